"""Zero flow of heat dissipation: the temperature difference that the needle would show at rest."""

from typing import Literal

import numpy as np

from sapflux.correction.night_table import (
    candidates,
    laid_on,
    lines_of,
    no_rows,
    same_key,
    wanting,
    without_silent,
)
from sapflux.correction.nights import DAY_NS, reach_s
from sapflux.schema import RECORD
from sapflux.stage import stage

COLUMNS = ("difference_K", "mean_deficit_kPa", "variation")


def zero_flow_candidates(
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

    def highest(mean, variation, mean_deficit, _last):
        meets = possible = np.isfinite(mean)
        if method == "quiet_nights":
            quiet = (mean_deficit <= highest_deficit_kPa) & (variation <= highest_variation)
            meets = possible & quiet
        accepted = meets.any(axis=-1)
        pool = np.where(accepted[..., None], meets, possible)
        return np.argmax(np.where(pool, mean, -np.inf), axis=-1), accepted

    return candidates(
        heated_difference.transpose(*RECORD),
        installation,
        solar_elevation,
        solar_time,
        vapour_pressure_deficit,
        highest,
        COLUMNS,
        averaging_h=averaging_h,
        least_records_share=least_records_share,
        highest_deficit_kPa=highest_deficit_kPa,
        highest_variation=highest_variation,
    )


def fit_baseline(rows, /, *, method, window_d):
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
    summarise=zero_flow_candidates,
    fit=fit_baseline,
    reach_s=reach_s,
    method_needs={"quiet_nights": ("vapour_pressure_deficit",)},
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
        Which nights count, see above. The default is the one that allows for flow at night.
        Own judgement.
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
    for place, here, own in lines_of(nights, heated, numbers):
        line = baseline_line(stamps[here], knots[own], values[own], farthest_d, widest_d)
        baseline[place][here] = line
    return {
        "zero_flow_difference": heated.copy(data=baseline),
        "no_baseline": wanting(baseline, heated, numbers),
    }


def baseline_line(stamps, knots, values, farthest_d, widest_d):
    """The baseline at `stamps`: linear between nights, held constant near the ends of a span.

    stamps : of records, knots : of nights, both ascending [ns]; values : at the knots. NaN
    further than `farthest_d` from the nearest knot where the knots either side are over
    `widest_d` apart, or there is but one. Nights are few and days apart, and the line holds
    beyond its last; that is what tells it from the filling of short gaps in a record.

    >>> day = DAY_NS
    >>> stamps, knots = np.array([0, 2, 3, 9]) * day, np.array([1, 3]) * day
    >>> baseline_line(stamps, knots, np.array([10.0, 12.0]), 5.0, 42.0)
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


def _moving_maximum(start, values, half):
    """Highest finite value of the nights up to `half` before and after; NaN stays NaN."""
    night = np.rint((start - start[0]) / DAY_NS).astype(np.int64)
    dense = np.full(night[-1] + 1 + 2 * half, -np.inf)
    dense[night + half] = np.where(np.isfinite(values), values, -np.inf)
    highest = np.lib.stride_tricks.sliding_window_view(dense, 2 * half + 1).max(axis=-1)
    return np.where(np.isfinite(values), highest[night], np.nan)
