"""Heat pulse velocity of the heat ratio method."""

import xarray as xr

from sapflux.physics import heat_pulse
from sapflux.stage import stage


@stage(
    chain="heat_ratio",
    makes="heat_pulse_velocity",
    flags="no_wood_sample",
)
def heat_pulse_velocity(
    log_heat_ratio, thermal_diffusivity, spacing_downstream, spacing_upstream, /
):
    """Heat pulse velocity behind the ratio of the temperature rises.

    Takes the mean of the two spacings. Needles that are not equally far from the heater read a
    velocity without flow, which the zero offset removes.

    Parameters
    ----------
    log_heat_ratio : (probe, point, time) [1]
        Log of downstream over upstream rise.
    thermal_diffusivity : (probe) [m2 s-1]
        Of fresh sapwood; may change with time.
    spacing_downstream, spacing_upstream : (probe) [m]
        From the heater to the needles.

    Returns
    -------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        Positive upwards; apparent, as the wound has not been corrected for.
    no_wood_sample : (probe, point, time) [bool]
        Where the diffusivity is missing.

    Source: Burgess et al. (2001), Tree Physiology 21, eq. 1.
    """
    spacing = (spacing_downstream + spacing_upstream) / 2.0
    velocity = xr.apply_ufunc(heat_pulse.velocity, log_heat_ratio, thermal_diffusivity, spacing)
    missing = thermal_diffusivity.isnull().broadcast_like(log_heat_ratio)
    return {
        "heat_pulse_velocity": velocity.transpose(*log_heat_ratio.dims),
        "no_wood_sample": missing.transpose(*log_heat_ratio.dims),
    }
