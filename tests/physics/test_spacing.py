"""Spacings of the heat ratio method: stated numbers, and what zero flow can and cannot tell."""

import numpy as np
import pytest

from sapflux.physics import heat_pulse, spacing
from sapflux.physics.heat_pulse import CM_PER_HOUR

K, MM = 2.5e-7, 1e-3
PULSE_S, WINDOW_S = 8.0, (60.0, 100.0)
MOMENT = spacing.reading_time(*WINDOW_S, PULSE_S)


def shown(velocity_cm_h, down_mm, up_mm, pulse_s=PULSE_S):
    """Log of the mean rises in the window (Marshall 1958, a line source), by quadrature.

    Of 201 moments of the window by Simpson's rule and 8 of the pulse by Gauss's.
    """
    moments = np.linspace(*WINDOW_S, 201)
    share = np.full(201, 2.0)
    share[1::2], share[[0, -1]] = 4.0, 1.0
    nodes, weights = np.polynomial.legendre.leggauss(8)
    ages = moments[:, None] + 0.5 * pulse_s * (1.0 + nodes)
    down, up = (
        share @ heat_pulse.line_source_rise(x, ages, velocity_cm_h * CM_PER_HOUR, K, 1, 1) @ weights
        for x in (down_mm * MM, -up_mm * MM)
    )
    return np.log(down / up)


def corrected(velocity_cm_h, down_mm, up_mm, given_mm=(6.0, 6.0)):
    """cm h-1 by either assumption on the given spacings, and by the additive offset."""
    zero = shown(0.0, down_mm, up_mm)
    log_ratio = shown(velocity_cm_h, down_mm, up_mm)
    one, two = given_mm[0] * MM, given_mm[1] * MM
    place = (zero, K, MOMENT)
    sums = (
        one + spacing.upstream_spacing(one, *place),
        two + spacing.downstream_spacing(two, *place),
        one + two,
    )
    return [float(spacing.velocity(log_ratio, zero, K, both)) / CM_PER_HOUR for both in sums]


@pytest.mark.parametrize(("seconds", "cm_h"), [(60.0, 3.25), (80.0, 2.44), (100.0, 1.95)])
def test_needles_6_and_7_mm_away_at_rest_read_a_velocity_by_the_plain_formula(seconds, cm_h):
    # Stated, by Burgess et al. (2001): (x2**2 - x1**2) / (4 t x) with x 6 mm.
    down, up = (heat_pulse.line_source_rise(x, seconds, 0.0, K, 1, 1) for x in (6e-3, -7e-3))
    log_ratio = np.log(down / up)
    plain = heat_pulse.velocity(log_ratio, K, 6e-3) / CM_PER_HOUR
    assert plain == pytest.approx(cm_h, abs=0.005)
    zero = spacing.zero_log_ratio(6e-3, 7e-3, K, seconds)
    assert spacing.velocity(log_ratio, zero, K, 13e-3) == pytest.approx(0.0, abs=1e-18)
    # Either needle is found from where the other stands.
    assert spacing.upstream_spacing(6e-3, log_ratio, K, seconds) == pytest.approx(7e-3)
    assert spacing.downstream_spacing(7e-3, log_ratio, K, seconds) == pytest.approx(6e-3)


def test_the_gain_of_the_additive_offset_stays_as_stated():
    # Stated: of 6 and 7 mm taken as 6 and 6 the velocity 10 reads 13.3 by the plain formula at 80 s
    # (2.44 + 10 * 13 / 12), and 10 * 13 / 12 with the offset taken off.
    down, up = (
        heat_pulse.line_source_rise(x, 80.0, 10 * CM_PER_HOUR, K, 1, 1) for x in (6e-3, -7e-3)
    )
    log_ratio = np.log(down / up)
    assert heat_pulse.velocity(log_ratio, K, 6e-3) / CM_PER_HOUR == pytest.approx(13.3, abs=0.05)
    zero = spacing.zero_log_ratio(6e-3, 7e-3, K, 80.0)
    additive = spacing.velocity(log_ratio, zero, K, 12e-3)
    assert additive / CM_PER_HOUR == pytest.approx(10 * 13 / 12, rel=1e-12)
    both = 6e-3 + spacing.upstream_spacing(6e-3, zero, K, 80.0)
    assert spacing.velocity(log_ratio, zero, K, both) / CM_PER_HOUR == pytest.approx(10, rel=1e-12)


def test_time_of_a_window_stated():
    # Stated: 78.3 s for 60 to 100 s; a pulse counts from its middle.
    assert spacing.reading_time(60.0, 100.0, 0.0) == pytest.approx(78.3, abs=0.05)
    assert spacing.reading_time(56.0, 96.0, 8.0) == pytest.approx(78.3, abs=0.05)


