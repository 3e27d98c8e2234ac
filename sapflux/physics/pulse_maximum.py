"""Time of the maximum rise after a heat pulse of some length, without a wound.

Times count from the START of heating. An endless line heater gives its heat evenly over `pulse`
seconds; 0 is an instantaneous pulse. Velocities and diffusivities in SI; NaN where an argument is.
"""

import numpy as np

from sapflux.physics.heat_pulse import line_source_rise

NODES, WEIGHTS = np.polynomial.legendre.leggauss(48)
HALVINGS = 60  # of a bracket of one pulse length: to the last digit


def finite_pulse_rise(distance, time, velocity, diffusivity, pulse, energy, heat_capacity):
    """Temperature rise [K] during and after a pulse of finite length, in sapwood.

    Parameters
    ----------
    distance : [m]
        From the heater, positive downstream (upwards); not 0.
    time : [s]
        Since the start of heating; the rise is 0 at and before it.
    velocity : [m s-1]
        Heat pulse velocity, positive upwards.
    diffusivity : [m2 s-1]
        Thermal diffusivity of the wood, the same in all directions.
    pulse : [s]
        Length of the heating; 0 is an instantaneous pulse.
    energy : [J m-1]
        Heat per length of heater, of the whole pulse.
    heat_capacity : [J m-3 K-1]
        Of fresh wood, per volume.

    Source: Marshall's (1958) instantaneous rise averaged over the pulse (Kluitenberg and Ham 2004,
    Agricultural and Forest Meteorology 126; from memory), by Gauss-Legendre quadrature: within
    1e-12 of the largest rise from 5 mm on (own comparison with adaptive quadrature).

    >>> round(float(finite_pulse_rise(6e-3, 88.0, 0.0, 2.5e-7, 8.0, 1000.0, 2.69e6)), 2)
    0.92
    """
    shape = np.broadcast_shapes(*(np.shape(one) for one in (distance, time, velocity, pulse)))
    if shape:
        distance, time, velocity, pulse = (
            np.asarray(one, float)[..., None]
            for one in np.broadcast_arrays(distance, time, velocity, pulse)
        )
    heated = np.minimum(time, pulse)  # of the pulse, what has been given
    ages = time - heated * 0.5 * (1.0 - NODES)
    rises = line_source_rise(distance, ages, velocity, diffusivity, energy, heat_capacity)
    given = np.where(np.equal(pulse, 0.0), 1.0, heated / np.where(np.equal(pulse, 0.0), 1.0, pulse))
    return (rises * given) @ (0.5 * WEIGHTS)


def time_of_maximum_velocity(time_of_maximum, pulse, diffusivity, distance):
    """Speed of the heat pulse [m s-1] at which the rise is largest at a time; at least 0.

    Parameters
    ----------
    time_of_maximum : [s]
        Since the start of heating, longer than `pulse`.
    pulse : [s]
        Length of the heating; 0 is an instantaneous pulse.
    diffusivity : [m2 s-1]
        Thermal diffusivity of fresh sapwood.
    distance : [m]
        Of the needle from the heater, downstream.

    NaN at a maximum within the pulse, or later than without any flow: no speed makes it. The
    maximum does not tell the direction of the flow.

    Source: Kluitenberg and Ham (2004), Agricultural and Forest Meteorology 126: sqrt((4k/t0)
    ln(1 - t0/tm) + x**2 / (tm (tm - t0))); Cohen et al. (1981) for a pulse of no length; both
    from memory, checked against the maximum of `finite_pulse_rise`.

    >>> round(float(time_of_maximum_velocity(37.014, 8.0, 2.5e-7, 6e-3)) * 3.6e5, 1)
    20.0
    """
    square = _square(time_of_maximum, pulse, diffusivity, distance)
    # Rounding may leave the time of no flow a little below zero.
    largest = np.square(np.asarray(distance) / np.asarray(time_of_maximum))
    square = np.where(np.abs(square) <= 1e-12 * largest, 0.0, square)
    return np.sqrt(np.where(square >= 0.0, square, np.nan))


def time_of_maximum(velocity, pulse, diffusivity, distance):
    """Time since the start of heating [s] at which the rise is largest.

    velocity : heat pulse velocity [m s-1], of either direction; pulse [s]; diffusivity [m2 s-1];
    distance : of the needle from the heater, downstream [m].

    Source: inverse of `time_of_maximum_velocity` by bisection.

    >>> round(float(time_of_maximum(0.0, 0.0, 2.5e-7, 6e-3)), 6)
    36.0
    """
    velocity = np.abs(np.asarray(velocity, float))
    # Of a pulse of no length; the heat of a longer one arrives later by no more than its length.
    k, x = diffusivity, np.asarray(distance, float)
    early = x**2 / (2.0 * k + np.sqrt(4.0 * k**2 + (velocity * x) ** 2))
    if not np.any(pulse):
        return early
    early, pulse, square = np.broadcast_arrays(early, np.asarray(pulse, float), velocity**2)
    early = np.maximum(early, pulse)
    late = early + pulse
    for _ in range(HALVINGS):
        middle = 0.5 * (early + late)
        slower = _square(middle, pulse, k, x) < square
        early, late = np.where(slower, early, middle), np.where(slower, middle, late)
    return 0.5 * (early + late)


def diffusivity_of_time_of_maximum(time_of_maximum, pulse, distance):
    """Thermal diffusivity [m2 s-1] at which the rise without flow is largest at a time.

    time_of_maximum : since the start of heating [s], longer than `pulse`, else NaN; pulse [s];
    distance : of the needle from the heater [m].

    Only at proven zero flow; a wound makes it low (Looker et al. 2016; from memory).

    Source: Kluitenberg and Ham (2004): (x**2/4) (1/(tm - t0) - 1/tm) / ln(tm/(tm - t0)), from
    memory, checked against the maximum of `finite_pulse_rise`; x**2 / (4 tm) at t0 = 0.

    >>> round(float(diffusivity_of_time_of_maximum(36.0, 0.0, 6e-3)) * 1e4, 6)
    0.0025
    """
    after, delay = _after_the_pulse(time_of_maximum, pulse)
    return np.square(distance) / (4.0 * after * delay)


def _square(time_of_maximum, pulse, diffusivity, distance):
    """Square of the velocity [m2 s-2] behind a time of maximum; below 0 where none makes it."""
    after, delay = _after_the_pulse(time_of_maximum, pulse)
    time = np.asarray(time_of_maximum, float)
    return np.square(distance) / (time * after) - 4.0 * diffusivity * delay / time


def _after_the_pulse(time_of_maximum, pulse):
    """Time from the end of the pulse to the maximum [s], and (tm/t0) ln(tm/(tm - t0)): 1 at t0 = 0.

    NaN where the maximum lies within the pulse.
    """
    time = np.asarray(time_of_maximum, float)
    time = np.where(time > pulse, time, np.nan)
    share = pulse / time
    short = share < 1e-9
    safe = np.where(short, 0.5, share)
    return time - pulse, np.where(short, 1.0 + 0.5 * share, -np.log1p(-safe) / safe)
