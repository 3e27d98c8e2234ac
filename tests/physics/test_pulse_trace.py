"""Time of maximum and decay of traces: back from the line source to the diffusivity put in."""

import numpy as np
import pytest

from sapflux.physics import pulse_maximum, pulse_trace

CM_H = 0.01 / 3600.0
VELOCITIES = np.array([-40.0, -10.0, 0.0, 5.0, 20.0, 40.0])


def rises(cm_h, time, diffusivity, pulse, down=6e-3, up=6e-3):
    """Marshall's (1958) line source, averaged over the pulse."""
    velocity = np.atleast_1d(cm_h)[:, None] * CM_H
    rest = (diffusivity, pulse, 1000.0, 2.69e6)
    return tuple(
        pulse_maximum.finite_pulse_rise(side, time, velocity, *rest) for side in (down, -up)
    )


@pytest.mark.parametrize("pulse", [2.0, 8.0])
@pytest.mark.parametrize("diffusivity", [1.5e-7, 2.5e-7, 3.5e-7])
def test_time_of_maximum_is_that_of_the_line_source(diffusivity, pulse):
    # Kluitenberg & Ham (2004), from memory; the maximum of either side is at the same time.
    time = np.arange(pulse + 1.0, 121.0)
    expected = pulse_maximum.time_of_maximum(VELOCITIES * CM_H, pulse, diffusivity, 6e-3)
    for rise in rises(VELOCITIES, time, diffusivity, pulse):
        found = pulse_trace.time_of_maximum(rise, time)
        np.testing.assert_allclose(found, expected, atol=0.05)  # the accuracy that is stated


def test_time_of_maximum_of_stated_equations():
    # 40.29 s without flow and 37.01 s at 20 cm h-1, 8 s of heating, 6 mm, 2.5e-7 m2 s-1: finite
    # pulse of Kluitenberg & Ham (2004), calculated; the accuracy that is stated.
    time = np.arange(9.0, 121.0)
    found = pulse_trace.time_of_maximum(rises([0.0, 20.0], time, 2.5e-7, 8.0)[0], time)
    assert found == pytest.approx([40.29, 37.01], abs=0.05)
    # A noise of 0.5 % of the rise and one row in twenty missing leave it within the noise.
    generator = np.random.default_rng(3)
    rise = rises(np.zeros(400), time, 2.5e-7, 8.0)[0]
    rise = rise + generator.normal(0.0, 0.005, rise.shape)
    rise[generator.random(rise.shape) < 0.05] = np.nan
    found = pulse_trace.time_of_maximum(rise, time)
    assert np.isfinite(found).all()
    assert found.mean() == pytest.approx(40.29, abs=0.05)
    assert found.std() < 0.35


def test_a_top_outside_the_rows_has_no_time():
    time = np.arange(9.0, 121.0)
    rise = rises([0.0], time, 2.5e-7, 8.0)[0]
    assert np.isnan(pulse_trace.time_of_maximum(rise[:, 35:], time[35:]))  # from 44 s
    assert np.isnan(pulse_trace.time_of_maximum(rise[:, :25], time[:25]))  # to 33 s
    assert np.isnan(pulse_trace.time_of_maximum(np.full_like(rise, np.nan), time))
    assert np.isnan(pulse_trace.time_of_maximum(rise[:, :1], time[:1]))


@pytest.mark.parametrize("pulse", [0.0, 2.0, 8.0, 10.0])
@pytest.mark.parametrize("diffusivity", [1.5e-7, 2.5e-7, 3.5e-7])
def test_decay_gives_the_diffusivity_back_at_any_flow(diffusivity, pulse):
    time = np.arange(pulse + 1.0, 121.0)
    found = pulse_trace.decay_time(*rises(VELOCITIES, time, diffusivity, pulse), time, pulse)
    np.testing.assert_allclose(found, 6e-3**2 / (4.0 * diffusivity), rtol=1e-6)
    back = pulse_trace.diffusivity_of_decay(found, 6e-3, 6e-3)
    np.testing.assert_allclose(back, diffusivity, rtol=1e-6)


def test_decay_of_unlike_spacings_is_their_mean():
    # By hand: the mean of x**2 / 4k of 6 and 7 mm is (36 + 49) / 2 / (4 * 0.25) = 42.5 s; the
    # correction for the pulse takes the mean for both: within the 1e-3 that is stated.
    time = np.arange(9.0, 121.0)
    found = pulse_trace.decay_time(*rises([0.0], time, 2.5e-7, 8.0, up=7e-3), time, 8.0)
    assert found == pytest.approx(42.5, rel=1e-3)
    assert pulse_trace.diffusivity_of_decay(found, 6e-3, 7e-3) == pytest.approx(2.5e-7, rel=1e-3)


def test_an_instantaneous_formula_on_a_long_pulse_would_be_low():
    # Ignoring 8 s of heating makes x**2 / (4 tm) 11 % low: 0.00223 for 0.0025 cm2 s-1,
    # Kluitenberg & Ham (2004), calculated. The finite form does not.
    time = np.arange(9.0, 121.0)
    top = pulse_trace.time_of_maximum(rises([0.0], time, 2.5e-7, 8.0)[0], time).item()
    assert 6e-3**2 / (4.0 * top) * 1e4 == pytest.approx(0.00223, abs=0.5e-5)
    finite = pulse_maximum.diffusivity_of_time_of_maximum(top, 8.0, 6e-3)
    assert finite * 1e4 == pytest.approx(0.0025, abs=0.5e-5)


def test_decay_bears_noise_and_missing_rows():
    time = np.arange(9.0, 121.0)
    generator = np.random.default_rng(5)
    both = [
        rise + generator.normal(0.0, 0.005, rise.shape)
        for rise in rises(np.full(400, 10.0), time, 2.5e-7, 8.0)
    ]
    both[0][generator.random(both[0].shape) < 0.1] = np.nan
    found = pulse_trace.diffusivity_of_decay(pulse_trace.decay_time(*both, time, 8.0), 6e-3, 6e-3)
    assert found.mean() * 1e4 == pytest.approx(0.0025, rel=2e-3)
    assert found.std() / found.mean() < 0.004


def test_too_short_a_decay_tells_nothing():
    time = np.arange(9.0, 121.0)
    down, up = rises([0.0, 0.0], time, 2.5e-7, 8.0)
    down[1, 20:] = np.nan
    found = pulse_trace.decay_time(down, up, time, 8.0)
    assert np.isfinite(found[0]) and np.isnan(found[1])
    assert np.isnan(pulse_trace.decay_time(-down, up, time, 8.0)).all()
