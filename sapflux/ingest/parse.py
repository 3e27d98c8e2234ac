"""One logger file as records: for each data line its time as written and its numbers.

Regular lines go through pandas' C parser all at once. Lines that it cannot read, and lines with
unusual quotes or field counts, are read one by one: either every cell is understood, and the line
joins the others through the same parser, or the line is rejected with its reason.
"""

import csv
import io
import re
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from sapflux.ingest import lines as text_lines
from sapflux.ingest import stamps as text_stamps
from sapflux.ingest.lines import IRREGULAR, REGULAR, REJECTED
from sapflux.ingest.stamps import UNREAD
from sapflux.ingest.text import shown, split_line
from sapflux.site.config import YEARS

INFINITE = {"INF", "INFINITY"}  # what loggers write for over-range: no value
FEW = 16  # lines read one by one rather than halved again


@dataclass(frozen=True)
class Parsed:
    """The records of one file, in the order of its lines.

    line : (n) index of the line, from 0. local : (n) microseconds of the logger's clock.
    columns : names of the value columns, sorted in a wide table.
    values : (n, columns) as written, NaN where missing; (n, 1) for a long table.
    cell : (n) index into `columns` of a long table's value; None for a wide table.
    present : (n, columns) where the line has that column; None if all lines have all.
    """

    sheet: text_lines.Sheet
    line: np.ndarray
    local: np.ndarray
    columns: tuple
    values: np.ndarray
    cell: np.ndarray | None = None
    present: np.ndarray | None = None


@dataclass
class _Segment:
    """The lines under one names line, as they are read."""

    names: tuple
    row: int  # of the names line, for messages
    times: list  # positions of the time columns
    wanted: list  # positions of the value columns
    labels: list = field(default_factory=list)  # positions of a long table's name columns
    parts: list = field(default_factory=list)  # (lines, stamps, values, label texts)


def parse(data, layout, wanted=None):
    """A file's text (UTF-8) as `Parsed`. `wanted`: value columns to read; None reads all."""

    def has_stamp(fields, names):
        at = [names.index(c) for c in layout.time_columns]
        if max(at) >= len(fields):
            return False
        text = " ".join(fields[i] for i in at)
        return text_stamps.from_text(text, layout) != UNREAD

    sheet = text_lines.cut(data, layout, has_stamp)
    segments = []
    for index, row in enumerate(sheet.names):
        if row.fault:
            continue
        segment = _segment(row, layout, wanted)
        segments.append(segment)
        here = sheet.names_of == index
        regular = np.flatnonzero(here & (sheet.kind == REGULAR))
        irregular = np.flatnonzero(here & (sheet.kind == IRREGULAR)).tolist()
        counts = sheet.fields[regular]
        for count in np.unique(counts).tolist():
            irregular += _read_regular(sheet, regular[counts == count], count, segment, layout)
        _read_irregular(sheet, sorted(irregular), segment, layout)
    return _long(sheet, segments) if layout.long else _wide(sheet, segments)


def _segment(row, layout, wanted):
    times = [row.columns.index(c) for c in layout.time_columns]
    if layout.long:
        labels = [row.columns.index(c) for c in layout.long.name_columns]
        values = [row.columns.index(layout.long.value_column)]
        return _Segment(row.columns, row.line, times, values, labels)
    values = [
        at
        for at, name in enumerate(row.columns)
        if at not in times and name and (wanted is None or name in wanted)
    ]
    values.sort(key=row.columns.__getitem__)
    return _Segment(row.columns, row.line, times, values)


def _reject(sheet, at, reason):
    sheet.kind[at] = REJECTED
    sheet.reasons[at] = reason


