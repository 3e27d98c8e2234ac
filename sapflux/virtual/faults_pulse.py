"""Faults of heat pulses: wrong energy, none, one that never ends, drift before it, small rises.

Each says what becomes of the two rises of a pulse; `show_rises` writes it into whatever a log keeps
of them: rises, temperatures after the pulse, their ratio, its logarithm, or a velocity.
"""

import numpy as np

from sapflux.units import CM2_PER_S, MM
from sapflux.virtual import assumptions, sensors
from sapflux.virtual.copy_values import as_written
from sapflux.virtual.faults_kinds import AFTER, BEFORE, PULSE, RATIOS, RISES, Kind, probes_of
from sapflux.virtual.faults_records import per_kelvin

READ_AT = 80.0  # s after the pulse, middle of the reading window
WARMING_H = 2.0  # e-folding time of wood whose heater is never switched off
UPSTREAM = (RISES[1], AFTER[1], "heat_ratio", *RATIOS)


def show_rises(records, fault, made):
    """Write other rises (2, record of the fault) [K], downstream first, into a fault's columns.

    A program that divides by a rise that is not positive, or takes its logarithm, has no value.
    """
    rows, struck = records.rows(fault), records.struck(fault)
    old = records.rises(struck[0][1])[:, rows]
    change = _log_ratio(made) - _log_ratio(old)
    for column, row in struck:
        if row.quantity in (*RISES, *AFTER):
            side = int(row.quantity.endswith("upstream"))
            records.values[rows, column] += (made - old)[side] * per_kelvin(row)
        elif row.quantity == "heat_ratio":
            records.values[rows, column] *= np.exp(change)
        elif row.quantity == "log_heat_ratio":
            records.values[rows, column] += change
        elif row.quantity == "logged_velocity":
            more = sensors.stored_velocity(change, *_embedded(records.site, row.id))
            records.values[rows, column] += as_written(more, row.quantity, row.unit)


def pulse_energy(records, fault, rng):
    """A pulse with the share `size` of its energy missing or too much: both rises scale."""
    factor = 1.0 + fault.size
    noise = assumptions.RATIO_NOISE[0] * max(1.0 - factor**2, 0.0) ** 0.5
    old = _rises(records, fault)
    show_rises(records, fault, old * factor + rng.normal(0.0, noise, old.shape))


def misfire(records, fault, rng):
    """The share `size` of the pulses does not come: rises of nothing but noise."""
    made = _rises(records, fault).copy()
    missed = rng.random(made.shape[1]) < fault.size
    missed[rng.integers(len(missed))] = True
    made[:, missed] = rng.normal(0.0, assumptions.RATIO_NOISE[0], (2, missed.sum()))
    show_rises(records, fault, made)


def stuck_relay(records, fault, rng):
    """A heater that stays on: wood warms by `size` K h-1 at first, and rises are that drift."""
    rows = records.rows(fault)
    hours = records.days(fault) * 24.0
    warmer = fault.size * WARMING_H * -np.expm1(-hours / WARMING_H)
    drift = fault.size * np.exp(-hours / WARMING_H) * READ_AT / 3600.0
    noise = rng.normal(0.0, assumptions.RATIO_NOISE[0], (2, len(rows)))
    show_rises(records, fault, drift + noise)
    for column, row in records.struck(fault):
        if row.quantity in (*BEFORE, *AFTER):
            records.values[rows, column] += warmer * per_kelvin(row)


def pre_pulse_drift(records, fault, rng):
    """Wood that warms by `size` mK s-1 at the pulse: the same is added to both rises."""
    show_rises(records, fault, _rises(records, fault) + fault.size * 1e-3 * READ_AT)


def rise_not_positive(records, fault, rng):
    """The upstream rise at `size` kelvin below zero."""
    down, up = _rises(records, fault)
    show_rises(records, fault, np.array([down, np.full_like(up, -fault.size)]))


def saturated_rise(records, fault, rng):
    """The upstream rise `size` kelvin too high, so that high velocities meet a ceiling."""
    down, up = _rises(records, fault)
    show_rises(records, fault, np.array([down, up + fault.size]))


def _rises(records, fault):
    """Rises of the pulses of a fault without it, (2, record) [K]."""
    return records.rises(records.struck(fault)[0][1])[:, records.rows(fault)]


def _log_ratio(rises):
    down, up = np.where(rises > 0.0, rises, np.nan)
    return np.log(down / up)


def _embedded(site, probe):
    """Diffusivity [m2 s-1] and spacing [m] in the program of a probe's logger."""
    row = next(r for r in reversed(site.table("probes")) if r.probe == probe)
    return row.embedded_diffusivity_cm2_s * CM2_PER_S, row.embedded_spacing_mm * MM


PULSES, FROM_UPSTREAM = probes_of(*PULSE), probes_of(*UPSTREAM)
KINDS = (
    Kind("wrong_pulse_energy", PULSES, 0.03, (0.02, 0.9), "1", (1.0, 30.0), pulse_energy,
         signed=True),
    Kind("misfire", PULSES, 0.03, (0.01, 1.0), "1", (0.5, 20.0), misfire),
    Kind("stuck_relay", probes_of(*PULSE, *BEFORE), 0.005, (0.05, 5.0), "K h-1", (0.1, 5.0),
         stuck_relay),
    Kind("pre_pulse_drift", PULSES, 0.03, (0.02, 2.0), "mK s-1", (0.05, 0.15), pre_pulse_drift,
         begins="dawn", signed=True),
    Kind("rise_not_positive", FROM_UPSTREAM, 0.02, (1e-3, 0.05), "K", (0.03, 0.2),
         rise_not_positive, begins="noon"),
    Kind("saturated_rise", FROM_UPSTREAM, 0.02, (2e-3, 0.06), "K", (3.0, 40.0), saturated_rise),
)  # fmt: skip
