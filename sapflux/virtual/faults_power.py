"""Faults of supply and heaters: power loss, sag, low battery, wrong heater power."""

import numpy as np

from sapflux.virtual import assumptions, sensors
from sapflux.virtual.copy_values import as_written
from sapflux.virtual.faults_kinds import HEATED, Kind, columns_of, logs_of, probes_of
from sapflux.virtual.faults_records import per_kelvin

RECOVERY_H = 3.0  # after which a needle is warm again
ELECTRIC = ("heater_voltage", "heater_current")  # each goes with the root of the power
SUPPLY = (*ELECTRIC, "heater_state")
SAG_FROM, SAG_DEEPEST, SAG_TO = 1.0, 6.0, 11.0  # h of standard time


def power_loss(records, fault, rng):
    """Heaters of a log off for `size` hours; the needles cool, and warm up again afterwards."""
    rows = records.rows(fault)
    weather = records.truth.weather
    back = fault.begin + np.timedelta64(round(fault.size * 3600), "s")
    share = ((weather.end <= fault.begin) | (weather.end > back)).astype(float)
    response = records.mean(sensors.heater_response(share, records.truth.step_s))[rows]
    powered = records.mean(share)[rows]
    for column, row in records.struck(fault):
        if row.quantity in SUPPLY:
            records.values[rows, column] *= powered
        else:
            _heat(records, rows, column, row, response, rng)


def supply_sag(records, fault, rng):
    """Heater power of a log lower by up to `size` at every dawn, back by noon."""
    rows = records.rows(fault)
    hours = records.hours(rows)
    depth = np.interp(hours, [SAG_FROM, SAG_DEEPEST, SAG_TO], [0.0, 1.0, 0.0])
    power = 1.0 - fault.size * depth
    for column, row in records.struck(fault):
        if row.quantity in ELECTRIC:
            records.values[rows, column] *= np.sqrt(power)
        elif row.quantity in HEATED:
            _heat(records, rows, column, row, power, rng)


def low_battery(records, fault, rng):
    """Supply voltage of a log lower by `size` volts."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        records.values[rows, column] -= as_written(fault.size, row.quantity, row.unit)


def heater_power(records, fault, rng):
    """Power of one heater wrong by the share `size` since it was built in."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        _heat(records, rows, column, row, 1.0 + fault.size, rng)


def _heat(records, rows, column, row, power, rng):
    """A heated column at another power [1]: heat scales, gradient and noise stay."""
    natural = records.natural(row)[rows]
    noise = assumptions.DISSIPATION_NOISE[0] * per_kelvin(row)
    lost = np.sqrt(np.clip(1.0 - np.asarray(power) ** 2, 0.0, 1.0))
    made = natural + (records.values[rows, column] - natural) * power
    records.values[rows, column] = made + rng.normal(0.0, noise, len(rows)) * lost


KINDS = (
    Kind("wrong_heater_power", probes_of(*HEATED), 0.01, (0.02, 0.6), "1", (1.0, 1.0),
         heater_power, begins="first", until="end", signed=True),
    Kind("heater_power_loss", logs_of(*HEATED, more=SUPPLY), 0.2, (0.5, 72.0), "h", None,
         power_loss, after_h=RECOVERY_H),
    Kind("supply_sag", logs_of(*HEATED, more=ELECTRIC), 0.15, (0.003, 0.3), "1",
         (2.0, 15.0), supply_sag, begins="evening"),
    Kind("low_battery", columns_of("battery_voltage"), 0.1, (0.3, 3.0), "V", (0.5, 10.0),
         low_battery),
)  # fmt: skip
