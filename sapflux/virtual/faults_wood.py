"""Faults of a probe in its wood: dying heaters, lost contact, wounds that grow, frost."""

import numpy as np

from sapflux.physics.heat_pulse import CM_PER_HOUR, log_ratio_of
from sapflux.virtual.copy_values import FULL_SUN
from sapflux.virtual.faults_kinds import (
    HEATED,
    PULSE,
    THERMAL,
    UNHEATED,
    Kind,
    Place,
    columns_of,
    logs_of,
    probes_of,
)
from sapflux.virtual.faults_pulse import show_rises
from sapflux.virtual.faults_records import per_kelvin
from sapflux.virtual.forest import lagged

LAG_OF_GRADIENT_S = 7200.0  # of the natural gradient behind the sun
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
    _lose_contact(records, fault, records.progress(fault))


def resin_pocket(records, fault, rng):
    """Resin fills the hole at once: the same as a loss of contact, whole and for good."""
    _lose_contact(records, fault, np.ones(len(records.rows(fault))))


def _lose_contact(records, fault, along):
    rows = records.rows(fault)
    kept = np.maximum(1.0 - 3.0 * fault.size * along, LEAST_AMPLITUDE)
    for column, row in records.struck(fault):
        zero = records.zero_flow(row)[rows]
        cooled = zero - records.values[rows, column]
        records.values[rows, column] = zero * (1.0 + fault.size * along) - cooled * kept


def sensitivity_loss(records, fault, rng):
    """The wound grows: what the probe shows of flow falls by the share `size` to the end."""
    _show_flow(records, fault, 1.0 - fault.size * records.progress(fault))


def sensitivity_step(records, fault, rng):
    """A probe drilled anew into other wood: it shows 1 + `size` of the flow from then on."""
    _show_flow(records, fault, np.full(len(records.rows(fault)), 1.0 + fault.size))


def _show_flow(records, fault, kept):
    """Another share of the flow (record of the fault) [1].

    Of a heated column in its flow index; of a pulse in the logarithm of the ratio of its rises,
    whose product stays.
    """
    rows, values, struck = records.rows(fault), records.values, records.struck(fault)
    if struck[0][1].quantity not in HEATED:
        down, up = records.rises(struck[0][1])[:, rows]
        both = (down > 0.0) & (up > 0.0)
        turn = np.where(both, up / np.where(both, down, 1.0), 1.0) ** ((1.0 - kept) / 2.0)
        show_rises(records, fault, np.array([down * turn, up / turn]))
        return
    for column, row in struck:
        zero = records.zero_flow(row)[rows]
        index = zero / values[rows, column] - 1.0
        values[rows, column] = zero / (1.0 + index * kept)


def offset_step(records, fault, rng):
    """Needles of a heat-ratio probe seated anew, aslant: `size` cm h-1 more from then on."""
    rises = records.rises(records.struck(fault)[0][1])[:, records.rows(fault)]
    (probe,) = records.truth.probes[records.struck(fault)[0][1].id]
    change = log_ratio_of(fault.size * CM_PER_HOUR, probe.wood_diffusivity, probe.spacing)
    show_rises(records, fault, rises * np.exp([[0.5 * change], [-0.5 * change]]))


def sunlit_stem(records, fault, rng):
    """A gap in the crowns: up to `size` kelvin of natural gradient in all pairs of a stem."""
    rows, weather = records.rows(fault), records.truth.weather
    sunny = lagged(weather.shortwave_radiation, LAG_OF_GRADIENT_S, weather.step_s) / FULL_SUN
    push = fault.size * records.mean(sunny)[rows]
    for column, row in records.struck(fault):
        records.values[rows, column] += push * per_kelvin(row)


def pairs_of_trees(plan, truth):
    """Places: every tree with heated pairs, with all pairs that a log keeps of it."""
    found = {}
    for row in plan.channels:
        if row.quantity in (*HEATED, *UNHEATED):
            found.setdefault((row.log, truth.tree_of[row.id]), []).append(row)
    return [
        Place(log, tree, tuple(row.column for row in rows))
        for (log, tree), rows in found.items()
        if any(row.quantity in HEATED for row in rows)
    ]


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
    Kind("dampening", probes_of(*HEATED), 0.01, (0.02, 0.5), "1", (1.0, 1.0), sensitivity_loss,
         begins="first", until="end"),
    Kind("dying_probe", probes_of(*HEATED), 0.01, (0.1, 5.0), "% d-1", (10.0, 60.0), dying_probe),
    Kind("loss_of_contact", probes_of(*HEATED), 0.015, (0.01, 0.3), "1", (15.0, 60.0),
         loss_of_contact),
    Kind("sensitivity_loss", probes_of(*HEATED, *PULSE), 0.02, (0.02, 0.5), "1",
         (20.0, 90.0), sensitivity_loss),
    Kind("resin_pocket", probes_of(*HEATED), 0.003, (0.01, 0.3), "1", (1.0, 1.0), resin_pocket,
         until="end"),
    Kind("sensitivity_step", probes_of(*HEATED, *PULSE), 0.01, (0.02, 0.6), "1", (1.0, 1.0),
         sensitivity_step, begins="visit", until="end", signed=True),
    Kind("offset_step", probes_of(*PULSE), 0.01, (0.1, 5.0), "cm h-1", (1.0, 1.0), offset_step,
         begins="visit", until="end", signed=True),
    Kind("sunlit_stem", pairs_of_trees, 0.02, (0.02, 1.5), "K", (5.0, 60.0), sunlit_stem,
         signed=True),
    Kind("level_step", columns_of(*HEATED), 0.01, (0.01, 0.3), "1", (1.0, 1.0), level_step,
         begins="visit", until="end", signed=True),
    Kind("frost", logs_of(*THERMAL), 0.3, (0.1, 5.0), "K", (0.25, 0.5), frost, begins="frost"),
)  # fmt: skip
