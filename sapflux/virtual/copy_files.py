"""Downloads of a virtual copy: every log printed in its layout, cut into files that overlap."""

from functools import partial

import numpy as np

from sapflux.site.tables import Channel
from sapflux.virtual import assumptions, faults, faults_clock, faults_files, loggers
from sapflux.virtual.copy_values import decimals, log_values

DAY = np.timedelta64(86400, "s")
NEW_COLUMN = "lithium_V"
SHORTEST = 10  # days; a last download of fewer is joined to the one before


def downloads(truth, site, plan):
    """(path below the site folder, bytes) of every file, log by log."""
    stamps = {}
    for name, log in plan.logs.items():
        layout = plan.layouts[log.layout]
        channels = [row for row in plan.channels if row.log == name]
        every = round(log.interval_min * 60) // truth.step_s
        end = truth.weather.end[every - 1 :: every]
        values = log_values(truth, site, channels, every)
        mine = faults.of_log(truth, name)
        values = faults.spoiled_values(truth, site, plan, name, every, values)
        shown = faults_clock.shown_end(end, log, mine)
        key = (log.clock, log.stamp, log.interval_min, log.layout, shown.tobytes())
        if key not in stamps:
            stamps[key] = _stamps(shown, log, layout)
        made = stamps[key]
        lines = _lines(values, made, channels, layout)
        per_record = len(channels) if layout.long else 1
        header = _header(name, channels, layout)
        blank, ends = np.full(len(header), np.datetime64("NaT"), end.dtype), end.repeat(per_record)
        files = []
        for first, last in spans(truth.weather.end[0] - truth.step_s, end[-1]):
            rows = np.flatnonzero((ends > first) & (ends <= last))
            data = lines[rows[0] : rows[-1] + 1]
            path = download_path(log, site.standard(last))
            files.append(
                faults_files.Download(path, [*header, *data], np.append(blank, ends[rows]))
            )
        changed = {
            kind: partial(change, name, values, made, channels, layout)
            for kind, change in PROGRAMS.items()
        }
        context = faults_files.Context(truth.seed, layout, len(header), end, changed)
        for file in faults_files.spoiled(files, mine, context):
            yield file.path, file.content(layout.encoding)


def _reordered(log, values, stamps, channels, layout, rng):
    """(header, data lines) of all records with the columns in another order."""
    order = rng.permutation(len(channels))
    if (order == np.arange(len(channels))).all():
        order = order[::-1]
    moved = [channels[at] for at in order]
    return _header(log, moved, layout), _lines(values[:, order], stamps, moved, layout)


def _widened(log, values, stamps, channels, layout, rng):
    """(header, data lines) of all records with one more column, of which the site knows nothing."""
    extra = Channel(log=log, column=NEW_COLUMN, kind="log", id=log, quantity="battery_voltage",
                    unit="V")  # fmt: skip
    at = int(rng.integers(1, len(channels) + 1))
    wide = [*channels[:at], extra, *channels[at:]]
    values = np.insert(values, at, rng.normal(3.6, 0.02, len(values)), axis=1)
    return _header(log, wide, layout), _lines(values, stamps, wide, layout)


PROGRAMS = {"column_order": _reordered, "column_added": _widened}  # what a new program changes


def download_path(log, last):
    """Path below the site folder of the download of a log that ends at `last` (standard time)."""
    folder, _, suffix = log.files[0].partition("*")
    return f"{folder}{folder.split('/')[-2]}_{last.astype('datetime64[D]')}{suffix}"


def spans(begin, end):
    """(first, last) moment of each download, each overlapping the one before.

    >>> [str(a)[:10] for a, _ in spans(np.datetime64("2031-05-01", "s"),
    ...                                np.datetime64("2031-07-05", "s"))]
    ['2031-05-01', '2031-05-30']
    """
    month = assumptions.DAYS_OF_DOWNLOAD * DAY
    cuts = [begin]
    while cuts[-1] + month + SHORTEST * DAY <= end:
        cuts.append(cuts[-1] + month)
    cuts = cuts if cuts[-1] < end else cuts[:-1]
    first = [begin, *(cut - assumptions.DAYS_OF_OVERLAP * DAY for cut in cuts[1:])]
    return list(zip(first, [*cuts[1:], end], strict=True))


def _stamps(end, log, layout):
    times = loggers.clock_times(end, log, zoned="%z" in layout.time_format)
    cells = loggers.stamp_cells(times, layout)
    return [layout.separator.join(loggers.in_quotes(c, layout) for c in row) for row in cells]


def _header(log, channels, layout):
    note = f"{layout.comment}logger {log}"
    if layout.long:
        labels = layout.long.name_columns
        names, blank = [*labels, layout.long.value_column], [""] * (len(labels) + 1)
        return loggers.header_lines(layout, names, blank, blank, note)
    names, written = [row.column for row in channels], [row.unit for row in channels]
    return loggers.header_lines(layout, names, written, [""] * len(names), note)


def _lines(values, stamps, channels, layout):
    """Data lines of all records: one a record, or of a long table one a record and channel."""
    places = [decimals(row.quantity, row.unit) for row in channels]
    missing = f"{layout.missing_numbers[0]:g}" if layout.missing_numbers else next(
        (text for text in layout.missing_text if text), "NAN"
    )  # fmt: skip
    labels = _labels(channels, layout) if layout.long else ()
    return loggers.record_lines(values, stamps, places, layout, missing, labels)


def _labels(channels, layout):
    """The name cells of each channel of a long table, joined."""
    count = len(layout.long.name_columns)
    return [
        layout.separator.join(
            loggers.in_quotes(cell, layout) for cell in row.column.split("/", count - 1)
        )
        for row in channels
    ]
