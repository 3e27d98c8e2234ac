"""How much an installation's flux hangs on its baseline, and what a run says of ageing probes."""

import numpy as np
import pandas as pd
import pytest

from sapflux import quality
from sapflux.physics import dissipation
from sapflux.pipeline.installation_lives import FlagCounts
from sapflux.pipeline.notes import notes_of_lives


class Cube(dict):
    """What `add_amplification` reads of a cube."""

    def __init__(self, *names):
        super().__init__(probe=type("Names", (), {"values": np.array(names)}))


def counted(flux, amplification, installation, block=None):
    counts, size = FlagCounts(), flux.shape[2]
    for first in range(0, size, block or size):
        part = slice(first, first + (block or size))
        counts.add_amplification(
            Cube("A", "B"), installation[:, part], flux[..., part], amplification[..., part]
        )
    return counts


def season(seed=2):
    generator = np.random.default_rng(seed)
    index = generator.uniform(-0.01, 0.5, (2, 1, 400))
    index[0, 0, 30:40] = np.nan
    return dissipation.flux_density(index), dissipation.amplification(index), index


def test_it_is_the_change_of_the_whole_flux_by_the_baseline():
    flux, gain, index = season()
    installation = np.zeros((2, 400), dtype=int)
    counts = counted(flux, gain, installation)
    measured, step = 10.0 / (1.0 + index), 1e-7
    moved = [
        np.nansum(
            dissipation.flux_density(dissipation.flow_index(10.0 * (1 + e), measured)), axis=(1, 2)
        )
        for e in (step, -step)
    ]
    by_difference = np.log(moved[0] / moved[1]) / (2 * step)
    assert counts.amplification(("A", 0)) == pytest.approx(by_difference[0], rel=1e-4)
    assert counts.amplification(("B", 0)) == pytest.approx(by_difference[1], rel=1e-4)


def test_by_hand_for_two_installations_of_a_probe():
    # (1 * 10 + 3 * 2) / 4 = 4; the second (2 * 5) / 2 = 5. Outside of both nothing counts.
    flux = np.array([[[1.0, 3.0, np.nan, 2.0, 9.0]], [[0.0, 0.0, 0.0, 0.0, -1.0]]])
    gain = np.array([[[10.0, 2.0, 7.0, 5.0, 9.0]], [[np.nan] * 4 + [-5.0]]])
    installation = np.array([[0, 0, 0, 1, -1], [0, 0, 0, 0, 0]])
    counts = counted(flux, gain, installation)
    assert counts.amplification(("A", 0)) == 4.0
    assert counts.amplification(("A", 1)) == 5.0
    assert np.isnan(counts.amplification(("B", 0)))  # no upward flux
    assert np.isnan(counts.amplification(("C", 0)))  # never seen


def test_it_is_the_same_number_for_every_block_length():
    flux, gain, _ = season()
    installation = np.zeros((2, 400), dtype=int)
    whole = counted(flux, gain, installation).amplification(("A", 0))
    for block in (1, 7, 150):
        assert counted(flux, gain, installation, block).amplification(("A", 0)) == whole


def notes_on(**columns):
    table = pd.DataFrame({"probe": ["P2", "P1"], "oldest_age_d": [400.0, 380.0], **columns})
    lives = pd.DataFrame({"records": [], "usable_fraction": [], "probe": []})
    for name in quality.NATIVE:
        lives[f"{name}_fraction"] = []
    return list(notes_of_lives(lives, {"ageing_controls": table}))


def test_old_probes_without_controls_are_told_of():
    verdict = "no re-installed controls: a fall of sensitivity cannot be told from drought"
    assert notes_on(applied=False, verdict=verdict) == [
        f"P1, P2: installed for more than 365 days; {verdict}"
    ]
    assert notes_on(applied=False, verdict=verdict, oldest_age_d=200.0) == []


def test_a_correction_for_ageing_is_told_of_whatever_the_age():
    assert notes_on(applied=True, verdict="0.2 +- 0.05: corrected", oldest_age_d=200.0) == [
        "sensitivity lost with the age of heat dissipation probes: 0.2 +- 0.05: corrected"
    ]
