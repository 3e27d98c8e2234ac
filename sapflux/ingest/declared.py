"""Whether the heads of a log's files read as the log is declared: for a check before a run."""

import os
from pathlib import Path

from sapflux.errors import DataError, Fault, nearest
from sapflux.ingest import clock
from sapflux.ingest.heads import (
    EmptyFileError,
    NamelessFileError,
    commonest_step,
    read_head,
    same_step,
    sample,
    sampled_rejects,
)
from sapflux.ingest.logs import to_utc
from sapflux.ingest.reasons import commonest

# Share of a file's data lines above which rejected lines are told. Source: own judgement.
MOST_REJECTED = 0.2
SAMPLED = 50  # records of a file, or of each channel of a long table, that a check reads


def head_faults(site, log, paths, sampled=False):
    """(faults, notes) of a log from the heads of its files.

    Faults: column names that cannot be found, columns that no file has, no sampled record that
    can be read, and steps between records that are not the log's interval. Notes: empty files,
    and files that lack columns of others; if `sampled`, files of which many of the first records
    would be rejected (a run tells it of all their lines).
    """
    heads, faults, notes = _heads(site, log, paths)
    if heads:
        faults += _column_faults(site, log, heads)
        samples = _samples(site, log, heads, SAMPLED)
        if list(_sample_faults(site, log, heads, samples)):
            samples = _samples(site, log, heads, None)  # to be sure: all of each head
            faults += _sample_faults(site, log, heads, samples)
        if sampled:
            notes += _rejected_notes(site, log, heads, samples)
        notes += _lacking_notes(site, log, heads)
    return faults, notes


def _layout(site, log):
    return site.layouts[site.logs[log].layout]


def _channels(site, log):
    """(row in channels.csv, channel) of the channels of a log."""
    rows = zip(site.rows_at["channels"], site.table("channels"), strict=True)
    return [(line, row) for line, row in rows if row.log == log]


def _heads(site, log, paths):
    """(heads, faults, notes on empty files) of the files of a log."""
    heads, closed, nameless, empty = [], [], [], []
    for path in paths:
        inside = Path(os.path.relpath(path, site.folder)).as_posix()
        try:
            heads.append(read_head(path, _layout(site, log), f"{site.folder}/{inside}"))
        except EmptyFileError as error:
            empty += error.faults
        except NamelessFileError as error:
            nameless += error.faults
        except DataError as error:
            closed += error.faults
    notes = [str(fault).rstrip(".") for fault in empty]
    if heads:
        return heads, closed + [_rejected_whole(fault) for fault in nameless], notes
    if nameless or (empty and not closed):
        first = (nameless or empty)[0]
        files = f"none of its {len(paths)} files has" if len(paths) > 1 else "its one file has not"
        what = f"{first.what}. Log {log!r} cannot be read: {files} column names that can be read"
        right = first.remedy or "Put its downloads there, or correct 'files' in site.toml."
        closed.append(Fault(first.where, what, right))
    return heads, closed, notes if nameless else []


def _rejected_whole(fault):
    what = f"{fault.what}. The file would be rejected line by line"
    right = "Give it a log and layout of its own, or leave it out of 'files'."
    return Fault(fault.where, what, right)


def _column_faults(site, log, heads):
    """Columns that the layout or the channels name, and no file of the log has."""
    layout = _layout(site, log)
    known = {column for head in heads for column in head.columns}
    wanted = list(layout.time_columns)
    if layout.long:
        wanted += [*layout.long.name_columns, layout.long.value_column]
    for column in wanted:
        if column not in known:
            yield Fault(
                f"{site.folder}/site.toml, [layouts.{site.logs[log].layout}]",
                f"no file of log {log!r} has the column {column!r}",
                nearest(column, known),
            )
    if layout.long:
        return
    for line, row in _channels(site, log):
        if row.column not in known:
            yield Fault(
                f"{site.folder}/channels.csv, row {line}",
                f"no file of log {log!r} has a column {row.column!r}",
                nearest(row.column, known),
            )


