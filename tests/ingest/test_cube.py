"""The measured cube: which sample belongs to which probe, in SI, with its first flags."""

from types import SimpleNamespace

import numpy as np
import pytest
from site_by_hand import site_by_hand

from sapflux import quality
from sapflux.errors import DataError
from sapflux.ingest.cube import measured_cubes
from sapflux.ingest.weather import weather_names, weather_series

NAN = np.nan

PROBES = """probe,tree,method,height_m,depth_from_mm,depth_to_mm,installed
            A,t1,heat_dissipation,1.3,0,20,2031-05-01
            B,t2,heat_dissipation,1.3,0,20,2031-05-01"""
TREES = """tree,stand,species
           t1,s,oak
           t2,s,oak"""
CHANNELS = """log,column,kind,id,quantity,unit,from,to
              L,one,probe,A,heated_emf,mV,,2031-06-01 00:20
              L,one,probe,B,heated_emf,mV,2031-06-01 00:20,
              L,two,probe,A,heated_difference,degC,2031-06-01 00:20,"""


def log(values, withheld=None, start="2031-06-01T00:10", interval_s=600):
    length = len(next(iter(values.values())))
    end = np.datetime64(start, "s") + np.arange(length) * np.timedelta64(interval_s, "s")
    arrays = {name: np.array(column, float) for name, column in values.items()}
    return SimpleNamespace(end=end, interval_s=interval_s, values=arrays, withheld=withheld or {})


def cube(values, channels=CHANNELS, withheld=None, **tables):
    site = site_by_hand(probes=PROBES, trees=TREES, channels=channels, **tables)
    (made,) = measured_cubes(site, {"L": log(values, withheld)}).values()
    return made


def flagged(made, name, probe):
    return quality.has(made["quality"].sel(probe=probe).values.ravel(), name).tolist()


VALUES = {"one": [0.4, 0.5, 0.6, 0.7], "two": [1, 2, 9.5, 9.6]}


def test_a_column_belongs_to_each_probe_over_its_own_span():
    made = cube(VALUES)
    emf = made["heated_emf"].sel(point=1).values
    np.testing.assert_allclose(emf[0], [0.4e-3, 0.5e-3, NAN, NAN])
    np.testing.assert_allclose(emf[1], [NAN, NAN, 0.6e-3, 0.7e-3])


def test_a_difference_in_celsius_takes_no_offset():
    np.testing.assert_allclose(
        cube(VALUES)["heated_difference"].sel(probe="A", point=1), [NAN, NAN, 9.5, 9.6]
    )


def test_a_probe_outside_its_channels_has_no_record():
    made = cube(VALUES)
    assert flagged(made, "no_record", "A") == [False] * 4
    assert flagged(made, "no_record", "B") == [True, True, False, False]


def test_a_missing_value_is_no_record():
    made = cube(VALUES | {"one": [0.4, NAN, 0.6, 0.7]})
    assert flagged(made, "no_record", "A") == [False, True, False, False]


def test_a_withheld_cell_is_conflicting():
    made = cube(
        VALUES | {"one": [NAN, 0.5, 0.6, 0.7]},
        withheld={"one": np.array([True, False, False, False])},
    )
    assert flagged(made, "conflicting", "A") == [True, False, False, False]


def test_an_implausible_value_is_flagged_and_kept():
    made = cube(VALUES | {"one": [0.4, 30.0, 0.6, 0.7]})
    assert flagged(made, "out_of_range", "A") == [False, True, False, False]
    assert made["heated_emf"].sel(probe="A", point=1).values[1] == pytest.approx(30e-3)


@pytest.mark.parametrize(
    ("kind", "name"), [("probe", "A"), ("tree", "t1"), ("log", "L"), ("stand", "s")]
)
def test_exclusions_take_out_whole_records_that_they_touch(kind, name):
    rows = f"kind,id,from,to,reason,who\n{kind},{name},2031-06-01 00:15,2031-06-01 00:25,cable,me"
    made = cube(VALUES, exclusions=rows)
    assert flagged(made, "excluded", "A") == [False, True, True, False]
    assert any(flagged(made, "excluded", "B")) == (kind in ("log", "stand"))


