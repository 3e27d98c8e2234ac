"""Probe physics: what goes in comes out again by the published formulas."""

import numpy as np
import pytest

from sapflux.constants import ZERO_CELSIUS
from sapflux.physics import dissipation, heat_pulse, thermocouple, wood
from sapflux.virtual import sensors

CM_PER_HOUR = 0.01 / 3600.0


def needle(**changes):
    known = {
        "name": "P", "tree": "T", "needle_from": 0.0, "needle_to": 0.02, "zero_flow": 10.0,
        "drift": 0.0, "bow": 0.0, "gradient": 0.0, "noise": 0.0,
    }  # fmt: skip
    return sensors.DissipationProbe(**(known | changes))


def pair(**changes):
    known = {
        "name": "P", "tree": "T", "depths_from": (0.01,), "depths_to": (0.015,),
        "wound_width": 2.0e-3, "offset": (0.0,), "noise": 0.0, "dry_density": 500.0,
        "water_content": 1.0,
    }  # fmt: skip
    return sensors.RatioProbe(**(known | changes))


def test_even_flow_along_a_needle_in_sapwood_comes_back_exactly():
    flow = np.array([0.0, 1e-5, 0.005, 0.03, 0.1])
    _, weights, share = sensors.needle_depths(0.0, 0.02, sapwood_depth=0.05)
    zero = np.full(5, 10.0)
    read = sensors.heated_difference(needle(), np.tile(flow, (8, 1)), weights, share, zero)
    back = dissipation.flux_density(dissipation.flow_index(zero, read))
    np.testing.assert_allclose(back, flow, rtol=1e-6, atol=1e-9)


def test_no_flow_leaves_the_zero_flow_difference():
    _, weights, share = sensors.needle_depths(0.0, 0.02, sapwood_depth=0.014)
    read = sensors.heated_difference(needle(), np.zeros((8, 3)), weights, share, np.full(3, 9.0))
    np.testing.assert_allclose(read, 9.0, rtol=1e-14)


def test_partial_contact_comes_back_by_the_correction_of_clearwater_1999():
    flow = np.array([0.005, 0.05])
    _, weights, share = sensors.needle_depths(0.0, 0.02, sapwood_depth=0.013)
    assert share == pytest.approx(0.65)
    zero = np.full(2, 10.0)
    read = sensors.heated_difference(needle(), np.tile(flow, (8, 1)), weights, share, zero)
    inside = dissipation.sapwood_contact(read, zero, share)
    back = dissipation.flux_density(dissipation.flow_index(zero, inside))
    np.testing.assert_allclose(back, flow, rtol=1e-6)


def test_contact_by_hand():
    """Calibration factor 0.1, exponent 1: J 0.1 is index 1, so 5 K in sapwood; 5 K and 10 K."""
    probe = needle(factor=0.1, exponent=1.0)
    _, weights, share = sensors.needle_depths(0.0, 0.02, sapwood_depth=0.012)
    read = sensors.heated_difference(probe, np.full((8, 1), 0.1), weights, share, np.array([10.0]))
    assert read[0] == pytest.approx(0.6 * 5.0 + 0.4 * 10.0, rel=1e-9)


def test_uneven_flow_reads_less_than_its_mean():
    """Clearwater et al. (1999): the needle reads the mean difference, which hides fast parts."""
    depths, weights, share = sensors.needle_depths(0.0, 0.02, sapwood_depth=0.05)
    flow = 0.03 * (1.4 - 40.0 * depths)[:, None]  # 0.042 at the cambium, 0.018 at the tip
    zero = np.array([10.0])
    read = sensors.heated_difference(needle(), flow, weights, share, zero)
    back = dissipation.flux_density(dissipation.flow_index(zero, read))[0]
    assert 0.97 * 0.03 < back < 0.03


def test_voltage_comes_back_by_its90():
    stem = np.array([5.0, 15.0, 30.0]) + ZERO_CELSIUS
    emf = sensors.heated_emf(np.array([10.0, 8.0, 12.0]), stem)
    back = thermocouple.difference(emf, stem)
    np.testing.assert_allclose(back, [10.0, 8.0, 12.0], rtol=1e-10)


def test_voltage_of_a_pair_against_its90_table():
    """ITS-90 type T, 20 and 30 degC: 0.789612 and 1.196446 mV (NIST Monograph 175 table)."""
    emf = sensors.heated_emf(10.0, 20.0 + ZERO_CELSIUS)
    assert emf * 1e3 == pytest.approx(1.196446 - 0.789612, abs=1e-6)


def test_warm_wood_and_warm_thermocouple_nearly_cancel_in_the_voltage():
    """0.2 % per kelvin each way (methods: common practice); alone either makes 2 % over 10 K."""
    stem = np.array([10.0, 20.0, 30.0]) + ZERO_CELSIUS
    alone = sensors.in_wood_of(10.0, stem, 0.002)
    assert abs(alone[2] / alone[1] - 1.0) > 0.015
    emf = sensors.heated_emf(alone, stem)
    np.testing.assert_allclose(emf / emf[1], 1.0, atol=0.002)


def test_fixed_sensitivity_reads_high_in_the_warm():
    """ITS-90: 10 K from 20 degC is 0.406835 mV, over 40.2654 uV/K it reads 10.1038 K."""
    emf = sensors.heated_emf(10.0, 20.0 + ZERO_CELSIUS)
    assert sensors.kelvin_by_constant(emf) == pytest.approx(0.406835 / 0.0402654, rel=1e-5)


