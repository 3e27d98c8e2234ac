"""Two estimates of a fast flow, the ratio of the rises and the time of the maximum, made one.

The faster the sap, the less of the rise upstream is left above its noise, and the steeper is the
response of a wounded stem to be turned round; the time of the maximum tells slow flow badly and
fast flow well. Each counts by its precision, the inverse of its variance [s2 m-2], which changes
smoothly with the flow: nothing jumps where one takes over from the other. SI units.
"""

from dataclasses import replace
from functools import lru_cache, partial

import numpy as np
from scipy.interpolate import CubicSpline

from sapflux.physics import curve_grid
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.physics.strip_maximum import (
    VELOCITIES,
    maximum_curve,
    velocity_of_time_of_maximum,
)
from sapflux.physics.wound_strip import apparent_velocity

STEP = 0.5 * CM_PER_HOUR
_SPEEDS = np.arange(0.0, VELOCITIES[-1] + 0.5 * STEP, STEP)


def velocity_deviation(rise_downstream, rise_upstream, noise, diffusivity, both_spacings):
    """Standard deviation [m s-1] of the apparent velocity of one record.

    rise_downstream, rise_upstream : above 0 [K]; noise : standard deviation of either [K];
    diffusivity [m2 s-1]; both_spacings : sum of both distances from the heater [m].

    The readings of a window are not independent: `noise` is that of their mean.

    Source: propagation of errors through (2 k / (x1 + x2)) ln(v1 / v2).

    >>> round(float(velocity_deviation(1.0, 0.1, 0.01, 2.5e-7, 12e-3)) / CM_PER_HOUR, 3)
    1.507
    """
    share = np.hypot(noise / np.asarray(rise_downstream), noise / np.asarray(rise_upstream))
    return 2.0 * diffusivity / both_spacings * share


def handed_over(velocity, deviation, time, time_deviation, width, diffusivity, reading):
    """(velocity, share): from both estimates by their precision [m s-1], and the time's part [1].

    NaN and 0 without a second estimate.

    Parameters
    ----------
    velocity : [m s-1]
        Of the sap, by the ratio, corrected for the wound.
    deviation : [m s-1]
        Standard deviation of the apparent velocity behind it. That of `velocity` is larger by the
        slope of the correction, here always that of the exact strip.
    time, time_deviation : [s]
        Of the largest downstream rise, since the start of heating, and its standard deviation.
    width, diffusivity : [m], [m2 s-1]
        Of the wound, 0 without one; of the wood. All broadcast with the above.
    reading : wound_strip.Strip
        All else; its own width and diffusivity are not looked at.

    In a wound a time is that of two velocities (see `strip_maximum`), of which the faster is meant.
    Its precision is the lower of those at both velocities: none where the ratio tells of flow up
    to the velocity of the latest maximum, or downwards.

    Source: own derivation; inverse-variance weights are common practice.
    """
    given = (velocity, deviation, time, width, diffusivity)
    velocity, deviation, time, width, diffusivity = np.broadcast_arrays(*given)
    second = velocity_of_time_of_maximum(time, width, diffusivity, reading)
    known = np.isfinite(second) & np.isfinite(velocity) & np.isfinite(deviation)
    found, share = np.full(velocity.shape, np.nan), np.zeros(velocity.shape)
    if not known.any():
        return found, share
    first, second, wood = velocity[known], second[known], (width[known], diffusivity[known])
    (response,) = curve_grid.between(np.abs(first) / STEP, *wood, partial(_responses, reading))
    falls = [
        curve_grid.between(np.maximum(one, 0.0) / STEP, *wood, partial(_falls, reading))[0]
        for one in (first, second)
    ]
    of_ratio = np.square(response / deviation[known])
    of_time = np.square(np.minimum(*falls) / time_deviation)
    part = of_time / np.where(of_time > 0.0, of_ratio + of_time, 1.0)
    found[known] = np.where(part > 0.0, first + part * (second - first), np.nan)
    share[known] = part
    return found, share


@lru_cache(maxsize=512)
def _responses(reading, width, diffusivity):
    """Slopes of apparent against sap velocity [1] at `_SPEEDS`; 0 where it turns down."""
    strip = _strip(reading, width, diffusivity)
    slope = CubicSpline(VELOCITIES, apparent_velocity(VELOCITIES, strip))(_SPEEDS, 1)
    return np.maximum(slope, 0.0), ()


@lru_cache(maxsize=512)
def _falls(reading, width, diffusivity):
    """How fast the time of maximum falls with velocity [s2 m-1] at `_SPEEDS`; 0 where it grows."""
    # The rest does not matter, and so the curve is the one that `strip_maximum` has at hand.
    one = replace(reading, spacing_upstream=0.0, window_from=0.0, window_to=0.0)
    curve = maximum_curve(_strip(one, width, diffusivity))
    return np.maximum(-curve.time(_SPEEDS, 1), 0.0), ()


def _strip(reading, width, diffusivity):
    return replace(reading, width=width, diffusivity=diffusivity)
