"""Needles in unevenly cooled wood, against adaptive quadrature and root finding."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.optimize import brentq

from sapflux.physics import dissipation, needle

DEPTHS = tuple(np.linspace(0.0, 1.0, 101).tolist())
RELATIVE = np.array(DEPTHS)
LENGTH = 0.02
EXPONENT = dissipation.GENERAL_EXPONENT
# name -> (profile on DEPTHS, depth of sapwood [m], exponent)
SHAPES = {
    "falling from 12 to 7": (12.0 - 5.0 * RELATIVE, LENGTH, EXPONENT),
    "falling from 15 to 3": (15.0 - 12.0 * RELATIVE, LENGTH, EXPONENT),
    "half-Gaussian of 10 mm": (np.exp(-0.5 * (RELATIVE * 2.0) ** 2), LENGTH, EXPONENT),
    "falling to zero": (1.0 - RELATIVE, LENGTH, EXPONENT),
    "falling to zero, flat calibration": (1.0 - RELATIVE, LENGTH, 0.8),
    "peak below the cambium": (np.interp(RELATIVE, [0, 0.3, 1], [0.5, 1.0, 0.05]), 0.06, 1.4),
    "needle half in sapwood": (np.interp(RELATIVE, [0, 0.5, 1], [1.0, 0.9, 0.1]), 0.013, 1.1),
    "no flow in the inner half": (np.interp(RELATIVE, [0, 0.5, 1], [1.0, 0, 0]), LENGTH, EXPONENT),
}
INDICES = [-0.05, -0.01, 0.01, 0.05, 0.2, 0.5, 1.0, 3.0, 10.0]


def cooling_of(profile, depth, exponent, contact=None, begin=0.0, end=LENGTH):
    share = min(1.0, (depth - begin) / (end - begin)) if contact is None else contact
    return needle.even_cooling(
        share, begin, end, depth, exponent, DEPTHS, tuple(np.asarray(profile).tolist())
    )


def reading(index, profile, depth, exponent, begin=0.0, end=LENGTH):
    """Ratio that the needle shows while its part in sapwood carries a mean flow of `index`.

    By scipy's adaptive quadrature, piece by piece of the shape.
    """
    last = min(end, depth)
    edges = [begin, *(r * depth for r in DEPTHS if begin < r * depth < last), last]

    def mean(function):
        parts = [quad(function, *part, epsabs=1e-15, epsrel=1e-13)[0] for part in pairwise(edges)]
        return sum(parts) / (last - begin)

    def shape(depth_below):
        return np.interp(depth_below / depth, RELATIVE, profile)

    middle = mean(shape)
    cooled = mean(lambda r: 1.0 / (1.0 + index * (shape(r) / middle) ** (1.0 / exponent)))
    share = (last - begin) / (end - begin)
    return 1.0 - share + share * cooled


@pytest.mark.parametrize("name", SHAPES)
def test_the_mean_flow_comes_back_from_what_the_needle_shows(name):
    profile, depth, exponent = SHAPES[name]
    cooling = cooling_of(profile, depth, exponent)
    for index in INDICES:
        found = 1.0 / cooling(reading(index, profile, depth, exponent)) - 1.0
        accuracy = 1e-9 if index > 0 else 2e-9
        assert (found / index) ** exponent == pytest.approx(1.0, abs=accuracy), index


@pytest.mark.parametrize("ratio", [0.97, 0.8, 0.5, 0.2])
def test_against_root_finding(ratio):
    profile, depth, exponent = SHAPES["falling from 15 to 3"]
    index = brentq(
        lambda k: reading(k, profile, depth, exponent) - ratio, 0.0, 50.0, xtol=1e-13, rtol=1e-13
    )
    found = float(cooling_of(profile, depth, exponent)(ratio))
    assert found == pytest.approx(1.0 / (1.0 + index), rel=1e-10)


def test_a_needle_within_deep_sapwood_sees_its_part_of_the_shape():
    profile, depth, exponent = 1.0 - 0.8 * RELATIVE, 0.08, 1.3
    at = {"begin": 0.011, "end": 0.0313}
    shown = reading(0.4, profile, depth, exponent, **at)
    assert 1.0 / cooling_of(profile, depth, exponent, **at)(shown) - 1.0 == pytest.approx(0.4)


@pytest.mark.parametrize("contact", [1.0, 0.75, 0.5])
def test_even_flow_is_the_two_piece_case(contact):
    # Clearwater et al. (1999): (difference - dead share * zero flow) / share in sapwood.
    ratio = np.linspace(1.0 - contact + 0.01, 1.2, 400)
    found = cooling_of(np.ones(101), 0.05, EXPONENT, contact)(ratio)
    np.testing.assert_allclose(found, dissipation.sapwood_contact(ratio, 1.0, contact), rtol=1e-12)


def test_no_flow_is_no_flow_exactly():
    for profile, depth, exponent in SHAPES.values():
        assert cooling_of(profile, depth, exponent)(1.0) == 1.0


@pytest.mark.parametrize("name", SHAPES)
def test_the_relation_rises_without_a_jump_on_both_sides_of_zero_flow(name):
    profile, depth, exponent = SHAPES[name]
    cooling = cooling_of(profile, depth, exponent)
    ratio = np.linspace(cooling.lowest + 0.02, 3.0, 20001)
    even = cooling(ratio)
    rise = np.diff(even)
    assert (rise > 0.0).all()
    assert rise.max() < 100 * (ratio[1] - ratio[0])
    assert np.abs(np.diff(rise)).max() < 0.05 * rise.max()


def test_below_the_share_without_flow_nothing_is_defined():
    cooling = cooling_of(1.0 - RELATIVE, 0.01, EXPONENT)  # half of the needle in sapwood
    assert cooling.lowest == 0.5
    found = cooling(np.array([0.4, 0.5, 0.5001, np.nan]))
    assert np.isnan(found[[0, 1, 3]]).all()
    assert 0.0 < found[2] < 0.01
    # The inner half of the shape has no flow either: three quarters of the needle are without.
    inner = cooling_of(np.interp(RELATIVE, [0, 0.5, 1], [1, 0, 0]), 0.01, EXPONENT)
    assert inner.lowest == pytest.approx(0.75, abs=1e-12)


@pytest.mark.parametrize(
    "profile",
    [np.full(101, np.nan), np.zeros(101), 0.5 - RELATIVE],
    ids=["unknown", "nowhere positive", "negative along the needle"],
)
def test_no_usable_shape_is_told(profile):
    assert cooling_of(profile, LENGTH, EXPONENT) is None


def test_a_point_without_length_or_without_contact_has_no_shape():
    assert cooling_of(1.0 - RELATIVE, 0.05, EXPONENT, 1.0, 0.01, 0.01) is None
    assert cooling_of(1.0 - RELATIVE, 0.01, EXPONENT, 0.0, 0.02, 0.03) is None
    assert cooling_of(1.0 - RELATIVE, np.nan, EXPONENT, 1.0) is None


@given(st.floats(0.05, 0.99), st.floats(0.1, 10.0))
def test_the_scale_of_a_profile_does_not_matter(ratio, scale):
    profile, depth, exponent = SHAPES["falling from 12 to 7"]
    one, other = (cooling_of(k * profile, depth, exponent)(ratio) for k in (1.0, scale))
    assert one == pytest.approx(float(other), rel=1e-12)
