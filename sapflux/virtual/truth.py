"""What a sampling without any error would give, beside what the whole forest transpired."""

import math
from dataclasses import dataclass

import numpy as np

from sapflux.virtual.forest import Stem


@dataclass(frozen=True)
class Stratum:
    """The living stems of one species of one stand, with their daily water use.

    `daily_kg` is (stem, day); `sampled` marks stems that carry probes. `ground` is the plan area
    of the stand's plots [m2]. `counts` (stem) is how many stems of that ground each one stands
    for: 1 each if None; more where only some of the plots measure stems as thin, 0 outside them.
    """

    stems: tuple[Stem, ...]
    daily_kg: np.ndarray
    sampled: np.ndarray
    ground: float
    counts: np.ndarray | None = None

    @property
    def counted_area(self):
        """Sapwood area on the ground of the stand [m2]."""
        return (self.areas if self.counts is None else self.areas * self.counts).sum()

    @property
    def counted_kg(self):
        """Daily water use on the ground of the stand: (stem, day) [kg]."""
        return self.daily_kg if self.counts is None else self.daily_kg * self.counts[:, None]

    @property
    def areas(self):
        """True sapwood area of each stem [m2]."""
        return np.array([stem.sapwood_area for stem in self.stems])


def daily_sums(flow, step_s):
    """Water use of each day [kg] from a flow at each record [kg s-1] of whole days.

    >>> daily_sums(np.full(48, 1e-3), 1800)
    array([86.4])
    """
    per_day = 86400 // step_s
    return flow.reshape(-1, per_day).sum(axis=1) * step_s


def stand_mm(stratum):
    """Transpiration of all its stems per ground area: (day) [mm]."""
    return stratum.counted_kg.sum(axis=0) / stratum.ground


def sampled_mm(stratum, carrier=None):
    """The same from the stems with probes alone, by the ratio of sums on sapwood area: (day) [mm].

    carrier : the stratum whose stems stand in where this one has no probes.
    """
    source = carrier or stratum
    ratio = source.daily_kg[source.sampled].sum(axis=0) / source.areas[source.sampled].sum()
    return ratio * stratum.counted_area / stratum.ground


def sampling_variance(stratum):
    """Variance of the sampled season total that the design implies [mm2].

    Of a simple sample of n of N stems under the ratio estimator: (N / ground)^2 (1 - n/N) S2 / n
    with N the sum of `counts` and S2 the variance of the stems' departures from the ratio of all
    stems (Cochran 1977, Sampling Techniques, equation 6.11). Zero where all stems are sampled.

    Not for a stratum without probes: see `stand_in_difference`.
    """
    season, areas = stratum.daily_kg.sum(axis=1), stratum.areas
    counts = np.ones(len(areas)) if stratum.counts is None else stratum.counts
    departures = season - stratum.counted_kg.sum() / stratum.counted_area * areas
    count, sample = float(counts.sum()), int(stratum.sampled.sum())
    if sample >= count or count <= 1.0:
        return 0.0
    spread = float(np.sum(counts * departures**2)) / (count - 1.0)
    return (count / stratum.ground) ** 2 * (1.0 - sample / count) * spread / sample


def stand_in_difference(stratum, carrier):
    """Season total if every stem of the stand-in were sampled, minus the true one [mm]."""
    ratio = carrier.counted_kg.sum() / carrier.counted_area
    whole = ratio * stratum.counted_area / stratum.ground
    return float(whole - stratum.counted_kg.sum() / stratum.ground)


def stand_design(strata, carriers):
    """(standard error of sampling [mm], difference by stand-ins [mm]) of a stand's season total.

    strata : species -> `Stratum`; carriers : species -> the species that stands in for it. The
    stand-in's sample serves both species, so their areas add up before the variance is taken.
    """
    variance, difference = 0.0, 0.0
    for species, stratum in strata.items():
        if species in carriers:
            difference += stand_in_difference(stratum, strata[carriers[species]])
            continue
        borrowed = [strata[s].counted_area for s, carrier in carriers.items() if carrier == species]
        share = 1.0 + math.fsum(borrowed) / stratum.counted_area
        variance += share**2 * sampling_variance(stratum)
    return math.sqrt(variance), difference


def pooled(strata):
    """Strata of several stands as one, to stand in for another."""
    counts = [np.ones(len(s.stems)) if s.counts is None else s.counts for s in strata]
    return Stratum(
        tuple(stem for s in strata for stem in s.stems),
        np.concatenate([s.daily_kg for s in strata]),
        np.concatenate([s.sampled for s in strata]),
        math.fsum(s.ground for s in strata),
        np.concatenate(counts),
    )
