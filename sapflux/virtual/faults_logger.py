"""Faults of the logger and its program: stuck, coarse, coded, in another unit, exchanged."""

import numpy as np

from sapflux import units
from sapflux.virtual.copy_values import as_written, decimals
from sapflux.virtual.faults_kinds import AFTER, BEFORE, SIGNAL, Kind, columns_of, couples

CODES = (-6999.0, 6999.0, 7999.0, -99999.0, -9999.0, 0.0)
# Temperatures that a program may write in Fahrenheit.
SCALED = (*BEFORE, *AFTER, "air_temperature", "panel_temperature", "stem_temperature")
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


def ratio_logarithm(records, fault, rng):
    """A program that writes the logarithm of a ratio in place of the ratio, or the reverse."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        own = records.values[rows, column]
        if row.quantity == "log_heat_ratio":
            records.values[rows, column] = np.exp(own)
        else:
            records.values[rows, column] = np.log(np.where(own > 0.0, own, np.nan))


def temperature_scale(records, fault, rng):
    """A program that writes Fahrenheit, or Celsius where Fahrenheit was agreed on."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        kelvin = units.to_si(records.values[rows, column], row.unit)
        other = "degC" if row.unit == "degF" else "degF"
        records.values[rows, column] = as_written(kelvin, row.quantity, other)


def text_code(records, fault, rng):
    """A word in the place of a number for `size` hours: INF or ERROR (see `loggers.WORDS`)."""
    rows, word = records.rows(fault), rng.choice([-np.inf, np.inf])
    for column, _ in records.struck(fault):
        records.values[rows, column] = word


def single_samples(records, fault, rng):
    """A program that reads once where it averaged: `size` times the noise."""
    rows = records.rows(fault)
    more = np.sqrt(max(fault.size**2 - 1.0, 0.0))
    for column, _ in records.struck(fault):
        noise = more * records.noise(column)
        records.values[rows, column] += rng.normal(0.0, noise, len(rows))


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
    Kind("ratio_logarithm", columns_of("heat_ratio", "log_heat_ratio"), 0.003, (1.0, 1.0),
         "program", (1.0, 1.0), ratio_logarithm, begins="visit", until="visit"),
    Kind("temperature_scale", columns_of(*SCALED), 0.005, (1.8, 1.8), "degF K-1", (1.0, 1.0),
         temperature_scale, begins="visit", until="visit"),
    Kind("single_samples", columns_of(*SIGNAL), 0.003, (1.2, 10.0), "1", (1.0, 1.0),
         single_samples, begins="visit", until="visit"),
    Kind("text_code", columns_of(*SIGNAL), 0.01, (0.2, 48.0), "h", None, text_code),
)  # fmt: skip
