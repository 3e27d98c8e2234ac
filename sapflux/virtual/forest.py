"""Transpiration of a virtual forest: demand by species, flow of each stem, flux by depth."""

from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter

from sapflux.constants import ZERO_CELSIUS
from sapflux.physics import atmosphere

RINGS = 400  # thin rings in which a stem's flow is summed


@dataclass(frozen=True)
class Response:
    """How the flux density of a species follows the weather. All values of a site are invented.

    The demand saturates with deficit as 1 - exp(-D / deficit_scale) and with radiation as
    R / (R + half_radiation); `dark_share` of the conductance stays open without light, so that
    a night flows in proportion to its deficit. `storage_lag` delays the flow at breast height.
    """

    greatest_flux_density: float  # kg m-2 s-1, outermost, without any limit
    deficit_scale: float  # Pa
    half_radiation: float  # W m-2
    dark_share: float  # 1
    half_soil_water: float  # 1, relative extractable water at which the soil halves the flow
    storage_lag: float  # s
    fade_from: str = ""  # leaves age from this date on, blank: never
    fade_to: str = ""  # and end here
    night_cooling: float = 0.0  # K, leaves below the air in the dark, as they radiate to the sky


@dataclass(frozen=True)
class Stem:
    """A stem of the survey with what nobody can see: vigour and the shape of its profile.

    Lengths in m. `tilt` turns the species' profile: positive is steeper inwards. Around the stem
    the flux density is a cosine of `azimuth_amplitude` with its greatest value at
    `greatest_azimuth`; the flow of the stem is that of the mean around it.
    """

    name: str
    stand: str
    plot: str
    species: str
    diameter: float  # over bark
    bark: float
    sapwood_depth: float
    vigour: float  # 1, its flux density over that of the species
    tilt: float  # 1
    deficit_ratio: float  # 1, its deficit_scale over that of the species
    alive: bool = True
    azimuth_amplitude: float = 0.0  # 1
    greatest_azimuth: float = 0.0  # degree

    @property
    def xylem_radius(self):
        """Radius under bark [m]."""
        return self.diameter / 2.0 - self.bark

    @property
    def sapwood_area(self):
        """Area of the ring of conducting sapwood [m2]."""
        inner = self.xylem_radius - self.sapwood_depth
        return np.pi * (self.xylem_radius**2 - inner**2)


def outer_flux_density(response, deficit_ratio, weather, soil, leaves=None):
    """Flux density just below the cambium at vigour 1, at each record [kg m-2 s-1].

    weather : `Weather`; soil : (time) relative extractable water [1]; leaves : (time)
    share of the leaf area at work, None for that of the response. Never negative.
    """
    scale = response.deficit_scale * deficit_ratio
    air = -np.expm1(-_leaf_deficit(response, weather) / scale)
    light = weather.shortwave_radiation / (weather.shortwave_radiation + response.half_radiation)
    opening = response.dark_share + (1.0 - response.dark_share) * light
    wet = soil / (soil + response.half_soil_water) * (1.0 + response.half_soil_water)
    leaves = _leaves(response, weather.end) if leaves is None else leaves
    demand = response.greatest_flux_density * air * opening * wet * leaves
    return lagged(demand, response.storage_lag, weather.step_s)


def lagged(series, lag, step_s):
    """A series behind a store that empties in proportion to its content: mean delay `lag` [s].

    Keeps the sum but for what the store holds at either end.

    >>> lagged(np.array([0.0, 8.0, 0.0]), 600.0, 600.0).round(2)
    array([0.  , 5.06, 1.86])
    """
    if lag <= 0.0:
        return series
    kept = np.exp(-step_s / lag)
    out, _ = lfilter([1.0 - kept], [1.0, -kept], series, zi=[kept * series[0]])
    return out


def profile_at(nodes, tilt, relative_depth):
    """Flux density at a relative depth over that just below the cambium of the species' mean.

    nodes : ((relative depth, ratio), ...), linear between; 0 cambium, 1 border of the heartwood.
    tilt : a stem's own departure, (1 + tilt * (0.5 - depth)). Zero outside the sapwood.

    >>> profile_at(((0.0, 1.0), (1.0, 0.0)), 0.0, np.array([0.25, 1.5]))
    array([0.75, 0.  ])
    """
    depth, ratio = np.array(nodes).T
    relative_depth = np.asarray(relative_depth, float)
    values = np.interp(relative_depth, depth, ratio) * (1.0 + tilt * (0.5 - relative_depth))
    return np.where((relative_depth >= 0.0) & (relative_depth <= 1.0), values, 0.0)


def effective_area(stem, nodes):
    """Sapwood area weighted by the profile [m2]: flow of the stem over its outer flux density."""
    depth = (np.arange(RINGS) + 0.5) * (stem.sapwood_depth / RINGS)
    ring = 2.0 * np.pi * (stem.xylem_radius - depth) * (stem.sapwood_depth / RINGS)
    return float(np.sum(ring * profile_at(nodes, stem.tilt, depth / stem.sapwood_depth)))


def facing(stem, azimuth):
    """Flux density at a face over the mean around the stem [1]. azimuth : [degree].

    >>> from types import SimpleNamespace
    >>> stem = SimpleNamespace(azimuth_amplitude=0.2, greatest_azimuth=90.0)
    >>> [round(float(facing(stem, azimuth)), 3) for azimuth in (90.0, 150.0, 270.0)]
    [1.2, 1.1, 0.8]
    """
    apart = np.radians(np.asarray(azimuth, float) - stem.greatest_azimuth)
    return 1.0 + stem.azimuth_amplitude * np.cos(apart)


def flux_density_at(stem, nodes, outer, depth):
    """Mean around the stem of the flux density at depths: (depth, time) [kg m-2 s-1].

    outer : (time), of the species at vigour 1; depth : below the cambium [m].
    """
    ratio = profile_at(nodes, stem.tilt, np.asarray(depth, float) / stem.sapwood_depth)
    return stem.vigour * ratio[:, None] * outer[None, :]


def stem_flow(stem, nodes, outer):
    """Sap flow of the stem at each record [kg s-1]; 0 for a dead one."""
    return (stem.vigour if stem.alive else 0.0) * effective_area(stem, nodes) * outer


def _leaf_deficit(response, weather):
    """Deficit from leaf to air [Pa]: below that of the air where leaves are cooler; never under 0.

    Leaves that cool below the dew point are wet and do not transpire. The cooling goes with the
    light, the fall of saturation with the slope of FAO-56, equation 13.
    """
    air = weather.vapour_pressure_deficit
    if not response.night_cooling:
        return air
    celsius = weather.air_temperature - ZERO_CELSIUS
    saturated = atmosphere.saturation_vapour_pressure(weather.air_temperature)
    slope = 4098.0 * saturated / (celsius + 237.3) ** 2
    light = weather.shortwave_radiation / (weather.shortwave_radiation + response.half_radiation)
    return np.maximum(air - slope * response.night_cooling * (1.0 - light), 0.0)


def _leaves(response, end):
    """Share of the leaf area still working: 1, falling in a straight line to 0 at `fade_to`."""
    if not response.fade_from:
        return np.ones(len(end))
    first, last = np.datetime64(response.fade_from, "s"), np.datetime64(response.fade_to, "s")
    return np.clip((last - end) / (last - first), 0.0, 1.0)
