"""Plain text for a terminal: aligned tables and numbers as people write them."""

import json
import math


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


def count(number, word):
    """A number and its word.

    >>> count(1, "file"), count(1200, "line")
    ('1 file', '1,200 lines')
    """
    return f"{number:,} {word}{'' if number == 1 else 's'}"


def print_json(value):
    """JSON alone on stdout; absent numbers as null."""
    print(json.dumps(_plain(value), indent=2, ensure_ascii=False))


def _plain(value):
    if isinstance(value, dict):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if hasattr(value, "item"):
        value = value.item()
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value if isinstance(value, str | int | float | bool | None) else str(value)
