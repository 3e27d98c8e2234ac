"""Demand, profile and flow of stems."""

import numpy as np
import pytest

from sapflux.virtual import forest
from sapflux.virtual.weather import Weather

RESPONSE = forest.Response(0.05, 1000.0, 200.0, 0.1, 0.1, 0.0)


def air(deficit, radiation):
    count = len(deficit)
    end = np.datetime64("2031-08-18T00:10", "s") + np.arange(count) * np.timedelta64(600, "s")
    fill = np.full(count, 290.0)
    return Weather(
        end, 600, fill, fill / 580.0, np.array(deficit, float), np.array(radiation, float),
        np.zeros(count), np.ones(count),
    )  # fmt: skip


def stem(**changes):
    known = {
        "name": "T", "stand": "s", "plot": "p", "species": "spruce", "diameter": 0.32,
        "bark": 0.01, "sapwood_depth": 0.06, "vigour": 1.0, "tilt": 0.0, "deficit_ratio": 1.0,
    }  # fmt: skip
    return forest.Stem(**(known | changes))


def test_saturated_air_takes_nothing():
    flow = forest.outer_flux_density(RESPONSE, 1.0, air([0.0, 0.0], [0.0, 800.0]), np.ones(2))
    np.testing.assert_array_equal(flow, 0.0)


def test_night_flow_is_the_dark_share_and_follows_the_deficit():
    """exp(-1) left at D equal to the scale: 0.05 x 0.6321 x 0.1, moist soil."""
    flow = forest.outer_flux_density(RESPONSE, 1.0, air([1000.0, 200.0], [0.0, 0.0]), np.ones(2))
    assert flow[0] == pytest.approx(0.05 * 0.632121 * 0.1, rel=1e-5)
    assert flow[1] < flow[0]


def test_dry_soil_lowers_the_flow():
    here = air([1000.0, 1000.0], [500.0, 500.0])
    flow = forest.outer_flux_density(RESPONSE, 1.0, here, np.array([1.0, 0.1]))
    assert flow[1] == pytest.approx(flow[0] * 0.5 * 1.1)


def test_leaves_fade_in_a_straight_line():
    ageing = forest.Response(0.05, 1000.0, 200.0, 0.1, 0.1, 0.0, "2031-08-17", "2031-08-19")
    full = forest.outer_flux_density(RESPONSE, 1.0, air([1000.0], [0.0]), np.ones(1))
    half = forest.outer_flux_density(ageing, 1.0, air([1000.0], [0.0]), np.ones(1))
    assert half[0] / full[0] == pytest.approx(0.5, abs=0.005)


def test_storage_delays_and_keeps_the_sum():
    series = np.zeros(500)
    series[10:40] = 3.0
    late = forest.lagged(series, 2400.0, 600.0)
    assert late.sum() == pytest.approx(series.sum())
    hours = np.arange(500)
    delay = (late * hours).sum() / late.sum() - (series * hours).sum() / series.sum()
    # Own derivation: discrete store, kept / (1 - kept) steps, 3.52 at lag 4 steps.
    assert delay == pytest.approx(1.0 / np.expm1(600.0 / 2400.0))


def test_annulus_example():
    """R 15 cm, sapwood 6 cm, J 12/7/2 cm/h in thirds: 3418 cm3/h (methods, C1, calculated)."""
    steps = ((0, 12), (1 / 3, 12), (1 / 3 + 1e-9, 7), (2 / 3, 7), (2 / 3 + 1e-9, 2), (1, 2))
    assert forest.effective_area(stem(), steps) * 1e4 == pytest.approx(3418.0, abs=2.5)


def test_even_profile_weighs_the_whole_sapwood():
    flat = ((0.0, 1.0), (1.0, 1.0))
    assert forest.effective_area(stem(), flat) == pytest.approx(stem().sapwood_area, rel=1e-12)


def test_no_flow_in_the_heartwood():
    flow = forest.flux_density_at(stem(), ((0, 1.0), (1, 0.5)), np.array([0.1]), [0.03, 0.07])
    assert flow[0, 0] == pytest.approx(0.075)
    assert flow[1, 0] == 0.0


def test_stem_flow_is_the_integral_of_what_the_depths_show():
    nodes, outer = ((0, 1.0), (0.4, 0.9), (1, 0.2)), np.array([0.02, 0.05])
    tree = stem(vigour=1.3, tilt=0.2)
    edges = np.linspace(0.0, tree.sapwood_depth, 2001)
    middle = (edges[1:] + edges[:-1]) / 2.0
    rings = np.pi * ((tree.xylem_radius - edges[:-1]) ** 2 - (tree.xylem_radius - edges[1:]) ** 2)
    by_rings = (forest.flux_density_at(tree, nodes, outer, middle) * rings[:, None]).sum(axis=0)
    np.testing.assert_allclose(forest.stem_flow(tree, nodes, outer), by_rings, rtol=1e-5)


def test_a_dead_stem_moves_nothing():
    flow = forest.stem_flow(stem(alive=False), ((0, 1.0), (1, 1.0)), np.array([0.1]))
    assert flow[0] == 0.0
