"""The head of a file: its column names and a sample of its records, for a check before a run."""

from dataclasses import dataclass

import numpy as np

from sapflux.errors import DataError, Fault
from sapflux.ingest import clock as clocks
from sapflux.ingest import lines as text_lines
from sapflux.ingest.files import HEAD_BYTES, no_names, read_bytes, utf8_of
from sapflux.ingest.parse import parse
from sapflux.ingest.text import line_bounds

# Steps that differ by no more than this share are one step with the jitter of its stamps, and fewer
# steps than FEWEST_STEPS of one length tell nothing of a log. Source: own judgement.
JITTER = 0.05
FEWEST_STEPS = 3


class EmptyFileError(DataError):
    """A file that holds nothing to read."""


class NamelessFileError(DataError):
    """A file that has text, and no line of column names that can be used."""


@dataclass(frozen=True)
class Head:
    """The whole lines of a file's first HEAD_BYTES.

    data : UTF-8; start : where each line begins. names_at : index of the first names line.
    columns : names of all names lines, each once. whole : whether this is all of the file.
    """

    path: str
    data: bytes
    start: np.ndarray
    names_at: int
    columns: tuple
    whole: bool


def read_head(path, layout, where):
    """The `Head` of a file. where : its path as messages show it.

    EmptyFileError, NamelessFileError, or DataError where the file cannot be opened.
    """
    raw = read_bytes(path, where, HEAD_BYTES)
    data = utf8_of(raw, layout, where)
    if not data.strip(b"\0 \t\r\n"):
        raise EmptyFileError(Fault(where, "the file is empty: it holds nothing to read", ""))
    start, stop, open_end = line_bounds(data)
    cut = len(raw) == HEAD_BYTES
    if cut and open_end:
        data, start, stop = data[: start[-1]], start[:-1], stop[:-1]
    names = text_lines.find_names(data, start, stop, layout)
    if not names:
        at = layout.names_line - 1
        line = data[start[at] : stop[at]].decode("utf-8", "replace") if at < len(start) else ""
        raise NamelessFileError(no_names(where, layout, line, cut))
    first = names[0]
    if first.fault:
        twice = next(c for c in sorted(first.columns) if c and first.columns.count(c) > 1)
        what = f"line {first.line + 1}: column '{twice}' stands twice"
        raise NamelessFileError(Fault(where, what, "Give each column its own name."))
    columns = tuple(dict.fromkeys(name for row in names for name in row.columns))
    return Head(where, data, start, first.line, columns, not cut)


def sample(head, layout, wanted=None, records=None):
    """The records under a head's names line as `Parsed`: the first few, or all of the head.

    wanted : value columns to read, as `parse` takes them.
    """
    data = head.data
    if records is not None:
        after = head.names_at + 1 + layout.first_data_line - layout.names_line + records
        if after < len(head.start):
            data = data[: head.start[after]]
    return parse(data, layout, wanted)


def sampled_rejects(head, parsed):
    """(file, line, reason) of the lines under the names line that a run would reject."""
    return [
        (head.path, at + 1, reason)
        for at, reason in sorted(parsed.sheet.reasons.items())
        if at > head.names_at
    ]


def commonest_step(samples, expected_s):
    """The commonest time from one record to the next [s]; None where too few records tell.

    samples : list of `Parsed`. Steps back and repeats do not count; in a long table a step is
    from one record to the next of the same value. Of equally common steps one that is
    `expected_s` is given.
    """
    steps = np.concatenate([np.empty(0), *(_steps(parsed) for parsed in samples)])
    values, counts = np.unique(np.round(steps[steps > 0]), return_counts=True)
    values, counts = values[values > 0], counts[values > 0]
    if not len(values):
        return None
    low = np.searchsorted(values, values * (1 - JITTER))
    high = np.searchsorted(values, values * (1 + JITTER), "right")
    total = np.concatenate([[0], np.cumsum(counts)])
    around = total[high] - total[low]
    wanted = np.abs(values - expected_s) <= JITTER * expected_s
    best = np.lexsort((-counts, ~wanted, -around))[0]
    return float(values[best]) if around[best] >= FEWEST_STEPS else None


def same_step(one_s, other_s):
    """Whether two steps are one, the jitter of stamps apart.

    >>> same_step(602, 600), same_step(600, 1200)
    (True, False)
    """
    return bool(abs(one_s - other_s) <= JITTER * other_s)


def _steps(parsed):
    local = parsed.local / clocks.SECOND
    if parsed.cell is None:
        return np.diff(local)
    order = np.argsort(parsed.cell, kind="stable")
    return np.diff(local[order])[np.diff(parsed.cell[order]) == 0]
