"""Heater power: records taken while the heater was off, and while the wood warmed up again."""

import numpy as np

from sapflux.stage import stage

MINUTE_NS, HOUR_NS = 60e9, 3600e9


def _reach_s(settings):
    # A second more, so that a record just at the edge is seen.
    return max(settings["margin_min"] * 60.0, settings["recovery_h"] * 3600.0) + 1.0


@stage(
    chain="heat_dissipation",
    flags=("heater_failure", "heater_recovery"),
    reach_s=_reach_s,
    limits={
        "smallest_difference_K": (-5.0, 10.0),
        "least_heater_V": (0.0, 30.0),
        "least_heater_share": (0.0, 1.0),
        "margin_min": (0.0, 240.0),
        "recovery_h": (0.0, 48.0),
    },
)
def screen_power_loss(
    heated_difference,
    heater_voltage=None,
    heater_state=None,
    power_off=None,
    heating_on=None,
    /,
    *,
    smallest_difference_K=1.5,
    least_heater_V=1.0,
    least_heater_share=0.99,
    margin_min=30.0,
    recovery_h=3.0,
):
    """Where the heater was off or its wiring broken, and where the wood still warms up after it.

    Without power the difference falls to the natural gradient of the stem, within about 1 K of
    zero, in 10 to 30 minutes; read as flow that would be a very high one.

    Parameters
    ----------
    heated_difference : (probe, point, time) [K]
        Heated minus reference needle.
    heater_voltage : (probe, time) [V]
        Where logged.
    heater_state : (probe, time) [1]
        Share of the interval with the heater on, where logged.
    power_off : (probe, time) [1]
        1 where the heater was off on purpose, by `references.csv`: a difference that has not
        fallen yet would be read as flow.
    heating_on : (probe) [s]
        Set for probes heated in cycles: their pauses are no outages, and voltage and state are
        not looked at. The difference that a cycle makes tells of an outage all the same.
    smallest_difference_K : float [K]
        Below this the heater is off: above the natural gradients of stems, and below the
        difference at the highest flow that the calibration covers. Own judgement.
    least_heater_V : float [V]
        Below this the heater is off. Own judgement: raise it to just below the regulated voltage.
    least_heater_share : float [1]
        Below this share of the interval the heater counts as off. Own judgement.
    margin_min : float [min]
        So long before such a record the difference may be falling already. Own judgement.
    recovery_h : float [h]
        So long after it the wood is still warming up; longer in large stems. Common practice.

    Returns
    -------
    heater_failure : (probe, point, time) [bool]
        Off, or within the margin before it.
    heater_recovery : (probe, point, time) [bool]
        Within the recovery after it.

    Source: common practice; the thresholds are own judgement.
    """
    off = heated_difference < smallest_difference_K
    steady = True if heating_on is None else heating_on.isnull()
    if heater_voltage is not None:
        off = off | ((heater_voltage < least_heater_V) & steady)
    if heater_state is not None:
        off = off | ((heater_state < least_heater_share) & steady)
    if power_off is not None:
        off = off | (power_off > 0)
    off = off.transpose(*heated_difference.dims)
    stamps = heated_difference["time"].values.astype("datetime64[ns]").astype(np.int64)
    failure, recovery = np.zeros((2, *off.shape), dtype=bool)
    rows = off.values.any(axis=-1)  # most probes have no outage in a block
    before, after = _since_and_until(off.values[rows], stamps)
    failure[rows] = after <= margin_min * MINUTE_NS
    recovery[rows] = (before <= recovery_h * HOUR_NS) & ~failure[rows]
    return {
        "heater_failure": off.copy(data=failure),
        "heater_recovery": off.copy(data=recovery),
    }


def _since_and_until(off, stamps):
    """Time since the last, and until the next, record that is `off`: (..., time) [ns], inf."""
    last = np.maximum.accumulate(np.where(off, stamps, -np.inf), axis=-1)
    ahead = np.where(off, stamps, np.inf)[..., ::-1]
    following = np.minimum.accumulate(ahead, axis=-1)[..., ::-1]
    return stamps - last, following - stamps
