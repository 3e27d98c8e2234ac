"""Nights that never set a baseline, and what a bias of humidity would change: by hand."""

import numpy as np
import pytest
import xarray as xr
from correction_records import beside, evaluated, record, stamps, table_of
from hypothesis import given, settings
from hypothesis import strategies as st

import sapflux.correction  # noqa: F401
from sapflux.correction.nights import (
    in_nights,
    nights_of,
    record_noise,
    window_slopes,
    with_hours_before,
)
from sapflux.physics import sun
from sapflux.stage import REGISTRY

STAGE = REGISTRY["heat_dissipation", "zero_flow_difference"]
NAN = np.nan


def place(day, hour):
    """Place of the half-hourly record that ends half an hour after this hour of March."""
    return (day - 1) * 48 + round(2 * hour)


def arrays_of(days, ripple_K=0.01, **around):
    """A difference of 10 K with a ripple from record to record."""
    time = stamps("2031-03-01", days)
    values = 10 + ripple_K * (-1.0) ** np.arange(len(time))
    heated = record(values, time)
    return {"heated_difference": heated, **beside(heated, **around)}


def with_series(arrays, **series):
    """The arrays with further ones: (time) of the site, (1, time) of the probe."""
    time = arrays["heated_difference"]["time"].values
    made = {}
    for name, values in series.items():
        if values.ndim == 1:
            made[name] = xr.DataArray(values, {"time": time}, "time")
        else:
            made[name] = xr.DataArray(values, {"probe": ["P1"], "time": time}, ("probe", "time"))
    return arrays | made


def reasons(arrays, **changed):
    """Reason by day of March on which the night ends; none of the refused sets the baseline."""
    table = table_of(STAGE, arrays, **changed)
    assert (table["accepted"] == (table["reason"] == "accepted")).all()
    assert (table["baseline_K"].notna() == table["accepted"]).all()
    days = (table["start"] + np.timedelta64(13, "h")).dt.day
    return dict(zip(days, table["reason"], strict=True))


def refused(arrays, **changed):
    return {day: why for day, why in reasons(arrays, **changed).items() if why != "accepted"}


METHODS = ("quiet_nights", "nightly_maximum", "moving_window")


@pytest.mark.parametrize("method", METHODS)
def test_frosty_nights_do_not_count(method):
    air = np.full(6 * 48, 278.15)
    air[place(2, 3)] = 273.15 - 0.6  # in the night
    air[place(3, 12)] = 263.15  # by day
    air[place(4, 3)] = 273.15 - 0.4  # above the limit
    air[place(5, 3) : place(5, 4)] = NAN
    arrays = with_series(arrays_of(6), air_temperature=air)
    assert refused(arrays, method=method) == {2: "frost: -0.6 degC, below -0.5"}


def test_frost_of_the_evening_before_counts_until_it_has_thawed():
    air = np.full(4 * 48, 278.15)
    air[place(1, 20)] = 271.15  # four hours before midnight
    air[place(2, 17)] = 271.15  # seven hours before midnight
    arrays = with_series(arrays_of(4), air_temperature=air)
    assert refused(arrays) == {2: "frost: -2.0 degC, below -0.5"}
    assert refused(arrays, before_h=0.0) == {}


def test_the_stem_tells_of_frost_before_the_air():
    air, stem = np.full((2, 4 * 48), 271.15)
    stem[:] = 274.15
    stem[place(3, 2)] = 272.15
    stem[place(4, 0) - 12 : place(4, 7)] = NAN
    arrays = with_series(arrays_of(4), air_temperature=air, stem_temperature=stem[None])
    table = table_of(STAGE, arrays)
    np.testing.assert_allclose(table["lowest_temperature_degC"], [1, 1, -1, -2])
    assert table["accepted"].tolist() == [True, True, False, False]


@pytest.mark.parametrize("method", METHODS)
def test_nights_with_a_visit_do_not_count(method):
    seen = np.zeros((1, 4 * 48), dtype=np.int8)
    seen[0, place(2, 4)] = 1
    seen[0, place(3, 15)] = 1
    arrays = with_series(arrays_of(4), visited=seen)
    assert refused(arrays, method=method) == {2: "the logger was visited"}
    table = table_of(STAGE, arrays, method=method)
    assert table["visited"].tolist() == [False, True, False, False]


