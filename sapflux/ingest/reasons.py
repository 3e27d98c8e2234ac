"""Rejected lines by kind of reason: the commonest, and what of the layout or log it speaks of."""

import re
from dataclasses import dataclass

# Pattern of a reason (see `lines`, `parse` and `logs`) -> what would be right.
KINDS = {
    r"time '.*' does not read as": "Correct 'time_format' of {layout}.",
    r"time '.*' lies outside the years": (
        "Correct 'time_format' of {layout}, or see when the logger's clock was lost."
    ),
    r"column '.*': '[+-]?\d*[.,]\d+([eE][+-]?\d+)?' is not a number": (
        "Correct 'decimal' of {layout}."
    ),
    r"column '.*': '.*' is not a number": (
        "Correct the column in channels.csv, or 'decimal' of {layout}; name a word that stands for "
        "no value in its 'missing_text'."
    ),
    r"has \d+ fields; its names line": "Correct 'delimiter' or 'decimal' of {layout}.",
    r"bytes that are not valid": "Correct 'encoding' of {layout}.",
    r"holds a NUL byte": "Correct 'encoding' of {layout}.",
    r"a quote is opened": "Correct 'quote' of {layout}.",
    r"column '.*' is empty": "Correct 'name_columns' of {layout}.",
    r"stands before any line of column names": "Correct 'time_columns' of {layout}.",
    r"column '.*' stands twice": "Give each column its own name.",
    r".* does not exist in": "Correct 'clock' of {log}.",
}


@dataclass(frozen=True)
class Commonest:
    """The commonest kind of reason: its number of lines, and the first of them."""

    count: int
    file: str
    line: int
    reason: str
    remedy: str


def commonest(rejected, log_name, layout_name):
    """The `Commonest` of rejected lines, (file, line, reason, ...) each; None where there are none.

    Of equally common kinds the one that comes first is given.
    """
    first, count = {}, {}
    for file, line, reason, *_ in rejected:
        kind = next((kind for kind in KINDS if re.match(kind, reason, re.DOTALL)), "")
        first.setdefault(kind, (file, line, reason))
        count[kind] = count.get(kind, 0) + 1
    if not count:
        return None
    kind = max(count, key=count.__getitem__)
    remedy = KINDS.get(kind, "See rejected.csv.")
    named = {"layout": f"[layouts.{layout_name}]", "log": f"[logs.{log_name}]"}
    return Commonest(count[kind], *first[kind], remedy.format(**named))
