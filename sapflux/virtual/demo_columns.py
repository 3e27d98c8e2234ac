"""Columns of the demo site's loggers: their names, what they mean, and what they hold."""

from dataclasses import dataclass

from sapflux.virtual import copy_values, demo_signals, sensors
from sapflux.virtual import demo_plan as plan
from sapflux.virtual.demo_forest import grouped_probes


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
    for group, probe in grouped_probes(truth):
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
    for group, probe in grouped_probes(truth):
        if group.log == log:
            out.update(_probe_values(truth, group, probe, every))
    for column in columns(truth):
        if column.log == log and column.kind != "probe":
            series = copy_values.other_series(truth, column, every)
            if column.quantity == "heater_voltage":
                powered = demo_signals.powered_share(log, truth.weather.end, truth.step_s)
                series = series * powered.reshape(-1, every).mean(axis=1)
            out[column.name] = copy_values.as_written(series, column.quantity, column.unit)
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
    """name -> values of each column of a probe."""
    if group.method == "heat_dissipation":
        powered = demo_signals.powered_share(group.log, truth.weather.end, truth.step_s)
        emf = demo_signals.dissipation_emf(truth, probe, powered)
        made = {"heated_emf": emf[None], "heated_difference": sensors.kelvin_by_constant(emf)[None]}
    else:
        made = copy_values.of_rises(*demo_signals.ratio_signals(truth, probe, every))
        made["logged_velocity"] = sensors.stored_velocity(
            made["log_heat_ratio"], plan.EMBEDDED_DIFFUSIVITY, plan.EMBEDDED_SPACING
        )
    return {
        c.name: copy_values.as_written(made[c.quantity][c.point - 1], c.quantity, c.unit)
        for c in _probe_columns(group, probe)
    }