def test_nights_in_which_the_heater_power_changed_do_not_count():
    volts = np.full((1, 5 * 48), 2.0)
    volts[0, place(2, 2) : place(2, 12)] = 2.02  # power 1.01^2 = 1.0201: by 2 %
    volts[0, place(2, 12) :] = 2.005  # by day: no night sees it change
    volts[0, place(4, 2) : place(4, 12)] = 2.014  # (2.014 / 2.005)^2: by 0.9 %
    arrays = with_series(arrays_of(5), heater_voltage=volts)
    assert refused(arrays) == {2: "heater power changed by 2.0%, above 1.0%"}
    table = table_of(STAGE, arrays)
    assert table["power_change"][1] == pytest.approx(0.0201)
    assert table["power_change"][3] == pytest.approx((2.014 / 2.005) ** 2 - 1)


def test_a_heating_cycle_is_no_change_of_power():
    volts = np.tile([2.0, 0.0], 4 * 24)[None]
    table = table_of(STAGE, with_series(arrays_of(4), heater_voltage=volts))
    assert (table["power_change"] == 0).all()
    assert table["accepted"].all()


@pytest.mark.parametrize("method", METHODS)
def test_a_connector_wetted_by_rain_does_not_count(method):
    arrays = arrays_of(7)
    values = arrays["heated_difference"].values.copy()
    ripple = 0.04 * (-1.0) ** np.arange(7 * 48)
    for day in (2, 4):  # noise five times as high as on other nights, and more
        night = slice(place(day, 0), place(day, 7))
        values[..., night] = 10 + 1.3 * ripple[night]
    arrays["heated_difference"] = arrays["heated_difference"].copy(data=values)
    rain = np.zeros(7 * 48)
    rain[place(1, 19)] = 2.0  # five hours before the first of them
    rain[place(5, 3)] = 2.0  # a wet night without noise
    found = refused(with_series(arrays, precipitation=rain), method=method, highest_variation=0.1)
    # Second differences of a ripple of +-r are 4 r: 4 r / (0.6745 sqrt(6)) is 0.024 for 0.01 K and
    # 0.126 for 0.052 K.
    assert found == {2: "wet connector: noise 0.13 K after rain, 0.024 as a rule"}
    assert refused(arrays, method=method, highest_variation=0.1) == {}
    dry = refused(
        with_series(arrays, precipitation=rain), before_h=2.0, method=method, highest_variation=0.1
    )
    assert dry == {}
    patient = with_series(arrays, precipitation=rain)
    assert refused(patient, wet_noise_ratio=6.0, method=method, highest_variation=0.1) == {}


def test_a_coarse_resolution_without_noise_is_no_reason():
    arrays = arrays_of(4, ripple_K=0.0)
    values = arrays["heated_difference"].values.copy()
    values[..., place(2, 0) : place(2, 7) : 2] += 0.01
    arrays["heated_difference"] = arrays["heated_difference"].copy(data=values)
    rain = np.ones(4 * 48)
    assert refused(with_series(arrays, precipitation=rain)) == {}


def test_a_refused_night_is_bridged():
    arrays = arrays_of(5, ripple_K=0.0)
    values = arrays["heated_difference"].values.copy()
    values[..., place(3, 0) : place(3, 12)] = 13.0  # somebody holds the probe
    arrays["heated_difference"] = arrays["heated_difference"].copy(data=values)
    seen = np.zeros((1, 5 * 48))
    seen[0, place(3, 4)] = 1
    arrays = with_series(arrays, visited=seen)
    table = table_of(STAGE, arrays)
    line = evaluated(STAGE, arrays, table)["zero_flow_difference"]
    np.testing.assert_allclose(line, 10.0, rtol=0, atol=1e-12)


def humid(deficits_kPa, celsius=10.0):
    deficits = np.repeat(np.asarray(deficits_kPa) * 1000.0, 48)
    arrays = arrays_of(len(deficits_kPa), deficit_Pa=deficits)
    return with_series(arrays, air_temperature=np.full(len(deficits), celsius + 273.15))


