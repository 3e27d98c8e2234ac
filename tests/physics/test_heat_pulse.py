"""Heat ratio against handbook numbers, and the line source against its own inverse."""

import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sapflux.physics import heat_pulse

CM_PER_HOUR = 0.01 / 3600
DIFFUSIVITY, SPACING = 2.5e-7, 6e-3
ENERGY, HEAT_CAPACITY = 1000.0, 2.69e6


@pytest.mark.parametrize(
    ("ratio", "cm_per_hour", "last_digit"),
    # Burgess et al. (2001), 0.0025 / 0.6 * 3600 * ln(ratio) worked by hand.
    [
        (1.1, 1.43, 0.01), (1.5, 6.08, 0.01), (2, 10.397, 0.001), (np.e, 15.000, 0.001),
        (3, 16.48, 0.01), (5, 24.14, 0.01), (10, 34.54, 0.01), (20, 44.94, 0.01),
    ],
)  # fmt: skip
def test_velocity_of_worked_ratios(ratio, cm_per_hour, last_digit):
    found = heat_pulse.velocity(np.log(ratio), DIFFUSIVITY, SPACING) / CM_PER_HOUR
    assert found == pytest.approx(cm_per_hour, abs=last_digit / 2)


@given(
    velocity=st.floats(-60, 60),
    diffusivity=st.floats(1.5e-7, 4e-7),
    time=st.floats(40, 120),
)
def test_ratio_of_line_source_rises_returns_the_velocity(velocity, diffusivity, time):
    given_velocity = velocity * CM_PER_HOUR
    down, up = (
        heat_pulse.line_source_rise(x, time, given_velocity, diffusivity, ENERGY, HEAT_CAPACITY)
        for x in (SPACING, -SPACING)
    )
    found = heat_pulse.velocity(np.log(down / up), diffusivity, SPACING)
    assert found / CM_PER_HOUR == pytest.approx(velocity, abs=1e-9)


def test_log_ratio_and_velocity_are_inverse():
    velocity = np.linspace(-40, 40, 17) * CM_PER_HOUR
    ratio = heat_pulse.log_ratio_of(velocity, DIFFUSIVITY, SPACING)
    np.testing.assert_allclose(
        heat_pulse.velocity(ratio, DIFFUSIVITY, SPACING), velocity, rtol=1e-14
    )


@pytest.mark.parametrize(
    ("heat_capacity", "rise"),
    # Marshall (1958) by hand at 6 mm, 80 s, 1000 J m-1, two decimals:
    # 1000 / (4 pi 2.5e-7 80 2.69e6) = 1.479; exp(-3.6e-5 / 8e-5) = 0.638; 0.943.
    [(2.69e6, 0.94), (3.0e6, 0.85), (2.5e6, 1.01)],
)
def test_rise_of_worked_examples(heat_capacity, rise):
    found = heat_pulse.line_source_rise(SPACING, 80.0, 0.0, DIFFUSIVITY, ENERGY, heat_capacity)
    assert found == pytest.approx(rise, abs=0.005)


def test_upstream_rise_at_high_flow():
    # Marshall (1958) by hand, 40 cm h-1, three decimals. At 80 s:
    # 1.479 * exp(-(0.006 + 1.1111e-4 * 80)**2 / 8e-5) = 1.479 * exp(-2.7706) = 0.0926.
    found = heat_pulse.line_source_rise(
        -SPACING,
        np.array([60.0, 80.0, 100.0]),
        40 * CM_PER_HOUR,
        DIFFUSIVITY,
        ENERGY,
        HEAT_CAPACITY,
    )
    np.testing.assert_allclose(found, [0.136, 0.093, 0.063], rtol=0, atol=0.5e-3)


def test_rise_without_flow_peaks_at_x2_over_4k():
    # 0.006**2 / (4 * 2.5e-7) = 36 s.
    time = np.arange(30.0, 42.0, 0.01)
    rise = heat_pulse.line_source_rise(SPACING, time, 0.0, DIFFUSIVITY, ENERGY, HEAT_CAPACITY)
    assert time[rise.argmax()] == pytest.approx(36.0, abs=0.01)


@pytest.mark.parametrize(
    ("cm_per_hour", "seconds"),
    # (sqrt(4 k**2 + V**2 x**2) - 2 k) / V**2 worked for an instantaneous pulse, one decimal.
    [(10, 35.1), (20, 32.7), (40, 27.0), (60, 22.2)],
)
def test_rise_with_flow_peaks_earlier(cm_per_hour, seconds):
    time = np.arange(20.0, 40.0, 0.001)
    rise = heat_pulse.line_source_rise(
        SPACING, time, cm_per_hour * CM_PER_HOUR, DIFFUSIVITY, ENERGY, HEAT_CAPACITY
    )
    assert time[rise.argmax()] == pytest.approx(seconds, abs=0.05)


def test_heat_is_conserved():
    # The rise times the heat capacity, summed over the plane across the line, is the pulse:
    # along x the Gaussian integrates to sqrt(4 pi k t), across likewise.
    x = np.arange(-0.08, 0.08, 1e-4)
    along = heat_pulse.line_source_rise(x, 60.0, 5e-5, DIFFUSIVITY, ENERGY, HEAT_CAPACITY)
    across = np.sqrt(4 * np.pi * DIFFUSIVITY * 60.0)
    assert along.sum() * 1e-4 * across * HEAT_CAPACITY == pytest.approx(ENERGY, rel=1e-9)


