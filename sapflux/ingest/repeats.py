"""Copies of one value in several downloads: the same, or in conflict.

Two printed numbers are the same if they differ by no more than half a unit of the last digit of the
coarser one. All copies are held against the one with the most digits, and that one is kept, so
that it does not matter which file owns the record, nor how the downloads are cut. A missing value
against a number is a conflict.
"""

from decimal import Decimal
from math import isnan

from sapflux.ingest.text import split_line


def cells_of(parsed, row, layout):
    """Column -> (value, text as it stands in the file) of one row."""
    sheet, at = parsed.sheet, int(parsed.line[row])
    names = sheet.names[sheet.names_of[at]].columns
    texts = dict(zip(names, split_line(sheet.line(at), layout), strict=False))
    values = parsed.values[row].tolist()
    if parsed.cell is not None:
        return {parsed.columns[parsed.cell[row]]: (values[0], texts[layout.long.value_column])}
    return {
        name: (value, texts[name])
        for name, value in zip(parsed.columns, values, strict=True)
        if name in texts
    }


def judge(copies, layout):
    """Index of the copy to keep, and the pairs of copies that are in conflict.

    copies : (value, text) in the order of ownership; NaN is missing.

    >>> from sapflux.site.config import Layout
    >>> judge([(6.8, "6.8"), (6.789, "6.789")], Layout())
    (1, [])
    >>> judge([(6.8, "6.8"), (6.9, "6.9")], Layout())
    (0, [(0, 1)])
    """
    exact = [None if isnan(value) else _decimal(text, layout) for value, text in copies]
    given = [i for i, n in enumerate(exact) if n is not None]
    if not given:
        return 0, []
    finest = min(given, key=lambda i: _digit(exact[i]))
    apart = [i for i, n in enumerate(exact) if not _same(n, exact[finest])]
    if not apart:
        return finest, []
    first = [(0, i) for i, n in enumerate(exact) if i and not _same(n, exact[0])]
    return finest, first or [(finest, i) if finest < i else (i, finest) for i in apart]


def _decimal(text, layout):
    return Decimal(text.replace(layout.decimal, "."))


def _digit(number):
    """Power of ten of the last printed digit."""
    return number.as_tuple().exponent


def _same(one, other):
    if one is None or other is None:
        return one is other
    unit = Decimal(1).scaleb(max(_digit(one), _digit(other)))
    return abs(one - other) * 2 <= unit
