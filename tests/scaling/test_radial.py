"""From points along a needle to the flow of a stem."""

import numpy as np
import pytest
import xarray as xr
from scipy.integrate import quad

from sapflux import quality
from sapflux.scaling.annuli import point_weights
from sapflux.scaling.radial import probe_flow

RELATIVE = np.linspace(0.0, 1.0, 101)
THIRDS = np.array([0.0, 0.02, 0.04]), np.array([0.02, 0.04, 0.06])
CM_H = 0.01 / 3600.0 * 1000.0  # 1 cm3 cm-2 h-1 in kg m-2 s-1
CM3_H = 1e-6 / 3600.0 * 1000.0  # 1 cm3 h-1 in kg s-1
NAN = np.nan


def needle(flux, radius, depth, begins, ends, profile=None, origin=None):
    """Arguments of probe_flow for probes (probe, point, time)."""
    flux = np.asarray(flux, dtype=float)
    time = np.datetime64("2031-06-01T01", "ns") + np.arange(flux.shape[2]) * np.timedelta64(1, "h")
    probes = [f"P{n}" for n in range(flux.shape[0])]
    array = xr.DataArray(
        flux,
        {"probe": probes, "point": np.arange(1, flux.shape[1] + 1), "time": time},
        ("probe", "point", "time"),
    )
    kinds = np.where(np.isfinite(flux), 1, 0) if origin is None else np.asarray(origin)

    def fact(values, *dims):
        values = np.asarray(values, dtype=float)
        dims = ("probe", *dims)
        return xr.DataArray(values, dims=(*dims, "time")[: values.ndim])

    shape = None
    if profile is not None:
        shape = fact(profile, "relative_depth").assign_coords(relative_depth=RELATIVE)
    return (
        array,
        array.copy(data=kinds.astype(np.int8)),
        fact(radius),
        fact(depth),
        fact(begins, "point"),
        fact(ends, "point"),
        shape,
    )


def three_points(**changes):
    flux = np.array([12.0, 7.0, 2.0]).reshape(1, 3, 1) * CM_H
    return needle(flux, [0.15], [0.06], [THIRDS[0]], [THIRDS[1]], **changes)


def test_worked_example_of_three_annuli():
    # Worked by hand: R 15 cm, sapwood 6 cm, J 12/7/2 cm h-1: rings of 56 pi, 48 pi and 40 pi cm2,
    # so 12*56 pi + 7*48 pi + 2*40 pi = 1088 pi = 3418 cm3 h-1.
    result = probe_flow(*three_points(), method="annuli")
    assert result["probe_flow"].item() / CM3_H == pytest.approx(1088 * np.pi, rel=1e-12)
    assert round(result["probe_flow"].item() / CM3_H) == 3418
    assert not result["incomplete_radius"].item()


def test_worked_example_outer_value_inwards_overestimates_by_59_percent():
    flux = np.array(12.0).reshape(1, 1, 1) * CM_H
    only_outer = needle(flux, [0.15], [0.06], [[0.0]], [[0.02]])
    flow = probe_flow(*only_outer, method="outer_value_inwards")["probe_flow"].item() / CM3_H
    assert round(flow) == 5429  # 12 * 144 pi
    assert round(flow / (1088 * np.pi) - 1, 2) == 0.59


def test_worked_example_unweighted_mean_is_7_percent_low():
    weights = point_weights(0.15, 0.06, *THIRDS, method="annuli")
    unweighted = np.mean([12, 7, 2]) * weights.sum() * 1e4
    assert round(unweighted) == 3167  # 7 * 144 pi
    assert round(unweighted / (1088 * np.pi) - 1, 2) == -0.07


@pytest.mark.parametrize("method", ["annuli", "outer_value_inwards", "relative_profile"])
def test_rings_sum_to_the_sapwood_area(method):
    profile = np.full(101, 0.7)
    weights = point_weights(0.15, 0.06, *THIRDS, RELATIVE, profile, method=method)
    assert weights.sum() == pytest.approx(np.pi * (0.15**2 - 0.09**2), rel=1e-12)


