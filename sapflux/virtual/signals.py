"""Signals of probes in a stem whose flux density at any depth is known, as loggers sample them."""

import numpy as np

from sapflux.physics import dissipation
from sapflux.virtual import sensors


def dissipation_emf(probe, stem, flux_at, weather, rng, powered=None):
    """Voltage of a heat-dissipation probe at each record of the weather [V].

    flux_at : depths [m] -> (depth, time) flux density [kg m-2 s-1], mean around the stem; rng :
    generator of its noise; powered : (time), share of each record with the heater on, None for
    always.
    """
    depths, weights, share = sensors.needle_depths(
        probe.needle_from, probe.needle_to, stem.sapwood_depth
    )
    temperature = sensors.stem_temperature(weather)
    zero = sensors.zero_flow_over_time(probe, progress(weather))
    flux = probe.facing * flux_at(depths)
    difference = sensors.heated_difference(probe, flux, weights, share, zero)
    difference = sensors.in_wood_of(difference, temperature, probe.conductivity_slope)
    if powered is not None:
        difference = difference * sensors.heater_response(powered, weather.step_s)
    difference = difference + sensors.natural_gradient(probe, weather)
    noise = rng.normal(0.0, probe.noise, len(difference))
    return sensors.heated_emf(difference + noise, temperature)


def ratio_rises(probe, stem, flux_at, every, rng_of, rises=sensors.rises):
    """(rise downstream, rise upstream) of a heat-ratio probe, each (point, record) [K].

    One record is `every` records of the weather's clock; its pulse sees their mean flow.
    flux_at : as above; rng_of : point from 0 -> generator of its noise; rises : as `sensors.rises`.
    """
    pairs = []
    for point in range(len(probe.depths_from)):
        flow = point_flux(probe.depths_from[point], probe.depths_to[point], stem, flux_at)
        flow = probe.facing * flow.reshape(-1, every).mean(axis=1)
        velocity = sensors.apparent_velocity(probe, flow) + probe.offset[point]
        share = 1.0
        if probe.shown is not None:
            share = probe.shown.share(sensors.true_velocity(probe, flow))
        rng = rng_of(point)
        pairs.append([
            rise * share + rng.normal(0.0, probe.noise, len(rise))
            for rise in rises(probe, velocity)
        ])  # fmt: skip
    down, up = zip(*pairs, strict=True)
    return np.array(down), np.array(up)


def point_flux(begin, end, stem, flux_at):
    """Mean flux density along the part of a point in sapwood: (time) [kg m-2 s-1]; else zero.

    begin, end : depths below cambium [m]; flux_at : depths -> (depth, time). Mean around the stem
    as `flux_at` is.
    """
    depths, weights, _ = sensors.needle_depths(begin, end, stem.sapwood_depth)
    return (weights[:, None] * flux_at(depths)).sum(axis=0)


def needle_ratio(probe, stem, flux_at):
    """Difference that a heated needle reads over what it reads without flow: (time) [1]."""
    depths, weights, share = sensors.needle_depths(
        probe.needle_from, probe.needle_to, stem.sapwood_depth
    )
    flux = probe.facing * flux_at(depths)
    return sensors.heated_difference(probe, flux, weights, share, np.ones(1))


def even_ratio(probe, flux_density):
    """As `needle_ratio`, of a needle wholly in sapwood that a flux density cools evenly."""
    index = dissipation.index_of(flux_density, probe.factor, probe.exponent)
    return 1.0 / (1.0 + index)


def progress(weather):
    """How far the time of the weather has gone at each record, 0 to 1."""
    return np.arange(len(weather.end)) / (len(weather.end) - 1)


def battery_voltage(weather, sunny, rng):
    """Supply of a logger [V]: a battery that the sun charges by day. sunny : (time) [1]."""
    return 12.45 + 0.9 * np.minimum(sunny, 1.0) + rng.normal(0.0, 0.02, len(weather.end))
