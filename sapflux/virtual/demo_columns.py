"""Columns of the demo site's loggers: their names, what they mean, and what they hold."""

from dataclasses import dataclass

import numpy as np

from sapflux.constants import ZERO_CELSIUS
from sapflux.virtual import demo_plan as plan
from sapflux.virtual import demo_signals, sensors, signals
from sapflux.virtual.forest import lagged
from sapflux.virtual.seeds import generator

CM_PER_HOUR = 0.01 / 3600.0


@dataclass(frozen=True)
class Column:
    """A logger column: its row of `channels.csv`, how it is printed, how its interval is made."""

    log: str
    name: str
    kind: str
    id: str
    point: int
    quantity: str
    unit: str
    decimals: int
    aggregation: str = "Avg"


def columns(truth):
    """Every column of every log, in the order of its files."""
    found = []
    for group, probe in truth.probes:
        found += _probe_columns(group, probe)
    found += [
        Column("upper", "heater_V", "log", "upper", 1, "heater_voltage", "V", 2),
        Column("upper", "batt_V", "log", "upper", 1, "battery_voltage", "V", 2, "Min"),
        Column("upper", "panel_C", "log", "upper", 1, "panel_temperature", "degC", 1),
        Column("lower", "Ubat", "log", "lower", 1, "battery_voltage", "V", 2),
        Column("pulse_a", "battery", "log", "pulse_a", 1, "battery_voltage", "V", 2),
        Column("weather", "Tair", "site", "", 1, "air_temperature", "degC", 2),
        Column("weather", "RH", "site", "", 1, "relative_humidity", "%", 1),
        Column("weather", "Rs", "site", "", 1, "shortwave_radiation", "W m-2", 1),
        Column("weather", "rain", "site", "", 1, "precipitation", "mm water", 2, "Tot"),
        Column("weather", "wind", "site", "", 1, "wind_speed", "m s-1", 2),
    ]
    return found


def channel_rows(truth):
    """(columns, rows) of `channels.csv`."""
    rows = [[c.log, c.name, c.kind, c.id, str(c.point), c.quantity, c.unit] for c in columns(truth)]
    return ["log", "column", "kind", "id", "point", "quantity", "unit"], rows


def values(truth, log, every):
    """name -> values of each column of a log, in the column's unit, one per interval.

    every : records of the weather's clock in one interval of the log.
    """
    out = {}
    for group, probe in truth.probes:
        if group.log == log:
            out.update(_probe_values(truth, group, probe, every))
    if log == "weather":
        out.update(_weather_values(truth.weather, every))
    else:
        out.update(_electrical_values(truth, log, every))
    return out


def _probe_columns(group, probe):
    if group.method == "heat_dissipation":
        unit, decimals = ("mV", 4) if group.stores == "heated_emf" else ("K", 3)
        name = f"dT_{probe.name}"
        return [Column(group.log, name, "probe", probe.name, 1, group.stores, unit, decimals)]
    kinds = {
        "rises": (("down", "rise_downstream", "K", 3), ("up", "rise_upstream", "K", 3)),
        "logged_velocity": (("v", "logged_velocity", "cm h-1", 2),),
        "log_heat_ratio": (("lnr", "log_heat_ratio", "1", 4),),
    }[group.stores]
    return [
        Column(group.log, f"{probe.name}_{point}_{short}", "probe", probe.name, point,
               quantity, unit, decimals, "Smp")
        for point in (1, 2)
        for short, quantity, unit, decimals in kinds
    ]  # fmt: skip


def _probe_values(truth, group, probe, every):
    if group.method == "heat_dissipation":
        weather = truth.weather
        powered = demo_signals.powered_share(group.log, weather.end, weather.step_s)
        emf = demo_signals.dissipation_emf(truth, probe, powered)
        stored = emf * 1e3 if group.stores == "heated_emf" else sensors.kelvin_by_constant(emf)
        return {f"dT_{probe.name}": stored}
    down, up = demo_signals.ratio_signals(truth, probe, every)
    out = {}
    for point in (1, 2):
        log_ratio = np.log(down[point - 1] / up[point - 1])
        velocity = sensors.stored_velocity(
            log_ratio, plan.EMBEDDED_DIFFUSIVITY, plan.EMBEDDED_SPACING
        )
        made = {
            "rises": {"down": down[point - 1], "up": up[point - 1]},
            "logged_velocity": {"v": velocity / CM_PER_HOUR},
            "log_heat_ratio": {"lnr": log_ratio},
        }[group.stores]
        out.update({f"{probe.name}_{point}_{short}": made[short] for short in made})
    return out


def _weather_values(weather, every):
    def mean(series):
        return series.reshape(-1, every).mean(axis=1)

    return {
        "Tair": mean(weather.air_temperature) - ZERO_CELSIUS,
        "RH": mean(weather.relative_humidity) * 100.0,
        "Rs": mean(weather.shortwave_radiation),
        "rain": weather.precipitation.reshape(-1, every).sum(axis=1),
        "wind": mean(weather.wind_speed),
    }


def _electrical_values(truth, log, every):
    """Supply, panel and heater: a battery that the sun charges by day."""
    weather = truth.weather
    sunny = lagged(weather.shortwave_radiation, 3600.0, weather.step_s) / 700.0
    battery = signals.battery_voltage(weather, sunny, generator(truth.seed, "battery", log))
    heater = 2.0 * demo_signals.powered_share(log, weather.end, weather.step_s)
    panel = weather.air_temperature - ZERO_CELSIUS + 4.0 * sunny
    series = {
        "upper": {"heater_V": heater, "batt_V": battery, "panel_C": panel},
        "lower": {"Ubat": battery},
        "pulse_a": {"battery": battery},
    }.get(log, {})
    return {name: values.reshape(-1, every).mean(axis=1) for name, values in series.items()}
