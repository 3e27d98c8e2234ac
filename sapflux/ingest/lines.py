"""The bytes of a logger file as lines, each with a class: what is a header, blank, torn, or data.

A line ends with LF, CR LF or a lone CR; what stands after the last of these is a line too. A quote
never spans lines, so a line with an open quote costs itself and no other. Columns are known by the
names line above: any line that holds all time columns (and, for a long table, its name and value
columns) is a names line, wherever it stands, and holds until the next. The lines around it that
the layout counts as header are header too, unless they carry a readable stamp.
"""

import re
from dataclasses import dataclass

import numpy as np

from sapflux.ingest.text import line_bounds, shown, split_line

# Lines above a last line without line end that show how many decimals the logger prints. A few may
# all have fewer by chance, if it leaves out zeros at the end; many would reach back to another
# program of the logger. Source: own judgement.
LINES_THAT_SHOW_DECIMALS = 20

HEADER, BLANK, REGULAR, IRREGULAR, REJECTED = range(5)


@dataclass(frozen=True)
class Names:
    """A names line: its index, its column names, and what is wrong with it ('' if nothing)."""

    line: int
    columns: tuple
    fault: str = ""


@dataclass(frozen=True)
class Sheet:
    """A file cut into classed lines. All arrays have one value a line but `separators`.

    data : the text as UTF-8; start, stop : where a line begins and ends in it, without line end.
    kind : its class; names_of : index into `names`, -1 before the first names line.
    first : index in `separators` of the line's first delimiter; fields : number of fields.
    reasons : line index -> why it was rejected.
    """

    data: bytes
    start: np.ndarray
    stop: np.ndarray
    kind: np.ndarray
    names: tuple
    names_of: np.ndarray
    separators: np.ndarray
    first: np.ndarray
    fields: np.ndarray
    reasons: dict

    def line(self, index):
        """The bytes of a line."""
        return self.data[self.start[index] : self.stop[index]]


def required_names(layout):
    """Columns that make a line a names line."""
    names = set(layout.time_columns)
    if layout.long:
        names |= {*layout.long.name_columns, layout.long.value_column}
    return names


def names_in(line, layout):
    """The column names in a line, or None if it is no names line."""
    text = line
    if layout.comment:
        text = line.removeprefix(layout.comment.encode())
    fields = split_line(text, layout)
    if fields is None or not required_names(layout) <= set(fields):
        return None
    while fields and not fields[-1]:
        fields.pop()
    return tuple(fields)


def cut(data, layout, has_stamp):
    """A file as a `Sheet`.

    data : UTF-8 as `as_utf8` gives it.
    has_stamp : (fields, names) -> whether the line's time reads as a stamp.
    """
    start, stop, open_end = line_bounds(data)
    array = np.frombuffer(data, dtype=np.uint8)
    kind = np.full(len(start), REGULAR, dtype=np.uint8)
    reasons = {}
    names = find_names(data, start, stop, layout)
    names_of = np.searchsorted([n.line for n in names], np.arange(len(start)), "right") - 1
    separators = np.flatnonzero(array == ord(layout.separator))
    first = np.searchsorted(separators, start)
    fields = np.searchsorted(separators, stop) - first + 1

    _count_fields(array, stop, kind, names, names_of, fields, ord(layout.separator))
    _check_quotes(array, start, stop, kind, reasons, separators, layout)
    for at in _lines_with(data, start, np.flatnonzero(array >= 128) if not data.isascii() else ()):
        try:
            data[start[at] : stop[at]].decode("utf-8")
        except UnicodeDecodeError:
            kind[at] = REJECTED
            reasons[at] = f"bytes that are not valid {layout.encoding}"
    if b"\0" in data:
        for at in _lines_with(data, start, np.flatnonzero(array == 0)):
            kind[at] = REJECTED
            reasons[at] = "holds a NUL byte"
    for at in np.flatnonzero(names_of < 0).tolist():
        kind[at] = REJECTED
        expected = ", ".join(layout.time_columns)
        reasons.setdefault(at, f"stands before any line of column names (expected: {expected})")
    for index, row in enumerate(names):
        if row.fault:
            for at in np.flatnonzero(names_of == index).tolist():
                kind[at] = REJECTED
                reasons.setdefault(at, row.fault)
    for at in _header_lines(data, start, stop, names, layout, has_stamp):
        kind[at] = HEADER
    for at in _blank_lines(data, array, start, stop, layout):
        kind[at] = BLANK
    for at in np.flatnonzero((kind == HEADER) | (kind == BLANK)).tolist():
        reasons.pop(at, None)
    sheet = Sheet(data, start, stop, kind, names, names_of, separators, first, fields, reasons)
    if open_end:
        _reject_torn_end(sheet, layout)
    return sheet


def _lines_with(data, start, positions):
    """Indices of the lines that hold any of the byte positions."""
    if not len(positions):
        return []
    return np.unique(np.searchsorted(start, positions, "right") - 1).tolist()