@pytest.mark.parametrize("pulse_s", [0.0, 8.0])
@pytest.mark.parametrize(("down", "up"), [(6.0, 7.0), (6.0, 6.3), (6.3, 5.7), (5.0, 6.0)])
def test_a_window_is_read_at_its_time_within_the_stated_error(down, up, pulse_s):
    moment = spacing.reading_time(*WINDOW_S, pulse_s)
    told = spacing.zero_log_ratio(down * MM, up * MM, K, moment)
    assert shown(0.0, down, up, pulse_s) == pytest.approx(told, rel=0.015)


@pytest.mark.parametrize("moved_mm", [-0.3, 0.3])
@pytest.mark.parametrize("cm_h", [2.0, 10.0, 25.0, 40.0])
def test_the_assumption_that_holds_returns_the_velocity(moved_mm, cm_h):
    # One needle 0.3 mm out of place: the right assumption is off only by the time of the window;
    # the other by 2 * 0.3 / 12 = 5 %, the mean by half of it, the additive offset by 0.3 / 12.
    for number, needles in enumerate([(6.0, 6.0 + moved_mm), (6.0 + moved_mm, 6.0)]):
        found = corrected(cm_h, *needles)
        assert found[number] == pytest.approx(cm_h, rel=1e-3)
        assert abs(found[1 - number] / cm_h - 1) == pytest.approx(0.05, abs=0.005)
        assert abs((found[0] + found[1]) / 2 / cm_h - 1) == pytest.approx(0.025, abs=0.003)
        assert abs(found[2] / cm_h - 1) == pytest.approx(0.025, abs=0.001)


@pytest.mark.parametrize("moved_mm", [-0.3, 0.3])
@pytest.mark.parametrize("cm_h", [1.0, 10.0, 25.0, 40.0])
def test_a_heater_askew_leaves_less_than_2_percent(moved_mm, cm_h):
    # Both needles are out of place, in opposite directions. Untreated, the probe at rest shows
    # ((6 + d)**2 - (6 - d)**2) / (4 t x) = 1.31 cm h-1 at 82.4 s.
    needles = (6.0 - moved_mm, 6.0 + moved_mm)
    raw = float(heat_pulse.velocity(shown(0.0, *needles), K, 6e-3)) / CM_PER_HOUR
    assert raw == pytest.approx(np.sign(moved_mm) * 1.31, abs=0.03)
    one, two, additive = corrected(cm_h, *needles)
    assert (one + two) / 2 == pytest.approx(cm_h, rel=0.02)
    assert additive == pytest.approx(cm_h, rel=1e-3)


def test_both_needles_too_far_show_nothing_at_rest_and_keep_their_gain():
    # The limit of the method: 0.3 mm of 6 mm is 5 % of the velocity, and no ratio tells.
    assert shown(0.0, 6.3, 6.3) == pytest.approx(0.0, abs=1e-14)
    assert corrected(20.0, 6.3, 6.3) == pytest.approx([21.0] * 3, rel=1e-9)


def test_needles_placed_at_random_are_right_on_the_mean_after_the_step():
    # 400 probes, each needle displaced by up to 0.3 mm: the gain left is as often high as low.
    generator = np.random.default_rng(5)
    places = 6.0 + generator.uniform(-0.3, 0.3, (400, 2))
    found = np.array([corrected(20.0, *needles) for needles in places])
    mean = found[:, :2].mean(axis=1)
    assert mean.mean() == pytest.approx(20.0, rel=0.005)
    assert np.quantile(np.abs(mean / 20.0 - 1.0), 0.5) < 0.02


def test_unequal_spacings_that_are_known_are_no_error():
    # Known needles of 10 and 5 mm show 4 k t ln r = x2**2 - x1**2 at rest, and nothing is left.
    velocity = np.array([-10.0, 0.0, 20.0, 60.0])
    down, up = (
        heat_pulse.line_source_rise(x, 60.0, velocity * CM_PER_HOUR, K, 1, 1)
        for x in (10e-3, -5e-3)
    )
    zero = spacing.zero_log_ratio(10e-3, 5e-3, K, 60.0)
    assert zero == pytest.approx(-75e-6 / (4 * K * 60), rel=1e-12)
    found = spacing.velocity(np.log(down / up), zero, K, 15e-3) / CM_PER_HOUR
    np.testing.assert_allclose(found, velocity, atol=1e-9)


def test_a_ratio_that_no_place_of_a_needle_gives_has_none():
    assert np.isnan(spacing.downstream_spacing(6e-3, 1.0, K, 80.0))  # 36 - 80 mm2
    assert np.isnan(spacing.misplacement(6e-3, 6e-3, 1.0, K, 80.0))
    assert np.isnan(spacing.upstream_spacing(6e-3, -1.0, K, 80.0))
    # 0.1 at 80 s: 8 mm2; 6 - sqrt(28) = 0.708 mm is more than sqrt(44) - 6 = 0.633 mm
    assert spacing.misplacement(6e-3, 6e-3, 0.1, K, 80.0) == pytest.approx(0.708e-3, abs=5e-7)
