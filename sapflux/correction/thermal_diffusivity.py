"""Thermal diffusivity of fresh sapwood: measured, from a wood sample, or from pulses in place."""

from typing import Literal

from sapflux.correction.diffusivity_nights import (
    IN_SITU,
    diffusivity_candidates,
    fit_diffusivity,
    laid_diffusivity,
)
from sapflux.correction.nights import reach_s
from sapflux.physics import wood
from sapflux.stage import stage
from sapflux.units import CM2_PER_S


@stage(
    chain="heat_ratio",
    makes="thermal_diffusivity",
    flags="no_wood_sample",
    table="diffusivity_nights",
    summarise=diffusivity_candidates,
    fit=fit_diffusivity,
    reach_s=reach_s,
    method_needs={
        "given": ("given_diffusivity",),
        "wood": ("dry_density", "water_content"),
        "in_situ": ("decay_time", "pulse_length", "vapour_pressure_deficit"),
        "in_situ_else_wood": (
            "decay_time",
            "pulse_length",
            "vapour_pressure_deficit",
            "dry_density",
            "water_content",
        ),
    },
    limits={
        "fibre_saturation": (0.0, 0.4),
        "averaging_h": (0.25, 6.0),
        "least_records_share": (0.1, 1.0),
        "highest_deficit_kPa": (0.0, 1.0),
        "fewest_nights": (1, 100),
        "smoothing_d": (0.0, 366.0),
        "lowest_diffusivity_cm2_s": (0.0005, 0.0025),
        "highest_diffusivity_cm2_s": (0.0025, 0.01),
    },
    unverified=(
        "conductivity of wood, all water alike (Swanson 1983; Burgess et al. 2001)",
        "conductivity of wood, bound water apart (Vandegehuchte & Steppe 2012)",
        "heat capacity of dry wood (Edwards & Warwick 1984)",
    ),
)
def thermal_diffusivity(
    given_diffusivity=None,
    dry_density=None,
    water_content=None,
    diffusivity_nights=None,
    log_heat_ratio=None,
    installation=None,
    /,
    *,
    method: Literal[
        "given_else_wood", "given", "wood", "in_situ", "in_situ_else_wood"
    ] = "given_else_wood",
    conduction: Literal["all_water", "bound_water_apart"] = "all_water",
    fibre_saturation=0.26,
    source: Literal["decay", "time_of_maximum"] = "decay",
    averaging_h=2.0,
    least_records_share=0.75,
    highest_deficit_kPa=0.1,
    fewest_nights=5,
    smoothing_d=15.0,
    lowest_diffusivity_cm2_s=0.0012,
    highest_diffusivity_cm2_s=0.0040,
):
    """Thermal diffusivity of fresh sapwood at each probe.

    From density and water content it is uncertain by 5 to 10 %, as wood conducts differently
    along and across the grain. Water content enters here and, the other way round, in the
    conversion to flux density: both must come from the same sample.

    In place it comes from the temperature traces of nights without flow, along the grain and with
    the needles as they stand: the mean before sunrise of nights with wet air. Needles out of place
    enter squared (1 % of spacing, 2 %), and a wound makes it low (Looker et al. 2016; from
    memory).

    Parameters
    ----------
    given_diffusivity : (probe) [m2 s-1]
        As the site gives it; NaN without one. May change with time, as all of these.
    dry_density : (probe) [kg m-3]
        Dry mass over fresh volume.
    water_content : (probe) [1]
        Water mass over dry mass.
    diffusivity_nights : table
        One row a probe, point, installation and night, where the method is in place: `start` (UTC,
        true solar noon before it), `time` (UTC, middle of the mean), decay_cm2_s from the whole
        decay, maximum_cm2_s from the time of maximum of both needles, mean_deficit_kPa, records,
        accepted, reason in words, diffusivity_cm2_s (accepted nights around it); and of the
        installation nights, usable, verdict in words.
    log_heat_ratio : (probe, point, time) [1]
        Which records there are; only in place.
    installation : (probe, time) [1]
        Each has its own diffusivity in place.
    method : text
        "given" alone, from "wood" alone, or as given and from wood where none is given; "in_situ"
        alone, or with wood where an installation has too few nights. The default takes a measured
        value before a worked out one. Own judgement.
    conduction : text
        "all_water" counts all water as free: the community's form. "bound_water_apart" counts
        the water in the cell walls with them: 3 % lower at a density of 500 and water content 1,
        9 % at 0.5. Own judgement.
    fibre_saturation : float [1]
        Of "bound_water_apart", water content up to which water is bound; 0 takes 0.2 G^-0.5, G the
        dry density over that of water. Source: Vandegehuchte & Steppe (2012); from memory.
    source : text
        In place, "decay" takes the fit of the whole decay, "time_of_maximum" the formula of a
        pulse of finite length. Flow at night leaves the first alone and makes the second high.
        Common practice: the whole curve tells more than its top.
    averaging_h : float [h]
        In place, length of the mean before sunrise. Common practice: at least 2 h.
    least_records_share : float [1]
        Share of the records of a mean that must be there. Own judgement.
    highest_deficit_kPa : float [kPa]
        In place, highest mean vapour pressure deficit of a night that counts. Common practice.
    fewest_nights : int [1]
        In place, accepted nights that an installation needs. Common practice.
    smoothing_d : float [d]
        In place, accepted nights up to half of it before and after are averaged; the diffusivity
        is linear in time between the nights and constant outside. Own judgement.
    lowest_diffusivity_cm2_s : float [cm2 s-1]
        Below it a diffusivity, whatever it comes from, is not that of sapwood. Common practice.
    highest_diffusivity_cm2_s : float [cm2 s-1]
        Above it, likewise. Common practice.

    Returns
    -------
    thermal_diffusivity : (probe, or probe and time) [m2 s-1]
        NaN where none is known, or what is known is out of bounds.
    no_wood_sample : as it [bool]
        Where that is so.

    ValueError if nothing that the method needs is given.

    Source: Swanson (1983), form of Burgess et al. (2001), Tree Physiology 21; Vandegehuchte &
    Steppe (2012); Kluitenberg & Ham (2004) for the time of maximum; all from memory; own
    derivation of the fit of the decay.
    """
    given = given_diffusivity if method in ("given_else_wood", "given") else None
    if method in IN_SITU:
        if diffusivity_nights is None or log_heat_ratio is None or installation is None:
            raise ValueError("no nights with temperature traces are given")
        given = laid_diffusivity(diffusivity_nights, log_heat_ratio, installation)
    made = None
    if method not in ("given", "in_situ") and dry_density is not None and water_content is not None:
        saturation = None
        if conduction == "bound_water_apart":
            saturation = fibre_saturation or wood.fibre_saturation(dry_density)
        made = wood.thermal_diffusivity(dry_density, water_content, saturation)
    if given is None and made is None:
        raise ValueError("no thermal diffusivity, and no dry density with water content, is given")
    if given is None or made is None:
        result = made if given is None else given
    else:
        result = given.fillna(made)
    low, high = lowest_diffusivity_cm2_s * CM2_PER_S, highest_diffusivity_cm2_s * CM2_PER_S
    result = result.where((result >= low) & (result <= high))
    return {"thermal_diffusivity": result, "no_wood_sample": result.isnull()}
