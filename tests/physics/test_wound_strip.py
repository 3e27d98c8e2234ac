"""The wound as a strip without flow: stated values, an independent grid in two dimensions, limits.

Values marked (series) are stated for the strip of this derivation, evaluated apart from this
program and checked there against a Laplace/Fourier solution. The grid is `sapflux.virtual.strip`,
finite volumes that share no formula with the response under test.
"""

from dataclasses import replace

import numpy as np
import pytest
from scipy.interpolate import CubicSpline
from scipy.special import erfc

from sapflux.physics import time_share, wound_strip
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.physics.wound_strip import Strip
from sapflux.virtual import strip as grid

DIFFUSIVITY, SPACING = 2.5e-7, 6e-3
LOGS = {"estimator": "mean_of_logs"}


def shown(cm_h, strip):
    """Apparent velocities [cm h-1] at true ones [cm h-1]."""
    return wound_strip.apparent_velocity(np.asarray(cm_h) * CM_PER_HOUR, strip) / CM_PER_HOUR


def slowed(strip):
    """True over apparent velocity without flow."""
    return float(wound_strip.curve(strip).factor(0.0))


def gridded(cm_h, width, spacing=(SPACING, SPACING)):
    """Mean log ratio of the rises over 60 to 100 s on the grid."""
    reading = grid.Reading(*spacing)
    seconds, down, up = grid.histories(
        cm_h * CM_PER_HOUR, width * 1e-3, DIFFUSIVITY, reading, 100.0
    )
    late = seconds >= 50.0
    return CubicSpline(seconds[late], np.log(down[late] / up[late])).integrate(60.0, 100.0) / 40.0


# The share of time


def test_moments_by_the_forward_recurrence():
    # i^n erfc from its recurrence 2n i^n = i^(n-2) - 2x i^(n-1) (Abramowitz and Stegun 7.2.5).
    def repeated(order, x):
        last, this = 2.0 / np.sqrt(np.pi) * np.exp(-(x**2)), erfc(x)
        for n in range(1, order + 1):
            last, this = this, (last - 2.0 * x * this) / (2.0 * n)
        return this

    z = 0.3
    m1, m2, m3 = time_share.moments(z)[1:4]
    root = np.sqrt(np.pi)
    assert m1 == pytest.approx(np.exp(-(z**2)) - root * z * erfc(z), rel=1e-12)
    assert m1 == pytest.approx(root * repeated(1, z), rel=1e-12)
    # n = 2: 2 (1/2 4 i3(z) + 1 i3(2z)); n = 3: 6 (1/3 15 i5(z) + 2/3 6 i5(2z) + i5(3z)).
    assert m2 == pytest.approx(root * (4 * repeated(3, z) + 2 * repeated(3, 2 * z)), rel=1e-9)
    third = 30 * repeated(5, z) + 24 * repeated(5, 2 * z) + 6 * repeated(5, 3 * z)
    assert m3 == pytest.approx(root * third, rel=1e-7)


def test_the_rule_gives_back_its_moments_at_any_width():
    z = np.concatenate([[0.0], np.geomspace(1e-7, 6.0, 200)])
    theta, weight = time_share.rule(z)
    assert ((theta >= 0.0) & (theta <= 1.0 + 1e-12)).all()
    np.testing.assert_allclose(weight.sum(axis=-1), 1.0, rtol=1e-12)
    moments = time_share.moments(z)
    for order in range(1, 10):
        np.testing.assert_allclose(
            (weight * theta**order).sum(axis=-1), moments[:, order], rtol=1e-7
        )


def test_the_rule_is_absent_where_the_width_is():
    _, weight = time_share.rule(np.array([0.5, np.nan]))
    assert np.isfinite(weight[0]).all() and np.isnan(weight[1]).all()


# Stated values


@pytest.mark.parametrize(
    ("width_mm", "cm_h"),
    [
        (1.7, (3.4836, 13.8228, 26.9376, 38.6868)),
        (2.0, (3.2535, 12.8847, 24.9580, 35.5138)),
        (3.0, (2.5646, 10.0997, 19.2381, 26.7314)),
    ],
)
def test_stated_apparent_velocities(width_mm, cm_h):
    # (series) 0.0025 cm2 s-1, 0.6 cm, 60-100 s, no length, mean of the log ratio: to 1e-4.
    found = shown([5.0, 20.0, 40.0, 60.0], Strip(width_mm * 1e-3, **LOGS))
    np.testing.assert_allclose(found, cm_h, atol=1e-4)


