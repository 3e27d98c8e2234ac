"""A merged log as the object that the rest of the program reads, with its account of every line."""

from dataclasses import dataclass

import numpy as np

from sapflux.ingest import clock as clocks
from sapflux.ingest import lines as text_lines
from sapflux.ingest.merge import CONFLICTING, DUPLICATE, KEPT
from sapflux.ingest.text import shown

LONGEST_TEXT = 200  # characters of a rejected line that the account shows


@dataclass(frozen=True)
class FileRecord:
    """One input file and what became of its lines; the classes sum to `lines`.

    path : relative to the site folder, with "/". header : names, units and comment lines.
    duplicate : repeats, and records whose step another record is nearer to. conflicting : repeats
    that differ. outside : before or after every channel interval of the log.
    """

    path: str
    sha256: str
    bytes: int
    lines: int
    header: int
    kept: int
    duplicate: int
    conflicting: int
    rejected: int
    blank: int
    outside: int


@dataclass(frozen=True)
class LogSeries:
    """The records of one log, merged.

    end : (n) datetime64[s], UTC end of the interval, sorted, on the native grid.
    interval_s : length of the interval [s].
    values : column -> (n) float64 in the unit as written; NaN where missing or withheld.
    withheld : column -> (n) bool, where downloads give different values.
    file, line : (n) int32, index into `files` and line from 1; (n, columns) in the order of
    `values` where the cells of one stamp come from several lines, -1 and 0 where no line has one.
    rejected : (file, line, reason, text); displaced : the same of lines counted as duplicate
    because another record is nearer to their step. lost : number of records among these, repeats
    and re-stamped copies apart.
    conflicts : (stamp, log, column, value, file, line, other_value, other_file, other_line), values
    as text, the first being the owner's.
    """

    name: str
    end: np.ndarray
    interval_s: int
    values: dict
    file: np.ndarray
    line: np.ndarray
    withheld: dict
    files: tuple
    rejected: tuple
    displaced: tuple
    conflicts: tuple
    lost: int = 0


def log_series(log_name, files, ranked, columns, interval, merged, outside):
    """The merged log with sources as files in the order of their paths."""
    index = {file.path: number for number, file in enumerate(files)}
    rank = np.array([index[file.path] for file in ranked], dtype=np.int32)
    paths = [file.path for file in ranked]
    classes = dict(zip(paths, merged.classes, strict=True))
    files_of = np.where(merged.source >= 0, rank[merged.source], np.int32(-1))
    conflicts = []
    for end, column, (source, line, text), (other, other_line, other_text) in merged.conflicts:
        stamp = np.datetime64(end, "us").astype("M8[s]")
        one = (text, paths[source], line)
        conflicts.append((stamp, log_name, column, *one, other_text, paths[other], other_line))
    sheets = {file.path: file.parsed.sheet for file in files}
    displaced = [
        (
            paths[source],
            line,
            f"{paths[other]}, line {other_line} is nearer to the same step",
            _shown_line(sheets[paths[source]], line - 1),
        )
        for source, line, other, other_line in merged.displaced
    ]
    rejected = [
        (file.path, at + 1, reason, _shown_line(file.parsed.sheet, at))
        for file in files
        for at, reason in sorted(file.reasons.items())
    ]
    return LogSeries(
        name=log_name,
        end=merged.end.view("M8[us]").astype("M8[s]"),
        interval_s=interval // clocks.SECOND,
        values=dict(zip(columns, merged.values, strict=True)),
        file=files_of.T,
        line=merged.line.T,
        withheld=dict(zip(columns, merged.withheld, strict=True)),
        files=tuple(_record(file, classes[file.path], outside[file.path]) for file in files),
        rejected=tuple(rejected),
        displaced=tuple(sorted(displaced)),
        conflicts=tuple(sorted(conflicts)),
        lost=merged.lost,
    )


def _record(file, classes, outside):
    kind = file.parsed.sheet.kind
    return FileRecord(
        path=file.path,
        sha256=file.sha256,
        bytes=file.size,
        lines=len(kind),
        header=int((kind == text_lines.HEADER).sum()),
        kept=int((classes == KEPT).sum()),
        duplicate=int((classes == DUPLICATE).sum()),
        conflicting=int((classes == CONFLICTING).sum()),
        rejected=len(file.reasons),
        blank=int((kind == text_lines.BLANK).sum()),
        outside=outside,
    )


def _shown_line(sheet, at):
    """A line as text, control characters escaped, cut to LONGEST_TEXT characters."""
    text = sheet.line(at)[: 4 * LONGEST_TEXT].decode("utf-8", "backslashreplace")
    return shown(text, LONGEST_TEXT)
