"""Regular clocks: where a record stands on a grid, and a series read on another clock."""

from dataclasses import dataclass

import numpy as np

# Share of a record's values that must be there for their mean to stand for it: own judgement.
# Half of a half hour of weather is still that half hour's weather; a single value may be a gust.
LEAST_SHARE = 0.5


@dataclass(frozen=True)
class Series:
    """One quantity on its own regular clock: ends of intervals (UTC), seconds, values (SI)."""

    end: np.ndarray
    interval_s: int
    values: np.ndarray


def grid(first_end, last_end, interval_s):
    """Every interval end from the first to the last, datetime64[s]."""
    count = int((last_end - first_end) / np.timedelta64(interval_s, "s")) + 1
    return first_end + np.arange(count) * np.timedelta64(interval_s, "s")


def place(end, first_end, interval_s):
    """Index on the grid of each interval end (which must lie on the grid)."""
    return ((end - first_end) / np.timedelta64(interval_s, "s")).astype(np.int64)


def on_records(series, end, interval_s, least_share=LEAST_SHARE):
    """A series on the records of another clock.

    A record no longer than the series' interval takes the value of the interval that holds its
    midpoint; a longer one takes the mean of the values that end inside it, NaN where less than
    `least_share` of them are there.

    end : (time) datetime64[s], ends of the records [UTC]; interval_s : their length [s].
    Returns (time) float64 in the unit of the series.

    >>> s = Series(np.array(["2031-06-01T01", "2031-06-01T02"], "M8[s]"), 3600, np.array([4.0, 8]))
    >>> on_records(s, np.array(["2031-06-01T00:30", "2031-06-01T01:30"], "M8[s]"), 1800)
    array([4., 8.])
    >>> on_records(s, np.array(["2031-06-01T02"], "M8[s]"), 7200)
    array([6.])
    """
    if len(series.end) == 0:
        return np.full(len(end), np.nan)
    step = np.timedelta64(series.interval_s, "s")
    if interval_s <= series.interval_s:
        middle = end - np.timedelta64(interval_s, "s") / 2
        return _holding(series, middle)
    count = -(-interval_s // series.interval_s)
    total = np.zeros(len(end))
    present = np.zeros(len(end))
    for back in range(count):
        # the middle of each of the series' intervals inside the record, latest first
        values = _holding(series, end - back * step - step / 2)
        there = np.isfinite(values)
        total += np.where(there, values, 0.0)
        present += there
    with np.errstate(invalid="ignore"):
        return np.where(present >= least_share * count, total / present, np.nan)


def _holding(series, moment):
    """Value of the interval that holds each moment, NaN where there is none."""
    index = np.searchsorted(series.end, moment, side="left")
    inside = index < len(series.end)
    index = np.where(inside, index, 0)
    near = inside & (series.end[index] - moment < np.timedelta64(series.interval_s, "s"))
    return np.where(near, series.values[index], np.nan)
