"""Solar nights: the hours of a block in which zero flow is looked for, and means over them.

A night is looked at from true solar midnight to sunrise: before midnight stems still refill. It is
known by the true solar noon before it, found from the night's own records, so that it is the same
for every way of cutting the record into blocks that hold the night whole.
"""

from dataclasses import dataclass, replace

import numpy as np

SECOND_NS = 1_000_000_000
DAY_NS = 86_400 * SECOND_NS
# The sun is up while its centre stands above this. Source: common practice.
HORIZON_DEG = 0.0
# A night ends within a solar day of the noon before it; an hour for the equation of time.
REACH_S = 25 * 3600.0
# A share of the records may miss a whole number of them by a rounding.
ROUNDING = 1e-9


@dataclass(frozen=True)
class Nights:
    """The nights of a block, in order.

    start : (night) datetime64[ns], UTC of the true solar noon before the night, to the second;
        half a record late where the sun's place is that of the middle of each interval.
    begins : (night) datetime64[ns], stamp of the first record after midnight.
    first : (night) place of that record in the block.
    length : (night) number of records from there to sunrise.
    step_ns : interval of the records [ns].
    """

    start: np.ndarray
    begins: np.ndarray
    first: np.ndarray
    length: np.ndarray
    step_ns: int


@dataclass(frozen=True)
class WindowMeans:
    """Running means within nights; NaN where too few records. All (..., night, window).

    Where no night is as long as a window there is one window, without a mean.
    count : finite records in the window. deviation : their standard deviation (n - 1).
    """

    mean: np.ndarray
    deviation: np.ndarray
    count: np.ndarray


def reach_s(_settings):
    """How far [s] a stage looks from the start of a night: to the end of it, whatever is set."""
    return REACH_S


def nights_of(time, solar_elevation, solar_time):
    """The nights of a block.

    time : (time) datetime64[ns], UTC, regular; solar_elevation : (time) [degree];
    solar_time : (time) [h], true solar, 0 to 24.
    Under a midnight sun there is no night; in a polar night it lasts until noon.
    ValueError if `time` is not regular.
    """
    stamps = np.asarray(time, dtype="datetime64[ns]").astype(np.int64)
    steps = np.diff(stamps)
    if (steps != steps[:1]).any():
        raise ValueError("the records do not stand at one regular interval")
    at = np.flatnonzero((solar_elevation < HORIZON_DEG) & (solar_time < 12))
    if not at.size or not steps.size:
        none = np.empty(0, dtype=np.int64)
        moments = none.astype("datetime64[ns]")
        return Nights(moments, moments, none, none, 1)
    since_noon = np.rint((np.asarray(solar_time)[at] + 12.0) * (3600 * SECOND_NS))
    noon = stamps[at] - since_noon.astype(np.int64)
    # Noons are a day apart but for the slow equation of time, so rounding cannot go astray.
    number = np.rint((noon - noon[0]) / DAY_NS).astype(np.int64)
    new = np.flatnonzero(np.diff(number, prepend=-1))
    start = noon[new] // SECOND_NS * SECOND_NS
    first = at[new]
    return Nights(
        start.astype("datetime64[ns]"),
        stamps[first].astype("datetime64[ns]"),
        first,
        np.diff(new, append=len(at)),
        int(steps[0]),
    )


def in_nights(values, nights, outside):
    """(..., time) laid out as (..., night, slot), `outside` behind the end of a night."""
    slots = np.arange(nights.length.max(initial=0))
    place = np.minimum(nights.first[:, None] + slots, values.shape[-1] - 1)
    return np.where(slots < nights.length[:, None], values[..., place], outside)


def with_hours_before(nights, hours):
    """The nights lengthened by so many hours before midnight, as far as the block has them.

    Up to 11 h, or they would reach to the noon that the night is known by.
    """
    back = np.minimum(round(hours * 3600 * SECOND_NS / nights.step_ns), nights.first)
    return replace(nights, first=nights.first - back, length=nights.length + back)


def window_records(nights, averaging_h):
    """Number of records in a window of `averaging_h`, at least one."""
    return max(1, round(averaging_h * 3600 * SECOND_NS / nights.step_ns))