def test_stated_apparent_velocity_of_41_samples_differs():
    # (series) 41 one-second samples at 1.7 mm and 20 cm h-1: 13.8209 instead of 13.8228.
    found = [shown(20.0, Strip(1.7e-3, window_from=t, window_to=t)) for t in np.arange(60.0, 100.5)]
    assert np.mean(found) == pytest.approx(13.8209, abs=1e-4)


def test_stated_slowing_of_slow_sap():
    # (series) b at V -> 0 for 0.0025 cm2 s-1, 60-100 s.
    found = [slowed(Strip(w * 1e-3, **LOGS)) for w in (1.7, 2.0, 2.4, 3.0)]
    np.testing.assert_allclose(found, [1.4345, 1.5358, 1.6857, 1.9476], atol=5e-5)


@pytest.mark.parametrize(
    ("changed", "per_cent"),
    [
        ({"diffusivity": 1.5e-7}, 14.6),
        ({"diffusivity": 2.0e-7}, 5.6),
        ({"diffusivity": 3.0e-7}, -3.9),
        ({"diffusivity": 4.0e-7}, -9.0),
        ({"window_from": 60.0, "window_to": 80.0}, 3.0),
        ({"window_from": 80.0, "window_to": 100.0}, -2.8),
        ({"tangential_to_axial": 0.7}, 9.5),
    ],
)
def test_stated_sensitivities_at_2_mm(changed, per_cent):
    # (series) of b at V -> 0.
    found = slowed(Strip(2e-3, **LOGS, **changed)) / slowed(Strip(2e-3, **LOGS)) - 1.0
    assert 100.0 * found == pytest.approx(per_cent, abs=0.05)


def test_stated_sensitivity_to_an_early_window_and_to_the_width():
    early = slowed(Strip(2e-3, window_from=30.0, window_to=60.0, **LOGS))
    assert 100.0 * (early / slowed(Strip(2e-3, **LOGS)) - 1.0) == pytest.approx(17.0, abs=0.5)
    # (series) 2.3-2.5 % per 0.1 mm.
    b = np.array([slowed(Strip(w * 1e-4, **LOGS)) for w in range(17, 31)])
    assert (np.round(100.0 * np.diff(b) / b[:-1], 1) >= 2.2).all()
    assert (np.round(100.0 * np.diff(b) / b[:-1], 1) <= 2.5).all()


@pytest.mark.parametrize(("width_mm", "ratio"), [(0.0, 1.0), (2.0, 0.943), (3.0, 0.911)])
def test_stated_drift_within_the_window(width_mm, ratio):
    # (series) apparent velocity of 60-80 s over that of 80-100 s.
    early = slowed(Strip(width_mm * 1e-3, window_from=60.0, window_to=80.0, **LOGS))
    late = slowed(Strip(width_mm * 1e-3, window_from=80.0, window_to=100.0, **LOGS))
    assert late / early == pytest.approx(ratio, abs=1e-3)


def test_the_response_to_slow_flow_by_its_expansion():
    # Own derivation: Vh = m1 V + c3 V^3 + ..., c3 = (x2/24k2) kappa3 - (t/4k)(m3 - m1 m2).
    seconds, k, x = 80.0, DIFFUSIVITY, SPACING
    strip = Strip(2e-3, window_from=seconds, window_to=seconds)
    m1, m2, m3 = time_share.moments(2e-3 / (2.0 * np.sqrt(k * seconds)))[1:4]
    third = m3 - 3.0 * m1 * m2 + 2.0 * m1**3
    c3 = x**2 / (24.0 * k**2) * third - seconds / (4.0 * k) * (m3 - m1 * m2)
    velocity = np.array([1.0, 2.0]) * CM_PER_HOUR
    found = wound_strip.apparent_velocity(velocity, strip)
    np.testing.assert_allclose((found / velocity - m1) / velocity**2, c3, rtol=5e-3)
    assert slowed(strip) == pytest.approx(1.0 / m1, rel=1e-6)


# The grid


