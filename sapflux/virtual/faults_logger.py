"""Faults of the logger and its program: stuck, coarse, coded, in another unit, exchanged."""

import numpy as np

from sapflux.virtual.copy_values import decimals
from sapflux.virtual.faults_kinds import SIGNAL, Kind, columns_of, couples

CODES = (-6999.0, 6999.0, 7999.0, -99999.0, -9999.0)
# Sizes of a change of unit by quantity: times, or if negative divided by.
MILLIVOLT_IN_KELVIN = 25.0  # K per mV of type T, rounded
UNIT_CHANGES = {
    "heated_emf": (1000.0, MILLIVOLT_IN_KELVIN),
    "unheated_emf": (1000.0, MILLIVOLT_IN_KELVIN),
    "heated_difference": (-MILLIVOLT_IN_KELVIN, 1.8),
    "unheated_difference": (-MILLIVOLT_IN_KELVIN, 1.8),
    "rise_downstream": (1.8, -1000.0),
    "rise_upstream": (1.8, -1000.0),
    "logged_velocity": (10.0, -3.6),
}


def stuck_value(records, fault, rng):
    """A frozen register: the same number for `size` hours."""
    rows = records.rows(fault)
    for column, _ in records.struck(fault):
        records.values[rows, column] = records.values[rows[:1], column]


def coarse_resolution(records, fault, rng):
    """Another input range: the smallest step is `size` times as wide."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        step = fault.size * 10.0 ** -decimals(row.quantity, row.unit)
        records.values[rows, column] = np.round(records.values[rows, column] / step) * step


def missing_code(records, fault, rng):
    """A number that stands for missing, and that the layout does not tell, for `size` hours."""
    rows = records.rows(fault)
    code = rng.choice([code for code in CODES if code not in records.declared])
    for column, _ in records.struck(fault):
        records.values[rows, column] = code


def averaged_code(records, fault, rng):
    """A code for missing that entered an average with the share `size` of its samples."""
    rows, code = records.rows(fault), rng.choice(CODES)
    for column, _ in records.struck(fault):
        own = records.values[rows, column]
        records.values[rows, column] = own + fault.size * (code - own)


def unit_change(records, fault, rng):
    """A program that writes another unit: values times `size`, if negative divided by it."""
    rows = records.rows(fault)
    for column, _ in records.struck(fault):
        records.values[rows, column] *= fault.size if fault.size > 0.0 else -1.0 / fault.size


def exchanged_columns(records, fault, rng):
    """Two cables back in each other's place after a visit, for `size` days."""
    rows = records.rows(fault)
    (first, _), (second, _) = records.struck(fault)
    records.values[np.ix_(rows, [first, second])] = records.values[np.ix_(rows, [second, first])]


def unit_sizes(place, plan):
    """Sizes that a change of unit can have in a column."""
    quantity = next(
        r.quantity for r in plan.channels if (r.log, r.column) == (place.log, place.name)
    )
    return UNIT_CHANGES[quantity]


KINDS = (
    Kind("stuck_value", columns_of(*SIGNAL), 0.01, (1.0, 120.0), "h", None, stuck_value),
    Kind("coarse_resolution", columns_of(*SIGNAL), 0.003, (2.0, 100.0), "1", (5.0, 40.0),
         coarse_resolution, begins="visit"),
    Kind("missing_code", columns_of(*SIGNAL), 0.01, (0.2, 24.0), "h", None, missing_code),
    Kind("averaged_code", columns_of(*SIGNAL), 0.03, (1 / 600, 0.5), "1", (0.0, 0.01),
         averaged_code),
    Kind("unit_change", columns_of(*UNIT_CHANGES), 0.003, (1.8, 1000.0), "1", (1.0, 20.0),
         unit_change, begins="visit", until="visit", signed=True, choices=unit_sizes),
    Kind("exchanged_columns", couples, 0.003, (2.0, 60.0), "d", None, exchanged_columns,
         begins="visit"),
)  # fmt: skip
