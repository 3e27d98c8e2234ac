"""Flux density of heat ratio."""

import xarray as xr

from sapflux.physics import wood
from sapflux.stage import stage


@stage(
    chain="heat_ratio",
    makes="flux_density",
    flags="no_wood_sample",
    unverified=(
        "conversion of pulse velocity (Barrett et al. 1995; Burgess et al. 2001)",
        "heat capacity of dry wood (Edwards & Warwick 1984)",
    ),
)
def flux_density(heat_pulse_velocity, dry_density, water_content, /):
    """Sap flux density behind a heat pulse velocity.

    Parameters
    ----------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        Corrected for offset and wound; keeps its sign.
    dry_density : (probe) [kg m-3]
        Dry mass over fresh volume, of the sample that also gave the diffusivity.
    water_content : (probe) [1]
        Water mass over dry mass, of the same sample. Both may change with time.

    Returns
    -------
    flux_density : (probe, point, time) [kg m-2 s-1]
        NaN without a wood sample.
    no_wood_sample : (probe, point, time) [bool]
        Where that is so.

    Source: Barrett et al. (1995), Plant Cell Environ. 18; Burgess et al. (2001).
    """
    flux = xr.apply_ufunc(wood.flux_density, heat_pulse_velocity, dry_density, water_content)
    missing = (dry_density.isnull() | water_content.isnull()).broadcast_like(heat_pulse_velocity)
    return {
        "flux_density": flux.transpose(*heat_pulse_velocity.dims),
        "no_wood_sample": missing.transpose(*heat_pulse_velocity.dims),
    }
