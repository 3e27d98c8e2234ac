"""Flux density that differs around the stem: probes see their face, the stem flows as its mean."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from sapflux.site.load import load_site
from sapflux.virtual import assumptions, forest, signals
from sapflux.virtual.copy import grow_copy
from sapflux.virtual.copy_values import log_values

SITE = load_site(Path(__file__).parents[2] / "configs" / "orvelin")


def faced(azimuth_of):
    """The site with `azimuth_of` (probe -> degrees or None) in its table of probes."""
    rows = tuple(
        row.model_copy(update={"azimuth_deg": azimuth_of(row)}) for row in SITE.table("probes")
    )
    return replace(SITE, tables={**SITE.tables, "probes": rows})


@pytest.fixture(scope="module")
def even():
    return grow_copy(SITE, seed=3, first_day="2032-07-01", days=2, gradients=False)


@pytest.fixture(scope="module")
def uneven():
    return grow_copy(SITE, seed=3, first_day="2032-07-01", days=2, gradients=False, azimuth=True)


def test_around_the_stem_the_mean_is_the_stem(uneven):
    truth, _ = uneven
    for stem in truth.stems:
        faces = forest.facing(stem, np.arange(0.0, 360.0, 5.0))
        assert faces.mean() == pytest.approx(1.0, rel=1e-12)
        assert faces.max() - faces.min() == pytest.approx(2.0 * stem.azimuth_amplitude, rel=5e-3)


def test_flows_of_stems_do_not_change(even, uneven):
    for stand, by_species in even[0].strata.items():
        for species in by_species:
            np.testing.assert_array_equal(
                even[0].sampled_mm(stand, species), uneven[0].sampled_mm(stand, species)
            )
    assert {s.azimuth_amplitude for s in even[0].stems} == {0.0}


def test_amplitudes_fill_their_range_and_directions_the_circle(uneven):
    low, high = assumptions.AZIMUTH_AMPLITUDE
    amplitudes = np.array([stem.azimuth_amplitude for stem in uneven[0].stems])
    greatest = np.array([stem.greatest_azimuth for stem in uneven[0].stems])
    assert low <= amplitudes.min() < low + 0.03 and high - 0.03 < amplitudes.max() <= high
    assert greatest.min() < 30.0 and 330.0 < greatest.max() < 360.0


def test_a_probe_sees_its_face():
    """By hand: F(a) = mean (1 + A cos(a - a0)), for the site's probes turned to every quarter."""
    for azimuth in (0.0, 90.0, 180.0, 270.0):
        truth, _ = grow_copy(
            faced(lambda _, a=azimuth: a), seed=3, first_day="2032-07-01", days=2, azimuth=True
        )
        plain, _ = grow_copy(faced(lambda _, a=azimuth: a), seed=3, first_day="2032-07-01", days=2)
        for name in ("P01", "P11", "P16"):
            stem = truth.known[truth.probes[name][0].tree].stem
            apart = np.radians(azimuth - stem.greatest_azimuth)
            by_hand = 1.0 + stem.azimuth_amplitude * np.cos(apart)
            np.testing.assert_allclose(
                truth.point_flux(name), by_hand * plain.point_flux(name), rtol=1e-12
            )


def test_a_probe_without_azimuth_has_one_drawn_by_seed():
    site = faced(lambda _: None)
    shares = []
    for seed in (3, 3, 4):
        truth, _ = grow_copy(site, seed=seed, first_day="2032-07-01", days=2, azimuth=True)
        shares.append([parts[0].facing for parts in truth.probes.values()])
    assert shares[0] == shares[1] != shares[2]
    assert np.ptp(shares[0]) > 0.1


def test_what_is_logged_follows_the_face(even, uneven):
    """Needles at a fast face are cooled more, the ratio of the rises there is greater."""
    for name, quantity, unit in (("P11", "heated_difference", "K"), ("P16", "log_heat_ratio", "1")):
        shown = {}
        for label, (truth, plan) in (("even", even), ("uneven", uneven)):
            row = next(r for r in plan.channels if r.id == name)
            row = row.model_copy(update={"quantity": quantity, "unit": unit})
            every = round(plan.logs[row.log].interval_min * 60) // truth.step_s
            shown[label] = log_values(truth, SITE, [row], every)[:, 0]
        facing = uneven[0].probes[name][0].facing
        assert facing != 1.0
        flux = uneven[0].point_flux(name)[0].reshape(-1, every).mean(axis=1)
        day = flux > 0.5 * flux.max()
        more = shown["uneven"][day].mean() - shown["even"][day].mean()
        assert np.sign(more) == np.sign(facing - 1.0) * (-1.0 if name < "P16" else 1.0)


def test_needles_read_the_flux_of_their_face(uneven):
    """Like a needle of an even stem whose flux is that of the face everywhere."""
    truth, _ = uneven
    for name in ("P01", "P11"):
        (part,) = truth.probes[name]
        stem, flux_at = truth.known[part.tree].stem, truth.flux_at(part.tree)
        ratio = signals.needle_ratio(
            replace(part, facing=1.0), stem, lambda d, p=part, f=flux_at: p.facing * f(d)
        )
        assert ratio.min() < 0.9
        np.testing.assert_allclose(truth.needle_ratio(name)[0], ratio, rtol=1e-12)


def test_truth_says_which_assumptions_were_taken(even, uneven):
    assert even[0].options == {
        "wound": "cubic", "azimuth": False, "gradients": "none",
        "night_cooling": assumptions.NIGHT_COOLING, "weather": "stochastic",
    }  # fmt: skip
    assert uneven[0].options == {**even[0].options, "azimuth": True}
