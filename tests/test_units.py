"""Units of columns against udunits, the reference library of the CF conventions."""

import re

import cf_units
import pytest

from sapflux import schema, units

SPELLED = {"%": "percent", "mm water": "kg m-2", "uV": "microvolt", "um": "micrometer"}


@pytest.mark.parametrize("written", units.UNITS)
def test_every_unit_converts_as_udunits_does(written):
    si, _, _ = units.UNITS[written]
    source = cf_units.Unit(SPELLED.get(written, written))
    for value in (0.0, 1.0, 37.5):
        expected = source.convert(value, cf_units.Unit(si))
        assert units.to_si(value, written) == pytest.approx(expected, rel=1e-12, abs=1e-12)


@pytest.mark.parametrize("name", schema.VARIABLES)
def test_units_of_the_schema_are_udunits(name):
    cf_units.Unit(schema.VARIABLES[name].units)


def test_trade_units_by_hand():
    # udunits 2: 1 cm3 cm-2 h-1 is 1 cm h-1 = 2.7777778e-6 m s-1; 1e-5 m s-1 is 3.6 cm h-1
    assert units.to_si(1.0, "cm h-1") == pytest.approx(2.7777778e-6, rel=1e-8)
    assert units.to_si(3.6, "cm h-1") == pytest.approx(1e-5, rel=1e-12)


@pytest.mark.parametrize(
    ("key", "written", "si"),
    [
        ("width_mm", "mm", "m"),
        ("diameter_cm", "cm", "m"),
        ("diffusivity_cm2_s", "cm2 s-1", "m2 s-1"),
        ("factor_g_m2_s", "g m-2 s-1", "kg m-2 s-1"),
        ("dry_density_kg_m3", "kg m-3", "kg m-3"),
        ("window_from_s", "s", "s"),
    ],
)
def test_keys_carry_the_factor_that_udunits_gives_their_unit(key, written, si):
    expected = cf_units.Unit(written).convert(1.0, cf_units.Unit(si))
    assert units.factor_of_key(key) == pytest.approx(expected, rel=1e-12)


def test_a_temperature_difference_takes_no_offset():
    assert units.to_si(10.0, "degF", difference=True) == pytest.approx(50 / 9)
    assert units.to_si(10.0, "degC", difference=True) == 10.0


def test_every_quantity_can_be_written_in_some_unit_and_has_a_range():
    for name, row in schema.QUANTITIES.items():
        assert units.accepted(name), name
        assert row.low < row.high, name


def test_units_accepted_for_a_quantity_are_units_of_its_kind():
    for name, row in schema.QUANTITIES.items():
        for unit in units.accepted(name):
            si, _, _ = units.UNITS[units.meant(unit, name)]
            assert si == row.units, (name, unit)


def test_wind_by_hand():
    # 36 km in an hour are 10 m in a second
    assert units.to_si(36.0, "km h-1") == pytest.approx(10.0, rel=1e-15)


def test_units_that_only_mislead_are_not_offered():
    assert set(units.accepted("wind_speed")) == {"m s-1", "km h-1"}
    assert "m3 m-3" not in units.accepted("relative_humidity")
    assert "m3 m-3" in units.accepted("soil_moisture")
    assert "mm" in units.accepted("precipitation") and "mm" in units.accepted("throughfall")


def test_names_of_flags_and_variables_are_words():
    for name in schema.VARIABLES:
        assert re.fullmatch(r"[a-z][a-z_0-9]*", name)
