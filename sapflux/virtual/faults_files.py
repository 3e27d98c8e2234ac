"""Faults of downloads: files saved twice, torn, empty, in conflict, with another column order."""

from dataclasses import dataclass, replace

import numpy as np

from sapflux.virtual import mess
from sapflux.virtual.faults_kinds import Kind, quoted_logs, whole_logs, wide_logs
from sapflux.virtual.seeds import generator


@dataclass(frozen=True)
class Download:
    """A file to be: its path, its lines, and the end of each line's record (NaT in a header)."""

    path: str
    lines: list
    ends: np.ndarray
    line_end: str = "\n"  # of the last line

    def content(self, encoding):
        """Its bytes."""
        if not self.lines:
            return b""
        return ("\n".join(self.lines) + self.line_end).encode(encoding)


@dataclass(frozen=True)
class Context:
    """What a fault of a file needs to know of its log."""

    seed: int
    layout: object
    header_lines: int
    end: np.ndarray  # of all records, UTC
    changed: dict  # kind -> function: generator -> (header, lines) of all records by a new program


def spoiled(files, faults, context):
    """Downloads of a log with its file faults, in the order of the table of kinds."""
    for fault in faults:
        if fault.kind in SPOIL:
            rng = generator(context.seed, f"fault/{fault.kind}", f"{fault.name}/{fault.begin}")
            files = SPOIL[fault.kind](files, fault, context, rng)
    return files


def _each(change):
    """A fault of one file, from a function of its `Download`."""

    def spoil(files, fault, context, rng):
        return [change(f, fault, context, rng) if f.path == fault.name else f for f in files]

    return spoil


def _new_program(files, fault, context, rng):
    """Columns in another order, or one more, from a moment on, with a new header there."""
    header, lines = context.changed[fault.kind](rng)
    ends = context.end
    made = []
    for file in files:
        late = file.ends > fault.begin  # False in a header, whose end is NaT
        if not late.any():
            made.append(file)
            continue
        early = [n for n, end in enumerate(file.ends) if end <= fault.begin]
        new = np.flatnonzero((ends > fault.begin) & np.isin(ends, file.ends))
        before = file.lines[: early[-1] + 1] if early else []
        blank = np.full(len(header), np.datetime64("NaT"), ends.dtype)
        made.append(replace(
            file,
            lines=[*before, *header, *(lines[n] for n in new)],
            ends=np.concatenate([file.ends[: len(before)], blank, ends[new]]),
        ))  # fmt: skip
    return made


def _overlap_conflict(files, fault, context, rng):
    """The share `size` of the last cells of an overlap, one at least, in conflict."""
    layout, made = context.layout, []
    known = set()
    for file in files:
        if file.path == fault.name:
            both = [n for n, end in enumerate(file.ends) if end in known]
            count = min(max(round(fault.size * len(both)), 1), len(both))
            lines = list(file.lines)
            for n in rng.choice(both, count, replace=False) if both else ():
                lines[n] = _other_cell(lines[n], layout)
            file = replace(file, lines=lines)
        known = {end for end in file.ends if not np.isnat(end)}
        made.append(file)
    return made


def _other_cell(line, layout):
    """The line with its last number larger by 5 % and 5 of its last digit; as it is without one."""
    cell = line.rpartition(layout.separator)[2]
    try:
        value = float(cell.replace(layout.decimal, "."))
    except ValueError:
        return line
    places = len(cell.partition(layout.decimal)[2])
    text = f"{value * 1.05 + 5 * 10.0**-places:.{places}f}".replace(".", layout.decimal)
    column = line.count(layout.separator)
    return mess.changed_cell([line], 1, layout.separator, column, text)[0]


def _data_line(file, rng):
    """Number from 1 of a line of data somewhere in the middle of a file."""
    data = np.flatnonzero(~np.isnat(file.ends))
    return int(data[int(len(data) * rng.uniform(0.2, 0.8))]) + 1


def _header_again(file, fault, context, rng):
    at = _data_line(file, rng)
    blank = np.full(context.header_lines, np.datetime64("NaT"), file.ends.dtype)
    # A file whose columns changed on the way repeats the header that holds at that line.
    heads = np.flatnonzero(np.isnat(file.ends[: at - 1]))
    first = max(heads[-1] + 1 - context.header_lines, 0) if len(heads) else 0
    header = file.lines[first : first + context.header_lines]
    ends = np.concatenate([file.ends[: at - 1], blank, file.ends[at - 1 :]])
    return replace(file, lines=mess.with_block(file.lines, at, header), ends=ends)


def _decimal_comma(file, fault, context, rng):
    """The other decimal mark in all numbers from the begin of the fault on."""
    layout, lines = context.layout, list(file.lines)
    old, new = (".", ",") if layout.decimal == "." else (",", ".")
    for n in np.flatnonzero((file.ends > fault.begin) & (file.ends <= fault.end)):
        stamp, numbers = _parted(lines[n], layout)
        lines[n] = stamp + numbers.replace(old, new)
    return replace(file, lines=lines)


def _parted(line, layout):
    """(what comes before the numbers of a line, the numbers), of a long table the last cell."""
    if layout.long:
        before, mark, last = line.rpartition(layout.separator)
        return before + mark, last
    at = 0
    for _ in layout.time_columns:
        if layout.quote and line.startswith(layout.quote, at):
            at = line.index(layout.quote, at + 1)
        at = line.index(layout.separator, at) + 1
    return line[:at], line[at:]


