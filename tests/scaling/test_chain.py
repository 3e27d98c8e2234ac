"""The scaling chain as the runner runs it: the same bytes for every block, dormancy not lost."""

import numpy as np
import pytest
import xarray as xr

from sapflux import quality
from sapflux.pipeline.execute import Chain, run_blocks
from sapflux.pipeline.recipe import load_recipe
from sapflux.stage import ORDER, REGISTRY

COUNT = 48 * 20
ENDS = np.datetime64("2031-10-01T00:30", "s") + np.arange(COUNT) * np.timedelta64(1800, "s")
LEAF_OFF = np.datetime64("2031-10-10T00:00", "s")
PROBES = [f"P{n}" for n in range(8)]
KEPT = (
    "flux_density", "origin", "probe_flow", "probe_filled_share", "tree_flow",
    "tree_filled_share", "stand_transpiration", "stand_filled_share", "stand_origin",
    "live_trees",
)  # fmt: skip


def cube():
    generator = np.random.default_rng(1)
    flux = generator.random((8, 2, COUNT)) * 0.03
    flux[generator.random(flux.shape) < 0.05] = np.nan
    flux[:, :, 300:700] = np.nan  # 7 to 15 October
    return xr.Dataset(
        {
            "flux_density": (("probe", "point", "time"), flux),
            "origin": (("probe", "point", "time"), np.isfinite(flux).astype(np.int8)),
        },
        {
            "probe": PROBES,
            "point": [1, 2],
            "time": ENDS.astype("datetime64[ns]"),
            "tree": ("probe", [f"T{n // 2}" for n in range(8)]),
            "stand": ("probe", ["north"] * 8),
            "species": ("probe", ["oak"] * 8),
        },
        attrs={"interval_s": 1800},
    )


def beside(ends, _wanted):
    strata = {
        "stand_species": ["north/oak", "north/pine"],
        "stand": ("stand_species", ["north", "north"]),
        "species": ("stand_species", ["oak", "pine"]),
        "stand_in": ("stand_species", ["", "oak"]),
    }
    time = ends.astype("datetime64[ns]")
    leaf = np.array([ends <= LEAF_OFF, np.ones(len(ends))]).astype(np.int8)

    def fact(values, *dims):
        return xr.DataArray(values, {"probe": PROBES}, ("probe", *dims))

    return {
        "installation": fact(np.zeros((8, len(ends)), int), "time").assign_coords(time=time),
        "xylem_radius": fact(np.full(8, 0.15)),
        "sapwood_depth": fact(np.full(8, 0.04)),
        "radial_from": fact(np.tile([0.0, 0.02], (8, 1)), "point"),
        "radial_to": fact(np.tile([0.02, 0.04], (8, 1)), "point"),
        "sapwood_area": xr.DataArray(
            np.full(4, 0.03), {"tree": [f"T{n}" for n in range(4)]}, ("tree",)
        ),
        "sapwood_per_ground": xr.DataArray([1e-3, 5e-4], strata, ("stand_species",)),
        "in_leaf": xr.DataArray(leaf, {**strata, "time": time}, ("stand_species", "time")),
    }


def run(block_days):
    chain = Chain(cube(), load_recipe().chains["scaling"], beside, spread_flags=False)
    found, bits = {}, []
    for block, working in run_blocks(chain, {}, block_days):
        for name in KEPT:
            part = working.variables[name].isel(time=block.core).values
            found.setdefault(name, []).append(part)
        bits.append(working.quality["stand_species", "time"].isel(time=block.core).values)
    found = {name: np.concatenate(parts, axis=-1) for name, parts in found.items()}
    return found | {"quality": np.concatenate(bits, axis=-1)}


def test_the_order_of_work_runs_from_the_point_to_the_stand():
    assert {name for chain, name in REGISTRY if chain == "scaling"} == set(ORDER["scaling"])
    made = {"flux_density", "origin"}
    for name in ORDER["scaling"]:
        stage = REGISTRY["scaling", name]
        facts = set(beside(ENDS, ()))
        assert set(stage.needs) <= made | facts, f"{name} stands before what it needs"
        made |= set(stage.makes)


@pytest.fixture(scope="module")
def whole():
    return run(None)


@pytest.mark.parametrize("block_days", [1, 3, 12])
def test_every_block_length_gives_the_same_bytes(whole, block_days):
    for name, values in run(block_days).items():
        assert values.tobytes() == whole[name].tobytes(), name


def test_dormancy_is_zero_where_too_few_trees_were_flagged(whole):
    kinds = quality.ORIGINS
    oak, pine = whole["stand_origin"][:, 320:680]
    dormant = ENDS[320:680] > LEAF_OFF
    assert set(oak[dormant]) == {kinds["assumed_zero"]}
    assert set(oak[~dormant]) == set(pine) == {kinds["absent"]}
    assert (whole["stand_transpiration"][0, 320:680][dormant] == 0).all()
    assert np.isnan(whole["stand_transpiration"][1, 320:680]).all()
    assert quality.has(whole["quality"][:, 320:680], "few_trees").all()


def test_the_borrowed_species_has_the_flux_density_of_its_stand_in(whole):
    oak, pine = whole["stand_transpiration"][:, :300]
    there = np.isfinite(pine)
    assert there.sum() > 200
    np.testing.assert_allclose(pine[there], oak[there] / 2, rtol=1e-14)
    assert quality.has(whole["quality"][1, :300], "borrowed")[there].all()
    assert not quality.has(whole["quality"][0], "borrowed").any()
