"""The public reading of a log: all its files as one series, with an account of every line."""

import hashlib
import os
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from sapflux.errors import DataError
from sapflux.ingest import clock as clocks
from sapflux.ingest import lines as text_lines
from sapflux.ingest.account import log_series
from sapflux.ingest.files import match_files, no_names, read_bytes, utf8_of
from sapflux.ingest.folds import civil_utc
from sapflux.ingest.merge import Source, merge
from sapflux.ingest.parse import parse
from sapflux.ingest.stamps import has_offset


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


def read_log(site, log_name):
    """All files of a log as one `LogSeries`.

    Reads the columns that `channels` names for the log, or all where it names none (a long table:
    always all). Files may come in any order, overlap, or be given twice: the series is the same.
    DataError where no file matches, or no file has the names of the time columns.
    """
    log = site.logs[log_name]
    layout = site.layouts[log.layout]
    interval = log.row_s * clocks.SECOND
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


def _read_files(site, log_name, layout, wanted, interval):
    """Every file of the log; one that is byte for byte the same as another is parsed once."""
    log = site.logs[log_name]
    paths, hashes, sizes, parsed = [], [], [], {}
    for path in match_files(site, log_name):
        shown_path = Path(os.path.relpath(path, site.folder)).as_posix()
        raw = read_bytes(path, shown_path)
        paths.append(shown_path)
        hashes.append(hashlib.sha256(raw).hexdigest())
        sizes.append(len(raw))
        if hashes[-1] not in parsed:
            parsed[hashes[-1]] = parse(utf8_of(raw, layout, shown_path), layout, wanted)
    _some_names(site, layout, paths, hashes, parsed)
    times = dict(zip(parsed, to_utc(list(parsed.values()), log, layout, interval), strict=True))
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
            raise DataError(no_names(f"{site.folder}/{path}", layout, line))


def to_utc(files, log, layout, interval):
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
