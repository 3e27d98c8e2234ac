"""A wound as a strip without sap flow about the needles: the exact response of the heat ratio.

A line heater stands in the middle of a strip of width w that conducts heat but carries no sap; sap
moves everywhere else, along the stem. Of heat met at the needles only the time that it has spent
outside the strip has carried it along: with theta that share of the time t since the pulse,
a rise is the mean over theta of that of a line source in sap of velocity theta V. Any width,
diffusivity along and across, spacing, window and length of pulse. SI units.

Source: own derivation (see `time_share`), checked against finite volumes in two dimensions.
"""

from dataclasses import dataclass, replace
from functools import lru_cache, partial

import numpy as np
from scipy.interpolate import CubicSpline

from sapflux.physics import curve_grid, time_share
from sapflux.physics.heat_pulse import CM_PER_HOUR

ESTIMATORS = ("log_of_means", "mean_of_logs")
# Sap velocities of a curve: every 2.5 cm h-1 up to 100, and some beyond for the end of the spline.
VELOCITIES = np.concatenate([[0.01], np.arange(2.5, 120.1, 2.5)]) * CM_PER_HOUR
FASTEST = 100.0 * CM_PER_HOUR
# Share of its slope without flow below which the response is too flat to be turned round: there an
# error of the apparent velocity weighs twice. Source: own judgement.
LEAST_SLOPE = 0.5
_WINDOW, _WINDOW_SHARE = np.polynomial.legendre.leggauss(10)
_PULSE, _PULSE_SHARE = np.polynomial.legendre.leggauss(5)


@dataclass(frozen=True)
class Strip:
    """A wound, the wood about it, and how the needles are read. Lengths m, times s, m2 s-1.

    tangential_to_axial : diffusivity across the stem over that along it [1].
    window_from, window_to : since the END of heating; pulse : its length, 0 for none.
    estimator : the log of the window's mean rises, or the mean of the log of each rise's.
    """

    width: float
    diffusivity: float = 2.5e-7
    tangential_to_axial: float = 1.0
    spacing_downstream: float = 6e-3
    spacing_upstream: float = 6e-3
    window_from: float = 60.0
    window_to: float = 100.0
    pulse: float = 0.0
    estimator: str = "log_of_means"


@dataclass(frozen=True, eq=False)
class Curve:
    """Sap velocity over apparent velocity [1] against the apparent one, for upward flow.

    factor : spline of the apparent velocity [m s-1]; even, so that the response is odd.
    highest : apparent velocity [m s-1] up to which the response is steep enough.
    """

    factor: CubicSpline
    highest: float


def apparent_velocity(velocity, strip):
    """Apparent heat pulse velocity [m s-1] at sap velocities [m s-1] of any shape.

    (k / x) times the log ratio of the rises less its value without flow, x the mean spacing: what
    the probe reads once its zero is set. Odd in velocity where the spacings are equal; for
    downward flow the needles change places.
    """
    velocity = np.asarray(velocity, float)
    flat = np.concatenate([[0.0], velocity.ravel()])
    age, share = _quadrature(strip)
    theta, weight = shares(age, strip)
    down, up = (
        rise_shape(distance, flat, age, theta, weight, strip.diffusivity) @ _PULSE_SHARE
        for distance in (strip.spacing_downstream, -strip.spacing_upstream)
    )  # (velocity, window)
    if strip.estimator == "mean_of_logs":
        ratio = np.log(down / up) @ share
    elif strip.estimator == "log_of_means":
        ratio = np.log((down @ share) / (up @ share))
    else:
        raise ValueError(f"estimator {strip.estimator!r} is none of {', '.join(ESTIMATORS)}")
    mean = 0.5 * (strip.spacing_downstream + strip.spacing_upstream)
    shown = strip.diffusivity / mean * (ratio[1:] - ratio[0])
    return shown.reshape(velocity.shape)


def _quadrature(strip):
    """Ages of the heat (window, pulse) [s], and the shares (window) of a mean over the window."""
    ends = strip.window_from, strip.window_to
    window = 0.5 * (ends[0] + ends[1] + (ends[1] - ends[0]) * _WINDOW)
    return window[:, None] + 0.5 * strip.pulse * (1.0 + _PULSE), 0.5 * _WINDOW_SHARE


def shares(age, strip):
    """(theta, weight) of `time_share.rule` at ages of the heat [s]."""
    across = strip.tangential_to_axial * strip.diffusivity
    return time_share.rule(strip.width / (2.0 * np.sqrt(across * age)))


