"""The death of a tree with probes: its flow ends, in its probes and in the truth of the stand."""

from dataclasses import replace

import numpy as np

from sapflux.virtual import truth as tables
from sapflux.virtual.faults_kinds import SIGNAL, Kind, Place

DEATH = "tree_death"


def trees(plan, truth):
    """Places: every tree with probes, in the log of its first channel, by the tree's name."""
    found = {}
    for row in plan.channels:
        if row.quantity in SIGNAL and row.id in truth.probes:
            tree = truth.probes[row.id][0].tree
            log, columns = found.setdefault(tree, (row.log, []))
            if row.log == log:
                columns.append(row.column)
    return [Place(log, tree, tuple(columns)) for tree, (log, columns) in found.items()]


def alive(faults, tree, end):
    """Share of its flow that a tree still has: (time) [1].

    From 1 when it begins to die to 0 in `size` days, by a straight line; 1 where it lives on.
    """
    share = np.ones(len(end))
    for fault in faults:
        if fault.kind == DEATH and fault.name == tree:
            days = (end - fault.begin) / np.timedelta64(86400, "s")
            share *= np.clip(1.0 - days / fault.size, 0.0, 1.0)
    return share


def with_deaths(truth):
    """The truth with the daily water use of trees that die as it then is."""
    dead = {fault.name for fault in truth.faults if fault.kind == DEATH}
    if not dead:
        return truth
    strata = {
        stand: {
            species: replace(
                stratum,
                daily_kg=np.array([
                    tables.daily_sums(truth.tree_flow(stem.name), truth.step_s)
                    if stem.name in dead else own
                    for stem, own in zip(stratum.stems, stratum.daily_kg, strict=True)
                ]),
            )
            for species, stratum in by_species.items()
        }
        for stand, by_species in truth.strata.items()
    }  # fmt: skip
    return replace(truth, strata=strata)


KINDS = (
    Kind(DEATH, trees, 0.005, (0.5, 20.0), "d", (1.0, 1.0), until="end"),
)  # fmt: skip
