"""The stand as the sum of its species, on every record."""

import numpy as np
import xarray as xr

from sapflux import quality

ALL = "all"  # the species that stands for the whole stand


def with_whole_stands(strata, sapwood_per_ground):
    """The strata with one more for each stand, its species "all".

    strata : Dataset (stand_species, time) with stand_transpiration [kg m-2 s-1], and any of
    stand_filled_share, live_trees, stand_origin, in_leaf and quality, with the coordinates
    `stand`, `species` and `stand_in`; sapwood_per_ground : (stand_species) [1], in the same order.

    Transpiration is the sum, absent where that of any species is; the filled share is weighted
    with the transpiration's sapwood; a stand is in leaf while any of its species is, and has every
    flag of its species. Its origin is measured where all are, interpolated or filled where any is,
    assumed zero where all are.
    """
    stands = list(dict.fromkeys(strata["stand"].values.astype(str)))
    wholes = [_whole(strata, stand, np.asarray(sapwood_per_ground, float)) for stand in stands]
    return xr.concat([strata, *wholes], "stand_species", coords="different", compat="equals",
                     join="exact")  # fmt: skip


def _whole(strata, stand, ground):
    own = np.flatnonzero(strata["stand"].values.astype(str) == stand)
    part, weight = strata.isel(stand_species=own), ground[own]
    makers = {
        "stand_transpiration": lambda v: v.sum(axis=0),
        "stand_filled_share": lambda v: np.tensordot(weight / weight.sum(), v, axes=1),
        "live_trees": lambda v: v.sum(axis=0),
        "in_leaf": lambda v: v.max(axis=0),
        "quality": lambda v: np.bitwise_or.reduce(v, axis=0),
        "stand_origin": _origin,
    }
    made = {
        name: (("stand_species", "time"), make(part[name].values)[np.newaxis])
        for name, make in makers.items()
        if name in part
    }
    labels = {"stand_species": f"{stand}/{ALL}", "stand": stand, "species": ALL, "stand_in": ""}
    coords = {name: ("stand_species", np.array([text])) for name, text in labels.items()}
    return xr.Dataset(made, {**coords, "time": part["time"].values})


def _origin(origins):
    """(species, time) -> (time): the least certain origin of any species that has flux."""
    kinds = quality.ORIGINS
    absent = (origins == kinds["absent"]).any(axis=0)
    zero = origins == kinds["assumed_zero"]
    # A dormant species adds nothing, so it does not make the rest assumed.
    others = np.where(zero, kinds["measured"], origins).max(axis=0)
    found = np.where(zero.all(axis=0), kinds["assumed_zero"], others)
    return np.where(absent, kinds["absent"], found).astype(origins.dtype)
