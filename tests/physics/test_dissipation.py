"""Heat dissipation against handbook numbers of the published calibration."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sapflux.physics import dissipation


@pytest.mark.parametrize(
    ("index", "cm_per_hour", "last_digit"),
    # Granier (1985): 118.99e-6 K**1.231 m3 m-2 s-1, worked in cm h-1 (from memory).
    [
        (0.05, 1.07, 0.01), (0.1, 2.52, 0.01), (0.2, 5.91, 0.01), (0.3, 9.73, 0.01),
        (0.5, 18.25, 0.01), (1.0, 42.84, 0.01), (1.5, 70.56, 0.01), (2.0, 100.5, 0.1),
    ],
)  # fmt: skip
def test_flux_density_of_the_published_calibration(index, cm_per_hour, last_digit):
    # 1 cm h-1 of water at 1000 kg m-3 is 10/3600 kg m-2 s-1.
    found = dissipation.flux_density(index) * 3600 / 10
    assert found == pytest.approx(cm_per_hour, abs=last_digit / 2)


def test_worked_example():
    # Granier (1985), from memory, by hand: (10 - 8) / 8 = 0.25; 118.99 * 0.25**1.231 = 21.6 in
    # g m-2 s-1.
    index = dissipation.flow_index(10.0, 8.0)
    assert index == 0.25
    assert dissipation.flux_density(index) * 1e3 == pytest.approx(21.6, abs=0.05)


def test_inverse_agrees_with_the_published_inverse():
    # Granier (1985), inverse as printed: K = 0.0206 (Js / 1e-6)**0.8124 (from memory). The
    # printed factor carries three digits, so 0.25 %; the exponent adds 5e-5 * ln(Js) = 0.02 %.
    micro = np.array([10.0, 50.0, 118.99])
    found = dissipation.index_of(micro * 1e-3)
    np.testing.assert_allclose(found, 0.0206 * micro**0.8124, rtol=0.0027)


@pytest.mark.parametrize(
    ("index", "factor"),
    # Derivative of the calibration of Granier (1985), exponent from memory: 1.231 (1 + K) / K,
    # calculated, one decimal.
    [(0.05, 25.9), (0.1, 13.5), (0.2, 7.4), (0.3, 5.3), (0.5, 3.7), (1.0, 2.5)],
)
def test_amplification_of_baseline_errors(index, factor):
    assert dissipation.amplification(index) == pytest.approx(factor, abs=0.05)


def test_amplification_is_the_slope_of_the_calibration():
    index = np.array([0.05, 0.2, 1.0])
    measured, step = 10.0 / (1.0 + index), 1e-6
    up = dissipation.flux_density(dissipation.flow_index(10.0 * (1 + step), measured))
    down = dissipation.flux_density(dissipation.flow_index(10.0 * (1 - step), measured))
    slope = np.log(up / down) / (2 * step)
    np.testing.assert_allclose(dissipation.amplification(index), slope, rtol=1e-6)


@pytest.mark.parametrize(
    ("night", "day", "share"),
    # Flow at night taken for none, by the exponent of Granier (1985), from memory: by hand from
    # the index. For the first: the reading at night is 10/1.05 = 9.524 and by day 10/1.3 = 7.692;
    # 1.83/7.69 = 0.238; (0.238/0.3)**1.231 = 0.75.
    [(0.05, 0.3, 0.75), (0.02, 0.3, 0.90), (0.05, 0.15, 0.57), (0.02, 0.15, 0.82)],
)
def test_night_flow_taken_for_zero_flow_lowers_the_day(night, day, share):
    seen = dissipation.flux_density(dissipation.flow_index(10.0 / (1 + night), 10.0 / (1 + day)))
    assert seen / dissipation.flux_density(day) == pytest.approx(share, abs=0.005)


@pytest.mark.parametrize(
    ("fraction", "share"),
    # A needle partly in dead wood, read as if wholly in sapwood (Clearwater et al. 1999, worked
    # at a flow index of 0.3).
    [(0.90, 0.85), (0.75, 0.64), (0.50, 0.36), (0.25, 0.14)],
)
def test_contact_correction_restores_what_dead_wood_hides(fraction, share):
    in_sapwood = 10.0 / 1.3  # that leaves an index of 0.3
    measured = fraction * in_sapwood + (1 - fraction) * 10.0
    seen = dissipation.flux_density(dissipation.flow_index(10.0, measured))
    true = dissipation.flux_density(0.3)
    assert seen / true == pytest.approx(share, abs=0.005)
    corrected = dissipation.sapwood_contact(measured, 10.0, fraction)
    assert corrected == pytest.approx(in_sapwood, rel=1e-12)


def test_contact_correction_is_undefined_where_dead_wood_explains_everything():
    found = dissipation.sapwood_contact(np.array([5.0, 4.0, 5.1]), 10.0, 0.5)
    np.testing.assert_allclose(found, [np.nan, np.nan, 0.2], rtol=1e-9)
    assert np.isnan(dissipation.sapwood_contact(9.0, 10.0, np.array([0.0, 1.2, np.nan]))).all()


def test_contact_correction_of_a_whole_needle_changes_nothing():
    assert dissipation.sapwood_contact(8.0, 10.0, 1.0) == 8.0


@given(index=st.floats(-0.9, 5.0), zero_flow=st.floats(1.0, 30.0))
def test_the_index_hangs_on_the_ratio_of_the_differences_alone(index, zero_flow):
    measured = zero_flow / (1.0 + index)
    assert dissipation.flow_index(zero_flow, measured) == pytest.approx(index, abs=1e-12)


@given(index=st.floats(-0.9, 5.0))
def test_the_calibration_has_an_inverse(index):
    back = dissipation.index_of(dissipation.flux_density(index))
    assert back == pytest.approx(index, abs=1e-12)


def test_flux_is_odd_and_zero_flow_is_zero():
    index = np.array([-0.4, -0.01, 0.0, 0.01, 0.4])
    flux = dissipation.flux_density(index)
    np.testing.assert_array_equal(flux, -flux[::-1])
    assert flux[2] == 0.0
    assert dissipation.index_of(0.0) == 0.0


def test_flux_is_linear_in_the_factor():
    index = np.linspace(-0.2, 2.0, 12)
    np.testing.assert_allclose(
        dissipation.flux_density(index, 0.3, 1.1), 3 * dissipation.flux_density(index, 0.1, 1.1)
    )


def test_readings_no_heated_needle_gives_are_nan():
    assert np.isnan(dissipation.flow_index(10.0, np.array([0.0, -1.0, np.nan]))).all()
    assert np.isnan(dissipation.amplification(0.0))
    assert np.isnan(dissipation.flux_density(np.nan))
