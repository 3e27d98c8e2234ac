"""Faults of a probe in its wood: dying heaters, lost contact, wounds that grow, frost."""

import numpy as np

from sapflux.virtual.faults_kinds import (
    HEATED,
    RATIOS,
    RISES,
    THERMAL,
    Kind,
    columns_of,
    logs_of,
    probes_of,
)
from sapflux.virtual.faults_records import per_kelvin

LOWEST_LEFT = 0.05  # of the difference, below which a dying heater does not fall
LEAST_AMPLITUDE = 0.1  # of the cooling by flow, left to a needle that lost contact


def dying_probe(records, fault, rng):
    """The heater gives `size` per cent less with each day."""
    rows = records.rows(fault)
    left = np.maximum(1.0 - fault.size / 100.0 * records.days(fault), LOWEST_LEFT)
    for column, row in records.struck(fault):
        natural = records.natural(row)[rows]
        records.values[rows, column] = natural + (records.values[rows, column] - natural) * left


def loss_of_contact(records, fault, rng):
    """The baseline rises to 1 + `size`, and what flow takes away shrinks three times as fast."""
    rows, along = records.rows(fault), records.progress(fault)
    kept = np.maximum(1.0 - 3.0 * fault.size * along, LEAST_AMPLITUDE)
    for column, row in records.struck(fault):
        zero = records.zero_flow(row)[rows]
        cooled = zero - records.values[rows, column]
        records.values[rows, column] = zero * (1.0 + fault.size * along) - cooled * kept


def sensitivity_loss(records, fault, rng):
    """The wound grows: what the probe shows of flow falls by the share `size` to the end.

    A heated column by its flow index; ratios and velocities by their value; a pair of rises so
    that the logarithm of their ratio falls and their product stays.
    """
    rows, kept = records.rows(fault), 1.0 - fault.size * records.progress(fault)
    values, struck = records.values, records.struck(fault)
    for column, row in struck:
        if row.quantity in HEATED:
            zero = records.zero_flow(row)[rows]
            index = zero / values[rows, column] - 1.0
            values[rows, column] = zero / (1.0 + index * kept)
        elif row.quantity in RATIOS:
            values[rows, column] *= kept
    rises = {row.quantity: column for column, row in struck if row.quantity in RISES}
    if len(rises) == 2:
        down, up = (values[rows, rises[name]] for name in RISES)
        both = (down > 0.0) & (up > 0.0)
        part = (1.0 - kept[both]) / 2.0
        turn = (up[both] / down[both]) ** part
        values[rows[both], rises["rise_downstream"]] *= turn
        values[rows[both], rises["rise_upstream"]] /= turn


def level_step(records, fault, rng):
    """A needle seated anew: its difference is another by the share `size` from then on."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        natural = records.natural(row)[rows]
        heat = records.values[rows, column] - natural
        records.values[rows, column] = natural + heat * (1.0 + fault.size)


def frost(records, fault, rng):
    """Freezing wood: all thermal columns of a log erratic, with a spread of `size` kelvin."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        walk = np.cumsum(rng.normal(0.0, 1.0, len(rows))) / np.sqrt(max(len(rows), 1))
        jumps = walk + 0.5 * rng.standard_normal(len(rows))
        records.values[rows, column] += fault.size * jumps * per_kelvin(row)


KINDS = (
    Kind("dying_probe", probes_of(*HEATED), 0.01, (0.1, 5.0), "% d-1", (10.0, 60.0), dying_probe),
    Kind("loss_of_contact", probes_of(*HEATED), 0.015, (0.01, 0.3), "1", (15.0, 60.0),
         loss_of_contact),
    Kind("sensitivity_loss", probes_of(*HEATED, *RATIOS, *RISES), 0.02, (0.02, 0.5), "1",
         (20.0, 90.0), sensitivity_loss),
    Kind("level_step", columns_of(*HEATED), 0.01, (0.01, 0.3), "1", (1.0, 1.0), level_step,
         begins="visit", until="end", signed=True),
    Kind("frost", logs_of(*THERMAL), 0.3, (0.1, 5.0), "K", (0.25, 0.5), frost, begins="frost"),
)  # fmt: skip
