"""The wound as a strip without flow: the finite volumes against series solutions, and in a copy."""

import time
from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from scipy.interpolate import CubicSpline

from sapflux.physics import heat_pulse, wood
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.site.load import load_site
from sapflux.virtual import sensors, signals, strip
from sapflux.virtual.copy import grow_copy
from sapflux.virtual.copy_values import log_values

SITE = load_site(Path(__file__).parents[2] / "configs" / "orvelin")
WOOD = 2.5e-7  # m2 s-1
# Apparent velocity [cm h-1] at true 5, 20, 40 and 60, by width [mm]: diffusivity 0.0025 cm2 s-1,
# spacing 0.6 cm, 60-100 s after an instantaneous pulse, mean of the log ratio. Source: own
# derivation, the share of time that a Brownian bridge spends outside the strip, evaluated by a
# Gauss rule from its moments; independent of any grid. Printed to 1e-4.
SERIES = {
    1.7: (3.4836, 13.8228, 26.9376, 38.6868),
    2.0: (3.2535, 12.8847, 24.9580, 35.5138),
    3.0: (2.5646, 10.0997, 19.2381, 26.7314),
}


def seen(velocity, width):
    """Apparent velocity [cm h-1] by the mean of the log ratio; velocity [cm h-1], width [mm]."""
    seconds, down, up = strip.histories(
        velocity * CM_PER_HOUR, width * 1e-3, WOOD, strip.Reading(), 100.0
    )
    late = seconds >= 50.0
    log_ratio = CubicSpline(seconds[late], np.log(down[late] / up[late]))
    return WOOD / 6e-3 * log_ratio.integrate(60.0, 100.0) / 40.0 / CM_PER_HOUR


@pytest.mark.parametrize("width", SERIES)
def test_the_grid_gives_the_series_solution(width):
    """2e-3, the accuracy stated for cells of 0.02 cm."""
    found = [seen(velocity, width) for velocity in (5.0, 20.0, 40.0, 60.0)]
    np.testing.assert_allclose(found, SERIES[width], rtol=2e-3)


def test_a_finer_grid_comes_nearer():
    """The error of second-order cells of half the width is about a quarter."""
    off = []
    for finest in (2e-4, 1e-4):
        reading = strip.Reading(window=(79.75, 80.25))
        down, up = strip.unit_rises(20.0 * CM_PER_HOUR, 2e-3, WOOD, reading, finest)
        off.append(np.log(down / up))
    finer = strip.unit_rises(20.0 * CM_PER_HOUR, 2e-3, WOOD, reading, 5e-5)
    limit = np.log(finer[0] / finer[1])
    assert abs(off[1] / limit - 1.0) < 0.5 * abs(off[0] / limit - 1.0) < 1e-3


@pytest.mark.parametrize("pulse", [0.0, 8.0])
def test_at_rest_the_strip_is_wood_like_any_other(pulse):
    """Marshall (1958), a line source: exp(-x2 / 4kt) / (4 pi k t), by a fine sum over both."""
    reading = strip.Reading(pulse_length=pulse)
    down, up = strip.unit_rises(0.0, 2e-3, WOOD, reading)
    late = 60.0 + (np.arange(4000) + 0.5) / 100.0
    after = late[:, None] + pulse * (np.arange(40) + 0.5) / 40
    by_hand = np.exp(-(6e-3**2) / (4.0 * WOOD * after)) / (4.0 * np.pi * WOOD * after)
    assert down == pytest.approx(by_hand.mean(), rel=2e-3)
    assert up == pytest.approx(down, rel=1e-12)


def test_slow_sap_is_slowed_by_the_share_of_time_outside_the_strip():
    """b at V -> 0 for 0.0025 cm2/s, 60-100 s: 1.4345, 1.5358, 1.6857 and 1.9476 (own derivation,
    1 / mean of exp(-z2) - sqrt(pi) z erfc z with z = w / (2 sqrt(kt)))."""
    for width, slowed in ((1.7, 1.4345), (2.0, 1.5358), (2.4, 1.6857), (3.0, 1.9476)):
        assert 0.5 / seen(0.5, width) == pytest.approx(slowed, rel=2e-3)


def test_the_table_is_odd_rises_and_meets_what_it_was_made_of():
    reading = strip.Reading(pulse_length=8.0)
    shown = strip.apparent_velocities(2e-3, WOOD, reading)
    velocity = np.array([0.0, 1.0, 12.0, 31.0, 52.0]) * CM_PER_HOUR
    np.testing.assert_array_equal(shown(-velocity), -shown(velocity))
    assert shown(0.0) == 0.0
    assert (np.diff(shown(np.linspace(0.0, 110.0, 300) * CM_PER_HOUR)) > 0.0).all()
    for one in velocity[1:]:
        down, up = strip.unit_rises(one, 2e-3, WOOD, reading)
        assert shown(one) == pytest.approx(WOOD / 6e-3 * np.log(down / up), rel=5e-5)
    back = strip.unit_rises(-velocity[3], 2e-3, WOOD, reading)
    there = strip.unit_rises(velocity[3], 2e-3, WOOD, reading)
    np.testing.assert_allclose(back[::-1], there, rtol=1e-12)


