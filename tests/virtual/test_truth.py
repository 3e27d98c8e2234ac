"""Sampling by the ratio of sums, and what a design can deliver."""

from itertools import combinations

import numpy as np
import pytest

from sapflux.virtual import truth
from sapflux.virtual.forest import Stem


def stratum(kg, sampled, depth=0.02, ground=100.0, diameters=None):
    diameters = diameters or [0.3] * len(kg)
    stems = tuple(
        Stem(f"T{n}", "s", "p", "beech", d, 0.0, depth, 1.0, 0.0, 1.0)
        for n, d in enumerate(diameters)
    )
    return truth.Stratum(stems, np.array(kg, float), np.array(sampled), ground)


def test_sampling_every_stem_is_the_truth():
    here = stratum([[10.0], [30.0], [50.0]], [True] * 3, diameters=[0.2, 0.3, 0.4])
    np.testing.assert_allclose(truth.sampled_mm(here), truth.stand_mm(here))
    assert truth.sampling_variance(here) == 0.0


def test_ratio_of_sums_by_hand():
    """Equal stems, 3 in all, 10 and 30 kg sampled: 20 kg each, 60 kg on 100 m2."""
    here = stratum([[10.0], [30.0], [500.0]], [True, True, False])
    assert truth.sampled_mm(here)[0] == pytest.approx(0.6)
    assert truth.stand_mm(here)[0] == pytest.approx(5.4)


def test_a_species_without_probes_takes_the_ratio_of_its_stand_in():
    """The carrier gives 20 kg a stem; two stems of the same size on the same ground."""
    carrier = stratum([[10.0], [30.0]], [True, True])
    here = stratum([[11.0], [12.0]], [False, False])
    assert truth.sampled_mm(here, carrier)[0] == pytest.approx(0.4)
    assert truth.stand_in_difference(here, carrier) == pytest.approx(0.40 - 0.23)


def test_standard_error_is_the_spread_over_all_samples_that_could_be_drawn():
    """Equal areas, where the formula of Cochran (1977) is exact: all 3 of 6 stems tried."""
    kg = np.array([[12.0], [30.0], [25.0], [44.0], [18.0], [21.0]])
    totals = []
    for chosen in combinations(range(6), 3):
        marks = [index in chosen for index in range(6)]
        totals.append(truth.sampled_mm(stratum(kg, marks))[0])
    one = stratum(kg, [True] * 3 + [False] * 3)
    assert np.sqrt(truth.sampling_variance(one)) == pytest.approx(np.std(totals), rel=1e-12)


def test_stand_in_shares_its_sample():
    """A species of the same area as its stand-in doubles what the stand-in's error moves."""
    carrier = stratum([[10.0], [30.0], [20.0]], [True, True, False])
    other = stratum([[10.0], [10.0], [10.0]], [False] * 3)
    alone, _ = truth.stand_design({"beech": carrier}, {})
    both, difference = truth.stand_design({"beech": carrier, "maple": other}, {"maple": "beech"})
    assert both == pytest.approx(2.0 * alone)
    assert difference == pytest.approx(0.6 - 0.3)
