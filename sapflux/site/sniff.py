"""How the text of an unknown logger file is laid out, found from its first lines."""

import csv
import re
from collections import Counter
from dataclasses import dataclass
from itertools import pairwise

from sapflux.errors import Fault, SiteError
from sapflux.site.config import Layout
from sapflux.site.guesses import written_unit
from sapflux.site.time_guesses import find_times, written_moment

READ_BYTES = 300_000
DELIMITERS = {",": ",", ";": ";", "tab": "\t", "|": "|", "space": " "}
AGGREGATIONS = {"avg", "smp", "tot", "max", "min", "std", "sample", "average", "total", "mean",
                "sum", "inst"}  # fmt: skip
MISSING = {"", "NAN", "NaN", "nan", "NA", "N/A", "#N/A", "NULL", "null", "None", "-", "--", "---",
           "INF", "-INF", "Inf", "-Inf"}  # fmt: skip
CODES = {-9999.0, -99999.0, 9999.0, -6999.0, 6999.0, -7999.0, 7999.0, -999.0, -99.9, -999.9}
NUMBER = re.compile(r"[+-]?(\d+([.,]\d*)?|[.,]\d+)([eE][+-]?\d+)?")
UNIT_SHARE = 0.6


@dataclass(frozen=True)
class Finding:
    """What was found of one file.

    layout : keys of a layout section that differ from its defaults, or matter to the reader.
    names : its columns; data_columns : column -> text of its unit ('' unknown), time left out; in
    a long table the joined names that occur. questions : what the text leaves open.
    """

    layout: dict
    names: tuple
    data_columns: dict
    interval_min: float | None
    questions: tuple

    @property
    def layout_key(self):
        """The layout as something that can be compared."""
        return repr(sorted(self.layout.items()))


def sniff(path):
    """The `Finding` of a logger file. SiteError where its text cannot be made out."""
    lines, encoding = _first_lines(path)
    delimiter, rows = _split(path, lines)
    width = _width(rows)
    starts = _data_start(path, rows, width)
    data = [cells for _, cells in rows[starts:] if len(cells) == width]
    header = [(line, cells) for line, cells in rows[:starts] if len(cells) == width]
    roles = _header_roles(header)
    if "names_line" not in roles:
        raise SiteError(Fault(
            f"{path}, line {rows[starts][0]}", "no line above the first record names the columns",
            "Columns are found by name: put a line of names at the top of a copy of the file.",
        ))  # fmt: skip
    at = dict(header)
    names = tuple(cell.strip() for cell in at[roles["names_line"]])
    units = at.get(roles.get("units_line"), [""] * width)
    times, questions = find_times(data)
    decimal = "," if delimiter != "," and _decimal_commas(data, times.columns) else "."
    layout = {"delimiter": delimiter, "decimal": decimal, "encoding": encoding}
    comment = (
        "#"
        if any(line.startswith("#") for _, line in lines)
        and not any(line.startswith("#") for number, line in lines if number == roles["names_line"])
        else ""
    )
    if comment:
        layout["comment"] = comment
    layout |= roles
    layout["header_lines"] = rows[starts][0] - 1
    layout["time_columns"] = [names[i] for i in times.columns]
    layout["time_format"] = "" if questions else times.format  # blank: asked for by `check`
    layout |= _missing(data, times.columns, decimal)
    values = [i for i in range(width) if i not in times.columns and names[i]]
    moments = [m for m in (written_moment(cells, times) for cells in data) if m]
    labels = _long_labels(data, values, moments)
    if labels:
        value = next(i for i in values if i not in labels)
        layout["long"] = {"name_columns": [names[i] for i in labels], "value_column": names[value]}
        joined = ("/".join(cells[i].strip() for i in labels) for cells in data)
        columns = dict.fromkeys(joined, units[value].strip())
    else:
        columns = {names[i]: units[i].strip() for i in values}
    if len({n for n in names if n}) < len([n for n in names if n]):
        questions += ("two columns have one name: which is meant?",)
    return Finding(layout, names, columns, _interval(moments), tuple(questions))


def _first_lines(path):
    """((line number, text) of the first lines that are not blank, encoding)."""
    try:
        with path.open("rb") as file:
            raw = file.read(READ_BYTES)
            whole = not file.read(1)
    except OSError as error:
        raise SiteError(
            Fault(str(path), f"the file cannot be read ({error.strerror})", "Name a logger file.")
        ) from None
    if raw[:2] in (b"\xff\xfe", b"\xfe\xff"):
        encoding = "utf-16"
        text = raw.decode(encoding, errors="replace")
    else:
        encoding = "utf-8-sig" if raw.startswith(b"\xef\xbb\xbf") else "utf-8"
        try:
            # The last line may be cut inside a character.
            text = raw[: None if whole else raw.rfind(b"\n") + 1].decode(encoding)
        except UnicodeDecodeError:
            encoding = "cp1252"
            text = raw.decode(encoding, errors="replace")
    lines = text.replace("\r\n", "\n").replace("\r", "\n").replace("\0", "").split("\n")
    lines = lines if whole else lines[:-1]
    kept = [(number, line) for number, line in enumerate(lines, 1) if line.strip()]
    if not kept:
        raise SiteError(Fault(str(path), "the file is empty", "Name a file with records."))
    return kept, encoding