@pytest.mark.parametrize(("width_mm", "cm_h"), [(1.7, 60.0), (2.0, 20.0), (3.0, 40.0)])
def test_the_grid_agrees(width_mm, cm_h):
    """To 2e-3, twice what cells of 0.02 cm cost."""
    seen = DIFFUSIVITY / SPACING * gridded(cm_h, width_mm) / CM_PER_HOUR
    assert shown(cm_h, Strip(width_mm * 1e-3, **LOGS)) == pytest.approx(seen, rel=2e-3)


@pytest.mark.slow
@pytest.mark.parametrize("width_mm", [1.7, 1.9, 2.1, 2.3, 2.6, 3.0])
def test_the_grid_agrees_over_widths_and_velocities(width_mm):
    velocities = np.array([2.5, 5.0, 10.0, 15.0, 20.0, 30.0, 40.0, 50.0, 60.0])
    seen = [DIFFUSIVITY / SPACING * gridded(v, width_mm) / CM_PER_HOUR for v in velocities]
    np.testing.assert_allclose(shown(velocities, Strip(width_mm * 1e-3, **LOGS)), seen, rtol=2e-3)
    assert gridded(0.0, width_mm) == pytest.approx(0.0, abs=1e-9)


def test_the_grid_agrees_on_means_after_a_pulse_of_8_s():
    reading = grid.Reading(pulse_length=8.0, window=(40.0, 70.0))
    down, up = grid.unit_rises(30.0 * CM_PER_HOUR, 2.2e-3, DIFFUSIVITY, reading)
    seen = DIFFUSIVITY / SPACING * np.log(down / up) / CM_PER_HOUR
    strip = Strip(2.2e-3, pulse=8.0, window_from=40.0, window_to=70.0)
    assert shown(30.0, strip) == pytest.approx(seen, rel=2e-3)


@pytest.mark.parametrize("spacing", [(6.5e-3, 5.5e-3), (5.5e-3, 6.5e-3)])
def test_the_grid_agrees_on_unequal_spacings(spacing):
    seen = gridded(20.0, 2.0, spacing) - gridded(0.0, 2.0, spacing)
    strip = Strip(2e-3, spacing_downstream=spacing[0], spacing_upstream=spacing[1], **LOGS)
    assert shown(20.0, strip) == pytest.approx(DIFFUSIVITY / SPACING * seen / CM_PER_HOUR, rel=2e-3)


# Properties


@pytest.mark.parametrize("estimator", wound_strip.ESTIMATORS)
@pytest.mark.parametrize("pulse", [0.0, 8.0])
def test_without_a_wound_the_velocity_is_shown_as_it_is(estimator, pulse):
    # Marshall (1958): the log ratio of equal spacings is V x / k at any time.
    velocity = np.array([0.0, 5.0, 40.0, 100.0])
    strip = Strip(0.0, pulse=pulse, estimator=estimator, window_from=30.0)
    np.testing.assert_allclose(shown(velocity, strip), velocity, atol=1e-9)
    narrow = shown(velocity, Strip(1e-8, pulse=pulse, estimator=estimator, window_from=30.0))
    np.testing.assert_allclose(narrow, velocity, rtol=1e-5)
    assert wound_strip.curve(strip).highest / CM_PER_HOUR == pytest.approx(100.0)


def test_the_response_is_odd_and_rises_to_its_highest():
    for width in (0.5e-3, 1.7e-3, 3e-3, 6e-3):
        strip = Strip(width)
        velocity = np.linspace(0.0, 110.0, 111)
        there, back = shown(velocity, strip), shown(-velocity, strip)
        np.testing.assert_allclose(back, -there, atol=1e-10)
        highest = wound_strip.curve(strip).highest / CM_PER_HOUR
        usable = there <= highest
        slopes = np.diff(there)[usable[1:]]
        # Half as steep as without flow at the highest: what an error of the signal weighs doubles.
        assert (slopes > 0.49 / slowed(strip)).all()
        last = usable.sum() - 1
        assert velocity[last] == 100.0 or np.diff(there)[last + 1] < 0.5 / slowed(strip)
        assert (np.diff(wound_strip.curve(strip).factor(there[usable] * CM_PER_HOUR)) > 0.0).all()


def test_wider_wounds_show_less_and_flatten_sooner():
    strips = [Strip(w * 1e-3) for w in (1.0, 1.7, 2.0, 2.4, 3.0)]
    assert (np.diff([shown(30.0, strip) for strip in strips]) < 0.0).all()
    assert (np.diff([wound_strip.curve(strip).highest for strip in strips]) < 0.0).all()


