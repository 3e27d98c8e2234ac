"""What the loggers of a virtual copy hold: the series behind each channel, in SI and as written."""

import math

import numpy as np

from sapflux import schema, units
from sapflux.virtual import assumptions, faults_tree, sensors, signals
from sapflux.virtual.forest import lagged
from sapflux.virtual.seeds import generator

# Smallest step that a logger prints, SI.
RESOLUTIONS = {
    "heated_emf": 1e-7, "unheated_emf": 1e-7, "heated_difference": 1e-3,
    "unheated_difference": 1e-3, "rise_downstream": 1e-3, "rise_upstream": 1e-3,
    "heat_ratio": 1e-4, "log_heat_ratio": 1e-4, "logged_velocity": 1e-8, "heater_voltage": 1e-2,
    "heater_state": 1e-2, "battery_voltage": 1e-2, "panel_temperature": 1e-1,
    "heater_current": 1e-4, "stem_diameter_change": 1e-6,
    "stem_temperature": 1e-2, "air_temperature": 1e-2, "relative_humidity": 1e-3,
    "vapour_pressure_deficit": 1.0, "shortwave_radiation": 1e-1, "net_radiation": 1e-1,
    "precipitation": 1e-2, "wind_speed": 1e-2,
}  # fmt: skip
FULL_SUN = 700.0  # W m-2


def log_values(truth, site, channels, every):
    """(record, channel) values of a log as written, in each channel's unit.

    channels : rows of `channels.csv` of one log; every : steps of the weather in one record.
    """
    known, columns = {}, []
    for row in channels:
        if row.kind == "probe" and row.quantity not in OTHERS:
            if row.id not in known:
                known[row.id] = probe_series(truth, site, row, every)
            series = known[row.id][row.quantity][row.point - 1]
        else:
            series = other_series(truth, row, every)
        columns.append(as_written(series, row.quantity, row.unit))
    return np.array(columns).T


def as_written(values, quantity, unit):
    """SI values in a channel's unit.

    >>> as_written(293.15, "air_temperature", "degC"), as_written(0.5, "relative_humidity", "%")
    (20.0, 50.0)
    """
    if schema.QUANTITIES[quantity].difference and unit in units.DIFFERENCE_FACTORS:
        return values / units.DIFFERENCE_FACTORS[unit]
    _, factor, offset = units.UNITS[unit]
    return (values - offset) / factor


def decimals(quantity, unit):
    """Decimals with which a logger prints a quantity.

    >>> decimals("heated_emf", "mV"), decimals("air_temperature", "degC")
    (4, 2)
    """
    factor = units.UNITS[unit][1]
    step = RESOLUTIONS.get(quantity, 1e-3) / factor
    return max(math.ceil(-math.log10(step) - 1e-9), 0)


def _mean(series, every):
    return series.reshape(-1, every).mean(axis=1)


def probe_series(truth, site, row, every):
    """quantity -> (point, record) of all that a probe can show."""
    if row.id not in truth.probes:
        return _unheated(truth, site, row.id, every)
    parts = truth.probes[row.id]
    stem, flux_at = truth.known[parts[0].tree].stem, truth.flux_at(parts[0].tree)
    if isinstance(parts[0], sensors.RatioProbe):
        return _ratio(truth, site, parts[0], stem, flux_at, every)
    emf = np.array([
        _mean(
            signals.dissipation_emf(
                part, stem, flux_at, truth.weather, generator(truth.seed, "noise", part.name)
            ),
            every,
        )
        for part in parts
    ])  # fmt: skip
    return {"heated_emf": emf, "heated_difference": sensors.kelvin_by_constant(emf)}


def _unheated(truth, site, probe, every):
    tree = truth.tree_of[probe]
    points = max(len(r.depth_from_mm) for r in site.table("probes") if r.probe == probe)
    sunny = lagged(truth.weather.shortwave_radiation, 7200.0, truth.step_s) / FULL_SUN
    temperature, made = sensors.stem_temperature(truth.weather), []
    for point in range(points):
        rng = generator(truth.seed, "noise", f"{probe}/{point + 1}")
        noise = rng.normal(0.0, assumptions.DISSIPATION_NOISE[0], len(sunny))
        emf = sensors.heated_emf(truth.gradients[tree] * sunny + noise, temperature)
        made.append(_mean(emf, every))
    emf = np.array(made)
    return {"unheated_emf": emf, "unheated_difference": sensors.kelvin_by_constant(emf)}


