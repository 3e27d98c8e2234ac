"""Time of the maximum rise at a needle in a wound, the wound a strip without sap flow.

Heat that stays in the strip lags behind the sap, and the longer it has wandered, the more of its
time it has been carried. So slow flow delays the maximum, and only faster flow brings it forward:
at 2.0 mm it is latest at 20 cm h-1, and as late as without flow again at 42. The time tells two
velocities, of which the faster is taken here; below the one of the latest maximum it tells nothing.
Times count from the START of heating. SI units.

Source: own derivation, from the rises of `wound_strip`.
"""

from dataclasses import dataclass, replace
from functools import lru_cache, partial

import numpy as np
from scipy.interpolate import CubicSpline

from sapflux.physics import curve_grid, pulse_maximum
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.physics.wound_strip import rise_shape, shares

VELOCITIES = np.arange(0.0, 150.1, 2.5) * CM_PER_HOUR
FINE = np.arange(0.0, 150.01, 0.02) * CM_PER_HOUR
AGES = 60  # at which a difference of rises is worked out, over the times that a maximum may have
LATEST = 2.5  # times the time without flow: later than in wounds of up to 6 mm
SHORTEST = 0.02  # s; a shorter pulse has its maximum half of the difference earlier
TIME_STEP = 5e-4  # of the time without flow


@dataclass(frozen=True, eq=False)
class MaximumCurve:
    """Times of maximum [s] of sap velocities; `slowest` the velocity [m s-1] of the latest."""

    time: CubicSpline
    slowest: float


@lru_cache(maxsize=512)
def maximum_curve(strip):
    """The `MaximumCurve` of a `wound_strip.Strip`; its window and upstream needle do not matter.

    >>> from sapflux.physics.wound_strip import Strip
    >>> round(float(maximum_curve(Strip(2e-3)).time(0.0)), 1)
    36.0
    """
    k, x = strip.diffusivity, strip.spacing_downstream
    length = max(strip.pulse, SHORTEST)
    ends = pulse_maximum.time_of_maximum(np.array([VELOCITIES[-1], 0.0]), length, k, x)
    times = np.geomspace(0.98 * ends[0] + 0.02 * length, LATEST * ends[1], AGES)
    ages = np.stack([times, times - length])
    rises = np.log(rise_shape(x, VELOCITIES, ages, *shares(ages, strip), k))
    # The mean over the pulse rises as long as its first heat warms the needle less than its last.
    growing = (rises[:, 0] - rises[:, 1]) / length
    found = [CubicSpline(times, one).roots(extrapolate=False)[-1] for one in growing]
    spline = CubicSpline(VELOCITIES, np.array(found) + 0.5 * (strip.pulse - length))
    return MaximumCurve(spline, float(FINE[np.argmax(spline(FINE))]))


def time_of_maximum(velocity, strip):
    """Time since the start of heating [s] of the largest downstream rise, of velocity's shape.

    velocity : of the sap [m s-1], either direction, NaN beyond 150 cm h-1.
    """
    return maximum_curve(strip).time(np.abs(velocity), extrapolate=False)


def velocity_of_time_of_maximum(time, width, diffusivity, reading):
    """Speed of the sap [m s-1] whose rise downstream is largest at a time; the faster of two.

    Parameters
    ----------
    time : [s]
        Since the start of heating.
    width, diffusivity : [m], [m2 s-1]
        Of each record; all three broadcast. Width 0 is sound wood.
    reading : wound_strip.Strip
        Spacing downstream, pulse and tangential_to_axial; all else is not looked at.

    NaN at a maximum later than any flow makes it, or earlier than at 150 cm h-1. The steeper the
    time falls with velocity, the better is the reading: next to the latest maximum an error of
    0.1 s is one of several cm h-1. Tested to 1 cm h-1 from 5 cm h-1 past the velocity of the latest
    maximum on, and to 0.05 from 15 on, for what lies between the curves (widths of 1 to 3 mm).

    >>> from sapflux.physics.wound_strip import Strip
    >>> time = time_of_maximum(60.0 * CM_PER_HOUR, Strip(2e-3))
    >>> found = velocity_of_time_of_maximum(time, 2e-3, 2.5e-7, Strip(2e-3))
    >>> round(float(found) / CM_PER_HOUR, 1)
    60.0
    """
    time, width, diffusivity = np.broadcast_arrays(np.asarray(time, float), width, diffusivity)
    known = np.isfinite(time) & np.isfinite(width) & np.isfinite(diffusivity)
    found = np.full(time.shape, np.nan)
    if known.any():
        k = diffusivity[known]
        without_flow = pulse_maximum.time_of_maximum(
            0.0, reading.pulse, k, reading.spacing_downstream
        )
        share = time[known] / without_flow
        one = replace(reading, spacing_upstream=0.0, window_from=0.0, window_to=0.0)
        velocity, earliest, latest = curve_grid.between(
            np.maximum(share, 0.0) / TIME_STEP, width[known], k, partial(_table, one)
        )
        # A nanosecond of slack: without a wound the latest is without flow, where share is 1.
        within = (share >= earliest) & (share <= latest + 1e-9)
        found[known] = np.where(within, velocity, np.nan)
    return found


@lru_cache(maxsize=512)
def _table(reading, width, diffusivity):
    """Velocities at even steps of time over that without flow, its earliest and its latest."""
    strip = replace(reading, width=width, diffusivity=diffusivity)
    read = maximum_curve(strip)
    times = read.time(FINE) / read.time(0.0)
    falling = slice(int(np.argmax(times)), None)
    places = np.arange(0.0, LATEST, TIME_STEP)
    velocities = np.interp(places, times[falling][::-1], FINE[falling][::-1])
    return velocities, (float(times[-1]), float(times[falling][0]))