def test_heater_voltage_of_a_logger_is_laid_on_its_probes():
    channels = CHANNELS + "\nL,volts,log,L,heater_voltage,V,,"
    made = cube(VALUES | {"volts": [2.0, 2.0, 0.0, 2.0]}, channels)
    assert made["heater_voltage"].sel(probe="A").values.tolist() == [2, 2, 0, 2]


def test_stem_temperature_of_a_tree_is_laid_on_its_probe_alone():
    channels = CHANNELS + "\nL,stem,tree,t1,stem_temperature,degC,,"
    made = cube(VALUES | {"stem": [10, 11, 12, 13]}, channels)
    np.testing.assert_allclose(made["stem_temperature"].sel(probe="A"), 273.15 + np.arange(10, 14))
    assert made["stem_temperature"].sel(probe="B").isnull().all()


def test_stem_diameter_of_a_tree_is_laid_on_its_probe_alone():
    channels = CHANNELS + "\nL,band,tree,t2,stem_diameter_change,um,,"
    made = cube(VALUES | {"band": [0, 5, 10, 20]}, channels)
    np.testing.assert_allclose(
        made["stem_diameter_change"].sel(probe="B"), [0, 5e-6, 1e-5, 2e-5], rtol=0, atol=1e-18
    )
    assert made["stem_diameter_change"].sel(probe="A").isnull().all()


def test_logs_of_unlike_intervals_make_a_cube_each():
    channels = CHANNELS + "\nslow,one,probe,B,heated_emf,mV,,2031-06-01 00:20"
    site = site_by_hand(probes=PROBES, trees=TREES, channels=channels)
    slow = log({"one": [0.4]}, start="2031-06-01T00:00", interval_s=1800)
    made = measured_cubes(site, {"L": log(VALUES), "slow": slow})
    assert list(made) == [("heat_dissipation", 600), ("heat_dissipation", 1800)]


WEATHER = """log,column,kind,id,quantity,unit
             L,air,site,,air_temperature,degC
             L,humid,site,,relative_humidity,%"""


def test_deficit_comes_from_temperature_and_humidity():
    site = site_by_hand(channels=WEATHER)
    logs = {"L": log({"air": [25.0, 25.0], "humid": [50.0, NAN]})}
    assert "vapour_pressure_deficit" in weather_names(site)
    deficit = weather_series(site, logs)["vapour_pressure_deficit"]
    # FAO-56 equation 11 at 25 degC is 3167.78 Pa, half of it at 50 %
    np.testing.assert_allclose(deficit.values, [1583.89, NAN], atol=0.005)


def test_a_logged_deficit_goes_before_a_derived_one():
    channels = WEATHER + "\nL,vpd,site,,vapour_pressure_deficit,kPa"
    site = site_by_hand(channels=channels)
    logs = {"L": log({"air": [25.0], "humid": [50.0], "vpd": [1.2]})}
    assert weather_series(site, logs)["vapour_pressure_deficit"].values == pytest.approx(1200)


def test_without_humidity_there_is_no_deficit():
    site = site_by_hand(channels=WEATHER.rsplit("\n", 1)[0])
    assert weather_names(site) == {"air_temperature"}


def test_records_off_the_grid_of_the_site_are_refused():
    site = site_by_hand(probes=PROBES, trees=TREES, channels=CHANNELS, utc_offset_h=5.5)
    hourly = log({"one": [0.4, 0.5], "two": [9, 9]}, start="2031-06-01T01:00", interval_s=3600)
    with pytest.raises(DataError) as caught:
        measured_cubes(site, {"L": hourly})
    assert str(caught.value) == (
        "configs/ridge/site.toml, [logs.L]: its records end 30 min after whole intervals of the "
        "site's standard time (utc_offset_h 5.5). Let utc_offset_h and the log's clock differ by "
        "whole intervals."
    )


def test_hourly_records_on_a_half_hour_offset_are_laid():
    site = site_by_hand(probes=PROBES, trees=TREES, channels=CHANNELS, utc_offset_h=5.5)
    hourly = log({"one": [0.4, 0.5], "two": [9, 9]}, start="2031-06-01T00:30", interval_s=3600)
    (made,) = measured_cubes(site, {"L": hourly}).values()
    assert made.sizes["time"] == 2
