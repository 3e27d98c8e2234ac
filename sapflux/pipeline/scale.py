"""From flux density on the common step to trees and stands, by the scaling chain."""

from dataclasses import dataclass

import numpy as np
import xarray as xr

from sapflux import quality, schema
from sapflux.pipeline.beside import scaling_beside
from sapflux.pipeline.execute import Chain, fitted_tables, run_blocks
from sapflux.site import facts


@dataclass(frozen=True)
class Scaled:
    """The three levels of a site on the common step; None where the recipe makes none."""

    probes: xr.Dataset
    trees: xr.Dataset | None
    stand: xr.Dataset | None
    tables: dict


def labelled(site, cube):
    """The cube with the tree, species and stand of each probe as coordinates."""
    labels = facts.labels(site, [str(name) for name in cube["probe"].values])
    coords = {name: ("probe", np.array(values, dtype=str)) for name, values in labels.items()}
    return cube.assign_coords(coords)


def ground_of(site, ends):
    """(stand_species) sapwood area per ground area [1]."""
    return facts.stand_facts(site, ends[:1])["sapwood_per_ground"].values


def scale(site, recipe, probes, weather, block_days, known=None):
    """Run the scaling chain on the joined cube of all probes.

    probes : Dataset (probe, point, time) of flux_density, quality and origin, labelled;
    known : what is to replace the products of stages, see `Chain`.
    """
    steps = recipe.chains["scaling"]
    # A flag of the common step may stand beside a value of it, so it masks nothing here.
    chain = Chain(
        probes.drop_vars("quality"),
        steps,
        scaling_beside(site, probes, weather),
        spread_flags=False,
        offset=site.offset,
        known=known or {},
    )
    tables = fitted_tables(chain, block_days)
    parts = {}
    names = {name for step in steps for name in step.stage.makes}
    also = ("installation", "in_leaf") if "stand_transpiration" in names else ("installation",)
    names |= set(also)
    for block, working in run_blocks(chain, tables, block_days, also):
        for name in sorted(names & working.variables.keys()):
            value = working.variables[name]
            parts.setdefault(name, []).append(value.isel(time=block.core))
        for dims, bits in working.quality.items():
            parts.setdefault(_flags_of(dims[0]), []).append(bits.isel(time=block.core))
    made = {name: _along_time(values, probes["time"]) for name, values in parts.items()}
    probes = _probes(site, probes, made)
    trees = _level(made, "tree")
    return Scaled(probes, _described_trees(trees, probes), _level(made, "stand_species"), tables)


def _flags_of(dim):
    return f"quality {dim}"


def _along_time(values, time):
    whole = xr.Variable.concat([value.variable for value in values], "time")
    fixed = {name: c for name, c in values[0].coords.items() if "time" not in c.dims}
    return xr.DataArray(whole, fixed | {"time": time.values})


def _probes(site, probes, made):
    """The probes with what scaling made of them, where they sit, and the flags it set."""
    probes = probes.copy()
    for name in ("flux_density", "origin", "probe_flow", "installation"):
        if name in made:
            probes[name] = made[name].variable
    if _flags_of("probe") in made:
        own = made[_flags_of("probe")].transpose("probe", ..., "time")
        spread = own.values if own.ndim == 3 else own.values[:, np.newaxis, :]
        probes["quality"] = (schema.RECORD, probes["quality"].values | spread)
    ends = probes["time"].values.astype("datetime64[s]")
    names = [str(name) for name in probes["probe"].values]
    interval_s, points = int(probes.attrs["interval_s"]), probes.sizes["point"]
    where = facts.lay_facts(site, names, points, ends, interval_s, ("radial_from", "radial_to"))
    return probes.assign_coords({name: fact.variable for name, fact in where.items()})


def _level(made, dim):
    """Dataset of what lies along `dim`, its flags as `quality`; None if nothing does."""
    of_dim = {n: v for n, v in made.items() if dim in v.dims}
    if not of_dim:
        return None
    renamed = {("quality" if n == _flags_of(dim) else n): v for n, v in of_dim.items()}
    return xr.Dataset(renamed).transpose(dim, "time")


def _described_trees(trees, probes):
    """The trees with the flags of all their probes, and how each value came to be."""
    if trees is None:
        return None
    flags = np.bitwise_or.reduce(probes["quality"].transpose(*schema.RECORD).values, axis=1)
    owner = probes["tree"].values.astype(str)
    of_tree = [
        np.bitwise_or.reduce(flags[owner == name], axis=0)
        for name in trees["tree"].values.astype(str)
    ]
    filled = trees["tree_filled_share"].values > 0
    kinds = quality.ORIGINS
    origin = np.where(filled, kinds["interpolated"], kinds["measured"])
    origin = np.where(np.isfinite(trees["tree_flow"].values), origin, kinds["absent"])
    dims = ("tree", "time")
    own = trees["quality"].values if "quality" in trees else np.int64(0)
    return trees.assign(
        quality=(dims, np.array(of_tree, dtype=np.int64) | own),
        origin=(dims, origin.astype(np.int8)),
    )
