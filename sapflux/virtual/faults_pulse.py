"""Faults of heat pulses: wrong energy, drift before the pulse, rises that are too small."""

from sapflux.virtual import assumptions
from sapflux.virtual.faults_kinds import RISES, Kind, columns_of, pulses
from sapflux.virtual.faults_records import per_kelvin

READ_AT = 80.0  # s after the pulse, middle of the reading window


def pulse_energy(records, fault, rng):
    """A pulse with the share `size` of its energy missing or too much: both rises scale."""
    rows, factor = records.rows(fault), 1.0 + fault.size
    for column, row in records.struck(fault):
        noise = assumptions.RATIO_NOISE[0] * max(1.0 - factor**2, 0.0) ** 0.5 * per_kelvin(row)
        scaled = records.values[rows, column] * factor
        records.values[rows, column] = scaled + rng.normal(0.0, noise, len(rows))


def pre_pulse_drift(records, fault, rng):
    """Wood that warms by `size` mK s-1 at the pulse: the same is added to both rises."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        records.values[rows, column] += fault.size * 1e-3 * READ_AT * per_kelvin(row)


def rise_not_positive(records, fault, rng):
    """The upstream rise at `size` kelvin below zero."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        records.values[rows, column] = -fault.size * per_kelvin(row)


def saturated_rise(records, fault, rng):
    """The upstream rise `size` kelvin too high, so that high velocities meet a ceiling."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        records.values[rows, column] += fault.size * per_kelvin(row)


KINDS = (
    Kind("wrong_pulse_energy", pulses, 0.03, (0.02, 0.9), "1", (1.0, 30.0), pulse_energy,
         signed=True),
    Kind("pre_pulse_drift", pulses, 0.03, (0.02, 2.0), "mK s-1", (0.05, 0.15), pre_pulse_drift,
         begins="dawn", signed=True),
    Kind("rise_not_positive", columns_of(RISES[1]), 0.02, (1e-3, 0.05), "K", (0.03, 0.2),
         rise_not_positive, begins="noon"),
    Kind("saturated_rise", columns_of(RISES[1]), 0.02, (2e-3, 0.06), "K", (3.0, 40.0),
         saturated_rise),
)  # fmt: skip
