"""From stems to trees to species to the stand."""

import numpy as np
import pytest
import xarray as xr

from sapflux import quality
from sapflux.scaling.stands import dormancy, stand_transpiration
from sapflux.scaling.trees import tree_flow

NAN = np.nan
TIME = np.datetime64("2031-06-01T01", "ns") + np.arange(3) * np.timedelta64(1, "h")


def probes(flows, trees, shares=0.0):
    flows = np.asarray(flows, dtype=float)
    coords = {
        "probe": [f"P{n}" for n in range(len(flows))],
        "time": TIME[: flows.shape[1]],
        "tree": ("probe", trees),
        "stand": ("probe", ["north" if tree else "" for tree in trees]),
        "species": ("probe", ["pine" if tree else "" for tree in trees]),
    }
    flow = xr.DataArray(flows, coords, ("probe", "time"))
    return flow, flow.copy(data=np.where(np.isfinite(flows), shares, NAN))


def test_a_tree_is_the_mean_of_the_probes_that_have_a_value():
    flow, share = probes(
        [[1, 1, NAN], [3, NAN, NAN], [5, 6, 7], [9, 9, 9]],
        ["A", "A", "B", ""],
        np.array([[0.0], [1.0], [0.5], [0.0]]),
    )
    result = tree_flow(flow, share)
    np.testing.assert_array_equal(result["tree_flow"].values, [[2, 1, NAN], [5, 6, 7]])
    np.testing.assert_array_equal(result["tree_filled_share"].values, [[0.5, 0, NAN], [0.5] * 3])
    assert result["tree_flow"]["tree"].values.tolist() == ["A", "B"]
    assert result["tree_flow"]["stand"].values.tolist() == ["north", "north"]
    assert result["tree_flow"]["species"].values.tolist() == ["pine", "pine"]


def trees(flows, stands, species, shares=0.0):
    flows = np.asarray(flows, dtype=float)
    names = [f"T{n}" for n in range(len(flows))]
    coords = {
        "tree": names,
        "time": TIME[: flows.shape[1]],
        "stand": ("tree", stands),
        "species": ("tree", species),
    }
    flow = xr.DataArray(flows, coords, ("tree", "time"))
    return flow, flow.copy(data=np.where(np.isfinite(flows), shares, NAN))


def areas(values):
    return xr.DataArray(
        values, {"tree": [f"T{n}" for n in range(len(values))]}, ("tree",), name="sapwood_area"
    )


def ground(rows):
    """rows of (stand, species, stand_in, sapwood per ground)."""
    stands, species, stand_in, values = zip(*rows, strict=True)
    return xr.DataArray(
        list(values),
        {
            "stand_species": [f"{a}/{b}" for a, b in zip(stands, species, strict=True)],
            "stand": ("stand_species", list(stands)),
            "species": ("stand_species", list(species)),
            "stand_in": ("stand_species", list(stand_in)),
        },
        ("stand_species",),
    )


def test_published_size_of_a_stand():
    # 20 m2 of sapwood on a hectare at 1500 kg m-2 d-1 are 20 * 1500 / 10000 = 3.0 mm d-1.
    density = 1500.0 / 86400.0
    area = np.array([0.02, 0.03, 0.05])
    flow, share = trees(density * area[:, None], ["north"] * 3, ["pine"] * 3)
    result = stand_transpiration(
        flow, share, areas(area), ground([("north", "pine", "", 20 / 10000)])
    )
    assert result["stand_transpiration"].item() * 86400 == pytest.approx(3.0, rel=1e-12)


def test_ratio_of_sums_not_mean_of_ratios():
    # Flows 1, 2 and 9 on 1, 1 and 2 m2: 12 / 4 = 3, the mean of ratios would be 2.5.
    flow, share = trees([[1], [2], [9]], ["north"] * 3, ["pine"] * 3, np.array([[0], [0], [1]]))
    result = stand_transpiration(flow, share, areas([1, 1, 2]), ground([("north", "pine", "", 1)]))
    assert result["stand_transpiration"].item() == 3.0
    assert result["stand_filled_share"].item() == 0.5
    assert result["live_trees"].item() == 3