def rise_shape(distance, velocity, age, theta, weight, diffusivity):
    """Rise after an instantaneous pulse, but for a constant, (velocity, *age): [s-1].

    distance : positive downstream [m]; velocity : of the sap (velocity) [m s-1]; age : since the
    pulse [s], with its `shares`.
    """
    lead = np.reshape(velocity, (-1, *(1,) * theta.ndim))
    apart = distance - lead * (theta * age[..., None])
    warm = weight * np.exp(-np.square(apart) / (4.0 * diffusivity * age[..., None]))
    return warm.sum(axis=-1) / age


@lru_cache(maxsize=4096)
def curve(strip):
    """The `Curve` of a strip. Where the response turns down, it ends.

    >>> read = curve(Strip(2e-3))
    >>> round(float(read.factor(0.0)), 2)  # slow sap moves half as fast again as it seems to
    1.54
    """
    shown = apparent_velocity(VELOCITIES, strip)
    rising = np.minimum.accumulate(np.concatenate([[True], np.diff(shown) > 0.0]))
    velocities, shown = VELOCITIES[rising], shown[rising]
    factor = velocities / shown
    # Even in the apparent velocity: no slope at zero, where the first node nearly is.
    start = np.concatenate([[0.0], shown[1:]]), factor
    spline = CubicSpline(*start, bc_type=((1, 0.0), "not-a-knot"))
    response = CubicSpline(np.concatenate([[0.0], velocities[1:]]), start[0])
    fine = np.linspace(0.0, min(FASTEST, velocities[-1]), 401)
    steep = response(fine, 1) >= LEAST_SLOPE * response(0.0, 1)
    last = fine[np.minimum.accumulate(steep)][-1]
    return Curve(spline, float(response(last)))


# Between the curves of the grid the factor is linear: within 4e-4 of the curve itself up to 0.8 of
# the highest velocity and 40 cm h-1, and within 1e-3 up to the highest (own measurement, widths 0.5
# to 6 mm and diffusivities 1.5e-7 to 4e-7 m2 s-1).
APPARENT_STEP = 0.25 * CM_PER_HOUR
_APPARENT = np.arange(0.0, VELOCITIES[-1] + APPARENT_STEP, APPARENT_STEP)


def sap_velocity(apparent, width, diffusivity, reading):
    """(velocity, highest): sap velocity beside a strip, and what apparent speed it may have.

    Parameters
    ----------
    apparent : [m s-1]
        As of `apparent_velocity`, zero without flow, positive upwards; the velocity keeps its sign.
    width, diffusivity : [m], [m2 s-1]
        Of each record; all three broadcast.
    reading : Strip
        All else; its own width and diffusivity are not looked at.

    Returns
    -------
    velocity : [m s-1]
        NaN beyond `highest`.
    highest : [m s-1]
        Apparent speed at which the response is half as steep as without flow; NaN only where
        width or diffusivity is.

    >>> shown = apparent_velocity(20.0 * CM_PER_HOUR, Strip(2e-3))
    >>> velocity, highest = sap_velocity(shown, 2e-3, 2.5e-7, Strip(2e-3))
    >>> round(float(velocity) / CM_PER_HOUR, 2)
    20.0
    """
    apparent, width, diffusivity = np.broadcast_arrays(apparent, width, diffusivity)
    turned = replace(
        reading,
        spacing_downstream=reading.spacing_upstream,
        spacing_upstream=reading.spacing_downstream,
    )
    known = np.isfinite(width) & np.isfinite(diffusivity)
    downward = apparent < 0.0
    factor, highest = (np.full(apparent.shape, np.nan) for _ in range(2))
    for own, met in ((reading, known & ~downward), (turned, known & downward)):
        if met.any():
            place = np.nan_to_num(np.abs(apparent[met])) / APPARENT_STEP
            factor[met], highest[met] = curve_grid.between(
                place, width[met], diffusivity[met], partial(_table, own)
            )
    return np.where(np.abs(apparent) <= highest, factor * apparent, np.nan), highest


@lru_cache(maxsize=4096)
def _table(reading, width, diffusivity):
    """Factors of a curve at even steps of the apparent velocity, and its highest one."""
    read = curve(replace(reading, width=width, diffusivity=diffusivity))
    # Beyond the curve's last node nothing is read but a neighbour's share just past its end.
    return read.factor(np.minimum(_APPARENT, read.factor.x[-1])), (read.highest,)
