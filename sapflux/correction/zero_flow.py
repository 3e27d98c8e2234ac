"""Zero flow of heat dissipation: the temperature difference that the needle would show at rest."""

from typing import Literal

import numpy as np
import pandas as pd

from sapflux.correction.night_table import (
    laid_on,
    night_rows,
    no_rows,
    reasons,
    same_key,
    without_silent,
)
from sapflux.correction.nights import (
    DAY_NS,
    in_nights,
    installations_in,
    nights_of,
    window_means,
    window_middle,
    window_records,
)
from sapflux.correction.order import stages_before
from sapflux.schema import RECORD
from sapflux.stage import stage

PA_PER_KPA = 1000.0
COLUMNS = ("difference_K", "mean_deficit_kPa", "variation")


def summarise_nights(
    heated_difference,
    installation,
    solar_elevation,
    solar_time,
    vapour_pressure_deficit=None,
    /,
    *,
    method,
    averaging_h,
    least_records_share,
    highest_deficit_kPa,
    highest_variation,
):
    """One row a probe, point, installation and night of the block: its candidate for zero flow.

    Columns as in the table of `zero_flow_difference`, without `baseline_K`. The candidate is the
    highest mean over `averaging_h` after true solar midnight and before sunrise; by
    "quiet_nights" the highest of those windows that meet the conditions, or the highest of all,
    not accepted, where none does.
    """
    heated = heated_difference.transpose(*RECORD)
    nights = nights_of(heated["time"].values, solar_elevation.values, solar_time.values)
    values = in_nights(heated.values, nights, np.nan)
    numbers = in_nights(laid_on(heated, installation), nights, -1)
    if vapour_pressure_deficit is None:
        deficit = np.full(heated.sizes["time"], np.nan)
    else:
        deficit = vapour_pressure_deficit.values / PA_PER_KPA
    records = window_records(nights, averaging_h)
    air = window_means(in_nights(deficit, nights, np.nan), nights, records, least_records_share)
    parts = []
    for current in installations_in(numbers):
        own = np.where((numbers == current[..., None])[:, None], values, np.nan)
        signal = window_means(own, nights, records, least_records_share)
        with np.errstate(divide="ignore", invalid="ignore"):
            variation = signal.deviation / np.abs(signal.mean)
        possible = np.isfinite(signal.mean)
        if method == "quiet_nights":
            meets = possible & (air.mean <= highest_deficit_kPa) & (variation <= highest_variation)
        else:
            meets = possible
        accepted = meets.any(axis=-1)
        pool = np.where(accepted[..., None], meets, possible)
        pick = np.argmax(np.where(pool, signal.mean, -np.inf), axis=-1)[..., None]
        found = possible.any(axis=-1)
        middle = window_middle(nights, pick[..., 0], records)
        columns = {
            "time": np.where(found, middle, np.datetime64("NaT", "ns")),
            "difference_K": _picked(signal.mean, pick),
            "mean_deficit_kPa": _picked(np.broadcast_to(air.mean, signal.mean.shape), pick),
            "variation": _picked(variation, pick),
            "records": _picked(signal.count, pick),
            "accepted": accepted,
            "night_records": np.isfinite(own).sum(axis=-1),
            "long_enough": nights.length >= records,
        }
        rows = night_rows(heated, current, nights, columns)
        rows["reason"] = reasons(
            rows, "difference_K", averaging_h, highest_deficit_kPa, highest_variation
        )
        parts.append(rows.drop(columns=["night_records", "long_enough"]))
    return pd.concat(parts, ignore_index=True) if parts else no_rows(*COLUMNS)