def _split(path, lines):
    """(delimiter, (line number, cells) of each line) of the delimiter that fits best."""
    best, best_score = None, (0.0, 0)
    for name, mark in DELIMITERS.items():
        rows = [(number, _cells(line, mark)) for number, line in lines]
        width = _width(rows)
        body = [cells for _, cells in rows[len(rows) // 2 :] if len(cells) == width]
        cells = [cell for row in body for cell in row]
        if width < 2 or not cells:
            continue
        share = (
            sum(_reads(cell) for cell in cells)
            / len(cells)
            * len(body)
            / len(rows[len(rows) // 2 :])
        )
        if (round(share, 2), width) > best_score:
            best, best_score = (name, rows), (round(share, 2), width)
    if best is None:
        raise SiteError(
            Fault(
                str(path),
                "no delimiter parts its lines into columns",
                "Name delimited text, as a logger writes it.",
            )
        )
    return best


def _cells(line, mark):
    try:
        return next(csv.reader([line], delimiter=mark))
    except csv.Error:  # longer than any line of a logger
        return [line]


def _reads(cell):
    """Whether a cell is a number, a part of a time, or a word for no value."""
    cell = cell.strip()
    return bool(
        cell in MISSING
        or NUMBER.fullmatch(cell)
        or re.fullmatch(r"[\d\-/.T]{6,}([ T]\d{1,2}:[\d:.]+)?( [AP]M)?|\d{1,2}:[\d:.]+", cell)
        or re.fullmatch(r"[\w.\-]+", cell)  # a label of a long table
    )


def _width(rows):
    """The most frequent number of cells of a line."""
    return Counter(len(cells) for _, cells in rows).most_common(1)[0][0]


def _data_start(path, rows, width):
    """Index of the first line from which on lines carry a time."""
    for index, (_, cells) in enumerate(rows):
        if len(cells) == width and find_times([cells])[0] is not None:
            return index
    raise SiteError(
        Fault(
            str(path),
            "no line begins with a time that is known",
            "Write the layout by hand: time_columns and time_format.",
        )
    )


def _header_roles(header):
    """Which header line holds the names, the units and the kind of aggregation."""
    roles, names, full = {}, [], False
    for line, cells in header:
        words = [cell.strip() for cell in cells if cell.strip()]
        if not words:
            continue
        if sum(word.lower() in AGGREGATIONS for word in words) > UNIT_SHARE * len(words):
            roles["aggregation_line"] = line
        elif names and _are_units(words):
            roles["units_line"] = line
        elif full and len(words) < len(cells):  # below a line that names every column
            if any(map(written_unit, words)):
                roles["units_line"] = line
        else:
            names.append(line)
            full = full or len(words) == len(cells)
    if names:
        roles = {"names_line": names[-1], **roles}
    return roles


def _are_units(words):
    hits = sum(bool(written_unit(word)) or word.lower() in ("ts", "rn") for word in words)
    return hits > UNIT_SHARE * len(words)


def _decimal_commas(data, time_columns):
    cells = [c.strip() for row in data for i, c in enumerate(row) if i not in time_columns]
    commas = sum(bool(re.fullmatch(r"[+-]?\d*,\d+", cell)) for cell in cells)
    points = sum(bool(re.fullmatch(r"[+-]?\d*\.\d+", cell)) for cell in cells)
    return commas > points


def _missing(data, time_columns, decimal):
    """Keys of the tokens and codes for no value that occur, beside the layout's defaults."""
    cells = {c.strip() for row in data for i, c in enumerate(row) if i not in time_columns}
    known = Layout.model_fields["missing_text"].default
    keys = {}
    words = sorted((cells & MISSING) - set(known))
    if words:
        keys["missing_text"] = [*known, *words]
    codes = sorted(v for v in (_number(c, decimal) for c in cells) if v in CODES)
    if codes:
        keys["missing_numbers"] = list(dict.fromkeys(codes))
    return keys


def _number(cell, decimal):
    try:
        return float(cell.replace(decimal, "."))
    except ValueError:
        return None


def _long_labels(data, values, moments):
    """Columns of names of a long table: all but one hold words, and stamps repeat."""
    worded = [
        i for i in values
        if not any(NUMBER.fullmatch(row[i].strip()) for row in data)
        and any(row[i].strip() not in MISSING for row in data)
    ]  # fmt: skip
    repeat = len(set(moments)) < len(moments)
    return worded if repeat and worded and len(values) - len(worded) == 1 else []


def _interval(moments):
    """The most frequent step forward in minutes; None where there is none."""
    steps = Counter((b - a).total_seconds() for a, b in pairwise(moments) if b > a)
    return steps.most_common(1)[0][0] / 60.0 if steps else None
