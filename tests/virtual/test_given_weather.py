"""Weather from given series: the means and sums of a real year, and a copy that lives in it."""

import json
import warnings
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from sapflux import run_site
from sapflux.cli import main
from sapflux.constants import ZERO_CELSIUS
from sapflux.errors import SiteError
from sapflux.physics import sun
from sapflux.site.load import load_site
from sapflux.virtual.copy import grow_copy, write_copy
from sapflux.virtual.given import given_weather, whole_days
from sapflux.virtual.given_table import read_weather
from sapflux.virtual.resample import finer

SITE = load_site(Path(__file__).parents[2] / "configs" / "orvelin")
GREENSBORO = SITE.position.model_copy(
    update={"latitude_deg": 36.1, "longitude_deg": -79.95, "elevation_m": 273.0,
            "utc_offset_h": -5.0}
)  # fmt: skip
PLAN = replace(
    SITE, position=GREENSBORO, layouts={}, logs={},
    tables={**SITE.tables, "channels": (), "visits": (), "exclusions": ()},
)  # fmt: skip


@pytest.fixture(scope="module")
def hourly():
    """The typical year of Greensboro (TMY3 723170) that pvlib ships: UTC ends, SI series."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of the library
        import pvlib

        path = Path(pvlib.__file__).parent / "data" / "723170TYA.CSV"
        year, _ = pvlib.iotools.read_tmy3(path, coerce_year=2033, map_variables=True)
    return {
        "end": year.index.tz_convert("UTC").tz_localize(None).to_numpy(),
        "air_temperature": year["temp_air"].to_numpy() + ZERO_CELSIUS,
        "relative_humidity": year["relative_humidity"].to_numpy() / 100.0,
        "shortwave_radiation": year["ghi"].to_numpy(float),
        "wind_speed": year["wind_speed"].to_numpy(),
    }


@pytest.fixture(scope="module")
def year(hourly):
    return given_weather(**hourly, step_s=600, position=GREENSBORO)


def test_sums_and_means_of_the_real_year_survive(year):
    """TMY3 723170: 1566.2030 kWh m-2, 14.421849 degC and 69.516096 % (sums of the file, pandas)."""
    assert len(year.end) == 8760 * 6
    assert year.shortwave_radiation.sum() / 6000.0 == pytest.approx(1566.2030, rel=1e-6)
    assert year.air_temperature.mean() - ZERO_CELSIUS == pytest.approx(14.421849, abs=5e-7)
    assert year.relative_humidity.mean() * 100.0 == pytest.approx(69.516096, abs=5e-7)


def test_the_deficit_is_near_that_of_the_hours(year):
    """0.614413 kPa from the hourly file, by FAO-56; curved in temperature, so not to the digit."""
    assert year.vapour_pressure_deficit.mean() == pytest.approx(614.413, rel=2e-3)
    assert (year.vapour_pressure_deficit >= 0.0).all()


@pytest.mark.parametrize(
    "name", ["air_temperature", "relative_humidity", "shortwave_radiation", "wind_speed"]
)
def test_every_hour_keeps_its_mean(name, hourly, year):
    back = getattr(year, name).reshape(-1, 6).mean(axis=1)
    np.testing.assert_allclose(back, hourly[name], rtol=1e-12, atol=1e-9)


def test_steps_follow_the_sun_and_stay_in_bounds(year):
    middle = year.end - np.timedelta64(300, "s")
    elevation, _ = sun.position(middle, 36.1, -79.95)
    light = year.shortwave_radiation
    stray = light[elevation < -1.0]
    assert stray.sum() / light.sum() < 1e-3  # hours that the file counts as light
    assert (year.relative_humidity >= 0.0).all() and (year.relative_humidity <= 1.0).all()
    # the first bright hour of the day rises with the sun
    hours = light.reshape(-1, 6)
    clear = (hours.mean(axis=1) > 0.0) & (elevation.reshape(-1, 6).min(axis=1) > 0.0)
    rising = np.diff(elevation.reshape(-1, 6), axis=1)[clear].min(axis=1) > 0.0
    assert (np.diff(hours[clear][rising], axis=1) > 0.0).all()


def test_lines_between_middles_by_hand():
    """Halves of an hour at means 0, 8, 0: middles m0 m1 m2 with (m0 + m1 / 8 - m0 / 8) = 0,
    3/4 m1 + m0 / 8 + m2 / 8 = 8: m0 = -m1 / 7, m1 (3/4 - 1/28) = 8, m1 = 11.2, m0 = -1.6."""
    made = finer(np.array([0.0, 8.0, 0.0]), 2)
    np.testing.assert_allclose(made, [-1.6, 1.6, 8.0, 8.0, 1.6, -1.6], atol=1e-12)
    kept = finer(np.array([0.0, 8.0, 0.0]), 2, low=0.0)
    np.testing.assert_allclose(kept, [0.0, 0.0, 8.0, 8.0, 0.0, 0.0], atol=1e-12)


def test_half_hours_pass_unchanged_on_their_own_clock():
    end = np.datetime64("2033-06-01T00:30", "s") + np.arange(96) * np.timedelta64(1800, "s")
    warmth = 290.0 + np.sin(np.arange(96.0))
    light, rain = np.full(96, 100.0), np.arange(96.0)
    here = given_weather(end, warmth, np.full(96, 0.5), light, rain, step_s=1800)
    np.testing.assert_array_equal(here.end, end)
    np.testing.assert_array_equal(here.air_temperature, warmth)
    np.testing.assert_array_equal(here.shortwave_radiation, light)
    np.testing.assert_array_equal(here.precipitation, rain)
    split = given_weather(end, warmth, np.full(96, 0.5), light, rain, step_s=600)
    assert split.precipitation.sum() == pytest.approx(rain.sum(), rel=1e-12)
    assert split.end[0] == np.datetime64("2033-06-01T00:10")


def test_all_that_is_wrong_with_series_is_told_at_once():
    end = np.datetime64("2033-06-01T01:00", "s") + np.arange(48) * np.timedelta64(3600, "s")
    warmth, dark = np.full(48, 15.0), np.full(48, np.nan)
    with pytest.raises(ValueError) as told:
        given_weather(end, warmth, np.full(48, 70.0), dark, np.zeros(47), step_s=700)
    for words in (
        "step_s is 700", "air_temperature holds 15 (48 such); it is in kelvin",
        "relative_humidity holds 70 (48 such); it is in shares between 0 and 1",
        "shortwave_radiation holds nan", "precipitation has shape (47,); end has 48 intervals",
    ):  # fmt: skip
        assert words in str(told.value)
    with pytest.raises(ValueError, match="end has steps of 3600, 7200 s"):
        given_weather(np.delete(end, 5), warmth[1:] + 273.0, warmth[1:] / 30.0, warmth[1:],
                      step_s=600)  # fmt: skip


def of_days(hourly, first, last, step_s=600):
    """Hours that end after `first` up to `last`, both of UTC."""
    kept = (hourly["end"] > np.datetime64(first)) & (hourly["end"] <= np.datetime64(last))
    series = {name: values[kept] for name, values in hourly.items()}
    return given_weather(**series, step_s=step_s, position=GREENSBORO)


def test_the_period_is_the_whole_days_of_standard_time(hourly):
    """UTC-5: a day begins at 05:00 UTC; nine hours before and seven after are left out."""
    weather = of_days(hourly, "2033-06-30T20:00", "2033-07-04T12:00")
    truth, _ = grow_copy(PLAN, seed=1, weather=weather)
    assert [str(day) for day in truth.dates] == ["2033-07-01", "2033-07-02", "2033-07-03"]
    assert truth.weather.end[0] == np.datetime64("2033-07-01T05:10")
    assert truth.weather.end[-1] == np.datetime64("2033-07-04T05:00")
    assert truth.options["weather"] == "given"
    inside = (hourly["end"] > truth.dates[0] + np.timedelta64(5, "h")) & (
        hourly["end"] <= truth.weather.end[-1]
    )
    light = truth.weather.shortwave_radiation.mean()
    assert light == pytest.approx(hourly["shortwave_radiation"][inside].mean(), rel=1e-12)


def test_weather_that_does_not_fit_is_refused(hourly):
    weather = of_days(hourly, "2033-07-01T05:00", "2033-07-04T05:00")
    with pytest.raises(ValueError, match="no first_day and no days"):
        grow_copy(PLAN, seed=1, weather=weather, days=2)
    with pytest.raises(ValueError, match=r"1 whole days .* at least 2"):
        grow_copy(PLAN, seed=1, weather=of_days(hourly, "2033-07-01T05:00", "2033-07-03T04:00"))
    coarse = of_days(hourly, "2033-07-01T05:00", "2033-07-04T05:00", step_s=3600)
    with pytest.raises(ValueError, match="steps of 3600 s; the logs' intervals of 600, 1800 s"):
        grow_copy(PLAN, seed=1, weather=coarse)
    with pytest.raises(ValueError, match="0 whole days"):
        whole_days(weather, 0.25 / 3)


def test_the_pipeline_finds_a_month_of_a_real_summer(hourly, tmp_path):
    """Within 2 % of sampling without error, of each stand: tables exact, gradients left out.

    June: four nights there are humid enough for a baseline, in July none is.
    """
    weather = of_days(hourly, "2033-06-01T05:00", "2033-07-01T05:00")
    assert len(weather.end) == 30 * 144
    truth = write_copy(PLAN, tmp_path / "copy", seed=3, knowledge="exact", gradients=False,
                       weather=weather)  # fmt: skip
    run = run_site(tmp_path / "copy", out=tmp_path / "out")
    daily = run.table("daily").query("species == 'all' and valid == 1")
    dates = [str(day) for day in truth.dates]
    for stand, by_species in truth.strata.items():
        own = daily[daily["stand"] == stand]
        assert len(own) == 30
        sampled = sum(truth.sampled_mm(stand, species) for species in by_species)
        expected = sampled[[dates.index(day) for day in own["start"]]].sum()
        assert own["transpiration_mm"].sum() == pytest.approx(expected, rel=0.02)


HEADER = "end_utc,air_temperature_degC,relative_humidity_percent,shortwave_radiation_W_m2"


def table_of(days=4, minutes=60, more=""):
    """Lines of a table: hours of a sine of temperature and sun from 31 May, 22 h UTC."""
    first, lines = np.datetime64("2033-05-31T22:00"), [HEADER + more]
    for n in range(1, days * 1440 // minutes + 1):
        end = first + np.timedelta64(n * minutes, "m")
        sine = np.sin((int(str(end)[11:13]) - 6) / 24 * 2 * np.pi)
        lines.append(f"{end},{15 + 5 * sine:.1f},70,{max(600 * sine, 0.0):.1f}")
    return lines


def written(folder, lines):
    path = folder / "weather.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def test_a_table_of_weather_is_what_its_columns_say(tmp_path):
    """15 degC, 70 % and 600 sin W m-2; a clock that the logs of 10 and 30 min share with it."""
    lines = table_of(more=",precipitation_mm,wind_speed_m_s")
    lines[1:] = [f"{line},0.5,2.5" for line in lines[1:]]
    lines[3] = lines[3].replace(",", "Z,", 1)
    found = read_weather(written(tmp_path, lines), SITE)
    assert found.step_s == 600 and len(found.end) == 4 * 144
    assert found.air_temperature.mean() == pytest.approx(288.15, abs=1e-3)
    np.testing.assert_allclose(found.relative_humidity, 0.7)
    np.testing.assert_allclose(found.wind_speed, 2.5)
    assert found.precipitation.sum() == pytest.approx(4 * 24 * 0.5)
    assert found.shortwave_radiation.mean() == pytest.approx(600.0 / np.pi, rel=0.01)
    calm = read_weather(written(tmp_path, table_of(minutes=15)), SITE)
    assert calm.step_s == 300 and not calm.precipitation.any()


def faults_of(folder, lines):
    with pytest.raises(SiteError) as told:
        read_weather(written(folder, lines), SITE)
    return [
        (fault.where.rpartition(", row ")[2] if ", row " in fault.where else "", fault.what)
        for fault in told.value.faults
    ]


def test_all_faults_of_a_table_of_weather_are_told_with_their_rows(tmp_path):
    lines = table_of(more=",precipitation_mm")
    lines[1:] = [f"{line},0" for line in lines[1:]]
    lines[3] = lines[3].replace(",70,", ",170,")
    lines[5] = "2033-06-01T03:00+02:00,1,70,0,0"
    lines[8] = lines[8].replace(",70,", ",,")
    lines[10] = lines[10][:-1] + "x"
    lines[12] = lines[12][:-1]
    del lines[20]
    assert faults_of(tmp_path, lines) == [
        ("4", "relative_humidity_percent is '170'"),
        ("6", "end_utc: '2033-06-01T03:00+02:00' is of another zone"),
        ("9", "relative_humidity_percent is blank"),
        ("11", "precipitation_mm is 'x'"),
        ("13", "precipitation_mm is blank"),
        ("21", "end_utc is 120 min after the row before; most rows are 60 min apart"),
    ]


def test_a_table_of_weather_has_two_days_of_intervals_within_a_night(tmp_path):
    assert faults_of(tmp_path, [line.replace("_percent", "") for line in table_of()])[:2] == [
        ("1", "unknown column 'relative_humidity'"),
        ("1", "the column 'relative_humidity_percent' is missing"),
    ]
    assert "0 whole days" in faults_of(tmp_path, table_of(days=1))[0][1]
    assert "most rows are 1440 min apart" in faults_of(tmp_path, table_of(60, 1440))[0][1]
    assert "there are 0 rows" in faults_of(tmp_path, [HEADER])[0][1]
    first = np.datetime64("2033-05-31T22:00:00")
    odd = [f"{first + np.timedelta64(601 * n, 's')},15,70,0" for n in range(1, 500)]
    odd = [HEADER, *odd]
    assert "no step of a minute" in faults_of(tmp_path, odd)[0][1]


def test_a_rehearsal_takes_a_table_and_says_so(tmp_path, capsys):
    table = written(tmp_path, table_of(days=6))
    arguments = ["rehearse", str(SITE.folder), "--weather", str(table), "--gradients", "none",
                 "--out", str(tmp_path / "out"), "--json"]  # fmt: skip
    assert main(arguments) == 0
    model = json.loads(capsys.readouterr().out)["forward_model"]
    assert model["weather"] == "given" and model["weather_table"] == "weather.csv"
    assert model["gradients"] == "none"
    run = tmp_path / "out" / "orvelin" / "seed_1_estimated" / "run" / "orvelin"
    assert "2033-06-01" in (run / "daily.csv").read_text(encoding="utf-8")
    with pytest.raises(SystemExit):
        main([*arguments, "--years", "1"])
    assert "not allowed with" in capsys.readouterr().err
    assert main([*arguments[:3], str(tmp_path / "none.csv")]) == 2
    assert "cannot be read" in capsys.readouterr().err
