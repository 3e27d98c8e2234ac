"""Signals of probes in a stem whose flux density is known at every depth."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from sapflux.constants import WATER_SPECIFIC_HEAT
from sapflux.physics import dissipation, heat_pulse, thermocouple, wood
from sapflux.virtual.forest import lagged
from sapflux.virtual.inverse import inverse_of, power_table

NODES, WEIGHTS = np.polynomial.legendre.leggauss(8)
END_OF_CUBIC = 1e-4  # share of its range over which the slope at its end is taken
ROOM = 293.15  # K, at which zero-flow differences and sensitivities are stated


@dataclass(frozen=True)
class DissipationProbe:
    """A continuously heated needle. Lengths in m, temperatures in K.

    `zero_flow` is the difference without flow in wood of 20 degC on the first day; over the season
    it drifts by the share `drift`, with a bow of `bow`. `gradient` is the natural difference of
    the two needles in the middle of a sunny day. `conductivity_slope` [K-1] is the rise of the
    wood's conduction with temperature, which lowers the difference.
    """

    name: str
    tree: str
    needle_from: float
    needle_to: float
    zero_flow: float
    drift: float
    bow: float
    gradient: float
    noise: float
    factor: float = dissipation.GENERAL_FACTOR  # kg m-2 s-1, of the species' true calibration
    exponent: float = dissipation.GENERAL_EXPONENT
    conductivity_slope: float = 0.002
    facing: float = 1.0  # flux density at its face over the mean around the stem


@dataclass(frozen=True)
class RatioProbe:
    """Two needles 6 mm either side of a heater, with points at several depths. SI units.

    `offset` [m s-1] is what the probe shows without flow, the same at every velocity: needles not
    quite parallel. `noise` [K] is that of a temperature rise averaged over the window. `shown` is
    the wound as a strip, a function true -> apparent velocity [m s-1] such as
    `strip.ApparentVelocity`; None for the numerical inverse of the published cubic. `diffusivity`
    [m2 s-1] is that of the wood where it was measured; None for that of density and water content.
    """

    name: str
    tree: str
    depths_from: tuple
    depths_to: tuple
    wound_width: float
    offset: tuple  # of each point
    noise: float
    dry_density: float
    water_content: float
    spacing: float = 6e-3
    pulse_length: float = 8.0
    pulse_energy: float = 900.0  # J m-1
    window: tuple = (60.0, 100.0)  # s after the end of heating
    spacing_upstream: float | None = None  # where it differs from `spacing`
    facing: float = 1.0  # flux density at its face over the mean around the stem
    shown: Callable | None = None
    diffusivity: float | None = None

    @property
    def wood_diffusivity(self):
        """Thermal diffusivity of the wood [m2 s-1]."""
        if self.diffusivity is not None:
            return self.diffusivity
        return float(wood.thermal_diffusivity(self.dry_density, self.water_content))


def needle_depths(begin, end, sapwood_depth):
    """Depths [m] at which the part of a needle in sapwood is looked at, and that part's share.

    Gauss-Legendre nodes over the conducting part, with weights that sum to 1.
    """
    conducting = min(end, sapwood_depth)
    share = max(conducting - begin, 0.0) / (end - begin)
    depths = begin + (conducting - begin) * 0.5 * (NODES + 1.0)
    return depths, 0.5 * WEIGHTS, share


def zero_flow_over_time(probe, progress):
    """Zero-flow difference in wood of 20 degC [K] as the season goes from 0 to 1 (`progress`)."""
    bow = 4.0 * probe.bow * progress * (1.0 - progress)
    return probe.zero_flow * (1.0 + probe.drift * progress + bow)


def heated_difference(probe, flux_density, weights, share, zero_flow, heat_index=None):
    """Heated minus reference needle temperature [K]: (time).

    The needle reads the mean over its length: each part of it in sapwood is cooled by the flux
    density there, the rest stays at `zero_flow`.

    flux_density : (node, time) [kg m-2 s-1] on the nodes of `needle_depths`; weights, share : as
    it gives them; zero_flow : (time) [K]; heat_index : flux density -> flow index, a numerical
    inverse of the probe's calibration (made here if None).

    Source: Clearwater et al. (1999), Tree Physiology 19: the needle averages temperature.
    """
    index_at = heat_index or calibration_inverse(probe.factor, probe.exponent)
    cooled = (weights[:, None] / (1.0 + index_at(flux_density))).sum(axis=0)
    return zero_flow * (share * cooled + 1.0 - share)


def calibration_inverse(factor, exponent):
    """Flow index [1] of a flux density [kg m-2 s-1], by a table of the calibration."""
    return power_table(lambda index: dissipation.flux_density(index, factor, exponent))


def in_wood_of(difference, stem_temperature, conductivity_slope):
    """The difference [K] in wood of another temperature than 20 degC: warm wood conducts better."""
    return difference / (1.0 + conductivity_slope * (stem_temperature - ROOM))


def heater_response(powered, step_s, fall_s=480.0, rise_s=1500.0):
    """Share of the steady difference [1] as the heater is cut and comes back.

    powered : (time), share of each record with the heater on. The needle cools and warms as a
    first-order lag, faster down than up (own judgement: a fall within half an hour, a return over
    two hours).
    """
    level = np.empty(len(powered))
    now = float(powered[0])
    for index, target in enumerate(powered):
        lag = rise_s if target > now else fall_s
        now = target + (now - target) * np.exp(-step_s / lag)
        if abs(now - target) < 1e-9:
            now = float(target)
        level[index] = now
    return level


def heated_emf(difference, stem_temperature):
    """Voltage [V] of a type T pair, one junction `difference` warmer than the stem."""
    return thermocouple.emf(stem_temperature + difference) - thermocouple.emf(stem_temperature)


def kelvin_by_constant(emf, at=ROOM):
    """The difference [K] that a logger stores whose program divides by one sensitivity."""
    return emf / thermocouple.sensitivity(at)


def apparent_velocity(probe, flux_density):
    """Velocity [m s-1] that the probe shows at a true flux density [kg m-2 s-1].

    The wound makes the true one seem slower: as the probe's strip shows it, else by a numerical
    inverse of the published cubic, NaN in wounds outside its table. The table ends at 40 cm h-1 as
    shown; from there the probe goes on in a straight line with the slope at its end (own
    judgement: the strip, too, bends little there). What a pipeline can still read of it is left to
    the rises, of which the upstream one drowns in noise.
    """
    true = true_velocity(probe, flux_density)
    if probe.shown is not None:
        return probe.shown(true)
    highest = heat_pulse.HIGHEST_WOUND_VELOCITY

    def shown(speed):
        return heat_pulse.wound_velocity(speed, probe.wound_width)

    speed = np.abs(true)
    last, before = shown(highest), shown(highest * (1.0 - END_OF_CUBIC))
    slope = highest * END_OF_CUBIC / (last - before)
    beyond = highest + slope * (speed - last)
    return np.sign(true) * np.where(speed > last, beyond, inverse_of(shown, speed, 0.0, highest))


def true_velocity(probe, flux_density):
    """Heat pulse velocity without a wound [m s-1]: V = J c_w / (rho c).

    Source: the heat that sap carries (heat balance, own derivation).
    """
    stored = wood.volumetric_heat_capacity(probe.dry_density, probe.water_content)
    return flux_density * WATER_SPECIFIC_HEAT / stored


def rises(probe, velocity):
    """Mean rises downstream and upstream [K] in the reading window, without noise.

    A line source in sap that moves at the apparent `velocity` [m s-1]: a finite pulse is the sum
    of eight short ones, the window the mean of steps of 2 s. Shapes of `velocity`. Of single
    rises the published cubic says nothing: they are those of wood that is as slow all over. With a
    strip for a wound both are smaller by `strip.ApparentVelocity.share`.

    Source: Marshall (1958), Plant Physiology 33.
    """
    diffusivity = probe.wood_diffusivity
    capacity = wood.volumetric_heat_capacity(probe.dry_density, probe.water_content)
    velocity = np.asarray(velocity, float)
    upstream = -(probe.spacing if probe.spacing_upstream is None else probe.spacing_upstream)
    parts = 8
    pulses = probe.pulse_length * ((np.arange(parts) + 0.5) / parts - 1.0)  # s, end of heating is 0
    seconds = np.arange(probe.window[0], probe.window[1], 2.0) + 1.0
    down, up = np.zeros(velocity.shape), np.zeros(velocity.shape)
    for moment in seconds:
        for pulse in pulses:
            at = (moment - pulse, velocity, diffusivity, probe.pulse_energy / parts, capacity)
            down += heat_pulse.line_source_rise(probe.spacing, *at)
            up += heat_pulse.line_source_rise(upstream, *at)
    return down / len(seconds), up / len(seconds)


def tabulated_rises(probe, velocity, nodes=2001):
    """`rises` by straight lines between logarithms at `nodes` velocities, for long series.

    Within 1e-6 of them over a range of 100 cm h-1, far below the noise of any logger.
    """
    low, high = float(np.min(velocity)), float(np.max(velocity))
    grid = np.linspace(low, high + 1e-9, nodes)
    return tuple(np.exp(np.interp(velocity, grid, np.log(r))) for r in rises(probe, grid))


def stored_velocity(log_ratio, diffusivity, spacing):
    """Velocity [m s-1] that a logger program with constants of its own makes of a log ratio."""
    return log_ratio * diffusivity / spacing


def stem_temperature(weather, lag_s=3.0 * 3600.0):
    """Temperature of the sapwood [K]: the air's, behind a store."""
    return lagged(weather.air_temperature, lag_s, weather.step_s)


def natural_gradient(probe, weather):
    """Difference of the two unheated needles [K]: follows the sun with a delay of two hours."""
    return probe.gradient * lagged(weather.shortwave_radiation, 7200.0, weather.step_s) / 700.0
