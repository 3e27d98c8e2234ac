"""Short gaps: what is bridged, what is not, and that it hangs on the neighbours alone."""

from itertools import pairwise

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st

from sapflux import quality
from sapflux.scaling.short_gaps import _reach_s, bridge, short_gaps

MEASURED, INTERPOLATED = quality.ORIGINS["measured"], quality.ORIGINS["interpolated"]


def cube(values, minutes=30, installation=0):
    values = np.asarray(values, dtype=float).reshape(1, 1, -1)
    step = np.timedelta64(minutes, "m")
    time = (np.datetime64("2031-06-01T00:30") + np.arange(values.shape[-1]) * step).astype(
        "datetime64[ns]"
    )
    coords = {"probe": ["A"], "point": [1], "time": time}
    dims = ("probe", "point", "time")
    flux = xr.DataArray(values, coords, dims)
    origin = flux.copy(data=np.where(np.isfinite(values), MEASURED, 0).astype(np.int8))
    own = np.broadcast_to(installation, values.shape[-1:]).reshape(1, -1)
    return flux, origin, xr.DataArray(own, {"probe": ["A"], "time": time}, ("probe", "time"))


NAN = np.nan


def test_a_gap_of_two_hours_is_a_straight_line():
    # Four half hours are missing between 1 and 6: steps of 1.
    result = short_gaps(*cube([1, NAN, NAN, NAN, NAN, 6]))
    np.testing.assert_allclose(result["flux_density"].values.ravel(), [1, 2, 3, 4, 5, 6], 1e-15)
    assert result["origin"].values.ravel().tolist() == [
        MEASURED, *[INTERPOLATED] * 4, MEASURED,
    ]  # fmt: skip
    assert result["origin"].dtype == np.int8


def test_a_longer_gap_stays_whole():
    result = short_gaps(*cube([1, NAN, NAN, NAN, NAN, NAN, 6]))
    assert np.isnan(result["flux_density"].values.ravel()[1:6]).all()
    assert result["origin"].values.ravel().tolist() == [MEASURED, 0, 0, 0, 0, 0, MEASURED]


def test_nothing_is_bridged_at_the_ends_of_the_record():
    result = short_gaps(*cube([NAN, 1, 2, NAN]))
    assert np.isnan(result["flux_density"].values.ravel()[[0, 3]]).all()


@pytest.mark.parametrize("own", [[0, 0, 1, 1], [0, 1, 1, 1], [0, -1, 0, 0], [-1, -1, -1, -1]])
def test_nothing_is_bridged_from_one_installation_to_the_next(own):
    result = short_gaps(*cube([1, NAN, 3, 4], installation=own))
    assert np.isnan(result["flux_density"].values.ravel()[1])


def test_negative_flux_and_measured_values_are_kept_bit_for_bit():
    flux, origin, own = cube([-0.1, 0.3, NAN, -0.7])
    kept = flux.copy(deep=True)
    result = short_gaps(flux, origin, own)
    there = np.isfinite(flux.values)
    assert result["flux_density"].values[there].tobytes() == kept.values[there].tobytes()
    assert result["flux_density"].values.ravel()[2] == pytest.approx(-0.2)
    assert flux.identical(kept)


@settings(max_examples=60, deadline=None)
@given(
    st.lists(st.one_of(st.none(), st.floats(-1e-3, 1e-1)), min_size=3, max_size=60),
    st.integers(1, 58),
)
def test_every_block_cut_gives_the_same_bytes(values, cut):
    flux, origin, own = cube([NAN if v is None else v for v in values])
    whole = short_gaps(flux, origin, own, longest_gap_h=2.0)
    halo = int(-(-_reach_s({"longest_gap_h": 2.0}) // 1800))
    parts = {"flux_density": [], "origin": []}
    cuts = [0, min(cut, len(values)), len(values)]
    for first, last in pairwise(cuts):
        low, high = max(0, first - halo), min(len(values), last + halo)
        block = short_gaps(*(a.isel(time=slice(low, high)) for a in (flux, origin, own)))
        for name, found in parts.items():
            found.append(block[name].values[..., first - low : last - low])
    for name, found in parts.items():
        assert np.concatenate(found, axis=-1).tobytes() == whole[name].values.tobytes()


def test_a_cut_one_step_short_of_the_reach_would_lose_the_bridge():
    values = np.array([1.0, NAN, NAN, NAN, NAN, 6.0])
    stamps = np.arange(6) * int(1800e9)
    own = np.zeros(6, dtype=int)
    assert bridge(values, stamps, own, 7200e9)[1].sum() == 4
    assert bridge(values[:-1], stamps[:-1], own[:-1], 7200e9)[1].sum() == 0


def test_a_noon_gap_of_six_hours_bridged_by_a_line_loses_what_was_worked_out():
    # Half-sine day of 12/14/16 h, gap of 6 h centred on noon: the chord misses 15/10/7 % of the
    # day's total. Own derivation: chord 6 h times sin(pi (L/2 - 3)/L) against the integral.
    for length, loss in [(12, 0.15), (14, 0.10), (16, 0.07)]:
        hours = np.arange(0, length + 1e-9, 1 / 60)
        flow = np.sin(np.pi * hours / length)
        gap = np.abs(hours - length / 2) < 3 - 1e-9
        stamps = (np.arange(len(hours)) * 60e9).astype(np.int64)
        line, _ = bridge(np.where(gap, NAN, flow), stamps, np.zeros(len(hours), int), 6 * 3600e9)
        assert 1 - np.trapezoid(line) / np.trapezoid(flow) == pytest.approx(loss, abs=0.005)
