"""Transpiration of a stand, species by species, from its instrumented trees."""

import numpy as np
import xarray as xr

from sapflux import quality
from sapflux.stage import stage


@stage(
    chain="scaling",
    makes=("stand_transpiration", "stand_filled_share", "live_trees"),
    flags=("few_trees", "borrowed"),
    limits={"fewest_trees": (1, 1000)},
)
def stand_transpiration(
    tree_flow, tree_filled_share, sapwood_area, sapwood_per_ground, /, *, fewest_trees=3
):
    """Transpiration per ground area of each species in each stand, by the ratio of sums.

        E = sapwood per ground * sum of tree flows / sum of their sapwood areas

    over the trees that have a value. A species without instrumented trees in a stand borrows the
    ratio: from its stand-in there, else from itself, else from its stand-in, over all stands.

    Parameters
    ----------
    tree_flow : (tree, time) [kg s-1]
        With the coordinates `stand` and `species` on tree.
    tree_filled_share : (tree, time) [1]
        Share of it that rests on filled values.
    sapwood_area : (tree) [m2]
        Trees with an unknown area carry nothing.
    sapwood_per_ground : (stand_species) [1]
        Of all living trees of the survey, on plan area, with the coordinates `stand`, `species`
        and `stand_in`.
    fewest_trees : int [1]
        With fewer live trees there is no value. Common practice; a stratum with fewer
        instrumented trees than that never has one, unless this is lowered.

    Returns
    -------
    stand_transpiration : (stand_species, time) [kg m-2 s-1]
        1 kg m-2 of water is 1 mm.
    stand_filled_share : (stand_species, time) [1]
        Mean over the live trees, weighted with their sapwood area.
    live_trees : (stand_species, time) [1]
        Trees that carry the value, whole numbers; those of the donor where it is borrowed.
    few_trees : (stand_species, time) [bool]
        Fewer than `fewest_trees`; the transpiration is NaN there.
    borrowed : (stand_species, time) [bool]
        The value rests on the trees of a stand-in, or of other stands.

    Source: ratio estimator, Cochran (1977), Sampling Techniques, chapter 6; the order of
    borrowing is own judgement.
    """
    flow = tree_flow.transpose("tree", "time")
    share = tree_filled_share.transpose("tree", "time").values
    area = sapwood_area.sel(tree=flow["tree"]).values
    strata = sapwood_per_ground.coords
    donors, borrowing = _donors(
        [strata[name].values.astype(str) for name in ("stand", "species", "stand_in")],
        flow["stand"].values.astype(str),
        flow["species"].values.astype(str),
        np.isfinite(area) & (area > 0),
    )
    shape = (len(donors), flow.sizes["time"])
    density, filled, live = np.empty(shape), np.empty(shape), np.empty(shape, dtype=np.int32)
    for place, own in enumerate(donors):
        density[place], filled[place], live[place] = _ratio(flow.values, share, area, own)
    few = live < fewest_trees
    ground = sapwood_per_ground.values[:, np.newaxis]
    coords = {name: value.variable for name, value in strata.items()}
    coords["time"] = flow["time"].values
    made = {
        "stand_transpiration": np.where(few, np.nan, density * ground),
        "stand_filled_share": np.where(few, np.nan, filled),
        "live_trees": live,
        "few_trees": few,
        "borrowed": np.array(borrowing, dtype=bool)[:, np.newaxis] & ~few,
    }
    return {n: xr.DataArray(v, coords, ("stand_species", "time")) for n, v in made.items()}


def _donors(strata, tree_stands, tree_species, usable):
    """Places of the trees that carry each stratum, and whether they are borrowed."""

    def trees(species, stand=None):
        met = usable & (tree_species == species)
        if stand is not None:
            met &= tree_stands == stand
        return np.flatnonzero(met)

    donors, borrowing = [], []
    for stand, species, stand_in in zip(*strata, strict=True):
        choices = [trees(species, stand)]
        if stand_in:
            choices.append(trees(stand_in, stand))
        choices.append(trees(species))
        if stand_in:
            choices.append(trees(stand_in))
        number = next((n for n, own in enumerate(choices) if len(own)), 0)
        donors.append(choices[number])
        borrowing.append(number > 0)
    return donors, borrowing


def _ratio(flows, shares, areas, own):
    """Flow per sapwood area, filled share and number of live trees; trees are added in order."""
    total, area, filled = (np.zeros(flows.shape[1]) for _ in range(3))
    live = np.zeros(flows.shape[1], dtype=np.int32)
    for tree in own:
        there = np.isfinite(flows[tree])
        live += there
        total += np.where(there, flows[tree], 0.0)
        area += np.where(there, areas[tree], 0.0)
        filled += np.where(there, shares[tree] * areas[tree], 0.0)
    absent = np.full(flows.shape[1], np.nan)
    return (
        np.divide(total, area, out=absent.copy(), where=area > 0),
        np.divide(filled, area, out=absent.copy(), where=area > 0),
        live,
    )


@stage(
    chain="scaling",
    makes=("stand_transpiration", "stand_origin"),
)
def dormancy(stand_transpiration, stand_filled_share, in_leaf=None, /):
    """Transpiration with the absent values of declared dormancy taken as zero, and their origin.

    Parameters
    ----------
    stand_transpiration : (stand_species, time) [kg m-2 s-1]
        NaN where absent.
    stand_filled_share : (stand_species, time) [1]
        Share of it that rests on filled values.
    in_leaf : (stand_species, time) [1]
        1 while the species is in leaf, else 0, as whole numbers, which masking leaves alone;
        species that are not told of are always in leaf. ValueError for NaN in it: dormancy would
        be lost where it is needed.

    Returns
    -------
    stand_transpiration : (stand_species, time) [kg m-2 s-1]
        What was measured in dormancy stays, zero only where there was nothing.
    stand_origin : (stand_species, time) [1]
        `measured`, `interpolated` where any part rests on filled values, `assumed_zero`,
        `absent`.

    Source: common practice: leafless trees transpire next to nothing; own judgement.
    """
    flux = stand_transpiration.transpose("stand_species", "time")
    share = stand_filled_share.transpose("stand_species", "time").values
    there = np.isfinite(flux.values)
    if in_leaf is None:
        assumed = np.zeros(flux.shape, dtype=bool)
    else:
        leaf = in_leaf.transpose("stand_species", "time").values
        if np.isnan(leaf).any():
            raise ValueError("in_leaf has NaN; give it as whole numbers, 1 in leaf and 0 not")
        assumed = ~there & (leaf == 0)
    kinds = quality.ORIGINS
    origin = np.select(
        [assumed, ~there, share > 0],
        [kinds["assumed_zero"], kinds["absent"], kinds["interpolated"]],
        kinds["measured"],
    )
    return {
        "stand_transpiration": flux.copy(data=np.where(assumed, 0.0, flux.values)),
        "stand_origin": flux.copy(data=origin.astype(np.int8)),
    }
