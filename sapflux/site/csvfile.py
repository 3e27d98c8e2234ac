"""The site's CSV tables as spreadsheets really save them."""

import csv
from dataclasses import dataclass

from pydantic import ValidationError

from sapflux.errors import Fault, nearest
from sapflux.site.messages import plain
from sapflux.site.tables import columns_of

DELIMITERS = {",": "','", ";": "';'", "\t": "a tab"}  # as messages name them


@dataclass(frozen=True)
class Table:
    """One table as read.

    rows : the valid rows; lines : line in the file of each (the first line is 1).
    cells : column -> text of every row, valid or not; a column the file has not is absent. None
    where a line could not be parted into cells.
    faults : what is wrong with the file.
    """

    rows: tuple = ()
    lines: tuple = ()
    cells: dict | None = None
    faults: tuple = ()


def read_table(path, row_class):
    """A CSV file as a `Table`: its valid rows, and every fault.

    UTF-8 with or without a byte order mark, any line ending, delimiter ',' ';' or tab (taken from
    the header line). Blank lines and lines that begin with '#' are skipped, cells are stripped.
    Any other encoding is a fault: a guess could garble names without anyone noticing.
    """
    text, fault = read_text(path)
    if fault:
        return Table(faults=(fault,))
    lines = _written_lines(text)
    if not lines:
        remedy = f"Begin it with a line of column names: {', '.join(columns_of(row_class))}."
        return Table(faults=(Fault(str(path), "the file has no header line", remedy),))
    (line, header), *body = lines
    delimiter = _delimiter(header)
    names, torn = _split(path, line, header, delimiter)
    if torn:
        return Table(faults=(torn,))
    faults = list(_header_faults(f"{path}, row {line}", names, row_class))
    missing = [c for c in _required(row_class) if c not in names]
    rows, at, lost = [], [], False
    cells = {name: [] for name in names if name in columns_of(row_class)}
    for line, text in body:
        where = f"{path}, row {line}"
        found, torn = _split(path, line, text, delimiter)
        if torn:
            faults.append(torn)
            lost = True
            continue
        if not any(found):
            continue
        other = _other_delimiter(path, line, text, found, names, delimiter)
        if other:
            faults.append(_delimiter_fault(where, delimiter, other))
            lost = True
            continue
        given = {n: cell for n, cell in zip(names, found, strict=False) if cell and n in cells}
        for name, column in cells.items():
            column.append(given.get(name, ""))
        fault = _shape_fault(where, found, names)
        if fault:
            faults.append(fault)
            continue
        row, wrong = _validated(where, given, row_class, missing)
        faults += wrong
        if row is not None:
            rows.append(row)
            at.append(line)
    return Table(tuple(rows), tuple(at), None if lost else cells, tuple(faults))


def read_text(path):
    """(text, None) of a UTF-8 file, byte order mark dropped; or (None, fault)."""
    try:
        raw = path.read_bytes()
    except OSError as error:
        return None, Fault(
            str(path),
            f"the file cannot be read ({error.strerror})",
            "Close it in other programs and see that you may read it.",
        )
    if raw[:2] in (b"\xff\xfe", b"\xfe\xff"):
        return None, Fault(str(path), "the file is UTF-16", "Save it as CSV in UTF-8.")
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        return None, Fault(
            f"{path}, row {line}",
            f"byte 0x{raw[error.start]:02x} is not UTF-8",
            "Save the file in UTF-8.",
        )
    if "\0" in text:
        line = text[: text.index("\0")].count("\n") + 1
        return None, Fault(
            f"{path}, row {line}",
            "the line holds a NUL byte: the file is damaged",
            "Save it again from the spreadsheet.",
        )
    return text, None


def _written_lines(text):
    """(line number, line) of every line that is neither blank nor a comment."""
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    return [
        (number, line)
        for number, line in enumerate(lines, 1)
        # A spreadsheet may put a comment that holds a delimiter in quotes.
        if line.strip() and not line.lstrip().lstrip('"').startswith("#")
    ]


def _delimiter(header):
    """The delimiter that a header line uses most; ',' where it uses none."""
    return max(DELIMITERS, key=header.count)


def _split(path, line, text, delimiter):
    """(stripped cells of one line, None), or ([], fault)."""
    try:
        cells = next(csv.reader([text], delimiter=delimiter, strict=True))
    except csv.Error:
        return [], Fault(
            f"{path}, row {line}",
            f"the quotes do not match in {text.strip()!r}",
            "Close every quote on its own line, and double a quote inside a cell.",
        )
    return [cell.strip() for cell in cells], None


def _header_faults(where, names, row_class):
    known = columns_of(row_class)
    for name in dict.fromkeys(names):
        if name and name not in known:
            yield Fault(where, f"unknown column {name!r}", nearest(name, known))
        if name and names.count(name) > 1:
            yield Fault(
                where, f"the column {name!r} stands {names.count(name)} times", "Keep one of them."
            )
    for name in _required(row_class):
        if name not in names:
            yield Fault(
                where,
                f"the column {name!r} is missing",
                f"Add it. Columns that every row needs: {', '.join(_required(row_class))}.",
            )


def _required(row_class):
    return [c for c, field in columns_of(row_class).items() if field.is_required()]


def _other_delimiter(path, line, text, cells, names, delimiter):
    """The delimiter by which a row has the header's number of cells, where its own does not."""
    if len(cells) >= len(names):
        return None
    for other in DELIMITERS:
        if other != delimiter and len(_split(path, line, text, other)[0]) == len(names):
            return other
    return None


def _delimiter_fault(where, header, row):
    return Fault(
        where,
        f"the header is delimited by {DELIMITERS[header]} and the row by {DELIMITERS[row]}",
        "Save the table with one delimiter throughout.",
    )


def _shape_fault(where, cells, names):
    """A row whose cells do not lie under the header's names."""
    beyond = [c for i, c in enumerate(cells) if c and (i >= len(names) or not names[i])]
    if beyond:
        return Fault(
            where,
            f"the cell {beyond[0]!r} has no column name above it",
            "Name its column in the header, or put a cell that holds the delimiter in quotes.",
        )
    if len(cells) < len(names):
        return Fault(
            where,
            f"the row has {len(cells)} cells and the header names {len(names)}",
            "Give every column a cell, blank where nothing is known.",
        )
    return None


def _validated(where, given, row_class, missing):
    """(row or None, faults). Columns that the whole file misses are told once, not here."""
    try:
        return row_class.model_validate(given), ()
    except ValidationError as error:
        entries = error.errors(include_url=False)
    faults = []
    for entry in entries:
        blank = entry["type"] == "missing"
        if blank and entry["loc"][0] in missing:
            continue
        what, remedy = plain(entry, columns_of(row_class), cells=True)
        known = row_class.blank_remedy(entry["loc"][0], given) if blank else ""
        faults.append(Fault(where, what, known or remedy))
    return None, faults