@pytest.mark.parametrize("begin_end", [(0.0, 0.02), (0.005, 0.03), (0.0125, 0.0125), (0.01, 0.09)])
def test_one_depth_with_a_profile_gives_the_flow_of_the_profile(begin_end):
    # Flux density 0.05 (1 - x) at relative depth x; the point sees its mean over its length in
    # sapwood. Reference: numerical integration by scipy.
    radius, depth = 0.14, 0.05

    def density(r):
        return 0.05 * (1.0 - r / depth)

    begin, end = begin_end[0], min(begin_end[1], depth)
    seen = density(begin) if begin == end else quad(density, begin, end)[0] / (end - begin)
    expected = quad(lambda r: density(r) * 2 * np.pi * (radius - r), 0, depth)[0]
    result = probe_flow(
        *needle([[[seen]]], [radius], [depth], [[begin]], [[begin_end[1]]], [1.0 - RELATIVE])
    )
    assert result["probe_flow"].item() == pytest.approx(expected, rel=1e-12)


def test_two_depths_with_a_profile_against_numerical_integration():
    radius, depth = 0.14, 0.05
    profile = np.exp(-3.0 * RELATIVE)
    begins, ends = np.array([0.005, 0.0275]), np.array([0.015, 0.0275])
    border = (0.015 + 0.0275) / 2

    def shape(r):
        return np.interp(r / depth, RELATIVE, profile)

    def ring(low, high):
        nodes = RELATIVE[(RELATIVE * depth > low) & (RELATIVE * depth < high)] * depth
        return quad(
            lambda r: shape(r) * 2 * np.pi * (radius - r), low, high, points=nodes, limit=300
        )[0]

    mean = quad(shape, 0.005, 0.015, points=RELATIVE[11:30] * depth, limit=300)[0] / 0.01
    expected = [ring(0, border) / mean, ring(border, depth) / shape(0.0275)]
    weights = point_weights(
        radius, depth, begins, ends, RELATIVE, profile, method="relative_profile"
    )
    np.testing.assert_allclose(weights, expected, rtol=1e-9)


def test_scale_of_the_profile_does_not_matter():
    base = point_weights(0.1, 0.04, *THIRDS, RELATIVE, 1.2 - RELATIVE, method="relative_profile")
    twice = point_weights(
        0.1, 0.04, *THIRDS, RELATIVE, 2 * (1.2 - RELATIVE), method="relative_profile"
    )
    np.testing.assert_allclose(twice, base, rtol=1e-13)


def test_flow_is_linear_in_flux_and_zero_without():
    one = probe_flow(*three_points())["probe_flow"]
    arguments = three_points()
    double = probe_flow(arguments[0] * 2, *arguments[1:])["probe_flow"]
    np.testing.assert_allclose(double, 2 * one, rtol=1e-15)
    assert probe_flow(arguments[0] * 0, *arguments[1:])["probe_flow"].item() == 0


def test_negative_inner_value_is_kept():
    arguments = three_points()
    flux = arguments[0].copy(data=np.array([12.0, 7.0, -2.0]).reshape(1, 3, 1) * CM_H)
    flow = probe_flow(flux, *arguments[1:], method="annuli")["probe_flow"].item() / CM3_H
    assert flow == pytest.approx((672 + 336 - 80) * np.pi, rel=1e-12)


def test_a_point_beyond_the_sapwood_is_not_needed():
    flux = np.array([12.0, 7.0, NAN]).reshape(1, 3, 1) * CM_H
    result = probe_flow(*needle(flux, [0.15], [0.04], [THIRDS[0]], [THIRDS[1]]), method="annuli")
    assert result["probe_flow"].item() / CM3_H == pytest.approx((672 + 336) * np.pi, rel=1e-12)


def test_a_missing_point_makes_the_flow_absent_and_says_so():
    flux = np.array([[12, 12, NAN], [7, NAN, NAN], [2, 2, NAN]]).reshape(1, 3, 3) * CM_H
    result = probe_flow(*needle(flux, [0.15], [0.06], [THIRDS[0]], [THIRDS[1]]))
    assert np.isfinite(result["probe_flow"].values).tolist() == [[True, False, False]]
    assert result["incomplete_radius"].values.tolist() == [[False, True, False]]
    assert np.isnan(result["probe_filled_share"].values[0, 1:]).all()


