"""Flux density of heat dissipation, by the calibration of the species or a general one."""

from typing import Literal

import xarray as xr

from sapflux.constants import WATER_DENSITY
from sapflux.physics import dissipation
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.stage import stage


@stage(
    chain="heat_dissipation",
    makes="flux_density",
    flags=("beyond_calibration", "no_calibration"),
    method_needs={"species": ("calibration_factor", "calibration_exponent")},
    limits={"highest_general_cm_h": (1.0, 500.0)},
)
def flux_density(
    flow_index,
    calibration_factor=None,
    calibration_exponent=None,
    calibration_lowest=None,
    calibration_highest=None,
    /,
    *,
    method: Literal["species_else_general", "species", "general"] = "species_else_general",
    highest_general_cm_h=70.0,
):
    """Sap flux density behind the flow index of heat dissipation.

    The general calibration reads low by 35 to 40 % on average, by 60 % in beech and by a factor
    of 2 to 5 in ring-porous wood: without a calibration of the species the result is for relative
    use. A factor and an exponent always come from the same calibration.

    Parameters
    ----------
    flow_index : (probe, point, time) [1]
        Negative indices give the flux density of their magnitude with a minus sign.
    calibration_factor : (probe) [kg m-2 s-1]
        Flux density at flow index 1 by the species' own calibration; NaN without one.
    calibration_exponent, calibration_lowest, calibration_highest : (probe) [1]
        Its exponent, and the range of flow index that it covers, open where NaN.
    method : text
        "species_else_general" takes the species' own calibration where there is one,
        "species" that alone, "general" never. Own judgement.
    highest_general_cm_h : float [cm h-1]
        Flux density up to which the general calibration is valid.
        Source: Granier (1985), value from memory.

    Returns
    -------
    flux_density : (probe, point, time) [kg m-2 s-1]
        NaN by "species" without a calibration.
    beyond_calibration : (probe, point, time) [bool]
        Outside the range of the calibration; the value stands.
    no_calibration : (probe, point, time) [bool]
        By "species" without a calibration.

    Source: Granier (1985, 1987) for the general calibration.
    """
    highest = highest_general_cm_h * CM_PER_HOUR * WATER_DENSITY
    general = xr.apply_ufunc(dissipation.flux_density, flow_index)
    beyond_general = general > highest
    if method == "general" or calibration_factor is None or calibration_exponent is None:
        return {"flux_density": general, "beyond_calibration": beyond_general}
    own = xr.apply_ufunc(
        dissipation.flux_density, flow_index, calibration_factor, calibration_exponent
    ).transpose(*flow_index.dims)
    has = (calibration_factor.notnull() & calibration_exponent.notnull()).broadcast_like(own)
    has = has.transpose(*own.dims)
    beyond = xr.zeros_like(own, dtype=bool)
    if calibration_lowest is not None:
        beyond = beyond | (flow_index < calibration_lowest)
    if calibration_highest is not None:
        beyond = beyond | (flow_index > calibration_highest)
    beyond = beyond.transpose(*own.dims) & has
    if method == "species":
        return {"flux_density": own, "beyond_calibration": beyond, "no_calibration": ~has}
    return {
        "flux_density": own.where(has, general),
        "beyond_calibration": beyond.where(has, beyond_general),
    }
