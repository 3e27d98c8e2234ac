"""The stand as the sum of its species: by hand."""

import numpy as np
import pytest
import xarray as xr

from sapflux import quality
from sapflux.scaling.whole_stands import with_whole_stands

NAN = np.nan
KINDS = quality.ORIGINS


def strata():
    dims = ("stand_species", "time")
    return xr.Dataset(
        {
            "stand_transpiration": (dims, [[1.0, 2.0, 0.0], [3.0, NAN, 0.0], [5.0, 5.0, 5.0]]),
            "stand_filled_share": (dims, [[0.0, 0, 0], [1.0, 0, 0], [0.0, 0, 0]]),
            "live_trees": (dims, np.array([[3, 3, 0], [4, 2, 0], [5, 5, 5]])),
            "quality": (dims, np.array([[0, 1, 0], [4, 8, 0], [0, 0, 0]], np.int64)),
            "stand_origin": (dims, np.array(
                [[1, 1, KINDS["assumed_zero"]], [2, 0, KINDS["assumed_zero"]], [1, 1, 1]])),
        },
        {
            "stand_species": ["a/oak", "a/fir", "b/oak"],
            "stand": ("stand_species", ["a", "a", "b"]),
            "species": ("stand_species", ["oak", "fir", "oak"]),
            "stand_in": ("stand_species", ["", "", ""]),
            "time": np.arange(3).astype("datetime64[h]").astype("datetime64[ns]"),
        },
    )  # fmt: skip


@pytest.fixture
def whole():
    return with_whole_stands(strata(), [2e-3, 1e-3, 1e-3])


def test_every_stand_gets_one_row_more(whole):
    assert list(whole["stand_species"].values) == ["a/oak", "a/fir", "b/oak", "a/all", "b/all"]
    assert whole["species"].values[-1] == "all"


def test_transpiration_is_the_sum_and_absent_where_any_species_is(whole):
    np.testing.assert_array_equal(
        whole["stand_transpiration"].sel(stand_species="a/all"), [4, NAN, 0]
    )


def test_the_filled_share_is_weighted_with_sapwood(whole):
    # a third of the sapwood is fir, whose value is filled
    share = whole["stand_filled_share"].sel(stand_species="a/all").values
    assert share[0] == pytest.approx(1 / 3)


def test_flags_and_trees_add_up(whole):
    own = whole.sel(stand_species="a/all")
    assert own["quality"].values.tolist() == [4, 9, 0]
    assert own["live_trees"].values.tolist() == [7, 5, 0]


def test_the_origin_is_the_least_certain(whole):
    origins = whole["stand_origin"].sel(stand_species="a/all").values.tolist()
    assert origins == [KINDS["interpolated"], KINDS["absent"], KINDS["assumed_zero"]]
