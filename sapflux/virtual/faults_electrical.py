"""Faults of wires and inputs: reversed, open, short, floating, wet, struck by lightning, bitten."""

import numpy as np

from sapflux import schema, units
from sapflux.physics import thermocouple
from sapflux.virtual import sensors
from sapflux.virtual.copy_values import FULL_SUN, as_written
from sapflux.virtual.faults_kinds import (
    AFTER,
    BEFORE,
    HEATED,
    PULSE,
    RATIOS,
    RISES,
    SIGNAL,
    THERMAL,
    Kind,
    columns_of,
    followers,
    logs_of,
    probes_of,
)
from sapflux.virtual.faults_records import per_kelvin
from sapflux.virtual.forest import lagged

DRYING_H = 3.0  # e-folding time of a wet connector
WET_NOISE = 5.0  # times the noise of the column
CHARGING_LAG_S = 3600.0  # of a battery behind the sun
SURGE = 5.0  # daily ranges, of the strike that leaves an offset
WHOLE = ("heat_ratio", *RATIOS)  # what one column says of both needles
FLOOR = 0.02  # share of the daily range, noise of an input that shows nothing


def polarity_reversal(records, fault, rng):
    """Two wires, or the needles up and down of the heater, exchanged for `size` days."""
    rows, struck = records.rows(fault), records.struck(fault)
    for column, row in struck:
        if row.quantity in (*HEATED, *RATIOS):
            records.values[rows, column] *= -1.0
        elif row.quantity == "heat_ratio":
            records.values[rows, column] = 1.0 / records.values[rows, column]
    for names in (RISES, BEFORE, AFTER):
        pair = [(column, row) for column, row in struck if row.quantity in names]
        if len(pair) == 2:
            (first, one), (second, other) = pair
            shown = [
                units.to_si(records.values[rows, column], row.unit,
                            difference=schema.QUANTITIES[row.quantity].difference)
                for column, row in pair
            ]  # fmt: skip
            records.values[rows, first] = as_written(shown[1], one.quantity, one.unit)
            records.values[rows, second] = as_written(shown[0], other.quantity, other.unit)


