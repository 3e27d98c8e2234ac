"""The ratio of the rises and the time of the maximum, made one: on the rises of an exact strip."""

import numpy as np
import pytest

from sapflux.physics import handover, heat_pulse, strip_maximum, wound_strip
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.physics.wound_strip import Strip

K, NOISE_K, TIME_NOISE_S = 2.5e-7, 0.01, 1.0
RAMP = np.arange(0.0, 85.01, 0.1)


def rises(velocity_cm_h, strip, energy=900.0, heat_capacity=2.69e6):
    """Mean rises of the window downstream and upstream [K]."""
    nodes, weights = np.polynomial.legendre.leggauss(12)
    middle, half = (strip.window_to + strip.window_from) / 2, strip.window_to - strip.window_from
    age = (middle + half / 2 * nodes)[:, None] + strip.pulse / 2 * (1 + nodes)
    theta, share = wound_strip.shares(age, strip)
    scale = energy / (4 * np.pi * K * heat_capacity) / 4
    return [
        scale
        * wound_strip.rise_shape(x, velocity_cm_h * CM_PER_HOUR, age, theta, share, K)
        @ weights
        @ weights
        for x in (6e-3, -6e-3)
    ]


def on_a_ramp(width=2e-3, stray_K=0.0, late_s=0.0, noise_K=NOISE_K):
    """cm h-1 by the ratio, the time, and both, and the share of the time, along `RAMP`.

    stray_K is added to the upstream rise, late_s to the time: errors that part the estimates.
    """
    strip = Strip(width, pulse=8.0)
    down, up = rises(RAMP, strip)
    up = up + stray_K
    apparent = heat_pulse.velocity(np.log(down / up), K, 6e-3)
    ratio, _ = wound_strip.sap_velocity(apparent, width, K, strip)
    time = strip_maximum.time_of_maximum(RAMP * CM_PER_HOUR, strip) + late_s
    deviation = handover.velocity_deviation(down, up, noise_K, K, 12e-3)
    both, share = handover.handed_over(ratio, deviation, time, TIME_NOISE_S, width, K, strip)
    alone = strip_maximum.velocity_of_time_of_maximum(time, width, K, strip)
    return *(one / CM_PER_HOUR for one in (ratio, alone, both)), share


def test_error_of_a_record_by_hand():
    # (k / x) sqrt((s / v1)**2 + (s / v2)**2): 15 cm h-1 * sqrt(0.02**2 + 0.1**2)
    found = handover.velocity_deviation(0.5, 0.1, 0.01, K, 12e-3) / CM_PER_HOUR
    assert found == pytest.approx(15 * np.hypot(0.02, 0.1), rel=1e-12)


def test_error_of_a_record_against_drawn_noise():
    generator = np.random.default_rng(2)
    down, up = (mean + generator.normal(0, 0.01, 200_000) for mean in (1.2, 0.2))
    drawn = np.std(heat_pulse.velocity(np.log(down / up), K, 6e-3))
    told = handover.velocity_deviation(1.2, 0.2, 0.01, K, 12e-3)
    assert told == pytest.approx(drawn, rel=0.01)


@pytest.mark.parametrize("width", [0.0, 1.7e-3, 2.0e-3, 2.4e-3])
def test_estimates_that_agree_give_the_velocity(width):
    ratio, _, both, share = on_a_ramp(width)
    told = np.isfinite(both)
    np.testing.assert_allclose(both[told], RAMP[told], rtol=2e-3, atol=0.01)
    # Told wherever the ratio is, above the velocity of the latest maximum, about which the time
    # hardly changes.
    slowest = strip_maximum.maximum_curve(Strip(width, pulse=8.0)).slowest / CM_PER_HOUR
    clear = np.isfinite(ratio) & (np.abs(RAMP - slowest) > 2.0)
    assert np.array_equal(told[clear], RAMP[clear] > slowest)
    assert (share[~told] == 0.0).all()


@pytest.mark.parametrize("stray_K", [0.0, 0.02, -0.01])
@pytest.mark.parametrize("late_s", [0.5, -0.5, -1.0])
def test_estimates_that_disagree_are_handed_over_without_a_jump(stray_K, late_s):
    # Steps of 0.1 cm h-1: a jump would stand out among the steps beside it.
    ratio, alone, both, share = on_a_ramp(stray_K=stray_K, late_s=late_s)
    final = np.where(np.isfinite(both), both, ratio)
    known = np.isfinite(final)
    steps = np.diff(final[known])
    assert np.abs(np.diff(steps)).max() < 2e-3
    # Switching from the one to the other would jump by hundreds of these.
    switch = share.argmax()
    assert share[switch] > 0.3
    assert np.abs(alone - ratio)[switch] > 0.5
    assert (np.diff(share[known][RAMP[known] < 60]) > -1e-9).all()


def test_slow_flow_of_a_wound_is_left_to_the_ratio():
    # A maximum as late as at 10 cm h-1 also comes at 29: the time alone would say so.
    _, alone, both, share = on_a_ramp()
    slow = RAMP < 18.4  # the latest is at 19, known in steps of 0.5
    assert alone[RAMP.searchsorted(10.0)] == pytest.approx(29.2, abs=0.1)
    assert np.isnan(both[slow]).all() and (share[slow] == 0.0).all()
    assert share[RAMP.searchsorted(25.0)] < 0.01
    assert share[-1] > 0.6


def test_a_ratio_at_its_ceiling_does_not_hold_the_flow_down():
    # 0.02 K left over from the pulse before bound the ratio: it tells 68 of 85 cm h-1.
    ratio, _, both, share = on_a_ramp(stray_K=0.02, noise_K=0.02)
    assert ratio[-1] < 69
    assert (both[-1] - ratio[-1]) / (85 - ratio[-1]) > 0.7
    assert share[-1] > 0.7


def test_without_a_time_or_a_ratio_there_is_nothing_to_hand_over():
    strip = Strip(2e-3, pulse=8.0)
    nan = np.nan
    first = np.array([40.0, nan, 40.0, 40.0, -40.0]) * CM_PER_HOUR
    deviation = np.array([1.0, 1.0, nan, 1.0, 1.0]) * CM_PER_HOUR
    time = np.array([nan, 40.0, 40.0, 12.0, 40.0])  # none, -, -, faster than 150 cm h-1, -
    both, share = handover.handed_over(first, deviation, time, 1.0, 2e-3, K, strip)
    assert np.isnan(both).all()
    assert (share == 0.0).all()
