"""Temperature traces around heat pulses, reduced to one record a pulse.

A log of traces has a row every `trace_step_s` around each pulse, stamped with its moment. The pulse
of a record begins `pulse_starts_s` after the record does. Here each pulse becomes a record of the
heat-ratio cube: rises over the reading window, and what else the traces tell.
"""

from dataclasses import dataclass

import numpy as np

from sapflux import schema
from sapflux.ingest.channels import values_of
from sapflux.physics import pulse_trace
from sapflux.site.config import TRACE_AFTER_S, TRACE_BEFORE_S
from sapflux.site.installations import episodes, latest_begun

DOWN, UP = schema.TRACES
# Share of the rows of a window that must be there, and rows that a drift needs. Own judgement.
LEAST_ROWS = 0.75
FEWEST_BEFORE = 5
# Standard deviation of the drift in a pulse about that over the intervals around it [K s-1]. A stem
# warms by up to 2 K h-1 (6e-4 K s-1), evenly for hours. Source: own judgement.
DRIFT_CHANGE = 1e-4


@dataclass(frozen=True)
class Traced:
    """The readings of one point on the records of a cube, from one log.

    readings : name -> (time); there : (time) a pulse has rows; withheld, beyond : (time) two
    downloads differ in a row, or a row is out of range.
    """

    readings: dict
    there: np.ndarray
    withheld: np.ndarray
    beyond: np.ndarray


def is_trace(channel):
    """Whether a channel is a temperature trace."""
    return channel.quantity in schema.TRACES


def record_interval_s(site, logs, channel):
    """Seconds of the records of the cube that a channel gives: from pulse to pulse of a trace."""
    if is_trace(channel):
        return round(site.logs[channel.log].interval_min * 60)
    return logs[channel.log].interval_s


def record_ends(site, logs, channel):
    """Ends of the records that a channel gives, datetime64[s], UTC, sorted, each once."""
    end = logs[channel.log].end
    if not is_trace(channel):
        return end
    return np.unique(_places(site, end, channel.log)[0])


def traced_points(site, logs, channels, ends):
    """Yield (probe, point, `Traced`) for each point and log with both traces.

    channels : of one cube; ends : its records [datetime64[s], UTC], regular, at least one.
    """
    pairs = {}
    for channel in filter(is_trace, channels):
        sides = pairs.setdefault((channel.id, channel.point, channel.log), {DOWN: [], UP: []})
        sides[channel.quantity].append(channel)
    for (probe, point, log), sides in pairs.items():
        down, up = (_laid(site, logs[log], log, sides[side], ends) for side in (DOWN, UP))
        seconds = _seconds(site, log)
        interval_s = round(site.logs[log].interval_min * 60)
        numbers = latest_begun(site, [probe], ends, interval_s)[0]
        readings = {name: np.full(len(ends), np.nan) for name in schema.TRACED}
        for number in np.unique(numbers):
            row, own = episodes(site, probe)[number], numbers == number
            window = (row.window_from_s, row.window_to_s)
            if None in window or row.pulse_length_s is None:
                continue
            found = pulse_readings(
                down.values[own], up.values[own], seconds, row.pulse_length_s, window, interval_s
            )
            for name, values in found.items():
                readings[name][own] = values
        befell = (getattr(down, n) | getattr(up, n) for n in ("there", "withheld", "beyond"))
        yield probe, point, Traced(readings, *befell)


def pulse_readings(downstream, upstream, seconds, pulse, window, interval_s):
    """name -> (pulse) readings of the traces of one point; NaN where too few rows are there.

    downstream, upstream : (pulse, row) [K]; seconds : (row) [s] since the start of heating;
    pulse : length of heating [s]; window : [s] since its END, both ends within; interval_s : from
    pulse to pulse.

    Rises are temperatures less a line through those before heating. Both needles have their own
    level and one drift: they sit 12 mm apart, and one slope has half the variance of two. Few rows
    tell a drift badly: 10 rows of a noise of 1 leave one of 7 at 90 s, 60 rows 0.6. So it is the
    mean of the slope of the rows and of that from the pulse before to the pulse after, by the
    inverse of their variances. Halves of the window share its middle row.

    Source: Burgess et al. (2001), Tree Physiology 21 (rises and their window); own derivation.
    """
    before = seconds < 0
    level, drift = _before(
        np.stack([downstream[:, before], upstream[:, before]]), seconds[before], interval_s
    )
    line = level[..., None] + drift[:, None] * seconds
    down, up = np.stack([downstream, upstream]) - line
    since_end = seconds - pulse
    first, last = window
    middle = 0.5 * (first + last)

    def means(begin, end):
        rows = (since_end >= begin) & (since_end <= end)
        return _mean(down[:, rows]), _mean(up[:, rows])

    rows = (since_end >= first) & (since_end <= last)
    held = np.isfinite(down).any(axis=0) | np.isfinite(up).any(axis=0)
    after = (since_end > 0) & (seconds <= seconds[held].max(initial=pulse + last))
    time = seconds[after]
    rise_down, rise_up = means(first, last)
    return {
        "rise_downstream": rise_down,
        "rise_upstream": rise_up,
        "mean_log_ratio": _mean(_log_ratio(down[:, rows], up[:, rows])),
        "early_log_ratio": _log_ratio(*means(first, middle)),
        "late_log_ratio": _log_ratio(*means(middle, last)),
        "time_of_maximum_downstream": pulse_trace.time_of_maximum(down[:, after], time),
        "time_of_maximum_upstream": pulse_trace.time_of_maximum(up[:, after], time),
        "decay_time": pulse_trace.decay_time(down[:, after], up[:, after], time, pulse),
        "pre_pulse_drift": np.where(np.isfinite(rise_down) & np.isfinite(rise_up), drift, np.nan),
    }


