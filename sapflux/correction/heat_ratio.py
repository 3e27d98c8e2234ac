"""Heat ratio signal: from temperatures, rises or a logged velocity to the log of the ratio."""

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
    /,
):
    """Natural logarithm of the downstream over the upstream temperature rise.

    Taken from the first of these that a record has: rises, ratio, log ratio, logged velocity.
    A logged velocity was made with a diffusivity and a spacing inside the logger; they are taken
    out of it again, so that the chain applies its own once.

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
    if rise_downstream is not None and rise_upstream is not None:
        positive = (rise_downstream > 0) & (rise_upstream > 0)
        known = rise_downstream.notnull() & rise_upstream.notnull()
        ratio = rise_downstream.where(positive) / rise_upstream.where(positive)
        found.append(np.log(ratio))
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