def fit_nights(rows, /, *, method, window_d):
    """The table of nights with `baseline_K`, the value of the baseline at each accepted night.

    It is `difference_K`, and by "moving_window" the highest `difference_K` of the accepted nights
    of the same installation up to half of `window_d` before and after. NaN where not accepted.
    """
    if not len(rows):
        return no_rows(*COLUMNS).assign(baseline_K=np.empty(0))
    rows = without_silent(rows).reset_index(drop=True)
    baseline = rows["difference_K"].where(rows["accepted"]).to_numpy(copy=True)
    if method == "moving_window":
        start = rows["start"].to_numpy().astype("datetime64[ns]").astype(np.int64)
        for *_, own in same_key(rows):
            baseline[own] = _moving_maximum(start[own], baseline[own], window_d // 2)
    return rows.assign(baseline_K=baseline)


@stage(
    chain="heat_dissipation",
    makes="zero_flow_difference",
    flags="no_baseline",
    table="zero_flow_nights",
    summarise=summarise_nights,
    fit=fit_nights,
    # A night ends within a solar day of the noon before it; an hour for the equation of time.
    reach_s=lambda settings: 25 * 3600.0,
    method_needs={"quiet_nights": ("vapour_pressure_deficit",)},
    after=stages_before("heat_dissipation", "zero_flow_difference"),
    limits={
        "averaging_h": (0.25, 6.0),
        "least_records_share": (0.1, 1.0),
        "highest_deficit_kPa": (0.0, 1.0),
        "highest_variation": (0.0, 0.1),
        "window_d": (1, 31),
        "farthest_d": (0.0, 366.0),
        "widest_d": (0.0, 366.0),
    },
)
def zero_flow_difference(
    heated_difference,
    zero_flow_nights,
    installation,
    /,
    *,
    method: Literal["quiet_nights", "nightly_maximum", "moving_window"] = "quiet_nights",
    averaging_h=2.0,
    least_records_share=0.75,
    highest_deficit_kPa=0.05,
    highest_variation=0.005,
    window_d=7,
    farthest_d=21.0,
    widest_d=42.0,
):
    """Temperature difference that the heated needle would show without sap flow.

    Each night gives a candidate: the highest mean over `averaging_h` between true solar midnight
    and sunrise. The baseline is linear in time between the accepted nights of one installation.

    "quiet_nights" accepts a candidate only if the air was near saturation and the difference had
    come to rest, and so allows flow on the other nights. The published rule wants a 2 h mean
    deficit below 0.05 kPa and a standard deviation of the 4 highest differences below 0.5 % of
    their mean. Here the deviation and the value are those of all records of the window: the
    highest few of many noisy records lie above the true difference, the more so the noisier the
    probe, and are close to one another by selection; the mean over 2 h has little of that bias.
    "nightly_maximum" accepts every night, so it assumes that flow stops every night: at a true
    night index of 0.05 it gives 75 % of the flux density of a day index of 0.3. "moving_window"
    takes the highest of the nights around instead.

    Parameters
    ----------
    heated_difference : (probe, point, time) [K]
        Heated minus reference needle, screened.
    zero_flow_nights : table
        One row a probe, point, installation and night: `start` (UTC, true solar noon before it),
        `time` (UTC, middle of the candidate), difference_K, mean_deficit_kPa, variation (standard
        deviation over mean), records (in the candidate), accepted, reason in words, and
        baseline_K, the value that the baseline takes at `time`.
    installation : (probe, time) [1]
        The baseline never reaches across it.
    method : text
        Which nights count.
    averaging_h : float [h]
        Length of the mean. Source: Oishi et al. (2008).
    least_records_share : float [1]
        Share of the records of a mean that must be there. Own judgement.
    highest_deficit_kPa : float [kPa]
        Of "quiet_nights", highest mean vapour pressure deficit. Source: Oishi et al. (2008).
    highest_variation : float [1]
        Of "quiet_nights", highest standard deviation over mean. Source: Oishi et al. (2008).
    window_d : int [d]
        Of "moving_window", nights up to half of it (rounded down) before and after are looked at.
        Own judgement among the 3 to 15 days in use.
    farthest_d : float [d]
        Before the first and after the last accepted night, and either side of a span that is not
        bridged, the baseline is held constant up to this far. Own judgement.
    widest_d : float [d]
        Accepted nights further apart than this are not bridged. Own judgement.

    Returns
    -------
    zero_flow_difference : (probe, point, time) [K]
        NaN where no accepted night is near enough.
    no_baseline : (probe, point, time) [bool]
        Where it is NaN while a probe is installed.

    Source: Oishi, Oren & Stoy (2008), Agric. For. Meteorol. 148 (conditions, from memory);
    Granier (1987), Tree Physiology 3 (nightly maximum).
    """
    heated = heated_difference.transpose(*RECORD)
    numbers = laid_on(heated, installation)
    stamps = heated["time"].values.astype("datetime64[ns]").astype(np.int64)
    baseline = np.full(heated.shape, np.nan)
    nights = zero_flow_nights[np.isfinite(zero_flow_nights["baseline_K"].to_numpy(dtype=float))]
    knots = nights["time"].to_numpy().astype("datetime64[ns]").astype(np.int64)
    values = nights["baseline_K"].to_numpy(dtype=float)
    rows = {str(name): row for row, name in enumerate(heated["probe"].values)}
    columns = {int(number): column for column, number in enumerate(heated["point"].values)}
    for probe, point, number, own in same_key(nights):
        if probe not in rows or point not in columns:
            continue
        row, column = rows[probe], columns[point]
        here = numbers[row] == number
        if here.any():
            line = bridged(stamps[here], knots[own], values[own], farthest_d, widest_d)
            baseline[row, column, here] = line
    absent = np.isnan(baseline)
    known = (numbers >= 0)[:, None, :] | np.isfinite(heated.values)
    return {
        "zero_flow_difference": heated.copy(data=baseline),
        "no_baseline": heated.copy(data=absent & known),
    }


def bridged(stamps, knots, values, farthest_d, widest_d):
    """Values at `stamps`, linear between `knots`; constant near the ends of a bridged span.

    stamps, knots : ascending [ns]; values : at the knots. NaN further than `farthest_d` from the
    nearest knot where the knots either side are over `widest_d` apart, or there is but one.

    >>> day = DAY_NS
    >>> stamps, knots = np.array([0, 2, 3, 9]) * day, np.array([1, 3]) * day
    >>> bridged(stamps, knots, np.array([10.0, 12.0]), 5.0, 42.0)
    array([10., 11., 12., nan])
    """
    # Only the knots around the stamps matter: a block sees few of the nights.
    low = max(np.searchsorted(knots, stamps[0], side="right") - 1, 0)
    high = np.searchsorted(knots, stamps[-1], side="right") + 1
    knots, values = knots[low:high], values[low:high]
    # Span k lies between knots k - 1 and k; the first and the last are open.
    edges = np.searchsorted(stamps, knots, side="left")
    span = np.repeat(np.arange(len(knots) + 1), np.diff([0, *edges, len(stamps)]))
    left = np.maximum(np.arange(len(knots) + 1) - 1, 0)
    right = np.minimum(left + 1, len(knots) - 1)
    right[0] = 0
    gap = knots[right] - knots[left]
    closed = (gap > 0) & (gap <= widest_d * DAY_NS)
    rise = values[right] - values[left]
    since = stamps - knots[left][span]
    line = values[left][span] + since / np.maximum(gap, 1)[span] * rise[span]
    rest = np.flatnonzero(~closed[span])
    if rest.size:
        since, until = np.abs(since[rest]), np.abs(knots[right][span[rest]] - stamps[rest])
        first = since <= until
        near = np.where(first, values[left][span[rest]], values[right][span[rest]])
        line[rest] = np.where(np.minimum(since, until) <= farthest_d * DAY_NS, near, np.nan)
    return line


def _picked(values, pick):
    return np.take_along_axis(values, pick, axis=-1)[..., 0]


def _moving_maximum(start, values, half):
    """Highest finite value of the nights up to `half` before and after; NaN stays NaN."""
    night = np.rint((start - start[0]) / DAY_NS).astype(np.int64)
    dense = np.full(night[-1] + 1 + 2 * half, -np.inf)
    dense[night + half] = np.where(np.isfinite(values), values, -np.inf)
    highest = np.lib.stride_tricks.sliding_window_view(dense, 2 * half + 1).max(axis=-1)
    return np.where(np.isfinite(values), highest[night], np.nan)