def _before(values, seconds, interval_s):
    """Levels at the start of heating (needle, pulse) and the common drift (pulse).

    values : (needle, pulse, row); seconds : (row). Pulses follow each other by `interval_s`.
    """
    there = np.isfinite(values)
    count = there.sum(axis=-1)
    enough = (count >= FEWEST_BEFORE).all(axis=0)
    size = np.maximum(count, 1)
    mean = np.where(there, values, 0.0).sum(axis=-1) / size
    mean_time = np.where(there, seconds, 0.0).sum(axis=-1) / size
    away = np.where(there, seconds - mean_time[..., None], 0.0)
    departure = np.where(there, values - mean[..., None], 0.0)
    spread = (away**2).sum(axis=(0, -1))
    enough &= spread > 0
    spread = np.where(enough, spread, 1.0)
    line = (away * departure).sum(axis=(0, -1)) / spread
    scatter = np.where(there, departure - line[:, None] * away, 0.0)
    freedom = np.maximum(count.sum(axis=0) - len(values) - 1, 1)
    variance = (scatter**2).sum(axis=(0, -1)) / freedom / spread

    around = np.full(len(line), np.nan)
    moments = mean_time + np.arange(len(line)) * interval_s
    both = enough[2:] & enough[:-2]
    change = (mean[:, 2:] - mean[:, :-2]) / (moments[:, 2:] - moments[:, :-2])
    around[1:-1] = np.where(both, change.mean(axis=0), np.nan)
    own = DRIFT_CHANGE**2 / (DRIFT_CHANGE**2 + variance)
    drift = np.where(np.isnan(around), line, own * line + (1.0 - own) * around)
    drift = np.where(enough, drift, np.nan)
    return mean - drift * mean_time, drift


def _mean(values):
    """Mean over the rows, NaN where less than LEAST_ROWS of them are there."""
    there = np.isfinite(values)
    count = there.sum(axis=-1)
    total = np.where(there, values, 0.0).sum(axis=-1)
    enough = count >= max(1, LEAST_ROWS * values.shape[-1])
    return np.where(enough, total / np.maximum(count, 1), np.nan)


def _log_ratio(down, up):
    """Logarithm of down over up, NaN where one is not positive."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.log(np.where((down > 0) & (up > 0), down / up, np.nan))


@dataclass(frozen=True)
class _Laid:
    """One trace on the records: values (time, row) in K, and what befell the rows (time)."""

    values: np.ndarray
    there: np.ndarray
    withheld: np.ndarray
    beyond: np.ndarray


def _laid(site, series, log, channels, ends):
    seconds = _seconds(site, log)
    values = np.full((len(ends), len(seconds)), np.nan)
    there, conflicting, beyond = (np.zeros(len(ends), dtype=bool) for _ in range(3))
    interval_s = round(site.logs[log].interval_min * 60)
    for channel in channels:
        rows, found, withheld = values_of(channel, series, site)
        end, column = _places(site, series.end[rows], log)
        place = ((end - ends[0]).astype(np.int64) // interval_s).astype(np.int64)
        own = (place >= 0) & (place < len(ends)) & (column < len(seconds))
        place, column, found, withheld = (a[own] for a in (place, column, found, withheld))
        row = schema.QUANTITIES[channel.quantity]
        with np.errstate(invalid="ignore"):
            outside = (found < row.low) | (found > row.high)
        values[place, column] = np.where(outside, np.nan, found)
        there[place] = True
        conflicting[place[withheld]] = True
        beyond[place[outside]] = True
    return _Laid(values, there, conflicting, beyond)


def _seconds(site, log):
    """Seconds since the start of heating of the rows that a pulse may have."""
    one = site.logs[log]
    before = TRACE_BEFORE_S // one.row_s * one.row_s
    last = min(TRACE_AFTER_S, round(one.interval_min * 60) - before - one.row_s)
    return np.arange(-before, last + 1, one.row_s) - one.pulse_starts_s % one.row_s


def _places(site, moments, log):
    """(ends of records, places among their rows) of moments [datetime64[s], UTC]."""
    one = site.logs[log]
    interval = round(one.interval_min * 60)
    before = TRACE_BEFORE_S // one.row_s * one.row_s
    starts = int(one.pulse_starts_s // one.row_s * one.row_s)
    offset = site.offset.astype("timedelta64[s]").astype(np.int64)
    since = moments.astype("datetime64[s]").astype(np.int64) + offset - starts + before
    record, place = np.divmod(since, interval)
    end = (record + 1) * interval - offset
    return end.astype("datetime64[s]"), place // one.row_s