@pytest.fixture(scope="module")
def strip_of_two_mm():
    """(diffusivity, reading, table) of wood of 500 kg m-3 with as much water, a pulse of 8 s."""
    reading = strip.Reading(pulse_length=8.0)
    diffusivity = float(wood.thermal_diffusivity(500.0, 1.0))
    return diffusivity, reading, strip.apparent_velocities(2e-3, diffusivity, reading)


def test_rises_of_a_probe_with_a_strip_are_those_of_the_strip(strip_of_two_mm):
    """Each rise, not only their ratio: q / (rho c) times what finite volumes give for 1 K m2."""
    diffusivity, reading, shown = strip_of_two_mm
    probe = sensors.RatioProbe("P", "T", (0.01,), (0.015,), 2e-3, (0.0,), 0.0, 500.0, 1.0,
                               shown=shown)  # fmt: skip
    true = np.array([0.0, 23.0, -52.0]) * CM_PER_HOUR
    flux = np.repeat(true * 2.691e6 / 4182.0, 2)[None, :]
    stem = SimpleNamespace(sapwood_depth=0.05)
    rises = signals.ratio_rises(probe, stem, lambda depths: np.repeat(flux, len(depths), 0), 2,
                                lambda point: np.random.default_rng(1))  # fmt: skip
    for index, velocity in enumerate(true):
        by_strip = strip.unit_rises(velocity, 2e-3, diffusivity, reading)
        for rise, one in zip(rises, by_strip, strict=True):
            assert rise[0, index] == pytest.approx(900.0 / 2.691e6 * one, rel=2e-3)
    assert shown.share(0.0) == 1.0
    # 0.5 % at 23 and 6 % at 52 cm/h
    assert shown.share(true[1]) == pytest.approx(0.995, abs=2e-3)
    assert shown.share(true[2]) == pytest.approx(0.94, abs=0.01)


def test_a_probe_with_a_strip_shows_its_ratio_and_not_the_cubic(strip_of_two_mm):
    flow = np.array([-0.004, 0.0, 0.02])
    probe = sensors.RatioProbe("P", "T", (0.01,), (0.015,), 2e-3, (0.0,), 0.0, 500.0, 1.0)
    diffusivity, reading, shown = strip_of_two_mm
    wounded = replace(probe, shown=shown)
    down, up = sensors.rises(wounded, sensors.apparent_velocity(wounded, flow))
    seen = heat_pulse.velocity(np.log(down / up), diffusivity, probe.spacing)
    true = flow * 4182.0 / 2.691e6  # rho c of 500 kg m-3 with as much water
    for index in (0, 2):
        one = strip.unit_rises(true[index], 2e-3, diffusivity, reading)
        ratio = diffusivity / 6e-3 * np.log(one[0] / one[1])
        assert seen[index] == pytest.approx(ratio, rel=1e-4)
    assert seen[1] == 0.0
    assert seen[2] > 1.1 * sensors.apparent_velocity(probe, flow)[2]


@pytest.fixture(scope="module")
def seconds():
    """Processor time of each copy."""
    return {}


@pytest.fixture(scope="module")
def copies(seconds):
    made = {}
    for wound in ("cubic", "strip"):
        begin = time.process_time()
        made[wound] = grow_copy(SITE, seed=3, days=4, gradients=False, wound=wound)
        seconds[wound] = time.process_time() - begin
    return made


def test_truth_says_which_wound_it_took(copies):
    for wound, (truth, _) in copies.items():
        assert truth.wound == truth.options["wound"] == wound
    assert copies["cubic"][0].probes["P16"][0].shown is None
    assert copies["strip"][0].probes["P16"][0].shown(0.0) == 0.0


def test_only_the_wound_of_heat_ratio_logs_differs(copies):
    """Ratios of a strip are nearer to those of sound wood: the published b is 15-28 % higher."""
    logged = {}
    for wound, (truth, plan) in copies.items():
        for name, log in plan.logs.items():
            channels = [row for row in plan.channels if row.log == name]
            every = round(log.interval_min * 60) // truth.step_s
            values = log_values(truth, SITE, channels, every)
            for row, column in zip(channels, values.T, strict=True):
                logged.setdefault((row.id, row.point, row.quantity), {})[wound] = column
    ratio_probes = {p for p, parts in copies["strip"][0].probes.items() if p >= "P16"}
    for (name, _, _), pair in logged.items():
        assert np.array_equal(pair["cubic"], pair["strip"]) == (name not in ratio_probes)
    truth = copies["strip"][0]
    for name in ratio_probes:
        flow = truth.point_flux(name)[0]
        fast = flow > 0.5 * flow.max()
        cubic = sensors.apparent_velocity(copies["cubic"][0].probes[name][0], flow[fast])
        shown = sensors.apparent_velocity(truth.probes[name][0], flow[fast])
        assert ((shown > 1.05 * cubic) & (shown < 1.35 * cubic)).all()


def test_the_strips_of_five_probes_take_less_than_twenty_seconds(copies, seconds):
    probes = copies["strip"][0].probes.values()
    assert sum(isinstance(parts[0], sensors.RatioProbe) for parts in probes) == 5
    assert seconds["strip"] - seconds["cubic"] < 20.0


def test_an_unknown_wound_is_refused():
    with pytest.raises(ValueError, match="'hole'; known: cubic, strip"):
        grow_copy(SITE, seed=1, days=2, wound="hole")
