"""Type T thermocouples against NIST Monograph 175 and an independent implementation of it."""

import numpy as np
import pytest
import thermocouple_its90
from hypothesis import given
from hypothesis import strategies as st

from sapflux.physics import thermocouple

ZERO = 273.15


@pytest.mark.parametrize(
    ("celsius", "millivolt"),
    # NIST Monograph 175, table of type T, three decimals.
    [
        (-40, -1.475), (-20, -0.757), (-10, -0.383), (0, 0.0), (10, 0.391), (20, 0.790),
        (25, 0.992), (30, 1.196), (40, 1.612), (50, 2.036), (100, 4.279), (200, 9.288),
        (400, 20.872),
    ],
)  # fmt: skip
def test_voltage_agrees_with_the_printed_table(celsius, millivolt):
    assert thermocouple.emf(celsius + ZERO) * 1e3 == pytest.approx(millivolt, abs=0.5e-3)


@pytest.mark.parametrize(
    ("celsius", "millivolt"),
    # thermocouple-its90 1.0.2 and thermocouples_reference 0.20, which agree to 3e-15 mV.
    [
        (-10, -0.383050), (10, 0.390996), (20, 0.789612), (25, 0.991977), (30, 1.196446),
        (40, 1.611793), (100, 4.278519),
    ],
)  # fmt: skip
def test_voltage_agrees_to_six_decimals(celsius, millivolt):
    assert thermocouple.emf(celsius + ZERO) * 1e3 == pytest.approx(millivolt, abs=0.5e-6)


@pytest.mark.parametrize(
    ("celsius", "microvolt_per_kelvin"),
    # thermocouple-its90 1.0.2, Thermocouple.seebeck.
    [
        (0, 38.748106), (15, 39.859152), (20, 40.265417), (25, 40.682295), (30, 41.106276),
        (40, 41.964069),
    ],
)  # fmt: skip
def test_sensitivity_agrees_to_six_decimals(celsius, microvolt_per_kelvin):
    found = thermocouple.sensitivity(celsius + ZERO) * 1e6
    assert found == pytest.approx(microvolt_per_kelvin, abs=0.5e-6)


@pytest.mark.parametrize(
    ("celsius", "stated"),
    # Type T, computed from the ITS-90 polynomial and stated to one decimal.
    [(5.0, 39.1), (15.0, 39.9), (25.0, 40.7), (35.0, 41.5)],
)
def test_sensitivity_across_the_temperatures_of_stems(celsius, stated):
    assert thermocouple.sensitivity(celsius + 273.15) * 1e6 == pytest.approx(stated, abs=0.05)


def test_whole_range_agrees_with_the_reference_library():
    # Same polynomials, so only rounding differs: 1e-12 V is 3e-8 K.
    celsius = np.linspace(-200, 400, 1201)
    expected = [thermocouple_its90.TypeT.emf(t) * 1e-3 for t in celsius]
    np.testing.assert_allclose(thermocouple.emf(celsius + ZERO), expected, rtol=0, atol=1e-12)


def test_difference_agrees_with_the_reference_library_both_sides_of_freezing():
    # The library inverts the same reference function; it stops its search at about 1e-9 K.
    for reference in (-15.0, -0.5, 0.0, 3.0, 20.0, 45.0):
        for millivolt in (-1.5, -0.3, 0.0, 0.1, 0.4, 0.9, 3.0):
            hot = thermocouple_its90.TypeT.temperature(millivolt, reference=reference)
            found = thermocouple.difference(millivolt * 1e-3, reference + ZERO)
            assert found == pytest.approx(hot - reference, abs=1e-8)


def test_difference_of_the_worked_example():
    # thermocouple-its90 1.0.2: 0.4 mV with the reference at 20 degC is 29.833701 degC.
    found = thermocouple.difference(0.4e-3, 20.0 + ZERO)
    assert found == pytest.approx(9.833701, abs=0.5e-6)


def test_a_fixed_sensitivity_of_40_uV_reads_a_difference_1_7_percent_high():
    # Ten kelvin from 20 to 30 degC give 0.406835 mV (thermocouple-its90 1.0.2).
    voltage = thermocouple.emf(30 + ZERO) - thermocouple.emf(20 + ZERO)
    assert voltage * 1e3 == pytest.approx(0.406835, abs=1e-6)  # two rounded voltages
    assert voltage / 40e-6 == pytest.approx(10.171, abs=0.5e-3)
    assert thermocouple.difference(voltage, 20 + ZERO) == pytest.approx(10.0, abs=1e-10)


def test_round_trip_returns_the_temperature():
    # Rounding of a kelvin value near 300 is 6e-14.
    kelvin = np.linspace(-20, 60, 4001) + ZERO
    back = thermocouple.temperature(thermocouple.emf(kelvin))
    np.testing.assert_allclose(back, kelvin, rtol=0, atol=1e-12)


@given(
    reference=st.floats(-30, 60),
    difference=st.floats(-20, 60),
)
def test_difference_undoes_the_voltage_of_two_junctions(reference, difference):
    cold = reference + ZERO
    voltage = thermocouple.emf(cold + difference) - thermocouple.emf(cold)
    assert thermocouple.difference(voltage, cold) == pytest.approx(difference, abs=1e-10)


def test_one_reference_and_many_equal_references_give_the_same_difference():
    # The fast path is a polynomial within 1e-11 K of the exact inverse.
    voltage = np.linspace(-2e-3, 5e-3, 7001)
    for reference in (0.0, 0.01, 5.0, 20.0, 50.0):
        one = thermocouple.difference(voltage, reference + ZERO)
        many = thermocouple.difference(voltage, np.full(voltage.shape, reference + ZERO))
        np.testing.assert_allclose(one, many, rtol=0, atol=1e-11)


def test_a_value_does_not_depend_on_its_neighbours():
    voltage = np.linspace(-1e-3, 3e-3, 60_000).reshape(3, 2, -1)
    for reference in (np.float64(293.15), np.full(voltage.shape, 293.15)):
        whole = thermocouple.difference(voltage, reference)
        part = (
            np.broadcast_to(reference, voltage.shape)[..., 7:911] if reference.ndim else reference
        )
        np.testing.assert_array_equal(
            thermocouple.difference(voltage[..., 7:911], part), whole[..., 7:911]
        )


def test_zero_voltage_is_no_difference():
    np.testing.assert_allclose(
        thermocouple.difference(0.0, np.array([-20.0, 0.0, 20.0]) + ZERO), 0.0, atol=1e-12
    )


def test_absent_and_impossible_values_are_nan():
    assert np.isnan(thermocouple.emf(np.array([np.nan, 50.0, 700.0]))).all()
    assert np.isnan(thermocouple.temperature(np.array([np.nan, -6e-3, 25e-3, np.inf]))).all()
    assert np.isnan(thermocouple.difference(np.array([np.nan, np.inf, -np.inf, 0.1]), 293.15)).all()
    assert np.isnan(thermocouple.difference(0.4e-3, np.array([np.nan, 20.0]))).all()


def test_shapes_broadcast():
    found = thermocouple.difference(np.full((2, 1, 5), 4e-4), np.full((2, 1, 1), 293.15))
    assert found.shape == (2, 1, 5)
    assert thermocouple.difference(np.empty((0, 3)), 293.15).shape == (0, 3)