def find_names(data, start, stop, layout):
    """Every names line of a text, as a tuple of `Names`."""
    word = max(required_names(layout), key=len).encode()
    found, position = [], data.find(word)
    while position >= 0:
        at = int(np.searchsorted(start, position, "right")) - 1
        columns = names_in(data[start[at] : stop[at]], layout)
        if columns is not None:
            twice = sorted({c for c in columns if c and columns.count(c) > 1})
            fault = f"column '{twice[0]}' stands twice in the names line {at + 1}" if twice else ""
            found.append(Names(at, columns, fault))
        position = data.find(word, int(stop[at]) + 1)
    return tuple(found)


def _header_lines(data, start, stop, names, layout, has_stamp):
    """Indices of the header lines: names lines, what belongs to them, and comments."""
    found = set()
    for index, row in enumerate(names):
        found.add(row.line)
        before = names[index - 1].columns if index else row.columns
        above = range(max(0, row.line - layout.names_line + 1), row.line)
        below = range(row.line + 1, row.line + 1 + layout.first_data_line - layout.names_line)
        for at, columns in [*((a, before) for a in above), *((b, row.columns) for b in below)]:
            if at < len(start):
                fields = split_line(data[start[at] : stop[at]], layout)
                if fields is None or not has_stamp(fields, columns):
                    found.add(at)
    if layout.comment:
        mark = layout.comment.encode()
        starts = np.frombuffer(data, dtype=np.uint8)[np.minimum(start, max(len(data) - 1, 0))]
        for at in np.flatnonzero(starts == mark[0]).tolist():
            if data.startswith(mark, start[at], stop[at]):
                found.add(at)
    return sorted(found)


def _blank_lines(data, array, start, stop, layout):
    """Indices of lines with nothing in them but blanks and delimiters."""
    nothing = b" \t" + layout.separator.encode()
    if not len(array):
        return range(len(start))
    begins = np.isin(array[np.minimum(start, len(array) - 1)], np.frombuffer(nothing, np.uint8))
    maybe = np.flatnonzero(begins | (start == stop)).tolist()
    return [at for at in maybe if not data[start[at] : stop[at]].strip(nothing)]


def _count_fields(array, stop, kind, names, names_of, fields, mark):
    """Mark lines whose field count is not that of their names line as irregular.

    Empty fields beyond the last named column are no fields: a trailing delimiter is harmless.
    """
    if not names:
        return
    width = np.array([len(n.columns) for n in names])[np.maximum(names_of, 0)]
    extra = fields - width
    kind[extra < 0] = IRREGULAR
    more = np.flatnonzero(extra > 0)
    if not len(more):
        return
    left, end = extra[more], stop[more].copy()
    while True:
        trims = (left > 0) & (array[end - 1] == mark)
        if not trims.any():
            break
        left[trims] -= 1
        end[trims] -= 1
    kind[more[left > 0]] = IRREGULAR


def _check_quotes(array, start, stop, kind, reasons, separators, layout):
    """Mark lines with an open quote as rejected, with unusual quotes as irregular."""
    if not layout.quote:
        return
    at = np.flatnonzero(array == ord(layout.quote))
    if not len(at):
        return
    line = np.searchsorted(start, at, "right") - 1
    odd = np.flatnonzero(np.bincount(line, minlength=len(start)) % 2)
    for index in odd.tolist():
        kind[index] = REJECTED
        reasons[index] = "a quote is opened and not closed"
    paired = ~np.isin(line, odd)
    opens, closes, line = at[paired][::2], at[paired][1::2], line[paired][::2]
    mark = ord(layout.separator)
    at_start = (opens == start[line]) | (array[np.maximum(opens - 1, 0)] == mark)
    after = np.minimum(closes + 1, len(array) - 1)
    at_end = (closes + 1 == stop[line]) | (array[after] == mark)
    inside = np.searchsorted(separators, closes) != np.searchsorted(separators, opens)
    unusual = line[~at_start | ~at_end | inside]
    kind[unusual[kind[unusual] == REGULAR]] = IRREGULAR


def _reject_torn_end(sheet, layout):
    """Reject a last line without line end whose last number has lost decimals.

    It can be cut in the middle of a number and still have every field. A number with fewer decimals
    than all of the lines above it (LINES_THAT_SHOW_DECIMALS of them) is taken for cut.
    """
    last = len(sheet.kind) - 1
    if sheet.kind[last] != REGULAR:
        return
    begin = max(0, last - LINES_THAT_SHOW_DECIMALS)
    above = np.flatnonzero(sheet.kind[begin:last] == REGULAR) + begin
    cells = [sheet.line(at).rsplit(layout.separator.encode(), 1)[-1] for at in above.tolist()]
    cell = sheet.line(last).rsplit(layout.separator.encode(), 1)[-1]
    printed = [_decimals(c, layout) for c in cells]
    if printed and _decimals(cell, layout) < min(printed):
        text = shown(cell.decode("utf-8", "backslashreplace"))
        sheet.kind[last] = REJECTED
        sheet.reasons[last] = f"the file ends inside this line: '{text}' has lost decimals"


def _decimals(cell, layout):
    """Printed decimals of a number; -1 for an empty cell, 0 for any other text."""
    if not cell.strip():
        return -1
    found = re.fullmatch(rb"\s*[+-]?\d*" + re.escape(layout.decimal.encode()) + rb"(\d*)", cell)
    return len(found[1]) if found else 0