def window_means(values, nights, records, least_records):
    """`WindowMeans` of every window of `records` records that lies within its night.

    values : (..., night, slot) as `in_nights` gives them; least_records : share of the records
    that must be there. Sums run from the first record of each night, one after another, so they
    do not depend on the other nights of the block.
    """
    windows = values.shape[-1] - records + 1
    if windows < 1:
        none = np.full((*values.shape[:-1], 1), np.nan)
        return WindowMeans(none, none, np.zeros(none.shape, dtype=np.int64))
    there = np.isfinite(values)
    filled = np.where(there, values, 0.0)
    # Sums of small departures from the night's mean, so that the squares keep their digits.
    total = np.cumsum(filled, axis=-1)[..., -1:]
    number = np.cumsum(there, axis=-1)[..., -1:]
    centre = total / np.maximum(number, 1)
    departure = np.where(there, values - centre, 0.0)
    count = _moving_sum(there, records)
    enough = count >= max(1, int(np.ceil(least_records * records - ROUNDING)))
    enough &= np.arange(windows) + records <= nights.length[:, None]
    size = np.where(enough, count, 1)
    mean = _moving_sum(departure, records) / size
    square = _moving_sum(departure**2, records) - size * mean**2
    deviation = np.sqrt(np.maximum(square, 0.0) / np.maximum(size - 1, 1))
    return WindowMeans(
        np.where(enough, mean + centre, np.nan),
        np.where(enough, deviation, np.nan),
        count,
    )


def window_slopes(values, nights, records, least_records):
    """Slope of the least-squares line through every window, in units of `values` an hour.

    Arguments and result as of `window_means`; NaN also where a window has but one record.
    """
    mean = window_means(values, nights, records, least_records).mean
    if values.shape[-1] < records:
        return mean
    there = np.isfinite(values)
    filled = np.where(there, values, 0.0)
    number = np.cumsum(there, axis=-1)[..., -1:]
    centre = np.cumsum(filled, axis=-1)[..., -1:] / np.maximum(number, 1)
    y = np.where(there, values - centre, 0.0)
    x = np.where(there, np.arange(values.shape[-1], dtype=float), 0.0)
    count = _moving_sum(there, records)
    sum_x, sum_y = _moving_sum(x, records), _moving_sum(y, records)
    spread = count * _moving_sum(x**2, records) - sum_x**2
    known = np.isfinite(mean) & (count > 1)
    slope = (count * _moving_sum(x * y, records) - sum_x * sum_y) / np.where(known, spread, 1.0)
    return np.where(known, slope * (3600 * SECOND_NS / nights.step_ns), np.nan)


def record_noise(values):
    """Standard deviation of the noise from record to record, of (..., night, slot) a night.

    From the median of the absolute second differences, which a steady rise or fall does not
    touch: for independent normal noise of deviation s they have the deviation sqrt(6) s, and the
    median of their absolute value is 0.6745 of that. NaN where three records never follow one
    another.

    Source: own derivation; 0.6745 is the upper quartile of the standard normal distribution.

    >>> round(float(record_noise(np.array([0.0, 1.0, 0.0, 1.0]))), 3)  # differences -2 and 2
    1.211
    """
    second = np.sort(np.abs(np.diff(values, n=2, axis=-1)), axis=-1)  # NaN stand last
    count = np.isfinite(second).sum(axis=-1)
    if not second.shape[-1]:
        return np.full(values.shape[:-1], np.nan)
    middle = np.maximum(np.stack([(count - 1) // 2, count // 2], axis=-1), 0)
    median = np.take_along_axis(second, middle, axis=-1).sum(axis=-1) / 2
    return median / (0.6745 * np.sqrt(6.0))


def window_middle(nights, window, records):
    """Middle of the stamps of a window of each night, datetime64[ns].

    window : (..., night) place of the window's first record within its night.
    """
    return nights.begins + (2 * window + records - 1) * nights.step_ns // 2


def last_window(nights, records):
    """(night) place of the last whole window before sunrise; 0 where the night is shorter."""
    return np.maximum(nights.length - records, 0)


def installations_in(installation):
    """Yield, for each installation met in turn, where it is: (..., night) number, -1 for none.

    installation : (..., night, slot) int, -1 outside. Most nights see one installation; a night
    in which a probe was replaced sees two, each with its own records.
    """
    none = np.iinfo(np.int64).max
    numbers = np.where(installation >= 0, installation, none).astype(np.int64)
    if not numbers.size:
        return
    current = numbers.min(axis=-1)
    while (current < none).any():
        yield np.where(current < none, current, -1)
        later = np.where(numbers > current[..., None], numbers, none)
        current = later.min(axis=-1)


def _moving_sum(values, records):
    total = np.cumsum(values, axis=-1, dtype=np.int64 if values.dtype == bool else np.float64)
    out = total[..., records - 1 :].copy()
    out[..., 1:] -= total[..., :-records]
    return out