def test_there_is_no_rise_before_the_pulse():
    found = heat_pulse.line_source_rise(
        SPACING, np.array([-10.0, 0.0, np.nan]), 0.0, DIFFUSIVITY, ENERGY, HEAT_CAPACITY
    )
    np.testing.assert_array_equal(found, [0.0, 0.0, np.nan])


@pytest.mark.parametrize(
    ("width_mm", "cubic", "linear"),
    # Burgess et al. (2001), table 1, from memory, at an apparent 10 cm h-1, one decimal.
    [(1.7, 16.6, 17.3), (2.0, 18.4, 19.2), (3.0, 25.3, 26.4)],
)
def test_wound_correction_at_10_cm_per_hour(width_mm, cubic, linear):
    found = heat_pulse.wound_velocity(10 * CM_PER_HOUR, width_mm * 1e-3) / CM_PER_HOUR
    assert found == pytest.approx(cubic, abs=0.05)
    row = np.isclose(heat_pulse.PUBLISHED_WOUND[:, 0], width_mm / 10)
    assert row.sum() == 1
    assert 10 * heat_pulse.PUBLISHED_WOUND[row, 4] == pytest.approx(linear, abs=0.05)


# Burgess et al. (2001), table 1, from memory, as the trade hands it on: width [cm], b, c, d; B.
HANDED_ON = """
.17:1.6565,-.0014,.0002;1.7283 .18:1.7077,-.0014,.0002;1.7853 .19:1.7701,-.0017,.0002;1.8568
.20:1.8292,-.0019,.0003;1.9216 .21:1.8909,-.0022,.0003;1.9891 .22:1.9554,-.0025,.0004;2.0594
.23:2.0226,-.0029,.0004;2.1326 .24:2.0685,-.0031,.0005;2.1825 .26:2.1932,-.0038,.0006;2.3176
.28:2.3448,-.0047,.0008;2.4813 .30:2.4908,-.0057,.0010;2.6383
"""


@pytest.mark.parametrize("line", HANDED_ON.split())
def test_every_width_of_the_wound_table(line):
    width, coefficients = line.split(":")
    b, c, d, linear = (float(number) for number in re.split("[,;]", coefficients))
    speeds = np.array([1.0, 10.0, 40.0])
    found = heat_pulse.wound_velocity(speeds * CM_PER_HOUR, float(width) / 100) / CM_PER_HOUR
    assert found == pytest.approx(b * speeds + c * speeds**2 + d * speeds**3, rel=1e-12)
    # The linear form of the same table is a second reading of it: both agree within 6 % where
    # heat pulse velocities mostly lie, so that a wrong digit in b would show.
    usual = np.array([5.0, 10.0, 15.0])
    cubic = b * usual + c * usual**2 + d * usual**3
    assert cubic == pytest.approx(linear * usual, rel=0.06)


def test_the_highest_velocity_in_the_widest_wound():
    # By hand: 2.4908 * 40 - 0.0057 * 1600 + 0.001 * 64000 = 154.512 cm h-1.
    found = heat_pulse.wound_velocity(40 * CM_PER_HOUR, 3e-3) / CM_PER_HOUR
    assert found == pytest.approx(154.512, abs=0.5e-3)


def test_wound_correction_grows_by_the_published_share_per_tenth_of_a_millimetre():
    # Slow flow, where b alone counts: 2.3-3.7 % by hand from b of neighbouring rows of Burgess
    # et al. (2001), the least from 0.23 to 0.24 cm, the most from 0.18 to 0.19 cm.
    widths = heat_pulse.PUBLISHED_WOUND[:, 0]
    slow = heat_pulse.wound_velocity(1e-3 * CM_PER_HOUR, widths / 100)
    per_tenth = np.expm1(np.diff(np.log(slow)) / np.diff(widths) / 100)
    assert per_tenth.min() == pytest.approx(0.023, abs=0.5e-3)
    assert per_tenth.max() == pytest.approx(0.037, abs=0.5e-3)
    assert widths[per_tenth.argmin()] == 0.23
    assert widths[per_tenth.argmax()] == 0.18


def test_between_rows_the_corrected_velocity_is_linear_in_width():
    velocity = np.linspace(-40, 40, 33) * CM_PER_HOUR
    narrow, wide = (heat_pulse.wound_velocity(velocity, w) for w in (2.4e-3, 2.6e-3))
    found = heat_pulse.wound_velocity(velocity, 2.45e-3)
    np.testing.assert_allclose(found, 0.75 * narrow + 0.25 * wide, rtol=1e-12, atol=1e-20)


def test_wound_correction_is_odd_rising_and_zero_without_flow():
    velocity = np.linspace(-40, 40, 161) * CM_PER_HOUR
    for width in np.arange(1.7, 3.01, 0.1) * 1e-3:
        found = heat_pulse.wound_velocity(velocity, width)
        np.testing.assert_array_equal(found, -found[::-1])
        assert found[80] == 0.0
        assert (np.diff(found) > np.diff(velocity)).all()


def test_wound_correction_stops_at_the_ends_of_the_table_and_at_40_cm_per_hour():
    widths = np.array([1.69, 1.7, 3.0, 3.01, np.nan]) * 1e-3
    found = heat_pulse.wound_velocity(10 * CM_PER_HOUR, widths)
    np.testing.assert_array_equal(np.isnan(found), [True, False, False, True, True])
    velocity = np.array([-40.1, -40.0, 40.0, 40.1, np.nan]) * CM_PER_HOUR
    found = heat_pulse.wound_velocity(velocity, 2e-3)
    np.testing.assert_array_equal(np.isnan(found), [True, False, False, True, True])
