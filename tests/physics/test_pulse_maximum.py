"""Times of maximum after a pulse of finite length: the stated numbers, and the rise itself."""

import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from sapflux.physics import heat_pulse, pulse_maximum
from sapflux.physics.heat_pulse import CM_PER_HOUR

DIFFUSIVITY, DISTANCE = 2.5e-7, 6e-3


def latest_maximum(velocity, pulse, diffusivity=DIFFUSIVITY, distance=DISTANCE):
    """Time of the largest rise by search on the rise."""

    def cold(time):
        return -float(
            pulse_maximum.finite_pulse_rise(
                distance, time, velocity, diffusivity, pulse, 1000.0, 2.69e6
            )
        )

    found = minimize_scalar(cold, bounds=(pulse + 2.0, 90.0), options={"xatol": 1e-7})
    return found.x


def test_stated_diffusivity_of_a_pulse_of_8_s_without_flow():
    # Stated: 8 s, V 0 -> 40.29 s -> 0.00250 cm2 s-1; without the length of the pulse 0.00223.
    found = pulse_maximum.diffusivity_of_time_of_maximum([40.29, 36.0], [8.0, 0.0], DISTANCE)
    np.testing.assert_allclose(found * 1e4, 0.00250, atol=5e-6)
    ignored = pulse_maximum.diffusivity_of_time_of_maximum(40.29, 0.0, DISTANCE)
    assert ignored * 1e4 == pytest.approx(0.00223, abs=5e-6)


def test_stated_time_of_maximum_of_a_pulse_of_8_s():
    # Stated: 8 s, V 20 cm h-1 -> 37.01 s -> 20.000; V 0 -> 40.29 s.
    velocity = np.array([0.0, 20.0]) * CM_PER_HOUR
    found = pulse_maximum.time_of_maximum(velocity, 8.0, DIFFUSIVITY, DISTANCE)
    np.testing.assert_allclose(found, [40.29, 37.01], atol=5e-3)
    back = pulse_maximum.time_of_maximum_velocity(found, 8.0, DIFFUSIVITY, DISTANCE)
    np.testing.assert_allclose(back / CM_PER_HOUR, [0.0, 20.0], atol=1e-6)


def test_stated_times_of_maximum_of_a_pulse_of_no_length():
    # Stated, by the equation of Cohen et al. (1981): V 10/20/40/60 cm h-1.
    velocity = np.array([10.0, 20.0, 40.0, 60.0]) * CM_PER_HOUR
    found = pulse_maximum.time_of_maximum(velocity, 0.0, DIFFUSIVITY, DISTANCE)
    np.testing.assert_allclose(found, [35.1, 32.7, 27.0, 22.2], atol=0.05)
    back = pulse_maximum.time_of_maximum_velocity(found, 0.0, DIFFUSIVITY, DISTANCE)
    np.testing.assert_allclose(back, velocity, rtol=1e-12)


@pytest.mark.parametrize("pulse", [0.5, 2.0, 8.0, 15.0])
@pytest.mark.parametrize("cm_h", [0.0, 5.0, 30.0, 90.0])
def test_the_rise_is_largest_where_the_equation_says(pulse, cm_h):
    velocity = cm_h * CM_PER_HOUR
    told = pulse_maximum.time_of_maximum(velocity, pulse, DIFFUSIVITY, DISTANCE)
    # A search on a flat top finds it to the root of the precision.
    assert told == pytest.approx(latest_maximum(velocity, pulse), abs=2e-4)
    if not cm_h:
        found = pulse_maximum.diffusivity_of_time_of_maximum(told, pulse, DISTANCE)
        assert found == pytest.approx(DIFFUSIVITY, rel=1e-9)


def test_a_short_pulse_is_a_pulse_of_no_length_half_its_length_later():
    velocity = np.array([0.0, 20.0, 60.0]) * CM_PER_HOUR
    at_once = pulse_maximum.time_of_maximum(velocity, 0.0, DIFFUSIVITY, DISTANCE)
    short = pulse_maximum.time_of_maximum(velocity, 1e-3, DIFFUSIVITY, DISTANCE)
    np.testing.assert_allclose(short, at_once + 5e-4, atol=1e-7)
    rise = [DISTANCE, 80.0, velocity, DIFFUSIVITY]
    np.testing.assert_allclose(
        pulse_maximum.finite_pulse_rise(*rise, 0.0, 1000.0, 2.69e6),
        heat_pulse.line_source_rise(*rise, 1000.0, 2.69e6),
        rtol=1e-13,
    )


def test_pulses_one_after_the_other_add_up():
    # Own derivation: a pulse of 8 s is the one of its first 3 s and the one of its last 5 s.
    def rise(time, pulse, energy):
        return pulse_maximum.finite_pulse_rise(
            DISTANCE, time, 1e-4, DIFFUSIVITY, pulse, energy, 2.69e6
        )

    times = np.array([-1.0, 0.0, 4.0, 7.0, 20.0, 80.0])
    whole = rise(times, 8.0, 800.0)
    assert whole[0] == whole[1] == 0.0
    np.testing.assert_allclose(
        whole, rise(times, 3.0, 300.0) + rise(times - 3.0, 5.0, 500.0), rtol=1e-9, atol=1e-12
    )


def test_times_that_no_speed_makes_have_none():
    times = [8.0, 5.0, 40.31, np.nan]  # within the pulse, and later than without flow
    found = pulse_maximum.time_of_maximum_velocity(times, 8.0, DIFFUSIVITY, DISTANCE)
    assert np.isnan(found).all()
    assert np.isnan(pulse_maximum.diffusivity_of_time_of_maximum([8.0, 5.0], 8.0, DISTANCE)).all()


def test_either_direction_has_the_same_time_and_arrays_broadcast():
    velocity = np.array([-30.0, 30.0, np.nan]) * CM_PER_HOUR
    found = pulse_maximum.time_of_maximum(velocity, np.array([[0.0], [8.0]]), DIFFUSIVITY, DISTANCE)
    assert found.shape == (2, 3)
    assert (found[:, 0] == found[:, 1]).all()
    assert np.isnan(found[:, 2]).all()
