"""Needles of the heat ratio method that do not stand where they should: spacings and zero flow.

Heat that rests shows a ratio other than 1 where the needles are not equally far from the heater:
4 k t ln(v1 / v2) is then the difference of the squared spacings, upstream less downstream. It
tells that difference only, never the sum of the spacings, on which the gain rests. SI; arguments
broadcast; NaN where one is NaN.
"""

import numpy as np


def reading_time(window_from, window_to, pulse_length):
    """Time [s] at which a single reading shows what the mean over the window shows at rest.

    Parameters
    ----------
    window_from, window_to : [s]
        The window, counted from the end of heating.
    pulse_length : [s]
        Length of the heating. The result counts from its middle: as if all heat came then.

    The inverse of the mean of 1/t. The log of the mean rises weighs the window otherwise, and a
    pulse is not all at its middle: for needles 6 and 7 mm away, a pulse of 8 s and 60 to 100 s
    the ratio at rest is 1 % from that of this time (own calculation with the line source).

    Source: own derivation from Marshall (1958), Plant Physiology 33.

    >>> round(float(reading_time(60.0, 100.0, 0.0)), 1)
    78.3
    """
    first = window_from + 0.5 * pulse_length
    last = window_to + 0.5 * pulse_length
    return (last - first) / np.log(last / first)


def velocity(log_ratio, zero_log_ratio, diffusivity, both_spacings):
    """Heat pulse velocity [m s-1] behind a log ratio, for known spacings.

    Parameters
    ----------
    log_ratio : [1]
        Natural logarithm of downstream over upstream rise.
    zero_log_ratio : [1]
        The same without flow.
    diffusivity : [m2 s-1]
        Thermal diffusivity of fresh sapwood.
    both_spacings : [m]
        Sum of the distances of both needles from the heater.

    Source: Marshall (1958), solved for the velocity as Burgess et al. (2001), Tree Physiology 21.

    >>> round(float(velocity(1.0, 0.0, 2.5e-7, 12e-3)) * 3.6e5, 6)
    15.0
    """
    return 2.0 * diffusivity / both_spacings * (log_ratio - zero_log_ratio)


def zero_log_ratio(downstream, upstream, diffusivity, time):
    """Log of downstream over upstream rise [1] without flow, for known spacings [m].

    diffusivity [m2 s-1]; time : since the pulse [s]. Equal spacings show 0 at any time.

    Source: Marshall (1958): (x2**2 - x1**2) / (4 k t).

    >>> round(float(zero_log_ratio(6e-3, 7e-3, 2.5e-7, 80.0)), 4)
    0.1625
    """
    squares = np.square(upstream) - np.square(downstream)
    return np.where(squares == 0.0, 0.0, squares / (4.0 * diffusivity * time))


def upstream_spacing(downstream, zero_log_ratio, diffusivity, time):
    """Distance of the upstream needle [m], if the downstream one stands right.

    downstream : its distance [m]; zero_log_ratio : without flow [1]; diffusivity [m2 s-1];
    time : since the pulse [s]. NaN where no distance gives the ratio.

    Source: Burgess et al. (2001), Tree Physiology 21: x2 = sqrt(x1**2 + 4 k t ln(v1 / v2)).

    >>> round(float(upstream_spacing(6e-3, 0.1625, 2.5e-7, 80.0)), 5)
    0.007
    """
    return _root(np.square(downstream) + 4.0 * diffusivity * time * zero_log_ratio)


def downstream_spacing(upstream, zero_log_ratio, diffusivity, time):
    """Distance of the downstream needle [m], if the upstream one stands right.

    As `upstream_spacing`, the other way round: x1 = sqrt(x2**2 - 4 k t ln(v1 / v2)).

    Source: Burgess et al. (2001), Tree Physiology 21.

    >>> round(float(downstream_spacing(7e-3, 0.1625, 2.5e-7, 80.0)), 5)
    0.006
    """
    return _root(np.square(upstream) - 4.0 * diffusivity * time * zero_log_ratio)


def misplacement(downstream, upstream, zero_log_ratio, diffusivity, time):
    """How far [m] a needle must have been moved to show this ratio without flow.

    The larger of the two: the upstream needle's way if the downstream one stands right, and the
    other way round. NaN where no distance gives the ratio.

    Source: own derivation from `upstream_spacing` and `downstream_spacing`.

    >>> round(float(misplacement(6e-3, 6e-3, 0.1625, 2.5e-7, 80.0)) * 1e3, 3)
    1.204
    """
    given = (zero_log_ratio, diffusivity, time)
    moved_up = np.abs(upstream_spacing(downstream, *given) - upstream)
    moved_down = np.abs(downstream_spacing(upstream, *given) - downstream)
    return np.maximum(moved_up, moved_down)


def _root(square):
    return np.sqrt(np.where(square > 0.0, square, np.nan))
