"""Pairs of installations of unlike age that saw the same days: an older probe and its control."""

from dataclasses import dataclass
from itertools import combinations

import numpy as np


@dataclass(frozen=True)
class Pair:
    """An older installation and its younger control, each (probe, point, installation).

    days : that both have; ln_ratio : mean over them of ln(index of the older / of the younger);
    age_difference_d : how much older it is [d].
    """

    older: tuple
    younger: tuple
    days: int
    age_difference_d: float
    ln_ratio: float


def pairs_of(rows, least_age_difference_d, fewest_common_days):
    """Every pair of installations of one group and point, sorted by older, then younger.

    rows : one a probe, point, installation and day, with `start`, group, age_d and index (> 0).
    """
    made = []
    for (_, point), of_group in rows.groupby(["group", "point"], sort=True):
        laid = of_group.pivot(index=["probe", "installation"], columns="start")
        keys = [(probe, point, int(number)) for probe, number in laid.index]
        age, index = (laid[name].to_numpy(dtype=float) for name in ("age_d", "index"))
        seen = np.isfinite(index)
        for one, other in combinations(range(len(keys)), 2):
            days = np.flatnonzero(seen[one] & seen[other])
            if len(days) < fewest_common_days:
                continue
            older = float((age[one, days] - age[other, days]).mean())
            ratio = float(np.log(index[one, days] / index[other, days]).mean())
            if older >= least_age_difference_d:
                made.append(Pair(keys[one], keys[other], len(days), older, ratio))
            elif -older >= least_age_difference_d:
                made.append(Pair(keys[other], keys[one], len(days), -older, -ratio))
    return sorted(made, key=lambda pair: (pair.older, pair.younger))


def independent(pairs):
    """Pairs of which no two share an installation, those of the largest age difference first."""
    taken, chosen = set(), []
    for pair in sorted(pairs, key=lambda pair: (-pair.age_difference_d, pair.older, pair.younger)):
        if taken.isdisjoint({pair.older, pair.younger}):
            taken |= {pair.older, pair.younger}
            chosen.append(pair)
    return chosen
