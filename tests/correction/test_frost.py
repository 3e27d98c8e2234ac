"""Frozen wood is taken out, by the stem's temperature or by the air's, until it has thawed."""

import numpy as np
import pytest
import xarray as xr
from correction_records import stamps

import sapflux.correction  # noqa: F401
from sapflux import quality
from sapflux.stage import REGISTRY, bind

STAGE = REGISTRY["heat_dissipation", "screen_frost"]
TIME = stamps("2031-11-20", 3)
ZERO = 273.15


def flagged(air=None, stem=None, **changed):
    """(probe, time) bool of two probes; air (time), stem (probe, time) [degC]."""
    coords = {"probe": ["P1", "P2"], "time": TIME}
    arrays = {"installation": xr.DataArray(np.zeros((2, len(TIME)), int), coords)}
    if air is not None:
        arrays["air_temperature"] = xr.DataArray(np.asarray(air) + ZERO, {"time": TIME}, ("time",))
    if stem is not None:
        arrays["stem_temperature"] = xr.DataArray(np.asarray(stem) + ZERO, coords)
    made = bind(STAGE.function, arrays, STAGE.defaults() | changed)["frozen_wood"]
    assert made.dims == ("probe", "time") and made.dtype == bool
    return made.values


def test_a_frozen_stem_is_flagged_until_it_has_thawed_by_hand():
    stem = np.full((2, len(TIME)), 5.0)
    stem[0, 20:30] = -1.0  # half-hourly: records 20 to 29 frozen, 6 h after it are 12 records
    stem[1, 40] = -0.4  # above the limit: undercooled sap is no ice
    found = flagged(stem=stem)
    assert np.flatnonzero(found[0]).tolist() == list(range(20, 42))
    assert not found[1].any()
    assert np.flatnonzero(flagged(stem=stem, thaw_h=0.0)[0]).tolist() == list(range(20, 30))


def test_the_air_counts_by_its_mean_over_three_hours_by_hand():
    air = np.full(len(TIME), 1.0)
    air[50:62] = -2.0
    # Six records to a mean. With four of them at -2 it is -1, with three -0.5, which is not below:
    # the first below ends at record 53, the last at record 63 (four of 58 to 63 at -2).
    found = flagged(air=air, thaw_h=0.0)
    assert np.flatnonzero(found[0]).tolist() == list(range(53, 64))
    assert (found[0] == found[1]).all()  # the air is that of the whole site


def test_the_stem_goes_before_the_air_and_the_air_stands_in_where_it_is_missing():
    air = np.full(len(TIME), -5.0)
    stem = np.full((2, len(TIME)), 3.0)
    stem[1, 100:] = np.nan
    found = flagged(air=air, stem=stem)
    assert not found[0].any()
    assert np.flatnonzero(found[1]).tolist() == list(range(100, len(TIME)))


def test_without_a_temperature_nothing_is_flagged():
    assert not flagged().any()
    assert not flagged(air=np.full(len(TIME), np.nan)).any()


def test_both_methods_have_the_screen_and_its_flag_masks():
    assert REGISTRY["heat_ratio", "screen_frost"].function is STAGE.function
    assert quality.FLAGS["frozen_wood"].masks and quality.FLAGS["frozen_wood"].is_fault


@pytest.mark.parametrize("size", [1, 7, 48])
def test_the_screen_is_the_same_for_every_block_length(size):
    generator = np.random.default_rng(4)
    air = generator.normal(-0.5, 1.0, len(TIME)).cumsum() / 5
    whole = flagged(air=air)
    assert 0 < whole[0].sum() < len(TIME)
    settings = STAGE.defaults()
    reach = int(np.ceil(STAGE.reach_s(settings) / 1800))
    coords = {"probe": ["P1", "P2"], "time": TIME}
    around = {
        "installation": xr.DataArray(np.zeros((2, len(TIME)), int), coords),
        "air_temperature": xr.DataArray(air + ZERO, {"time": TIME}, ("time",)),
    }
    for first in range(0, len(TIME), size):
        begin = max(0, first - reach)
        block = {n: a.isel(time=slice(begin, first + size + reach)) for n, a in around.items()}
        part = bind(STAGE.function, block, settings)["frozen_wood"].values
        core = slice(first - begin, first - begin + size)
        np.testing.assert_array_equal(part[:, core], whole[:, first : first + size])
