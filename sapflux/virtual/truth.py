"""What a sampling without any error would give, beside what the whole forest transpired."""

import math
from dataclasses import dataclass

import numpy as np

from sapflux.virtual.forest import Stem


@dataclass(frozen=True)
class Stratum:
    """The living stems of one species of one stand, with their daily water use.

    `daily_kg` is (stem, day); `sampled` marks stems that carry probes. `ground` is the plan area
    of the stand's plots [m2].
    """

    stems: tuple[Stem, ...]
    daily_kg: np.ndarray
    sampled: np.ndarray
    ground: float

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
    return stratum.daily_kg.sum(axis=0) / stratum.ground


def sampled_mm(stratum, carrier=None):
    """The same from the stems with probes alone, by the ratio of sums on sapwood area: (day) [mm].

    carrier : the stratum whose stems stand in where this one has no probes.
    """
    source = carrier or stratum
    ratio = source.daily_kg[source.sampled].sum(axis=0) / source.areas[source.sampled].sum()
    return ratio * stratum.areas.sum() / stratum.ground


def sampling_variance(stratum):
    """Variance of the sampled season total that the design implies [mm2].

    Of a simple sample of n of N stems under the ratio estimator: (N / ground)^2 (1 - n/N) S2 / n
    with S2 the variance of the stems' departures from the ratio of all stems (Cochran 1977,
    Sampling Techniques, equation 6.11). Zero where all stems are sampled.

    Not for a stratum without probes: see `stand_in_difference`.
    """
    season, areas = stratum.daily_kg.sum(axis=1), stratum.areas
    departures = season - season.sum() / areas.sum() * areas
    count, sample = len(areas), int(stratum.sampled.sum())
    spread = float(np.sum(departures**2)) / (count - 1)
    return (count / stratum.ground) ** 2 * (1.0 - sample / count) * spread / sample


def stand_in_difference(stratum, carrier):
    """Season total if every stem of the stand-in were sampled, minus the true one [mm]."""
    whole = carrier.daily_kg.sum() / carrier.areas.sum() * stratum.areas.sum() / stratum.ground
    return float(whole - stratum.daily_kg.sum() / stratum.ground)


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
        borrowed = [strata[s].areas.sum() for s, carrier in carriers.items() if carrier == species]
        share = 1.0 + math.fsum(borrowed) / stratum.areas.sum()
        variance += share**2 * sampling_variance(stratum)
    return math.sqrt(variance), difference
