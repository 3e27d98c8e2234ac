"""Times of maximum in a wound: sound wood, an independent grid in two dimensions, the way back."""

import numpy as np
import pytest
from scipy.interpolate import CubicSpline

from sapflux.physics import pulse_maximum, strip_maximum
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.physics.wound_strip import Strip
from sapflux.virtual import strip as grid

DIFFUSIVITY, SPACING = 2.5e-7, 6e-3


def gridded(cm_h, width_mm, pulse):
    """Time of the largest rise downstream on a grid of cells of 0.1 mm [s]."""
    seconds, down, _ = grid.histories(
        cm_h * CM_PER_HOUR, width_mm * 1e-3, DIFFUSIVITY, grid.Reading(), 65.0, 1e-4
    )
    rise = CubicSpline(seconds, down)
    late = seconds[seconds > pulse + 5.0]
    if pulse:  # the mean over the pulse stops growing where its two ends are equally warm
        found = CubicSpline(late, rise(late) - rise(late - pulse)).roots(extrapolate=False)
    else:
        found = CubicSpline(late, rise(late, 1)).roots(extrapolate=False)
    return found[-1]


@pytest.mark.parametrize("pulse", [0.0, 1e-3, 0.5, 8.0])
def test_sound_wood_by_the_equation_of_a_pulse(pulse):
    # Kluitenberg and Ham (2004), Cohen et al. (1981); from memory, by `pulse_maximum`.
    velocity = np.array([-40.0, 0.0, 2.0, 10.0, 20.0, 40.0, 60.0, 100.0, 140.0]) * CM_PER_HOUR
    found = strip_maximum.time_of_maximum(velocity, Strip(0.0, pulse=pulse))
    told = pulse_maximum.time_of_maximum(velocity, pulse, DIFFUSIVITY, SPACING)
    np.testing.assert_allclose(found, told, atol=2e-4)
    back = strip_maximum.velocity_of_time_of_maximum(
        told[3:], 0.0, DIFFUSIVITY, Strip(0.0, pulse=pulse)
    )
    np.testing.assert_allclose(back / CM_PER_HOUR, velocity[3:] / CM_PER_HOUR, atol=0.02)


def test_stated_time_of_maximum_without_a_wound():
    # Stated: a pulse of 8 s, V 20 cm h-1 -> 37.01 s.
    reading = Strip(0.0, pulse=8.0)
    found = strip_maximum.time_of_maximum(20.0 * CM_PER_HOUR, reading)
    assert found == pytest.approx(37.01, abs=5e-3)
    back = strip_maximum.velocity_of_time_of_maximum(37.0143, 0.0, DIFFUSIVITY, reading)
    assert back / CM_PER_HOUR == pytest.approx(20.0, abs=0.02)


@pytest.mark.parametrize(
    ("width_mm", "cm_h", "pulse"),
    [(2.0, 0.0, 0.0), (2.0, 20.0, 0.0), (2.0, 60.0, 8.0), (3.0, 40.0, 8.0)],
)
def test_the_grid_agrees(width_mm, cm_h, pulse):
    """To 2e-3, the accuracy asked of the log ratio."""
    found = strip_maximum.time_of_maximum(cm_h * CM_PER_HOUR, Strip(width_mm * 1e-3, pulse=pulse))
    assert found == pytest.approx(gridded(cm_h, width_mm, pulse), rel=2e-3)


def test_a_wound_delays_the_maximum_of_slow_flow():
    # Own derivation, met by the grid too: later than without flow up to 42 cm h-1 at 2.0 mm.
    times = strip_maximum.time_of_maximum(np.array([0.0, 20.0, 40.0, 45.0]) * CM_PER_HOUR,
                                          Strip(2e-3))  # fmt: skip
    assert times[0] == pytest.approx(36.0, abs=1e-3)
    assert times[1] > times[2] > times[0] > times[3]
    assert gridded(20.0, 2.0, 0.0) > gridded(40.0, 2.0, 0.0) > gridded(0.0, 2.0, 0.0)


def test_the_velocity_comes_back():
    generator = np.random.default_rng(3)
    reading = Strip(0.0, pulse=7.0)
    for _ in range(4):
        width, k = generator.uniform(1e-3, 3e-3), generator.uniform(1.5e-7, 4e-7)
        strip = Strip(width, k, pulse=7.0)
        slowest = strip_maximum.maximum_curve(strip).slowest
        velocity = slowest + np.array([5.0, 10.0, 15.0, 30.0, 50.0]) * CM_PER_HOUR
        times = strip_maximum.time_of_maximum(velocity, strip)
        assert (np.diff(times) < 0.0).all()
        found = strip_maximum.velocity_of_time_of_maximum(times, width, k, reading)
        off = np.abs(found - velocity) / CM_PER_HOUR
        # The documented errors of the grid of curves.
        assert off.max() < 1.0
        assert off[2:].max() < 0.05


def test_times_that_no_velocity_makes_have_none():
    reading = Strip(0.0, pulse=8.0)
    times = np.array([5.0, 80.0, np.nan, 30.0, 30.0, 30.0, -1.0, 1e9])
    width = np.array([2e-3, 2e-3, 2e-3, np.nan, 2e-3, 2e-3, 2e-3, 2e-3])
    k = np.array([2.5e-7, 2.5e-7, 2.5e-7, 2.5e-7, np.nan, 2.5e-7, 2.5e-7, 2.5e-7])
    found = strip_maximum.velocity_of_time_of_maximum(times, width, k, reading)
    assert np.isnan(found).tolist() == [True] * 5 + [False, True, True]
    assert np.isnan(strip_maximum.velocity_of_time_of_maximum(times, np.nan, k, reading)).all()