def _garbled(file, fault, context, rng):
    """`size` characters of a line of data turned into others."""
    n = _data_line(file, rng) - 1
    line, count = file.lines[n], min(round(fault.size), len(file.lines[n]) - 1)
    at = int(rng.integers(1, len(line) - count + 1))
    noise = "".join(rng.choice(list(GARBAGE), count))
    return replace(file, lines=[*file.lines[:n], line[:at] + noise + line[at + count :],
                                *file.lines[n + 1 :]])  # fmt: skip


def _repeated(file, fault, context, rng):
    """`size` lines of data written a second time right after themselves."""
    first = _data_line(file, rng) - 1
    rows = slice(first, min(first + round(fault.size), len(file.lines)))
    rows = [n for n in range(rows.start, rows.stop) if not np.isnat(file.ends[n])]
    last = rows[-1] + 1
    lines = [*file.lines[:last], *(file.lines[n] for n in rows), *file.lines[last:]]
    ends = np.concatenate([file.ends[:last], file.ends[rows], file.ends[last:]])
    return replace(file, lines=lines, ends=ends)


def _truncated(file, fault, context, rng):
    kept = ~(file.ends > fault.begin)
    return replace(
        file, lines=[x for x, k in zip(file.lines, kept, strict=True) if k], ends=file.ends[kept]
    )


def _open_quote(file, fault, context, rng):
    cells = 2 + len(context.layout.time_columns)
    separator = context.layout.separator
    lines = mess.open_quote(file.lines, _data_line(file, rng), separator, cells)
    return replace(file, lines=lines)


def _nul_bytes(file, fault, context, rng):
    return replace(file, lines=mess.nul_bytes(file.lines, _data_line(file, rng), round(fault.size)))


def _trailing(file, fault, context, rng):
    return replace(file, lines=mess.trailing_delimiters(file.lines, context.layout.separator))


def _torn(file, fault, context, rng):
    return replace(file, lines=mess.torn(file.lines, 1.0 - fault.size), line_end="")


def _duplicate(files, fault, context, rng):
    made = []
    for file in files:
        made.append(file)
        if file.path == fault.name:
            made.append(replace(file, path=_named(file.path, "_copy")))
    return made


def _empty(files, fault, context, rng):
    nothing = Download(_named(fault.name, "_empty"), [], np.empty(0, "datetime64[s]"))
    return [*files, nothing]


def _named(path, more):
    """A path with something before its suffix.

    >>> _named("raw/a/a_2031-05-01.csv", "_copy")
    'raw/a/a_2031-05-01_copy.csv'
    """
    stem, dot, suffix = path.rpartition(".")
    return f"{stem}{more}{dot}{suffix}"


SPOIL = {
    "column_order": _new_program,
    "column_added": _new_program,
    "overlap_conflict": _overlap_conflict,
    "truncated_file": _each(_truncated),
    "decimal_comma": _each(_decimal_comma),
    "repeated_lines": _each(_repeated),
    "header_again": _each(_header_again),
    "open_quote": _each(_open_quote),
    "nul_bytes": _each(_nul_bytes),
    "garbled_line": _each(_garbled),
    "trailing_delimiters": _each(_trailing),
    "torn_line": _each(_torn),
    "duplicate_file": _duplicate,
    "empty_file": _empty,
}
FROM_THE_END = ("truncated_file", "decimal_comma")  # from `size` before the last line on to it
GARBAGE = "?@~^$" + chr(7) + chr(27)  # in every encoding
ONE = (1.0, 1.0)
KINDS = (
    Kind("column_order", wide_logs, 0.02, ONE, "order", ONE, begins="any", until="end"),
    Kind("column_added", wide_logs, 0.02, ONE, "column", ONE, begins="any", until="end"),
    Kind("overlap_conflict", whole_logs, 0.03, (1e-3, 0.3), "1", ONE, begins="later file"),
    Kind("truncated_file", whole_logs, 0.05, (0.05, 15.0), "d", ONE, begins="file"),
    Kind("decimal_comma", whole_logs, 0.01, (0.02, 15.0), "d", ONE, begins="file"),
    Kind("repeated_lines", whole_logs, 0.03, (1.0, 1500.0), "line", ONE, begins="file"),
    Kind("header_again", whole_logs, 0.05, ONE, "header", ONE, begins="file"),
    Kind("open_quote", quoted_logs, 0.02, ONE, "line", ONE, begins="file"),
    Kind("nul_bytes", whole_logs, 0.03, (4.0, 400.0), "byte", ONE, begins="file"),
    Kind("garbled_line", whole_logs, 0.05, (1.0, 40.0), "character", ONE, begins="file"),
    Kind("trailing_delimiters", whole_logs, 0.02, ONE, "delimiter", ONE, begins="file"),
    Kind("torn_line", whole_logs, 0.1, (0.05, 0.95), "1", ONE, begins="file"),
    Kind("duplicate_file", whole_logs, 0.1, ONE, "file", ONE, begins="file"),
    Kind("empty_file", whole_logs, 0.03, ONE, "file", ONE, begins="file"),
)  # fmt: skip
