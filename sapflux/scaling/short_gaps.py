"""Short gaps in flux density, bridged by a straight line in time."""

import numpy as np

from sapflux import quality
from sapflux.stage import stage

HOUR_NS = 3600e9
LONGEST_STEP_S = 3600.0  # of the records of a site; its configuration allows no more


def _reach_s(settings):
    # The neighbours of a gap lie one step further out than the gap.
    return settings["longest_gap_h"] * 3600.0 + LONGEST_STEP_S


@stage(
    chain="scaling",
    makes=("flux_density", "origin"),
    reach_s=_reach_s,
    limits={"longest_gap_h": (0.0, 6.0)},
)
def short_gaps(flux_density, origin, installation, /, *, longest_gap_h=2.0):
    """Flux density with its short gaps bridged by a straight line in time.

    A gap of two hours costs a day's total next to nothing; one of six hours at noon takes 7 to
    15 % of it. Nothing is bridged before the first or after the last measured record, nor from
    one installation of a probe to the next.

    Parameters
    ----------
    flux_density : (probe, point, time) [kg m-2 s-1]
        NaN where absent, whatever the reason.
    origin : (probe, point, time) [1]
        How each value came to be.
    installation : (probe, time) [1]
        Number of the installation, -1 outside.
    longest_gap_h : float [h]
        Longest time without a value that is bridged, from the end of the last measured interval
        to the start of the next. Common practice; measure it on the site's own days.

    Returns
    -------
    flux_density : (probe, point, time) [kg m-2 s-1]
        Measured values untouched; NaN in longer gaps.
    origin : (probe, point, time) [1]
        `interpolated` where a value was put in.

    Source: linear interpolation, common practice; the loss for a noon gap in a half-sine day is
    an own derivation.
    """
    stamps = flux_density["time"].values.astype("datetime64[ns]").astype(np.int64)
    own = installation.transpose("probe", "time").values[:, np.newaxis, :]
    values, filled = bridge(flux_density.values, stamps, own, longest_gap_h * HOUR_NS)
    kinds = np.where(filled, np.int8(quality.ORIGINS["interpolated"]), origin.values)
    return {
        "flux_density": flux_density.copy(data=values),
        "origin": origin.copy(data=kinds.astype(origin.dtype)),
    }


def bridge(values, stamps, installation, longest_gap_ns):
    """Values with short gaps bridged, and where that was done.

    values : (..., time), NaN where absent; stamps : (time) regular ends of interval [ns];
    installation : (..., time) whole numbers, negative outside, broadcast to the values;
    longest_gap_ns : longest missing time [ns]. A bridged value hangs on its two neighbours alone.

    >>> filled, where = bridge(np.array([1.0, np.nan, 3.0]), np.arange(3), np.zeros(3, int), 1)
    >>> filled.tolist(), where.tolist()
    ([1.0, 2.0, 3.0], [False, True, False])
    """
    count = len(stamps)
    there = np.isfinite(values)
    if count < 3 or there.all():
        return values.copy(), np.zeros(values.shape, dtype=bool)
    place = np.broadcast_to(np.arange(count), values.shape)
    before = np.maximum.accumulate(np.where(there, place, -1), axis=-1)
    ahead = np.where(there, place, count)[..., ::-1]
    after = np.minimum.accumulate(ahead, axis=-1)[..., ::-1]
    enclosed = ~there & (before >= 0) & (after < count)
    before, after = np.where(enclosed, before, 0), np.where(enclosed, after, 0)
    own = np.broadcast_to(installation, values.shape)
    span = stamps[after] - stamps[before]
    filled = (
        enclosed
        & (span - (stamps[1] - stamps[0]) <= longest_gap_ns)
        & (own >= 0)
        & (np.take_along_axis(own, before, -1) == own)
        & (np.take_along_axis(own, after, -1) == own)
    )
    first = np.take_along_axis(values, before, -1)
    last = np.take_along_axis(values, after, -1)
    share = (stamps - stamps[before]) / np.where(enclosed, span, 1)
    return np.where(filled, first + (last - first) * share, values), filled
