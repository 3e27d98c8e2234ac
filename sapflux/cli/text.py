"""Plain text for a terminal: aligned tables and numbers as people write them."""

import json
import math
import textwrap

from sapflux.pipeline.identity import plain


def columns(rows, header, right=()):
    """Rows as aligned lines under a header; `right` names the columns set flush right.

    >>> print("\\n".join(columns([["oak", "1.5"]], ["species", "mm"], right=["mm"])))
    species   mm
    oak      1.5
    """
    table = [list(map(str, header)), *[[str(cell) for cell in row] for row in rows]]
    widths = [max(len(row[i]) for row in table) for i in range(len(header))]
    flush = [name in right for name in header]
    return [
        "  ".join(
            cell.rjust(width) if to_right else cell.ljust(width)
            for cell, width, to_right in zip(row, widths, flush, strict=True)
        ).rstrip()
        for row in table
    ]


def share(value):
    """A fraction as whole per cent; a dash where there is none."""
    return "-" if value is None or math.isnan(value) else f"{100 * value:.0f} %"


def millimetres(value):
    """Millimetres of water; a dash where no total may be given."""
    return "-" if value is None or math.isnan(value) else f"{value:.1f}"


def signed(value):
    """A difference in millimetres with its sign; none at 0.

    >>> signed(1.26), signed(-0.01)
    ('+1.3', '0.0')
    """
    text = f"{value:+.1f}"
    return text[1:] if float(text) == 0 else text


def count(number, word):
    """A number and its word.

    >>> count(1, "file"), count(1200, "line")
    ('1 file', '1,200 lines')
    """
    return f"{number:,} {word}{'' if number == 1 else 's'}"


def note(text):
    """A note as indented lines of at most 100 characters.

    >>> note("the file is empty")
    '  note: the file is empty'
    """
    return textwrap.fill(text, 100, initial_indent="  note: ", subsequent_indent="        ")


def unverified_values(values):
    """A sentence on the published values that a recipe rests on and nobody has looked up."""
    return f"values known from memory only, not verified against print: {'; '.join(values)}"


def print_json(value):
    """JSON alone on stdout; absent numbers as null."""
    print(json.dumps(plain(value), indent=2, ensure_ascii=False))
