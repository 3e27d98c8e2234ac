"""The public reading of a log: all its files as one series, with an account of every line."""

import hashlib
import os
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from sapflux.errors import DataError, Fault
from sapflux.ingest import clock as clocks
from sapflux.ingest import lines as text_lines
from sapflux.ingest.account import log_series
from sapflux.ingest.folds import civil_utc
from sapflux.ingest.merge import Source, merge
from sapflux.ingest.parse import parse
from sapflux.ingest.stamps import has_offset
from sapflux.ingest.text import as_utf8, line_bounds, shown, squeezed

HEAD_BYTES = 64 * 1024  # of a file, for its names line alone: a thousand columns fit in it


@dataclass(frozen=True)
class _File:
    """A file that is read: its bytes' hash, its rows, their UTC ends, and its rejected lines."""

    path: str
    sha256: str
    size: int
    parsed: object
    end: np.ndarray
    valid: np.ndarray
    reasons: dict


def match_files(site, log_name):
    """Paths of a log's files, sorted, each once. DataError where no file matches."""
    patterns = site.logs[log_name].files
    found = set()
    for pattern in filter(None, patterns):
        anchor = Path(pattern).anchor
        root = Path(anchor) if anchor else site.folder
        found |= set(root.glob(pattern.removeprefix(anchor)))
    paths = sorted(path for path in found if path.is_file())
    if not paths:
        raise DataError(
            Fault(
                f"{site.folder}/site.toml, [logs.{log_name}]",
                f"no file matches {', '.join(repr(p) for p in patterns)}",
                "Patterns count from the site folder; put the downloads there or correct 'files'.",
            )
        )
    return paths


def read_header(path, layout):
    """Column names of a file's first names line. DataError where it has none.

    No more than the file's first HEAD_BYTES are read; a line that they cut is left out.
    """
    where = Path(path).name
    raw = _bytes(path, where, HEAD_BYTES)
    data = _text(raw, layout, where)
    if not data.strip(b"\0 \t\r\n"):
        raise DataError(Fault(where, "the file is empty", "Remove it, or download it again."))
    start, stop, open_end = line_bounds(data)
    cut = len(raw) == HEAD_BYTES
    if cut and open_end:
        start, stop = start[:-1], stop[:-1]
    for at in range(len(start)):
        names = text_lines.names_in(data[start[at] : stop[at]], layout)
        if names is not None:
            twice = sorted({name for name in names if name and names.count(name) > 1})
            if twice:
                what = f"line {at + 1}: column '{twice[0]}' stands twice"
                raise DataError(Fault(where, what, "Give each column its own name."))
            return names
    at = layout.names_line - 1
    line = data[start[at] : stop[at]].decode("utf-8", "replace") if at < len(start) else ""
    raise DataError(_no_names(where, layout, line, cut))


def read_log(site, log_name):
    """All files of a log as one `LogSeries`.

    Reads the columns that `channels` names for the log, or all where it names none (a long table:
    always all). Files may come in any order, overlap, or be given twice: the series is the same.
    DataError where no file matches, or no file has the names of the time columns.
    """
    log = site.logs[log_name]
    layout = site.layouts[log.layout]
    interval = max(1, round(log.interval_min * 60)) * clocks.SECOND
    channels = [c for c in site.table("channels") if c.log == log_name]
    wanted = {c.column for c in channels} or None

    files = _read_files(site, log_name, layout, wanted, interval)
    ranked = sorted(files, key=lambda f: (_first_stamp(f), f.sha256, f.path))
    sources, outside = [], {}
    for file in ranked:
        inside = _inside(site, channels, file.end, interval) & file.valid
        outside[file.path] = int((file.valid & ~inside).sum())
        rows = np.flatnonzero(inside)
        sources.append(Source(file.parsed, rows, file.end[rows]))
    columns = tuple(sorted({name for file in files for name in file.parsed.columns}))
    anchor = -clocks.standard_offset(log.clock) % interval
    merged = merge(sources, columns, interval, anchor, layout)
    return log_series(log_name, files, ranked, columns, interval, merged, outside)


def _bytes(path, where, most=-1):
    """The first `most` bytes of a file, or all."""
    try:
        with Path(path).open("rb") as file:
            return file.read(most)
    except OSError as error:
        what = f"the file cannot be read ({error.strerror})"
        raise DataError(
            Fault(where, what, "Check that it is there, and that no other program holds it open.")
        ) from None


