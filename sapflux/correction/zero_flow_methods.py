"""From candidates of single nights to the values that the baseline takes: one way a method."""

from dataclasses import dataclass

import numpy as np

from sapflux.correction.night_table import in_words, same_key, without_silent
from sapflux.correction.nights import DAY_NS
from sapflux.correction.zero_flow_nights import no_candidates

# Through two nights any line passes: own judgement.
FEWEST_ABOVE = 3
# Nights this little below the first line are on it: rounding, far below any resolution.
ON_THE_LINE_K = 1e-9
# Own judgement: a median of fewer departures says nothing.
FEWEST_DEPARTURES = 3
MONTH_D = 30


@dataclass(frozen=True)
class Line:
    """Least-squares lines through rows of points: all (row).

    level : at x = 0. error : its standard error, NaN for fewer than three points. count : points.
    """

    level: np.ndarray
    slope: np.ndarray
    error: np.ndarray
    count: np.ndarray


def fit_baseline(
    rows,
    /,
    *,
    method,
    window_d,
    regime_d,
    fewest_nights,
    least_deficit_range_kPa,
    wet_noise_ratio,
    fewest_a_month,
):
    """The table of nights with what only all nights together tell.

    Nights wetted at the connector are refused here, for they show beside the other nights of the
    probe. baseline_K, baseline_error_K, admissible : as in the table of `zero_flow_difference`.
    """
    rows = without_silent(rows).reset_index(drop=True) if len(rows) else no_candidates()
    size = len(rows)
    noise = rows["noise_K"].to_numpy()
    usual = np.full(size, np.nan)
    for *_, own in same_key(rows):
        usual[own] = _median(noise[own])
    # Without any noise as a rule (a coarse resolution) there is nothing to compare with.
    wet = rows["rained"].to_numpy(dtype=bool) & (usual > 0) & (noise > wet_noise_ratio * usual)
    accepted = rows["accepted"].to_numpy(dtype=bool) & ~wet
    value = np.where(accepted, rows["difference_K"].to_numpy(), np.nan)
    deficit = rows["mean_deficit_kPa"].to_numpy()
    night = _night_numbers(rows)
    baseline, error = np.full((2, size), np.nan)
    refused = np.full(size, "", dtype=object)
    for *_, own in same_key(rows):
        one = (night[own], value[own])
        if method == "double_regression":
            found = double_regression(*one, window_d // 2, fewest_nights)
        elif method == "deficit_regression":
            found = deficit_regression(
                *one, deficit[own], regime_d // 2, fewest_nights, least_deficit_range_kPa
            )
        else:
            made = highest_around(*one, window_d // 2) if method == "moving_window" else one[1]
            found = made, np.where(np.isfinite(made), scatter(*one), np.nan), ""
        baseline[own], error[own], refused[own] = found
    stands = accepted & (refused == "")
    wet_words = "wet connector: noise {:.2g} K after rain, {:.2g} as a rule"
    reason = in_words(
        size,
        [
            (wet & rows["accepted"].to_numpy(dtype=bool), wet_words, noise, usual),
            (accepted & ~stands, "{}", refused),
            (True, "{}", rows["reason"].to_numpy()),
        ],
    )
    may = ~wet & (refused == "")
    return rows.assign(
        accepted=stands,
        accepted_if_drier=rows["accepted_if_drier"].to_numpy(dtype=bool) & may,
        accepted_if_wetter=rows["accepted_if_wetter"].to_numpy(dtype=bool) & may,
        reason=reason,
        baseline_K=np.where(stands, baseline, np.nan),
        baseline_error_K=np.where(stands, error, np.nan),
        admissible=_admissible(rows, stands, fewest_a_month),
    )


def highest_around(night, values, half):
    """Highest value of the nights up to `half` before and after; NaN stays NaN.

    night : whole numbers from 0, rising; values : (night) [K], NaN where not accepted.
    """
    around = windows_of(night, values, half)
    highest = np.where(np.isnan(around), -np.inf, around).max(axis=-1)
    return np.where(np.isfinite(values), highest, np.nan)


def double_regression(night, values, half, fewest_nights):
    """(value, its standard error, why refused) of the line through the upper nights around each.

    A line through the values of the nights up to `half` before and after; those on or above it
    are kept; the line through these, at the night itself, is its zero flow. Arguments as of
    `highest_around`. NaN and a reason in words where too few nights are there or kept.

    Source: Lu, Urban & Zhao (2004), Acta Bot. Sin. 46 (from memory).
    """
    around = windows_of(night, values, half)
    away = np.broadcast_to(np.arange(-half, half + 1.0), around.shape)
    first = lines_through(away, around)
    above = around >= first.level[:, None] + first.slope[:, None] * away - ON_THE_LINE_K
    upper = lines_through(away, np.where(above, around, np.nan))
    here = np.isfinite(values)
    few = f"{{}} accepted nights in the window, {fewest_nights} needed"
    few_above = f"{{}} nights of the window on or above the line, {FEWEST_ABOVE} needed"
    refused = in_words(
        len(night),
        [
            (here & (first.count < fewest_nights), few, first.count),
            (here & (upper.count < FEWEST_ABOVE), few_above, upper.count),
        ],
    )
    good = here & (refused == "")
    return np.where(good, upper.level, np.nan), np.where(good, upper.error, np.nan), refused


def deficit_regression(night, values, deficit, half, fewest_nights, least_range_kPa):
    """(value, its standard error, why refused) of each night, by its regime's line on deficit.

    A line through the values of the nights up to `half` before and after against the deficit of
    each; its value at no deficit is the zero flow. deficit : (night) [kPa]; else as of
    `double_regression`.

    Source: common practice.
    """
    there = np.where(np.isfinite(deficit), values, np.nan)
    around = windows_of(night, there, half)
    dryness = windows_of(night, deficit, half)
    line = lines_through(dryness, around)
    used = np.isfinite(around)
    highest = np.where(used, dryness, -np.inf).max(axis=-1)
    lowest = np.where(used, dryness, np.inf).min(axis=-1)
    span = np.where(line.count > 0, highest, 0.0) - np.where(line.count > 0, lowest, 0.0)
    here = np.isfinite(values)
    few = f"{{}} accepted nights in the regime, {fewest_nights} needed"
    alike = f"deficit of the regime spans {{:.3g}} kPa, {least_range_kPa:g} needed"
    refused = in_words(
        len(night),
        [
            (here & np.isnan(deficit), "no vapour pressure deficit"),
            (here & (line.count < fewest_nights), few, line.count),
            (here & (span < least_range_kPa), alike, span),
        ],
    )
    good = here & (refused == "")
    return np.where(good, line.level, np.nan), np.where(good, line.error, np.nan), refused


def scatter(night, values):
    """Standard error of one night's value as a point of the line: a number, NaN for too few.

    Each accepted night is compared with the line between its two neighbours: for independent
    errors of deviation s the departure has the deviation s sqrt(1 + u^2 + (1 - u)^2), u the share
    of the way. s is the median of the absolute departures, scaled so, over 0.6745. It holds what
    a night's own mean cannot show: flow that differs from night to night, and change of the true
    zero flow between nights.

    Source: own derivation; 0.6745 is the upper quartile of the standard normal distribution.

    >>> round(float(scatter(np.arange(5), np.array([10.0, 10.2, 10.0, 10.2, 10.0]))), 4)
    0.2421
    """
    known = np.isfinite(values)
    x, y = night[known].astype(float), values[known]
    if len(x) < FEWEST_DEPARTURES + 2:
        return np.nan
    share = (x[1:-1] - x[:-2]) / (x[2:] - x[:-2])
    departure = y[1:-1] - (y[:-2] + share * (y[2:] - y[:-2]))
    return np.median(np.abs(departure) / np.sqrt(1 + share**2 + (1 - share) ** 2)) / 0.6745


def windows_of(night, values, half):
    """(night, 2 half + 1) values of the nights from `half` before to `half` after each, or NaN."""
    dense = np.full(night[-1] + 1 + 2 * half, np.nan)
    dense[night + half] = values
    return np.lib.stride_tricks.sliding_window_view(dense, 2 * half + 1)[night]


def lines_through(x, y):
    """`Line` of each row of (row, place) points; a point with a NaN is none.

    NaN where the points of a row do not differ in x.
    """
    there = np.isfinite(x) & np.isfinite(y)
    count = there.sum(axis=-1)
    number = np.maximum(count, 1)
    mean_x = np.where(there, x, 0.0).sum(axis=-1) / number
    mean_y = np.where(there, y, 0.0).sum(axis=-1) / number
    dx = np.where(there, x - mean_x[:, None], 0.0)
    dy = np.where(there, y - mean_y[:, None], 0.0)
    spread = (dx**2).sum(axis=-1)
    spread = np.where(spread > 0, spread, np.nan)
    slope = (dx * dy).sum(axis=-1) / spread
    rest = ((dy - slope[:, None] * dx) ** 2).sum(axis=-1)
    variance = rest / np.where(count > 2, count - 2, np.nan)
    error = np.sqrt(variance * (1 / number + mean_x**2 / spread))
    return Line(mean_y - slope * mean_x, slope, error, count)


def _night_numbers(rows):
    """(row) whole days since the first night of the same key: noons are a day apart."""
    start = rows["start"].to_numpy().astype("datetime64[ns]").astype(np.int64)
    numbers = np.zeros(len(rows), dtype=np.int64)
    for *_, own in same_key(rows):
        numbers[own] = np.rint((start[own] - start[own.start]) / DAY_NS).astype(np.int64)
    return numbers


def _median(values):
    known = values[np.isfinite(values)]
    return np.median(known) if len(known) else np.nan


def _admissible(rows, accepted, fewest_a_month):
    """(row) bool: whether the row's installation has accepted nights enough for its records."""
    recorded = (rows["reason"] != "no night record").to_numpy()
    enough = np.zeros(len(rows), dtype=bool)
    for *_, own in same_key(rows):
        enough[own] = accepted[own].sum() * MONTH_D >= fewest_a_month * recorded[own].sum()
    return enough
