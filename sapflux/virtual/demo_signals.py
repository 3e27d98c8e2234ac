"""Signals of every probe of the demo site on its logger's records, as the logger stores them."""

import numpy as np

from sapflux.virtual import demo_plan as plan
from sapflux.virtual import forest, sensors
from sapflux.virtual.seeds import generator


def standard(text):
    """A moment of standard time as UTC datetime64[s]."""
    offset = np.timedelta64(round(plan.POSITION.utc_offset_h * 3600), "s")
    return np.datetime64(text.replace(" ", "T"), "s") - offset


def flux_density(truth, stem, depths):
    """True flux density of a stem at depths [m]: (depth, time) [kg m-2 s-1]."""
    nodes = plan.SPECIES[stem.species].profile
    return forest.flux_density_at(stem, nodes, truth.outer[stem.name], depths)


def dissipation_emf(truth, probe, powered):
    """Voltage of a heat-dissipation probe at each record [V]. `powered`: share heated."""
    stem, weather = truth.stem(probe.tree), truth.weather
    depths, weights, share = sensors.needle_depths(
        probe.needle_from, probe.needle_to, stem.sapwood_depth
    )
    progress = np.arange(len(weather.end)) / (len(weather.end) - 1)
    temperature = sensors.stem_temperature(weather)
    zero = sensors.zero_flow_over_time(probe, progress)
    flow = flux_density(truth, stem, depths)
    difference = sensors.heated_difference(probe, flow, weights, share, zero)
    difference = sensors.in_wood_of(difference, temperature, probe.conductivity_slope)
    difference = difference * sensors.heater_response(powered, weather.step_s)
    difference = difference + sensors.natural_gradient(probe, weather)
    noise = generator(truth.seed, "noise", probe.name).normal(0.0, probe.noise, len(difference))
    emf = sensors.heated_emf(difference + noise, temperature)
    if probe.name == plan.EXCLUDED[0]:
        emf = _broken_cable(emf, weather.end, truth.seed)
    return emf


def powered_share(log, end, step_s):
    """Share of each record with the heaters of a log on."""
    on = np.ones(len(end))
    if log == plan.POWER_LOSS[0]:
        cut, back = (standard(text) for text in plan.POWER_LOSS[1:])
        lost = np.minimum(end, back) - np.maximum(end - np.timedelta64(step_s, "s"), cut)
        on -= np.maximum(lost / np.timedelta64(step_s, "s"), 0.0)
    return on


def ratio_signals(truth, probe, every):
    """(rise downstream, rise upstream), each (point, record) [K].

    One record is `every` records of the weather's clock; its pulse sees their mean flow.
    """
    stem = truth.stem(probe.tree)
    pairs = []
    for point, (begin, end) in enumerate(zip(probe.depths_from, probe.depths_to, strict=True)):
        depths, weights, _ = sensors.needle_depths(begin, end, stem.sapwood_depth)
        flow = (weights[:, None] * flux_density(truth, stem, depths)).sum(axis=0)
        flow = flow.reshape(-1, every).mean(axis=1)
        velocity = sensors.apparent_velocity(probe, flow) + probe.offset[point]
        rng = generator(truth.seed, "noise", f"{probe.name}/{point + 1}")
        pairs.append([
            rise + rng.normal(0.0, probe.noise, len(rise))
            for rise in sensors.rises(probe, velocity)
        ])  # fmt: skip
    down, up = zip(*pairs, strict=True)
    return np.array(down), np.array(up)


def _broken_cable(emf, end, seed):
    """Erratic readings while the cable is bitten through."""
    begin, stop = (standard(text) for text in plan.EXCLUDED[1:3])
    broken = (end > begin) & (end <= stop)
    noise = generator(seed, "broken cable").normal(0.0, 4e-5, len(emf))
    return np.where(broken, emf * 0.6 + noise, emf)
