"""Heat ratio signal: from temperatures, rises or a logged velocity to the log of the ratio."""

from typing import Literal

import numpy as np
import xarray as xr

from sapflux.physics import heat_pulse
from sapflux.stage import stage


@stage(
    chain="heat_ratio",
    makes=("rise_downstream", "rise_upstream"),
)
def rises(
    temperature_before_downstream=None,
    temperature_after_downstream=None,
    temperature_before_upstream=None,
    temperature_after_upstream=None,
    rise_downstream=None,
    rise_upstream=None,
    heat_ratio=None,
    log_heat_ratio=None,
    logged_velocity=None,
    /,
):
    """Temperature rises either side of the heater after a pulse.

    Parameters
    ----------
    temperature_before_downstream, temperature_before_upstream : (probe, point, time) [K]
        Before the pulse.
    temperature_after_downstream, temperature_after_upstream : (probe, point, time) [K]
        Means over the reading window after the pulse.
    rise_downstream, rise_upstream : (probe, point, time) [K]
        As logged; they go before the temperatures.
    heat_ratio, log_heat_ratio : (probe, point, time) [1]
        Not used: probes that log these have no rises.
    logged_velocity : (probe, point, time) [m s-1]
        Not used, likewise.

    Returns
    -------
    rise_downstream : (probe, point, time) [K]
        After minus before. NaN where neither rise nor temperatures are logged.
    rise_upstream : (probe, point, time) [K]
        Likewise.

    ValueError if no signal of the heat ratio method is given.

    Source: Burgess et al. (2001), Tree Physiology 21.
    """
    signals = (
        rise_downstream,
        rise_upstream,
        temperature_after_downstream,
        temperature_after_upstream,
        heat_ratio,
        log_heat_ratio,
        logged_velocity,
    )
    like = next((signal for signal in signals if signal is not None), None)
    if like is None:
        raise ValueError("no signal of the heat ratio method is given")
    down = (rise_downstream, temperature_before_downstream, temperature_after_downstream)
    up = (rise_upstream, temperature_before_upstream, temperature_after_upstream)
    return {"rise_downstream": _rise(*down, like), "rise_upstream": _rise(*up, like)}


def _rise(rise, before, after, like):
    """The logged rise, else the difference of the temperatures, else NaN."""
    found = xr.full_like(like, np.nan) if rise is None else rise
    if before is None or after is None:
        return found.copy()
    return found.fillna(after - before)


@stage(
    chain="heat_ratio",
    makes="log_heat_ratio",
    flags="log_domain",
)
def log_heat_ratio(
    rise_downstream=None,
    rise_upstream=None,
    heat_ratio=None,
    log_heat_ratio=None,
    logged_velocity=None,
    embedded_diffusivity=None,
    embedded_spacing=None,
    mean_log_ratio=None,
    pre_pulse_drift=None,
    /,
    *,
    estimator: Literal["log_of_means", "mean_of_logs"] = "log_of_means",
):
    """Natural logarithm of the downstream over the upstream temperature rise.

    Taken from the first of these that a record has: rises, ratio, log ratio, logged velocity.
    A logged velocity was made with a diffusivity and a spacing inside the logger; they are taken
    out of it again, so that the chain applies its own once.

    Over a reading window there are two estimators, which differ with noise and, at a wound, without
    it. Only temperature traces give the choice: means that the logger made of its window give the
    logarithm of means, and what a logger stored as a ratio has the estimator of its program.

    Parameters
    ----------
    rise_downstream, rise_upstream : (probe, point, time) [K]
        Temperature rises after the pulse.
    heat_ratio, log_heat_ratio : (probe, point, time) [1]
        As logged.
    logged_velocity : (probe, point, time) [m s-1]
        As logged, without wound correction.
    embedded_diffusivity : (probe) [m2 s-1]
        Inside the logged velocity.
    embedded_spacing : (probe) [m]
        Inside the logged velocity.
    mean_log_ratio : (probe, point, time) [1]
        Mean of the logarithms of each sample of a trace.
    pre_pulse_drift : (probe, point, time) [K s-1]
        Of a record from a trace; tells those apart.
    estimator : text
        Of records from traces: "log_of_means", the logarithm of the ratio of the mean rises, is
        nearly unbiased until the upstream rise comes near three times its noise. "mean_of_logs"
        is not: samples without a logarithm drop out of it, and at a noise of 0.02 K a true
        velocity of 80 cm h-1 read 48 in our own calculation. Own judgement.

    Returns
    -------
    log_heat_ratio : (probe, point, time) [1]
        Zero without flow, negative downwards. NaN without a signal, and where a rise or a ratio
        is not positive.
    log_domain : (probe, point, time) [bool]
        Where that is so.

    ValueError if no signal is given.

    Source: Burgess et al. (2001), Tree Physiology 21, eq. 1.
    """
    found, refused = [], []
    traced = None
    if estimator == "mean_of_logs" and mean_log_ratio is not None and pre_pulse_drift is not None:
        traced = pre_pulse_drift.notnull()
        found.append(mean_log_ratio)
        refused.append(traced & mean_log_ratio.isnull())
    if rise_downstream is not None and rise_upstream is not None:
        positive = (rise_downstream > 0) & (rise_upstream > 0)
        known = rise_downstream.notnull() & rise_upstream.notnull()
        ratio = rise_downstream.where(positive) / rise_upstream.where(positive)
        log_of_means = np.log(ratio)
        if traced is not None:
            log_of_means, known = log_of_means.where(~traced), known & ~traced
        found.append(log_of_means)
        refused.append(known & ~positive)
    if heat_ratio is not None:
        found.append(np.log(heat_ratio.where(heat_ratio > 0)))
        refused.append(heat_ratio <= 0)
    if log_heat_ratio is not None:
        found.append(log_heat_ratio)
    if logged_velocity is not None and embedded_diffusivity is not None:
        undone = xr.apply_ufunc(
            heat_pulse.log_ratio_of, logged_velocity, embedded_diffusivity, embedded_spacing
        )
        found.append(undone.transpose(*logged_velocity.dims))
    if not found:
        raise ValueError("no signal of the heat ratio method is given")
    result = found[0]
    for other in found[1:]:
        result = result.fillna(other)
    outside = xr.zeros_like(result, dtype=bool)
    for where in refused:
        outside = outside | where
    return {"log_heat_ratio": result, "log_domain": outside & result.isnull()}