def test_a_bias_of_humidity_adds_and_takes_nights_by_hand():
    # Saturated air of 10 degC holds 1.228 kPa (FAO-56, table 2.3), 2 % of it are 0.0246 kPa. Of
    # nights with 0.02, 0.03, 0.07 and 0.08 kPa two are below 0.05; in drier air 0.0546 is not, and
    # in wetter air 0.0454 is.
    table = table_of(STAGE, humid([0.02, 0.03, 0.07, 0.08]))
    assert table["accepted"].tolist() == [True, True, False, False]
    assert table["accepted_if_drier"].tolist() == [True, False, False, False]
    assert table["accepted_if_wetter"].tolist() == [True, True, True, False]


def test_the_edge_of_the_bias_is_two_per_cent_of_saturation():
    # FAO-56, table 2.3: 1.2280 kPa at 10 degC, to the last digit printed (1.228): 0.02456 kPa.
    near = humid([0.05 - 0.0245, 0.05 - 0.0247, 0.05 + 0.0245, 0.05 + 0.0247])
    table = table_of(STAGE, near)
    assert table["accepted_if_drier"].tolist() == [False, True, False, False]
    assert table["accepted_if_wetter"].tolist() == [True, True, True, False]


def test_without_air_temperature_or_bias_the_verdict_stays():
    arrays = humid([0.02, 0.03, 0.07, 0.08])
    for table in (
        table_of(STAGE, {n: a for n, a in arrays.items() if n != "air_temperature"}),
        table_of(STAGE, arrays, humidity_bias=0.0),
    ):
        assert table["accepted_if_drier"].equals(table["accepted"].rename("accepted_if_drier"))
        assert table["accepted_if_wetter"].equals(table["accepted"].rename("accepted_if_wetter"))


def test_no_bias_lets_a_frosty_night_in():
    table = table_of(STAGE, humid([0.02, 0.07], celsius=-3.0))
    assert not table[["accepted", "accepted_if_drier", "accepted_if_wetter"]].any().any()


def test_the_noise_is_that_of_the_records_and_not_of_their_course():
    generator = np.random.default_rng(6)
    noise = generator.normal(0, 0.02, (2, 30000))
    slope = np.linspace(0, 500, 30000)
    np.testing.assert_allclose(record_noise(noise), 0.02, rtol=0.03)
    np.testing.assert_allclose(record_noise(noise + slope), record_noise(noise), rtol=1e-6)
    assert np.isnan(record_noise(np.array([[1.0, NAN, 2.0, 3.0], [NAN] * 4]))).all()
    assert np.isnan(record_noise(np.ones((3, 2)))).all()


@given(st.lists(st.one_of(st.floats(-5, 5), st.just(NAN)), min_size=3, max_size=9))
@settings(max_examples=80, deadline=None)
def test_window_slopes_are_those_of_numpy(values):
    time = stamps("2031-02-01", 2)
    nights = nights_of(time, *sun.position(time, 48.0, 0.0))
    laid = np.full(len(time), NAN)
    laid[nights.first[1] : nights.first[1] + len(values)] = values
    got = window_slopes(in_nights(laid, nights, NAN), nights, 4, 0.75)[1]
    hours = np.arange(len(laid)) / 2
    for window in range(len(got)):
        here = slice(nights.first[1] + window, nights.first[1] + window + 4)
        known = np.isfinite(laid[here])
        if known.sum() < 3 or window + 4 > nights.length[1]:
            assert np.isnan(got[window])
        else:
            expected = np.polyfit(hours[here][known], laid[here][known], 1)[0]
            assert got[window] == pytest.approx(expected, abs=1e-9)


def test_hours_before_midnight_are_those_the_block_has():
    time = stamps("2031-02-01T20:00", 2)
    nights = nights_of(time, *sun.position(time, 48.0, 0.0))
    longer = with_hours_before(nights, 6.0)
    # Solar midnight is at 0:14 UTC: the first record of the night ends at 0:30 or 1:00.
    assert (nights.first - longer.first)[0] == nights.first[0] < 12
    assert (nights.first - longer.first)[1] == 12
    np.testing.assert_array_equal(longer.first + longer.length, nights.first + nights.length)