def test_heater_falls_within_half_an_hour_and_is_back_after_two_hours():
    powered = np.array([1.0] * 3 + [0.0] * 30 + [1.0] * 30)
    level = sensors.heater_response(powered, 600.0)
    assert (level[:3] == 1.0).all()
    assert level[5] < 0.05
    assert 0.98 < level[33 + 11] < 1.0
    assert np.all(np.diff(level[33:]) >= 0.0)


def test_drift_starts_at_the_first_value_and_ends_at_the_stated_share():
    probe = needle(drift=0.02, bow=0.01)
    shown = sensors.zero_flow_over_time(probe, np.array([0.0, 0.5, 1.0]))
    np.testing.assert_allclose(shown, [10.0, 10.2, 10.2])


@pytest.mark.parametrize("width", [1.7e-3, 2.03e-3, 2.4e-3])
def test_ratio_probe_comes_back_through_the_published_chain(width):
    flow = np.array([-0.002, 0.0, 1e-4, 0.01, 0.03])
    probe = pair(wound_width=width)
    down, up = sensors.rises(probe, sensors.apparent_velocity(probe, flow))
    diffusivity = wood.thermal_diffusivity(500.0, 1.0)
    shown = heat_pulse.velocity(np.log(down / up), diffusivity, probe.spacing)
    true = heat_pulse.wound_velocity(shown, width)
    np.testing.assert_allclose(wood.flux_density(true, 500.0, 1.0), flow, rtol=1e-9, atol=1e-14)


def test_wound_halves_the_velocity_by_the_printed_cubic():
    """Width 1.7 mm turns 10 into 16.625 cm/h (Burgess et al. 2001, from memory): so back again.

    J = V rho c / c_w with 500 kg/m3 and water content 1: rho c 2.691e6, c_w 4182.
    """
    flow = 16.625 * CM_PER_HOUR * 2.691e6 / 4182.0
    shown = sensors.apparent_velocity(pair(wound_width=1.7e-3), flow)
    assert shown / CM_PER_HOUR == pytest.approx(10.0, rel=1e-9)


def test_beyond_the_published_table_a_probe_shows_a_straight_line():
    """1.7 mm: 40 cm/h as shown are 40 (1.6565 - 0.0014 40 + 0.0002 1600) = 76.82 true, and there
    the cubic rises by 1.6565 - 2 0.0014 40 + 3 0.0002 1600 = 2.5045 (table from memory)."""
    true = np.array([-100.0, 70.0, 76.82, 100.0])
    flow = true * CM_PER_HOUR * 2.691e6 / 4182.0
    shown = sensors.apparent_velocity(pair(wound_width=1.7e-3), flow) / CM_PER_HOUR
    beyond = 40.0 + (100.0 - 76.82) / 2.5045
    np.testing.assert_allclose(shown[[0, 2, 3]], [-beyond, 40.0, beyond], rtol=1e-3)
    assert 36.0 < shown[1] < 38.0


def test_a_fast_pulse_leaves_an_upstream_rise_that_drowns_in_noise():
    """Marshall (1958): the upstream rise over that at rest is exp(-(2 x V t + V2 t2) / 4kt).

    By hand at 80 s, 6 mm, 2.47e-7 m2/s: 0.0955 at 40 and 0.0024 at 75 cm/h, of 0.86 K at 900 J/m.
    So at 75 some 2 mK are left, the noise of a thermocouple, and what the probe shows scatters.
    """
    velocity = np.array([0.0, 40.0, 75.0]) * CM_PER_HOUR
    _, up = sensors.rises(pair(pulse_length=1e-3, window=(79.0, 81.0)), velocity)
    assert up[1] / up[0] == pytest.approx(0.0955, rel=0.05)
    assert up[2] / up[0] == pytest.approx(0.0024, rel=0.15)


def test_rises_at_rest_are_those_of_the_line_source():
    """Marshall (1958): q / (4 pi k t rho c) exp(-x2 / 4kt), mean of 60-100 s, short pulse.

    At 80 s with 1000 J/m, 6 mm, k 2.47e-7 and 2.691e6 J m-3 K-1: 0.95 K; over the window the
    rise changes little, so the mean lies within 2 % of it.
    """
    probe = pair(pulse_energy=1000.0, pulse_length=1e-3)
    down, up = sensors.rises(probe, np.array([0.0]))
    diffusivity = wood.thermal_diffusivity(500.0, 1.0)
    by_hand = (
        1000.0 / (4.0 * np.pi * diffusivity * 80.0 * 2.691e6)
        * np.exp(-(6e-3**2) / (4.0 * diffusivity * 80.0))
    )  # fmt: skip
    assert down[0] == pytest.approx(by_hand, rel=0.02)
    assert down[0] == up[0]


def test_longer_pulse_changes_the_rises_but_not_their_ratio():
    velocity = np.array([10.0 * CM_PER_HOUR])
    short = sensors.rises(pair(pulse_length=1e-3), velocity)
    long = sensors.rises(pair(pulse_length=8.0), velocity)
    assert abs(short[0] / long[0] - 1.0)[0] > 0.005
    np.testing.assert_allclose(short[0] / short[1], long[0] / long[1], rtol=1e-12)


def test_stored_velocity_by_hand():
    """ln 2 at k 0.0025 cm2/s and 6 mm is 10.397 cm/h (Burgess et al. 2001, equation 1)."""
    stored = sensors.stored_velocity(np.log(2.0), 2.5e-7, 6e-3)
    assert stored / CM_PER_HOUR == pytest.approx(10.397, abs=5e-4)