def _text(raw, layout, where):
    try:
        data = as_utf8(raw, layout.encoding)
    except LookupError:
        what = f"encoding '{layout.encoding}' is not known"
        raise DataError(Fault(where, what, "Use for example utf-8, cp1252 or utf-16.")) from None
    return squeezed(data) if layout.separator == " " else data


def _no_names(where, layout, line, cut=False):
    expected = ", ".join(sorted(text_lines.required_names(layout)))
    among = f"no line of its first {HEAD_BYTES // 1024} kB" if cut else "no line"
    return Fault(
        where,
        f"{among} holds the column names {expected}; line {layout.names_line} is '{shown(line)}'",
        "Correct 'time_columns', 'delimiter' or 'encoding' of its layout.",
    )


def _read_files(site, log_name, layout, wanted, interval):
    """Every file of the log; one that is byte for byte the same as another is parsed once."""
    log = site.logs[log_name]
    paths, hashes, sizes, parsed = [], [], [], {}
    for path in match_files(site, log_name):
        shown_path = Path(os.path.relpath(path, site.folder)).as_posix()
        raw = _bytes(path, shown_path)
        paths.append(shown_path)
        hashes.append(hashlib.sha256(raw).hexdigest())
        sizes.append(len(raw))
        if hashes[-1] not in parsed:
            parsed[hashes[-1]] = parse(_text(raw, layout, shown_path), layout, wanted)
    _some_names(site, layout, paths, hashes, parsed)
    times = dict(zip(parsed, _to_utc(list(parsed.values()), log, layout, interval), strict=True))
    return [
        _File(path, sha256, size, parsed[sha256], *times[sha256])
        for path, sha256, size in zip(paths, hashes, sizes, strict=True)
    ]


def _some_names(site, layout, paths, hashes, parsed):
    """DataError if files have lines, and none of them has column names."""
    if any(one.sheet.names for one in parsed.values()):
        return
    for path, sha256 in zip(paths, hashes, strict=True):
        sheet = parsed[sha256].sheet
        if (sheet.kind != text_lines.BLANK).any():
            at = layout.names_line - 1
            line = sheet.line(at).decode("utf-8", "replace") if at < len(sheet.kind) else ""
            raise DataError(_no_names(f"{site.folder}/{path}", layout, line))


def _to_utc(files, log, layout, interval):
    """(UTC ends, valid, reasons) of each file; `valid` is False for times that do not exist."""
    shift = interval if log.stamp == "start" else 0
    offset = 0 if has_offset(layout) else clocks.fixed_offset(log.clock)
    if offset is not None:
        return [
            (f.local - offset + shift, np.ones(len(f.local), dtype=bool), f.sheet.reasons)
            for f in files
        ]
    zone, out = log.clock.removeprefix("civil:"), []
    for file, (utc, absent) in zip(files, civil_utc(files, zone, interval), strict=True):
        reasons = dict(file.sheet.reasons)
        for row in np.flatnonzero(absent).tolist():
            local = int(file.local[row])
            skipped = clocks.skipped_hour(local, zone)
            text = str(np.datetime64(local, "us").astype("M8[s]")).replace("T", " ")
            hours = clocks.standard_offset(log.clock) / clocks.SECOND / 3600
            reasons[int(file.line[row])] = (
                f"{text} does not exist in {zone}: clocks skip from {skipped[0]} to {skipped[1]}. "
                f"If the logger does not follow daylight saving, set a fixed clock such as "
                f'"utc{hours:+g}" for this log.'
            )
        out.append((utc + shift, ~absent, reasons))
    return out


def _inside(site, channels, end, interval):
    """Where a record lies neither before nor after every channel interval."""
    inside = np.ones(len(end), dtype=bool)
    starts = [site.utc(c.from_) for c in channels]
    stops = [site.utc(c.to) for c in channels]
    if channels and None not in starts:
        inside &= end - interval >= min(starts).astype("M8[us]").astype(np.int64)
    if channels and None not in stops:
        inside &= end <= max(stops).astype("M8[us]").astype(np.int64)
    return inside


def _first_stamp(file):
    """Earliest end of a file's records; after all others if it has none."""
    return int(file.end[file.valid].min(initial=np.iinfo(np.int64).max))
