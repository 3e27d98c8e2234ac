"""The stochastic season: bounds that air, sun and soil must keep."""

import numpy as np

from sapflux.physics import sun
from sapflux.site.config import Position
from sapflux.virtual import weather as weathers
from sapflux.virtual.seeds import generator

PLACE = Position(
    name="x", latitude_deg=46.0, longitude_deg=9.0, elevation_m=800.0, utc_offset_h=1.0,
    water_year_start="10-01", common_step_min=30,
)  # fmt: skip


def season(seed=3, step_s=1800, days=120):
    climate = weathers.Climate()
    return weathers.stochastic_weather(climate, PLACE, "2031-05-01", days, step_s, seed)


def test_first_record_ends_one_step_into_the_first_day():
    assert season().end[0] == np.datetime64("2031-04-30T23:30:00")
    assert len(season().end) == 120 * 48


def test_same_seed_same_weather_and_another_seed_another():
    one, two, other = season(3), season(3), season(4)
    np.testing.assert_array_equal(one.air_temperature, two.air_temperature)
    assert not np.array_equal(one.air_temperature, other.air_temperature)


def test_night_is_dark_and_day_below_the_top_of_the_atmosphere():
    here = season()
    middle = here.end - np.timedelta64(900, "s")
    above = sun.horizontal_irradiance_above_atmosphere(middle, 46.0, 9.0)
    elevation, _ = sun.position(middle, 46.0, 9.0)
    assert (here.shortwave_radiation[elevation < 0.0] == 0.0).all()
    assert (here.shortwave_radiation <= 0.80 * above).all()


def test_humidity_and_deficit_fit_together():
    """At 20 degC saturated air holds 2338.28 Pa (FAO-56, equation 11)."""
    here = season()
    assert ((here.relative_humidity > 0.0) & (here.relative_humidity < 1.0)).all()
    saturated = here.vapour_pressure_deficit / (1.0 - here.relative_humidity)
    near = np.abs(here.air_temperature - 293.15) < 0.05
    assert near.any()
    np.testing.assert_allclose(saturated[near], 2338.28, rtol=0.004)


def test_rain_falls_and_darkens_the_sky():
    here = season()
    wet = here.precipitation > 0.0
    assert 0.02 < wet.mean() < 0.4
    noon = np.arange(len(wet)) % 48 == 23
    bright = here.shortwave_radiation
    assert bright[wet & noon].mean() < 0.5 * bright[~wet & noon].mean()


def test_soil_dries_without_rain_and_fills_with_it():
    here = season()
    level = weathers.soil_water(here)
    assert ((level >= 0.0) & (level <= 1.0)).all()
    change = np.diff(level)
    dry = here.precipitation[1:] == 0.0
    assert (change[dry] <= 0.0).all()
    assert (change[here.precipitation[1:] > 1.0] >= 0.0).all()


def test_quiet_night_by_hand():
    """Two days of half-hours; light from 05:00; deficit 40 Pa in the 2 h before it, then 60."""
    count = 96
    end = np.datetime64("2031-08-17T23:30", "s") + np.arange(count) * np.timedelta64(1800, "s")
    light = np.tile(np.where(np.arange(48) >= 10, 300.0, 0.0), 2)
    deficit = np.where(np.arange(count) < 48, 40.0, 60.0)
    fill = np.ones(count)
    here = weathers.Weather(end, 1800, fill, fill, deficit, light, fill, fill)
    assert weathers.quiet_nights(here, 1.0).tolist() == [True, False]


def test_draws_hang_on_their_key_alone():
    first = generator(1, "vigour", "T1").normal()
    generator(1, "vigour", "T0").normal()
    assert generator(1, "vigour", "T1").normal() == first
    assert generator(1, "vigour", "T2").normal() != first
    assert generator(1, "tilt", "T1").normal() != first
    assert generator(2, "vigour", "T1").normal() != first


def test_a_long_dry_spell_needs_a_lasting_sky():
    sky = weathers.Sky(0.9, 0.0, 5.0, 3.0, 0.0, 0.0)
    climate = weathers.Climate(skies=(sky, sky), chances=((1.0, 0.0), (0.0, 1.0)))
    here = weathers.stochastic_weather(climate, PLACE, "2031-06-01", 10, 1800, 1)
    assert here.precipitation.sum() == 0.0
    assert not weathers.quiet_nights(here, 1.0).any()
    assert here.vapour_pressure_deficit.max() > 1000.0