def _samples(site, log, heads, records):
    """So many records of each head, of each channel in a long table; all where None."""
    wanted = {row.column for _, row in _channels(site, log)} or None
    layout = _layout(site, log)
    if records and layout.long and wanted:
        records *= len(wanted)
    return [sample(head, layout, wanted, records) for head in heads]


def _sample_faults(site, log, heads, samples):
    """What the sampled records show to be wrong."""
    yield from _unread(site, log, heads, samples)
    yield from _wrong_step(site, log, samples)


def _rejected_notes(site, log, heads, samples):
    """Files of whose sampled records more than MOST_REJECTED would be rejected."""
    for head, parsed in zip(heads, samples, strict=True):
        rejected = sampled_rejects(head, parsed)
        count = len(rejected) + len(parsed.line)
        if len(rejected) > MOST_REJECTED * count:
            worst = commonest(rejected, log, site.logs[log].layout)
            yield (
                f"{head.path}: {len(rejected)} of the {count} records that a check reads would be "
                f"rejected, most often (first in line {worst.line}): {worst.reason}. {worst.remedy}"
            )


def _unread(site, log, heads, samples):
    """The fault of a log of whose sampled records none can be read."""
    if any(len(parsed.line) for parsed in samples):
        return
    rejected = [
        line
        for head, parsed in zip(heads, samples, strict=True)
        for line in sampled_rejects(head, parsed)
    ]
    worst = commonest(rejected, log, site.logs[log].layout)
    if worst:
        what = f"none of the {len(rejected)} records of log {log!r} that a check reads"
        if len(rejected) == 1:
            what = f"the one record of log {log!r} that a check reads"
        verb = "cannot be read" if len(rejected) == 1 else "can be read"
        yield Fault(f"{worst.file}, line {worst.line}", f"{what} {verb}: {worst.reason}",
                    worst.remedy)  # fmt: skip


def _wrong_step(site, log, samples):
    """The fault of a log whose records follow each other at another step than declared."""
    minutes, traced = site.logs[log].interval_min, site.logs[log].trace_step_s
    declared_s = site.logs[log].row_s
    step_s = commonest_step(samples, declared_s)
    if step_s is None or same_step(step_s, declared_s):
        return
    if traced:
        yield Fault(
            f"{site.folder}/site.toml, [logs.{log}]",
            f"steps of {step_s:g} s are commonest between the rows of its files, and trace_step_s "
            f"is {traced:g}",
            "Give the seconds from one row to the next around a pulse; a log without traces has "
            "no trace_step_s.",
        )
    else:
        yield Fault(
            f"{site.folder}/site.toml, [logs.{log}]",
            f"steps of {step_s / 60:g} min are commonest between the records of its files, and "
            f"interval_min is {minutes:g}",
            "Give the minutes from one record to the next; records at another step are another "
            "log.",
        )


def _lacking_notes(site, log, heads):
    """Files that lack columns which other files of the log have, and which their time calls for."""
    layout = _layout(site, log)
    if layout.long:
        return
    known = {column for head in heads for column in head.columns}
    for head in heads:
        lacks = [
            (line, row)
            for line, row in _channels(site, log)
            if row.column in known and row.column not in head.columns
        ]
        if lacks:
            begin, stop = _span(site, log, head)
            lacks = [
                f"{row.column} (channels.csv row {line})"
                for line, row in lacks
                if (begin is None or row.to is None or site.utc(row.to) > begin)
                and (stop is None or row.from_ is None or site.utc(row.from_) < stop)
            ]
        if lacks:
            yield f"{head.path} has no column {', '.join(lacks)}"


def _span(site, log, head):
    """(begin, end) of a file's records, UTC; None where the head does not tell."""
    interval = site.logs[log].row_s * clock.SECOND
    layout = _layout(site, log)
    ((ends, valid, _),) = to_utc([sample(head, layout, set())], site.logs[log], layout, interval)
    ends = ends[valid]
    if not len(ends):
        return None, None
    begin, end = (ends.min() - interval).view("M8[us]"), ends.max().view("M8[us]")
    return begin, end if head.whole else None