def test_slow_conduction_across_widens_the_wound():
    # Own derivation: stretching the wood across by the root of the ratio makes it even.
    velocity = [5.0, 40.0]
    stretched = shown(velocity, Strip(2e-3 / np.sqrt(0.7)))
    np.testing.assert_allclose(
        shown(velocity, Strip(2e-3, tangential_to_axial=0.7)), stretched, rtol=1e-12
    )


def test_downward_flow_sees_the_needles_changed():
    down = Strip(2e-3, spacing_downstream=6.5e-3, spacing_upstream=5.5e-3)
    up = Strip(2e-3, spacing_downstream=5.5e-3, spacing_upstream=6.5e-3)
    assert shown(-20.0, down) == pytest.approx(-shown(20.0, up), rel=1e-12)


def test_an_unknown_estimator_is_refused():
    with pytest.raises(ValueError, match=r"^estimator 'median' is none of log_of_means, mean_of_l"):
        wound_strip.apparent_velocity(1e-5, Strip(2e-3, estimator="median"))


# Turned round


@pytest.mark.parametrize("estimator", wound_strip.ESTIMATORS)
@pytest.mark.parametrize("spacing", [(6e-3, 6e-3), (6.4e-3, 5.6e-3)])
def test_the_sap_velocity_comes_back(estimator, spacing):
    generator = np.random.default_rng(5)
    reading = Strip(
        0.0, pulse=7.0, estimator=estimator, spacing_downstream=spacing[0],
        spacing_upstream=spacing[1],
    )  # fmt: skip
    for _ in range(12):
        width, k = generator.uniform(1e-3, 3e-3), generator.uniform(1.5e-7, 4e-7)
        strip = replace(reading, width=width, diffusivity=k)
        true = np.linspace(-100.0, 100.0, 41) * CM_PER_HOUR
        seen = wound_strip.apparent_velocity(true, strip)
        found, highest = wound_strip.sap_velocity(seen, width, k, reading)
        assert (np.isnan(found) == (np.abs(seen) > highest)).all()
        # The documented errors of the grid of curves.
        off = np.abs(found - true) / np.maximum(np.abs(true), 1e-12)
        assert np.nanmax(off) < 1e-3
        low = np.abs(seen) < np.minimum(0.8 * highest, 40.0 * CM_PER_HOUR)
        assert np.max(off[low]) < 4e-4


def test_what_the_grid_shows_is_turned_round():
    """From the forward side's own table: the errors of the grid and of the curves, 2e-3 at most."""
    reading = grid.Reading(pulse_length=8.0)
    velocity = np.array([-30.0, -5.0, 5.0, 20.0, 45.0, 60.0]) * CM_PER_HOUR
    seen = grid.apparent_velocities(2.1e-3, 2.6e-7, reading)(velocity)
    found, _ = wound_strip.sap_velocity(seen, 2.1e-3, 2.6e-7, Strip(0.0, pulse=8.0))
    np.testing.assert_allclose(found, velocity, rtol=2e-3)


def test_what_is_read_does_not_hang_on_what_is_read_with_it():
    seen = np.linspace(-10.0, 40.0, 60) * CM_PER_HOUR
    width = np.linspace(1.8e-3, 2.3e-3, 60)
    k = np.linspace(2.2e-7, 2.8e-7, 60)
    whole = wound_strip.sap_velocity(seen, width, k, Strip(0.0))
    parts = [wound_strip.sap_velocity(seen[s], width[s], k[s], Strip(0.0))
             for s in (slice(0, 7), slice(7, 60))]  # fmt: skip
    for place in (0, 1):
        joined = np.concatenate([part[place] for part in parts])
        assert joined.tobytes() == whole[place].tobytes()


def test_nothing_is_made_of_nothing():
    seen = np.array([1e-5, np.nan, 1e-5, 1e-5])
    width = np.array([np.nan, 2e-3, 2e-3, 2e-3])
    k = np.array([2.5e-7, 2.5e-7, np.nan, 2.5e-7])
    found, highest = wound_strip.sap_velocity(seen, width, k, Strip(0.0))
    assert np.isnan(found).tolist() == [True, True, True, False]
    assert np.isnan(highest).tolist() == [True, False, True, False]
    none = wound_strip.sap_velocity(seen, np.nan, 2.5e-7, Strip(0.0))
    assert np.isnan(none).all()