def test_dead_channels_leave_both_sums_and_few_trees_are_refused():
    flow, share = trees(
        [[1, 1, NAN], [2, 2, 2], [9, NAN, NAN], [4, 4, 4], [7, 7, 7]], ["north"] * 5, ["pine"] * 5
    )
    result = stand_transpiration(
        flow, share, areas([1, 1, 2, 2, NAN]), ground([("north", "pine", "", 2)])
    )
    # 2 * 16 / 6, then 2 * 7 / 4, then two live trees only: the fifth has no sapwood area.
    np.testing.assert_allclose(
        result["stand_transpiration"].values, [[32 / 6, 3.5, NAN]], rtol=1e-15
    )
    assert result["few_trees"].values.tolist() == [[False, False, True]]
    assert result["live_trees"].values.tolist() == [[4, 3, 2]]
    assert result["live_trees"].dtype.kind == "i"
    assert not result["borrowed"].any()


def test_who_lends_to_whom():
    flow, share = trees([[1.0], [2.0], [4.0]], ["north", "north", "south"], ["pine", "oak", "fir"])
    strata = ground([
        ("north", "pine", "oak", 1.0),  # own
        ("north", "beech", "oak", 1.0),  # its stand-in there: 2
        ("south", "pine", "oak", 1.0),  # itself elsewhere: 1
        ("south", "ash", "oak", 1.0),  # its stand-in elsewhere: 2
        ("north", "fir", "oak", 1.0),  # a stand-in there goes before itself elsewhere: 2
        ("south", "elm", "", 1.0),  # nobody
    ])  # fmt: skip
    result = stand_transpiration(flow, share, areas([1.0] * 3), strata, fewest_trees=1)
    np.testing.assert_array_equal(result["stand_transpiration"].values[:, 0], [1, 2, 1, 2, 2, NAN])
    assert result["borrowed"].values[:, 0].tolist() == [False, True, True, True, True, False]
    assert result["few_trees"].values[:, 0].tolist() == [False] * 5 + [True]
    assert result["live_trees"].values[:, 0].tolist() == [1, 1, 1, 1, 1, 0]


def test_areas_are_found_by_name_not_by_place():
    flow, share = trees([[1], [2], [9]], ["north"] * 3, ["pine"] * 3)
    area = areas([1, 1, 2]).isel(tree=[2, 0, 1])
    result = stand_transpiration(flow, share, area, ground([("north", "pine", "", 1)]))
    assert result["stand_transpiration"].item() == 3.0


def test_many_trees_give_the_same_bytes_in_blocks_of_one_record():
    generator = np.random.default_rng(3)
    flow, share = trees(generator.random((40, 3)), ["north"] * 40, ["pine"] * 40)
    rest = areas(generator.random(40)), ground([("north", "pine", "", 1e-3)])
    whole = stand_transpiration(flow, share, *rest)["stand_transpiration"].values
    parts = [
        stand_transpiration(flow.isel(time=[n]), share.isel(time=[n]), *rest) for n in range(3)
    ]
    joined = np.concatenate([part["stand_transpiration"].values for part in parts], axis=1)
    assert joined.tobytes() == whole.tobytes()


def test_dormancy_is_zero_only_where_nothing_was_measured():
    def strata(values):
        return xr.DataArray([values], dims=("stand_species", "time"))

    result = dormancy(
        strata([1.0, NAN, NAN, 2.0, 3.0]),
        strata([0.0, NAN, NAN, 0.0, 0.2]),
        strata([1, 1, 0, 0, 1]),
    )
    np.testing.assert_array_equal(result["stand_transpiration"].values, [[1, NAN, 0, 2, 3]])
    kinds = quality.ORIGINS
    assert result["stand_origin"].values.tolist() == [[
        kinds["measured"], kinds["absent"], kinds["assumed_zero"], kinds["measured"],
        kinds["interpolated"],
    ]]  # fmt: skip
    evergreen = dormancy(strata([NAN, 1.0]), strata([NAN, 0.0]))
    assert np.isnan(evergreen["stand_transpiration"].values[0, 0])
    assert evergreen["stand_origin"].values.tolist() == [[kinds["absent"], kinds["measured"]]]


def test_an_unknown_leafy_period_is_refused():
    flux = xr.DataArray([[NAN, 1.0]], dims=("stand_species", "time"))
    leaf = flux.copy(data=[[NAN, 1.0]])
    with pytest.raises(ValueError, match=r"^in_leaf has NaN; give it as whole numbers, 1 in leaf"):
        dormancy(flux, flux * 0, leaf)
