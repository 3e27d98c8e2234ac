"""Thermal diffusivity of fresh sapwood, measured or from a wood sample."""

from typing import Literal

from sapflux.physics import wood
from sapflux.stage import stage


@stage(
    chain="heat_ratio",
    makes="thermal_diffusivity",
    flags="no_wood_sample",
    method_needs={"given": ("given_diffusivity",), "wood": ("dry_density", "water_content")},
)
def thermal_diffusivity(
    given_diffusivity=None,
    dry_density=None,
    water_content=None,
    /,
    *,
    method: Literal["given_else_wood", "given", "wood"] = "given_else_wood",
):
    """Thermal diffusivity of fresh sapwood at each probe.

    From density and water content it is uncertain by 5 to 10 %, as wood conducts differently
    along and across the grain. Water content enters here and, the other way round, in the
    conversion to flux density: both must come from the same sample.

    Parameters
    ----------
    given_diffusivity : (probe) [m2 s-1]
        As the site gives it; NaN without one. May change with time, as all of these.
    dry_density : (probe) [kg m-3]
        Dry mass over fresh volume.
    water_content : (probe) [1]
        Water mass over dry mass.
    method : text
        "given" alone, from "wood" alone, or as given and from wood where none is given. The
        default takes a measured value before a worked out one. Own judgement.

    Returns
    -------
    thermal_diffusivity : (probe, or probe and time) [m2 s-1]
        NaN where neither is known.
    no_wood_sample : as it [bool]
        Where that is so.

    ValueError if nothing that the method needs is given.

    Source: Swanson (1983), form of Burgess et al. (2001), Tree Physiology 21; from memory.
    """
    given = None if method == "wood" else given_diffusivity
    made = None
    if method != "given" and dry_density is not None and water_content is not None:
        made = wood.thermal_diffusivity(dry_density, water_content)
    if given is None and made is None:
        raise ValueError("no thermal diffusivity, and no dry density with water content, is given")
    if given is None or made is None:
        result = made if given is None else given.copy()
    else:
        result = given.fillna(made)
    return {"thermal_diffusivity": result, "no_wood_sample": result.isnull()}