def _ratio(truth, site, probe, stem, flux_at, every):
    down, up = signals.ratio_rises(
        probe, stem, flux_at, every,
        lambda point: generator(truth.seed, "noise", f"{probe.name}/{point + 1}"),
        sensors.tabulated_rises,
    )  # fmt: skip
    before = np.broadcast_to(_mean(sensors.stem_temperature(truth.weather), every), down.shape)
    made = of_rises(down, up) | {
        "temperature_before_downstream": before,
        "temperature_after_downstream": before + down,
        "temperature_before_upstream": before,
        "temperature_after_upstream": before + up,
    }
    row = [r for r in site.table("probes") if r.probe == probe.name][-1]
    if row.embedded_diffusivity_cm2_s and row.embedded_spacing_mm:
        made["logged_velocity"] = sensors.stored_velocity(
            made["log_heat_ratio"],
            row.embedded_diffusivity_cm2_s * units.CM2_PER_S,
            row.embedded_spacing_mm * units.MM,
        )
    return made


def of_rises(down, up):
    """quantity -> rises, their ratio and its logarithm; NaN without two positive rises."""
    positive = (down > 0.0) & (up > 0.0)
    ratio = np.where(positive, down, np.nan) / np.where(positive, up, np.nan)
    return {
        "rise_downstream": down,
        "rise_upstream": up,
        "heat_ratio": ratio,
        "log_heat_ratio": np.log(ratio),
    }


def other_series(truth, row, every):
    """A quantity of a log, a tree, the site or a stand; stands share the site's weather."""
    weather = truth.weather
    if row.quantity == "precipitation":
        return weather.precipitation.reshape(-1, every).sum(axis=1)
    return _mean(OTHERS.get(row.quantity, _weather_series)(truth, row), every)


def _weather_series(truth, row):
    weather = truth.weather
    if row.quantity == "net_radiation":
        # Albedo and a steady loss of long waves: own judgement, plausible for a forest.
        return 0.85 * weather.shortwave_radiation - 50.0
    return getattr(weather, row.quantity)


def _sunny(truth):
    return lagged(truth.weather.shortwave_radiation, 3600.0, truth.step_s) / FULL_SUN


def _battery(truth, row):
    rng = generator(truth.seed, "battery", row.log)
    return signals.battery_voltage(truth.weather, _sunny(truth), rng)


def _steady(value):
    return lambda truth, row: np.full(len(truth.weather.end), value)


def stem_diameter_change(truth, name):
    """Change of a stem's diameter since the first record: (time) [m], without noise.

    The store of water that delays the flow holds `storage_lag` times the flow less than full (first
    order, own derivation); the stem shrinks in proportion to that deficit over its sapwood area,
    and grows at a steady rate while it lives. So it is level before dawn where refilling has ended.
    """
    one = truth.known[name]
    lag = truth.species[one.stem.species].response.storage_lag
    deficit = lag * truth.tree_flow(name) / one.stem.sapwood_area
    rng = generator(truth.seed, "growth", name)
    rate = rng.uniform(*assumptions.GROWTH) / assumptions.DAYS_OF_GROWTH / 86400.0
    alive = faults_tree.alive(truth.faults, name, truth.weather.end)
    change = rate * truth.step_s * np.cumsum(alive) - assumptions.SHRINKAGE * deficit
    return change - change[0]


def _dendrometer(truth, row):
    rng = generator(truth.seed, "noise", f"dendrometer/{row.id}/{row.column}")
    change = stem_diameter_change(truth, row.id)
    return change + rng.normal(0.0, assumptions.DENDROMETER_NOISE, len(change))


OTHERS = {
    "stem_diameter_change": _dendrometer,
    "heater_voltage": _steady(assumptions.HEATER_VOLTAGE),
    "heater_current": _steady(assumptions.HEATER_CURRENT),
    "heater_state": _steady(1.0),
    "battery_voltage": _battery,
    "panel_temperature": lambda truth, row: truth.weather.air_temperature + 4.0 * _sunny(truth),
    "stem_temperature": lambda truth, row: sensors.stem_temperature(truth.weather),
}
