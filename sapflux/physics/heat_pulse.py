"""Heat ratio: a line heater, the ratio of the rises either side of it, and the wound around it.

Velocities are positive upwards. Arguments are arrays that broadcast; NaN where one is NaN.
"""

import numpy as np

CM_PER_HOUR = 0.01 / 3600.0  # m s-1

# Wound width [cm]; b, c, d of Vc = b Vh + c Vh**2 + d Vh**3 with velocities in cm h-1; and B of
# the linear form Vc = B Vh. Steel needles 6 mm either side of the heater, 60-100 s after it.
# Source: Burgess et al. (2001), Tree Physiology 21, table 1; from memory, unverified against
# print. The step 0.23 to 0.24 is out of line with its neighbours.
PUBLISHED_WOUND = np.array(
    [
        [0.17, 1.6565, -0.0014, 0.0002, 1.7283],
        [0.18, 1.7077, -0.0014, 0.0002, 1.7853],
        [0.19, 1.7701, -0.0017, 0.0002, 1.8568],
        [0.20, 1.8292, -0.0019, 0.0003, 1.9216],
        [0.21, 1.8909, -0.0022, 0.0003, 1.9891],
        [0.22, 1.9554, -0.0025, 0.0004, 2.0594],
        [0.23, 2.0226, -0.0029, 0.0004, 2.1326],
        [0.24, 2.0685, -0.0031, 0.0005, 2.1825],
        [0.26, 2.1932, -0.0038, 0.0006, 2.3176],
        [0.28, 2.3448, -0.0047, 0.0008, 2.4813],
        [0.30, 2.4908, -0.0057, 0.0010, 2.6383],
    ]
)
PUBLISHED_SPACING = 6e-3  # m
PUBLISHED_WINDOW = (60.0, 100.0)  # s since the end of heating
# How far needles and window may be from these for the table to be taken. Source: own judgement.
PUBLISHED_SPACING_SLACK, PUBLISHED_WINDOW_SLACK = 0.5e-3, 5.0
NARROWEST_WOUND = 1.7e-3  # m, ends of the published table
WIDEST_WOUND = 3.0e-3
# Above this the cubic runs away (at 3.0 mm it turns 60 into 344 cm h-1). Common practice.
HIGHEST_WOUND_VELOCITY = 40.0 * CM_PER_HOUR
# 40 cm h-1 is still 40 where m s-1 have rounded it up.
ROUNDED_UP = 1.0 + 1e-12


def line_source_rise(distance, time, velocity, diffusivity, energy, heat_capacity):
    """Temperature rise [K] after an instantaneous pulse of an endless line heater in sapwood.

    Parameters
    ----------
    distance : [m]
        From the heater, positive downstream (upwards), negative upstream.
    time : [s]
        Since the pulse; the rise is 0 at and before it.
    velocity : [m s-1]
        Heat pulse velocity, positive upwards.
    diffusivity : [m2 s-1]
        Thermal diffusivity of the wood, the same in all directions.
    energy : [J m-1]
        Heat per length of heater.
    heat_capacity : [J m-3 K-1]
        Of fresh wood, per volume.

    Source: Marshall (1958), Plant Physiology 33: q/(4 pi k t rho c) exp(-(x - V t)**2 / (4 k t)).

    >>> round(float(line_source_rise(6e-3, 80.0, 0.0, 2.5e-7, 1000.0, 2.69e6)), 2)
    0.94
    """
    time = np.asarray(time, float)
    after = np.where(time > 0.0, time, np.nan)
    spread = 4.0 * diffusivity * after
    peak = energy / (heat_capacity * np.pi * spread)
    rise = peak * np.exp(-((distance - velocity * after) ** 2) / spread)
    return np.where(time <= 0.0, 0.0, rise)


def velocity(log_ratio, diffusivity, spacing):
    """Heat pulse velocity [m s-1] behind the log of downstream over upstream rise.

    Parameters
    ----------
    log_ratio : [1]
        Natural logarithm of the ratio of the rises; zero without flow, negative downwards.
    diffusivity : [m2 s-1]
        Thermal diffusivity of fresh sapwood.
    spacing : [m]
        Distance of each needle from the heater; the mean of both where they differ.

    Holds without a wound; at a wound it is the apparent velocity that `wound_velocity` corrects.

    Source: Burgess et al. (2001), eq. 1: (k / x) ln(v1 / v2).

    >>> round(float(velocity(1.0, 2.5e-7, 6e-3)) / CM_PER_HOUR, 6)
    15.0
    """
    return diffusivity / spacing * log_ratio


def log_ratio_of(velocity, diffusivity, spacing):
    """Log of downstream over upstream rise [1] at a heat pulse velocity [m s-1].

    Source: inverse of `velocity`.

    >>> round(float(log_ratio_of(15.0 * CM_PER_HOUR, 2.5e-7, 6e-3)), 12)
    1.0
    """
    return velocity * spacing / diffusivity


def is_published_layout(spacing_downstream, spacing_upstream, window_from, window_to):
    """Whether a probe is read about as those of the published wound table.

    Spacings [m], window [s] since the end of heating; what is NaN is not held against it.

    >>> [bool(is_published_layout(x, 6e-3, 60.0, 100.0)) for x in (6e-3, 5e-3)]
    [True, False]
    """
    begin, end = PUBLISHED_WINDOW
    spacing, window = PUBLISHED_SPACING_SLACK + 1e-9, PUBLISHED_WINDOW_SLACK + 1e-9
    return ~(
        (np.abs(spacing_downstream - PUBLISHED_SPACING) > spacing)
        | (np.abs(spacing_upstream - PUBLISHED_SPACING) > spacing)
        | (np.abs(window_from - begin) > window)
        | (np.abs(window_to - end) > window)
    )


def wound_velocity(velocity, width):
    """Heat pulse velocity [m s-1] corrected for the wound, by the published table.

    `velocity` is the apparent one, `width` [m] the width of wounded wood across the needles.
    The cubic is odd in velocity: downward flow is corrected by its magnitude (own convention).
    Between tabulated widths the corrected velocity is linear in width. NaN outside the table
    (1.7-3.0 mm) and beyond an apparent 40 cm h-1: the cubic must not be extrapolated.

    Source: Burgess et al. (2001), table 1; from memory, unverified against print.

    >>> round(float(wound_velocity(10.0 * CM_PER_HOUR, 1.7e-3)) / CM_PER_HOUR, 3)
    16.625
    """
    b, c, d = _cubic(width)
    speed = np.abs(velocity) / CM_PER_HOUR
    highest = HIGHEST_WOUND_VELOCITY / CM_PER_HOUR * ROUNDED_UP
    speed = np.where(speed <= highest, speed, np.nan)
    return np.sign(velocity) * (speed * (b + speed * (c + speed * d))) * CM_PER_HOUR


def _cubic(width):
    """b, c, d at a width [m]; NaN outside the table.

    A velocity linear in width between two rows is the cubic of coefficients linear in width: all
    three taken together are the same as interpolating the result.
    """
    width = np.asarray(width, float)
    # A nanometre of slack: 1.7 mm read from a table may miss 0.0017 m by a rounding.
    inside = (width >= NARROWEST_WOUND - 1e-9) & (width <= WIDEST_WOUND + 1e-9)
    known = np.where(inside, width * 100.0, np.nan)
    widths = PUBLISHED_WOUND[:, 0]
    return tuple(np.interp(known, widths, PUBLISHED_WOUND[:, column]) for column in (1, 2, 3))