def test_short_needle_without_a_profile_is_refused_and_never_extended():
    flux = np.full((4, 1, 1), 0.03)
    arguments = needle(
        flux, [0.15] * 4, [0.06, 0.0219, 0.0221, 0.06], [[0.0]] * 4, [[0.02]] * 4,
        [np.full(101, NAN)] * 3 + [np.ones(101)],
    )  # fmt: skip
    for method, allowed in [
        ("relative_profile", [False, True, False, True]),
        ("annuli", [False, True, False, False]),
        ("outer_value_inwards", [True] * 4),
    ]:
        result = probe_flow(*arguments, method=method)
        assert np.isfinite(result["probe_flow"].values[:, 0]).tolist() == allowed
        assert (~result["incomplete_radius"].values[:, 0]).tolist() == allowed


def test_sapwood_left_uncovered_counts_as_without_flow():
    flux = np.full((1, 1, 1), 0.03)
    result = probe_flow(
        *needle(flux, [0.15], [0.021], [[0.0]], [[0.02]]), method="annuli", uncovered_mm=1.0
    )
    ring = np.pi * (0.15**2 - 0.13**2)
    assert result["probe_flow"].item() == pytest.approx(0.03 * ring, rel=1e-12)


@pytest.mark.parametrize(
    ("radius", "depth", "profile"),
    [(NAN, 0.06, 1.0), (0.15, NAN, 1.0), (0.15, 0.16, 1.0), (0.15, 0.06, 0.0), (0.15, 0.0, 1.0)],
)
def test_unknown_geometry_is_flagged(radius, depth, profile):
    arguments = needle(
        np.full((1, 1, 1), 0.03), [radius], [depth], [[0.0]], [[0.02]], [np.full(101, profile)]
    )
    result = probe_flow(*arguments)
    assert np.isnan(result["probe_flow"].item()) and result["incomplete_radius"].item()


def test_probes_with_fewer_points_than_others():
    flux = np.array([[[0.03], [0.01]], [[0.03], [NAN]]])
    arguments = needle(
        flux, [0.15, 0.15], [0.04, 0.02], [[0, 0.02], [0, NAN]], [[0.02, 0.04], [0.02, NAN]]
    )
    flow = probe_flow(*arguments, method="annuli")["probe_flow"].values[:, 0]
    outer, inner = np.pi * (0.15**2 - 0.13**2), np.pi * (0.13**2 - 0.11**2)
    np.testing.assert_allclose(flow, [0.03 * outer + 0.01 * inner, 0.03 * outer], rtol=1e-12)


def test_filled_share_is_by_weight():
    origin = np.array([1, 2, 1]).reshape(1, 3, 1)
    result = probe_flow(*three_points(origin=origin), method="annuli")
    assert result["probe_filled_share"].item() == pytest.approx(48 / 144, rel=1e-12)
    origin = np.full((1, 3, 1), quality.ORIGINS["measured"])
    assert probe_flow(*three_points(origin=origin))["probe_filled_share"].item() == 0


def test_facts_that_change_with_a_new_installation():
    flux = np.full((2, 1, 4), 0.03)
    depth_to = np.array([[[0.02, 0.02, 0.03, 0.03]], [[0.02, 0.02, 0.02, 0.02]]])
    sapwood = np.array([[0.02, 0.02, 0.03, 0.03], [0.02] * 4])
    profile = np.repeat(np.ones((2, 101, 1)), 4, axis=2)
    arguments = needle(flux, [0.15, 0.1], sapwood, [[0.0], [0.0]], depth_to, profile)
    flow = probe_flow(*arguments)["probe_flow"].values
    first, second = np.pi * (0.15**2 - 0.13**2), np.pi * (0.15**2 - 0.12**2)
    np.testing.assert_allclose(flow[0], np.array([first, first, second, second]) * 0.03, rtol=1e-12)
    np.testing.assert_allclose(flow[1], np.pi * (0.1**2 - 0.08**2) * 0.03, rtol=1e-12)
    for cut in (1, 2, 3):
        parts = [
            probe_flow(*(a.isel(time=part) if "time" in a.dims else a for a in arguments))
            for part in (slice(0, cut), slice(cut, None))
        ]
        joined = np.concatenate([part["probe_flow"].values for part in parts], axis=1)
        assert joined.tobytes() == flow.tobytes()


def test_an_unknown_method_is_named():
    with pytest.raises(ValueError, match=r"^no method 'ring'; known: relative_profile, annuli, "):
        point_weights(0.1, 0.05, *THIRDS, method="ring")
