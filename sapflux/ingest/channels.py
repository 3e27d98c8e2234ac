"""Channels: which logger column is which quantity of which thing, from when to when."""

import numpy as np

from sapflux import units
from sapflux.ingest.series import Series
from sapflux.schema import QUANTITIES


def within(site, channel, end, interval_s):
    """(time) bool: records that lie wholly in the span of a channel. end : [UTC]."""
    start, stop = site.utc(channel.from_), site.utc(channel.to)
    inside = np.ones(len(end), dtype=bool)
    if start is not None:
        inside &= end - np.timedelta64(interval_s, "s") >= start
    if stop is not None:
        inside &= end <= stop
    return inside


def excluded(site, kind, name, end, interval_s):
    """(time) bool: records that an exclusion of this thing touches. end : [UTC]."""
    out = np.zeros(len(end), dtype=bool)
    start = end - np.timedelta64(interval_s, "s")
    for row in site.table("exclusions"):
        if (row.kind, row.id) == (kind, name):
            out |= (end > site.utc(row.from_)) & (start < site.utc(row.to))
    return out


def values_of(channel, series, site):
    """The records of one channel, in SI, from its own span of time.

    Returns (rows, values, withheld): indices into the log's rows, float64 values in SI, and where
    two downloads gave different values.
    """
    inside = within(site, channel, series.end, series.interval_s)
    rows = np.flatnonzero(inside)
    if channel.column not in series.values:
        return rows[:0], np.empty(0), np.empty(0, dtype=bool)
    quantity = QUANTITIES[channel.quantity]
    written = series.values[channel.column][rows]
    values = units.to_si(written, channel.unit, difference=quantity.difference)
    withheld = series.withheld.get(channel.column)
    return rows, values, withheld[rows] if withheld is not None else np.zeros(len(rows), bool)


def single_series(site, logs, kind, quantity, thing=None, point=None):
    """One quantity of one thing as a `Series`, put together from all its channels.

    thing, point : name and point of the thing; None: whichever it is.
    Values that are excluded, or outside the plausible range of the schema, become NaN. None where
    the site has no such channel, or its channels have no record.
    """
    parts = []
    for channel in site.table("channels"):
        if (channel.kind, channel.quantity) != (kind, quantity) or channel.log not in logs:
            continue
        if thing is not None and channel.id != thing:
            continue
        if point is not None and channel.point != point:
            continue
        series = logs[channel.log]
        rows, values, _ = values_of(channel, series, site)
        if len(rows):
            end = series.end[rows]
            out = excluded(site, "log", channel.log, end, series.interval_s)
            out |= excluded(site, kind, channel.id, end, series.interval_s)
            parts.append((end, np.where(out, np.nan, values), series.interval_s))
    if not parts:
        return None
    end = np.concatenate([part[0] for part in parts])
    values = np.concatenate([part[1] for part in parts])
    order = np.argsort(end, kind="stable")
    row = QUANTITIES[quantity]
    with np.errstate(invalid="ignore"):
        plausible = (values >= row.low) & (values <= row.high)
    # Parts of unlike intervals are read on the coarser clock: never finer than what was logged.
    return Series(end[order], max(p[2] for p in parts), np.where(plausible, values, np.nan)[order])
