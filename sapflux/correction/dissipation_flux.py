"""Flux density of heat dissipation, by the calibration of the species or a general one."""

from typing import Literal

import numpy as np
import xarray as xr

from sapflux.constants import WATER_DENSITY
from sapflux.physics import dissipation
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.schema import RECORD
from sapflux.stage import stage


@stage(
    chain="heat_dissipation",
    makes=("flux_density", "baseline_amplification"),
    flags=("beyond_calibration", "no_calibration"),
    method_needs={"species": ("calibration_factor", "calibration_exponent")},
    limits={"highest_general_cm_h": (1.0, 500.0)},
    unverified=(
        "general calibration of heat dissipation, factor and exponent (Granier 1985, 1987)",
        "its range up to 70 cm h-1 (Granier 1985)",
    ),
)
def flux_density(
    flow_index,
    calibration_factor=None,
    calibration_exponent=None,
    calibration_lowest=None,
    calibration_highest=None,
    heating_on=None,
    /,
    *,
    method: Literal["species_else_general", "species", "general"] = "species_else_general",
    highest_general_cm_h=70.0,
):
    """Sap flux density behind the flow index of heat dissipation.

    The general calibration reads low by 35 to 40 % on average, by 60 % in beech and by a factor
    of 2 to 5 in ring-porous wood: without a calibration of the species the result is for relative
    use. A factor and an exponent always come from the same calibration. The general one was made
    with heat that is never cut: a probe heated in cycles has a flux density only by a calibration
    of its species for such heating.

    Parameters
    ----------
    flow_index : (probe, point, time) [1]
        Negative indices give the flux density of their magnitude with a minus sign.
    calibration_factor : (probe) [kg m-2 s-1]
        Flux density at flow index 1 by the species' own calibration for the probe's kind of
        heating; NaN without one.
    calibration_exponent, calibration_lowest, calibration_highest : (probe) [1]
        Its exponent, and the range of flow index that it covers, open where NaN.
    heating_on : (probe) [s]
        Time heated in a heating cycle; NaN for probes heated without a break.
    method : text
        "species_else_general" takes the species' own calibration where there is one,
        "species" that alone, "general" never. Own judgement.
    highest_general_cm_h : float [cm h-1]
        Flux density up to which the general calibration is valid.
        Source: Granier (1985), value from memory.

    Returns
    -------
    flux_density : (probe, point, time) [kg m-2 s-1]
        NaN without a calibration.
    baseline_amplification : (probe, point, time) [1]
        Relative change of flux density per relative change of the zero-flow difference,
        exponent * (1 + index) / index, with the exponent in use; of the part of a needle in
        sapwood, so that less contact adds to it. NaN at an index of exactly 0.
    beyond_calibration : (probe, point, time) [bool]
        Outside the range of the calibration; the value stands.
    no_calibration : (probe, point, time) [bool]
        Without a calibration that may be used.

    Source: Granier (1985, 1987) for the general calibration; the amplification is its derivative
    (own derivation).
    """
    index = flow_index.transpose(*RECORD)
    has = _known(index, calibration_factor, calibration_exponent) & (method != "general")
    general = ~has & (method != "species")
    if heating_on is not None:
        general = general & heating_on.isnull()
    factor = _chosen(has, calibration_factor, dissipation.GENERAL_FACTOR)
    exponent = _chosen(has, calibration_exponent, dissipation.GENERAL_EXPONENT)
    usable = (has | general).broadcast_like(index).transpose(*RECORD)
    flux = xr.apply_ufunc(dissipation.flux_density, index, factor, exponent).transpose(*RECORD)
    amplification = xr.apply_ufunc(dissipation.amplification, index, exponent).transpose(*RECORD)
    beyond = general & (flux > highest_general_cm_h * CM_PER_HOUR * WATER_DENSITY)
    if calibration_lowest is not None:
        beyond = beyond | (has & (index < calibration_lowest))
    if calibration_highest is not None:
        beyond = beyond | (has & (index > calibration_highest))
    return {
        "flux_density": flux.where(usable),
        "baseline_amplification": amplification.where(usable),
        "beyond_calibration": beyond.transpose(*RECORD),
        "no_calibration": ~usable,
    }


def _known(index, factor, exponent):
    """(probe), with time where it changes: where there is a calibration of the species' own."""
    if factor is None or exponent is None:
        probes = index["probe"].values
        return xr.DataArray(np.zeros(len(probes), dtype=bool), {"probe": probes}, ("probe",))
    return factor.notnull() & exponent.notnull()


def _chosen(has, own, general):
    """The species' own value where it is to be used, else the general one."""
    return general if own is None else own.where(has, general)
