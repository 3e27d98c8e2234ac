"""Heat pulse velocity corrected for the wound that the needles left in the wood."""

from typing import Literal

import numpy as np
import xarray as xr

from sapflux.physics import heat_pulse
from sapflux.stage import stage


@stage(
    chain="heat_ratio",
    makes="heat_pulse_velocity",
    flags=("beyond_wound_limit", "no_wound_width"),
    limits={"highest_velocity_cm_h": (5.0, 40.0)},
)
def wound(
    heat_pulse_velocity,
    wound_width,
    /,
    *,
    method: Literal["published"] = "published",
    highest_velocity_cm_h=40.0,
):
    """Heat pulse velocity of the sap beside the wound.

    A strip of wood in which no sap moves slows the pulse down. The published cubic holds for
    needles 6 mm either side of the heater read 60 to 100 s after the pulse. Downward flow is
    corrected by its magnitude; between tabulated widths the corrected velocity is linear in width.

    Parameters
    ----------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        Apparent, positive upwards.
    wound_width : (probe) [m]
        Of the wounded wood across the needles; may change with time. 0.1 mm changes the result
        by 2 to 4 %.
    method : text
        "published": the cubic of the published table, the only one so far.
    highest_velocity_cm_h : float [cm h-1]
        Highest apparent velocity that is corrected: beyond it the cubic runs away.
        Common practice.

    Returns
    -------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        NaN where either flag is set.
    beyond_wound_limit : (probe, point, time) [bool]
        Apparent velocity beyond the highest, up or down.
    no_wound_width : (probe, point, time) [bool]
        No width, or one outside the table (1.7 to 3.0 mm).

    Source: Burgess et al. (2001), Tree Physiology 21, table 1; from memory.
    """
    corrected = xr.apply_ufunc(heat_pulse.wound_velocity, heat_pulse_velocity, wound_width)
    corrected = corrected.transpose(*heat_pulse_velocity.dims)
    # The cubic of the smallest velocity tells where the width is one that the table covers.
    covered = xr.apply_ufunc(heat_pulse.wound_velocity, xr.zeros_like(wound_width), wound_width)
    speed = np.abs(heat_pulse_velocity) / heat_pulse.CM_PER_HOUR
    beyond = speed > highest_velocity_cm_h * heat_pulse.ROUNDED_UP
    missing = covered.isnull().broadcast_like(heat_pulse_velocity).transpose(*corrected.dims)
    return {
        "heat_pulse_velocity": corrected.where(~beyond),
        "beyond_wound_limit": beyond,
        "no_wound_width": missing,
    }