def _read_regular(sheet, lines, count, segment, layout):
    """Read lines of `count` fields. Returns the indices of those to be read one by one."""
    stamps = text_stamps.stamps_of(sheet, lines, segment.times, layout)
    good = (stamps != UNREAD) & text_stamps.sane(stamps)
    left = lines[~good].tolist()
    lines, stamps = lines[good], stamps[good]
    pending, strange = [(lines, stamps)] if len(lines) else [], None
    while pending:
        lines, stamps = pending.pop()
        try:
            values, labels = _by_pandas(sheet, lines, count, segment, layout)
        except ValueError:
            if strange is None:
                strange = _strange(sheet, lines, segment, layout)
                left += lines[strange].tolist()
                rest = (lines[~strange], stamps[~strange])
                pending += [rest] if len(rest[0]) else []
            elif len(lines) <= FEW:
                left += lines.tolist()
            else:
                half = len(lines) // 2
                pending += [(lines[half:], stamps[half:]), (lines[:half], stamps[:half])]
            continue
        segment.parts.append((lines, stamps, values, labels))
    return left


def _strange(sheet, lines, segment, layout):
    """Where a line holds bytes that neither numbers, missing tokens nor its time can hold."""
    usual = b"0123456789+-eE \t" + f"{layout.decimal}{layout.separator}{layout.quote}".encode()
    usual += "".join([*INFINITE, *layout.missing_text]).encode()
    first = split_line(sheet.line(lines[0]), layout)
    usual += "".join(first[at] for at in segment.times).encode()
    odd = np.ones(256, dtype=bool)
    odd[np.frombuffer(usual, dtype=np.uint8)] = False
    odd[[10, 13]] = False
    at = np.flatnonzero(odd[np.frombuffer(sheet.data, dtype=np.uint8)])
    return np.isin(lines, np.searchsorted(sheet.start, at, "right") - 1)


def _by_pandas(sheet, lines, count, segment, layout):
    breaks = np.flatnonzero(np.diff(lines) != 1)
    first = sheet.start[lines[np.concatenate([[0], breaks + 1])]].tolist()
    last = sheet.stop[lines[np.concatenate([breaks, [len(lines) - 1]])]].tolist()
    text = b"\n".join(sheet.data[a:b] for a, b in zip(first, last, strict=True))
    return _convert(text, len(lines), segment.wanted, segment.labels, layout)


def _convert(text, rows, wanted, labels, layout):
    """Values (rows, wanted) and labels of clean lines. ValueError if a number is unreadable."""
    columns = sorted([*wanted, *labels])
    if not columns:
        return np.empty((rows, 0)), []
    missing = sorted({"", *layout.missing_text})
    quotes = {"quotechar": layout.quote} if layout.quote else {"quoting": csv.QUOTE_NONE}
    if labels:
        quotes |= {
            "dtype": {at: np.float64 if at in wanted else str for at in columns},
            "na_values": {at: missing if at in wanted else [] for at in columns},
        }
    else:
        quotes |= {"dtype": np.float64, "na_values": missing}
    table = pd.read_csv(
        io.BytesIO(text),
        sep=layout.separator,
        decimal=layout.decimal,
        header=None,
        usecols=columns,
        index_col=False,
        keep_default_na=False,
        skip_blank_lines=False,
        skipinitialspace=layout.separator != " ",
        low_memory=False,
        engine="c",
        **quotes,
    )
    if len(table) != rows:
        raise ValueError("pandas finds another number of lines")
    names = [table[at].str.strip() for at in labels]
    if any((column == "").any() for column in names):
        raise ValueError("a name is empty")
    values = (table[wanted] if labels or wanted != columns else table).to_numpy()
    infinite = np.isinf(values)
    for code in layout.missing_numbers:
        infinite |= values == code
    if infinite.any():
        values = np.where(infinite, np.nan, values)
    return values, [column.to_numpy(dtype=object) for column in names]