def open_input(records, fault, rng):
    """A broken wire for `size` hours: the input reads half beyond its physical range."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        top = 1.5 * schema.QUANTITIES[row.quantity].high
        records.values[rows, column] = as_written(top, row.quantity, row.unit)


def shorted_input(records, fault, rng):
    """Bare wires that touch, for `size` hours: nearly nothing, with a little noise.

    A temperature is then that of the logger's panel, to which the pair is compared.
    """
    rows, weather = records.rows(fault), records.truth.weather
    for column, row in records.struck(fault):
        noise = rng.normal(0.0, FLOOR * records.daily_range(column), len(rows))
        records.values[rows, column] = noise
        if row.quantity in (*BEFORE, *AFTER):
            panel = records.mean(weather.air_temperature)[rows]
            records.values[rows, column] += as_written(panel, row.quantity, row.unit)


def floating_input(records, fault, rng):
    """A loose wire: a random walk on top, of `size` daily ranges in an hour."""
    rows = records.rows(fault)
    hours = records.every * records.truth.step_s / 3600.0
    for column, _ in records.struck(fault):
        step = fault.size * records.daily_range(column) * np.sqrt(hours)
        records.values[rows, column] += np.cumsum(rng.normal(0.0, step, len(rows)))


def wet_connector(records, fault, rng):
    """Water in a plug from the first rain on: `size` microvolts and noise, drying over hours."""
    rows = records.rows(fault)
    decay = np.exp(-records.days(fault) * 24.0 / DRYING_H)
    for column, row in records.struck(fault):
        kelvin = fault.size * 1e-6 / thermocouple.sensitivity(sensors.ROOM)
        noise = WET_NOISE * records.noise(column) * rng.standard_normal(len(rows))
        wet = kelvin * per_kelvin(row) + noise
        records.values[rows, column] += wet * decay


def earth_loop(records, fault, rng):
    """A current of the charging supply through the ground: up to `size` kelvin in full sun."""
    rows, weather = records.rows(fault), records.truth.weather
    charging = lagged(weather.shortwave_radiation, CHARGING_LAG_S, weather.step_s) / FULL_SUN
    push = fault.size * np.minimum(records.mean(charging)[rows], 1.0)
    for column, row in records.struck(fault):
        records.values[rows, column] += push * per_kelvin(row)


def panel_error(records, fault, rng):
    """A single-ended reading against a panel that warms: `size` kelvin in each kelvin an hour."""
    rows, weather = records.rows(fault), records.truth.weather
    hours = records.every * weather.step_s / 3600.0
    warming = np.gradient(records.mean(weather.air_temperature), hours)[rows]
    for column, row in records.struck(fault):
        records.values[rows, column] += fault.size * warming * per_kelvin(row)


def lightning(records, fault, rng):
    """A surge into all channels of a log at once, of up to `size` daily ranges either way."""
    rows = records.rows(fault)
    for column, _ in records.struck(fault):
        push = fault.size * rng.uniform(0.5, 1.0) * rng.choice([-1.0, 1.0])
        records.values[rows, column] += push * records.daily_range(column)


def lightning_offset(records, fault, rng):
    """A surge that leaves one input `size` daily ranges off until it is mended."""
    rows = records.rows(fault)
    for column, _ in records.struck(fault):
        records.values[rows, column] += fault.size * records.daily_range(column)
        records.values[rows[0], column] += SURGE * np.sign(fault.size) * records.daily_range(column)


def spike(records, fault, rng):
    """One or two records off by `size` daily ranges."""
    rows = records.rows(fault)
    for column, _ in records.struck(fault):
        records.values[rows, column] += fault.size * records.daily_range(column)


def cable_damage(records, fault, rng):
    """A bitten cable: drops and jumps of `size` daily ranges that come and go."""
    rows = records.rows(fault)
    for column, _ in records.struck(fault):
        touched = rng.random(len(rows)) < 0.6
        touched[:1] = True
        jumps = fault.size * records.daily_range(column) * (rng.standard_normal(len(rows)) - 0.5)
        records.values[rows, column] += np.where(touched, jumps, 0.0)


def multiplexer_ghost(records, fault, rng):
    """The share `size` of the channel before shows up in this one."""
    rows = records.rows(fault)
    for column, _ in records.struck(fault):
        own, other = records.values[rows, column], records.values[rows, column - 1]
        records.values[rows, column] = own + fault.size * (other - own)


def _reversible(plan, truth):
    """Places: heated columns by themselves, and all that a log keeps of a point with pulses."""
    return columns_of(*HEATED)(plan, truth) + [
        place
        for place in probes_of(*PULSE, *BEFORE)(plan, truth)
        # One needle alone of the two has nothing to change places with.
        if len(place.columns) > 1 or place.columns[0] in _odd(plan, place.log)
    ]


def _odd(plan, log):
    return {r.column for r in plan.channels if r.log == log and r.quantity in WHOLE}


KINDS = (
    Kind("polarity_reversal", _reversible, 0.003, (0.5, 40.0), "d", None,
         polarity_reversal),
    Kind("open_input", columns_of(*SIGNAL), 0.008, (0.5, 240.0), "h", None, open_input),
    Kind("shorted_input", columns_of(*SIGNAL), 0.004, (0.5, 240.0), "h", None, shorted_input),
    Kind("floating_input", columns_of(*SIGNAL), 0.006, (0.01, 1.0), "daily range h-0.5",
         (0.2, 10.0), floating_input),
    Kind("wet_connector", columns_of(*THERMAL), 0.03, (10.0, 300.0), "uV", (0.25, 1.0),
         wet_connector, begins="rain", signed=True),
    Kind("earth_loop", logs_of(*HEATED), 0.05, (0.01, 0.5), "K", (5.0, 40.0), earth_loop,
         signed=True),
    Kind("panel_error", logs_of(*HEATED), 0.05, (5e-3, 0.2), "K (K h-1)-1", (5.0, 40.0),
         panel_error, signed=True),
    Kind("lightning", logs_of(*SIGNAL, fewest=3), 0.3, (0.2, 20.0), "daily range", (0.0, 0.01),
         lightning, begins="rain"),
    Kind("lightning_offset", columns_of(*SIGNAL), 0.005, (0.02, 3.0), "daily range", (3.0, 60.0),
         lightning_offset, begins="rain", signed=True),
    Kind("spike", columns_of(*SIGNAL), 0.1, (0.1, 20.0), "daily range", (0.0, 0.01), spike,
         signed=True),
    Kind("cable_damage", columns_of(*SIGNAL), 0.01, (0.03, 3.0), "daily range", (0.2, 10.0),
         cable_damage),
    Kind("multiplexer_ghost", followers, 0.003, (0.05, 1.0), "1", (1.0, 30.0), multiplexer_ghost),
)  # fmt: skip