def _read_irregular(sheet, lines, segment, layout):
    """Read lines one by one: rejected with a reason, or understood whole."""
    kept, stamps, numbers, labels = [], [], [], []
    for at in lines:
        cells = split_line(sheet.line(at), layout)
        reason = _fit(cells, segment)
        if not reason:
            when = " ".join(cells[i] for i in segment.times)
            stamp = text_stamps.from_text(when, layout)
            reason = _stamp_fault(when, stamp, layout)
        if not reason:
            reason, row = _numbers(cells, segment, layout)
        if reason:
            _reject(sheet, at, reason)
            continue
        sheet.kind[at] = IRREGULAR
        kept.append(at)
        stamps.append(stamp)
        numbers.append(row)
        labels.append([cells[i] for i in segment.labels])
    if not kept:
        return
    mark = layout.separator if layout.separator != " " else ";"
    plain = layout.model_copy(update={"delimiter": mark if mark != "\t" else "tab"})
    text = "\n".join(mark.join(["0", *row]) for row in numbers).encode()
    values, _ = _convert(text, len(kept), list(range(1, len(segment.wanted) + 1)), [], plain)
    texts = [np.array(column, dtype=object) for column in zip(*labels, strict=True)]
    segment.parts.append((np.array(kept), np.array(stamps, dtype=np.int64), values, texts))


def _fit(cells, segment):
    """Trim empty fields beyond the named columns; what is wrong with the number of fields."""
    if cells is None:
        return "a quote is opened and not closed"
    width = len(segment.names)
    while len(cells) > width and not cells[-1]:
        cells.pop()
    if len(cells) != width:
        return f"has {len(cells)} fields; its names line {segment.row + 1} has {width}"
    return ""


def _stamp_fault(text, stamp, layout):
    if stamp == UNREAD:
        return f"time '{shown(text)}' does not read as '{layout.time_format}'"
    if not text_stamps.sane(np.array([stamp]))[0]:
        return f"time '{shown(text)}' lies outside the years {YEARS[0]} to {YEARS[1]}"
    return ""


def _numbers(cells, segment, layout):
    """What is wrong with the numbers or names of a line, and its numbers as clean text."""
    for at in segment.labels:
        if not cells[at]:
            return f"column '{segment.names[at]}' is empty", None
    mark = re.escape(layout.decimal)
    number = re.compile(rf"[+-]?(\d+({mark}\d*)?|{mark}\d+)([eE][+-]?\d+)?", re.ASCII)
    row = []
    for at in segment.wanted:
        cell = cells[at]
        if cell in layout.missing_text or cell.lstrip("+-").upper() in INFINITE:
            cell = ""
        elif cell and not number.fullmatch(cell):
            return f"column '{segment.names[at]}': '{shown(cell)}' is not a number", None
        elif cell and not np.isfinite(float(cell.replace(layout.decimal, "."))):
            cell = ""  # beyond what a number can hold, like INF
        row.append(cell)
    return "", row


def _gather(segments):
    """All parts in the order of their lines."""
    parts = [(s, *part) for s in segments for part in s.parts]
    if not parts:
        return [], np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int64), slice(None)
    line = np.concatenate([part[1] for part in parts])
    local = np.concatenate([part[2] for part in parts])
    order = slice(None) if (np.diff(line) > 0).all() else np.argsort(line)
    return parts, line[order], local[order], order


def _wide(sheet, segments):
    parts, line, local, order = _gather(segments)
    sets = [tuple(s.names[at] for at in s.wanted) for s in segments]
    columns = tuple(sorted({name for names in sets for name in names}))
    alike = all(names == columns for names in sets)
    if len(parts) == 1 and alike:
        return Parsed(sheet, line, local, columns, parts[0][3])
    values = np.full((len(line), len(columns)), np.nan)
    present = np.zeros(values.shape, dtype=bool)
    at = 0
    for segment, lines, _, block, _ in parts:
        into = [columns.index(segment.names[i]) for i in segment.wanted]
        values[at : at + len(lines), into] = block
        present[at : at + len(lines), into] = True
        at += len(lines)
    whole = bool(present.all())
    return Parsed(
        sheet, line, local, columns, values[order], None, None if whole else present[order]
    )


def _long(sheet, segments):
    parts, line, local, order = _gather(segments)
    if not parts:
        return Parsed(sheet, line, local, (), np.empty((0, 1)), np.empty(0, dtype=np.int64))
    names = ["/".join(row) for part in parts for row in zip(*part[4], strict=True)]
    cell, columns = pd.factorize(np.array(names, dtype=object)[order])
    values = np.concatenate([part[3] for part in parts])[order]
    return Parsed(sheet, line, local, tuple(columns), values, cell)
