"""Series on a finer clock that keep the mean of every interval they come from."""

import numpy as np
from scipy.linalg import solve_banded

from sapflux.physics import sun


def finer(values, parts, low=-np.inf, high=np.inf):
    """Straight lines between the middles of intervals, on `parts` steps of each: (step).

    The values at the middles are those with which the steps of every interval have its mean;
    before the first and after the last middle the line is level. Where the line of an interval
    would leave `low` to `high`, it is drawn in towards the interval's mean, which stays.

    values : (interval), means, within `low` and `high`. Source: own derivation.

    >>> finer(np.array([1.0, 1.0, 4.0, 4.0]), 2).reshape(4, 2).mean(axis=1)
    array([1., 1., 4., 4.])
    """
    values = np.asarray(values, float)
    count = len(values)
    if parts == 1 or count < 2:
        return np.repeat(values, parts)
    places = (np.arange(parts) + 0.5) / parts - 0.5  # of the steps, in intervals from the middle
    neighbour = np.maximum(places, 0.0).sum() / parts  # weight of each neighbour in the mean
    bands = np.full((3, count), neighbour)
    bands[1] = 1.0 - 2.0 * neighbour
    bands[1, [0, -1]] += neighbour
    nodes = solve_banded((1, 1), bands, values)
    middles = np.arange(count)
    steps = (middles[:, None] + places).ravel()
    line = np.interp(steps, middles, nodes).reshape(count, parts)
    mean = values[:, None]
    above, below = line.max(axis=1, keepdims=True) - mean, mean - line.min(axis=1, keepdims=True)
    room = np.minimum(_share(high - mean, above), _share(mean - low, below))
    return (mean + room * (line - mean)).ravel()


def by_sun(values, end, interval_s, parts, position):
    """Sunlight on `parts` steps of each interval, in proportion to that above the atmosphere.

    The steps of every interval have its mean; where the sun is below the horizon at the middle of
    all of them, they are even.

    values : (interval) [W m-2]; end : (interval) UTC; position : latitude_deg, longitude_deg.
    """
    step = interval_s / parts
    into = ((np.arange(parts) + 0.5) * step - interval_s) * 1e9
    moments = end.astype("datetime64[ns]")[:, None] + into.astype("timedelta64[ns]")
    above = sun.horizontal_irradiance_above_atmosphere(
        moments, position.latitude_deg, position.longitude_deg
    )
    mean = above.mean(axis=1, keepdims=True)
    shape = np.where(mean > 0.0, above / np.where(mean > 0.0, mean, 1.0), 1.0)
    return (np.asarray(values, float)[:, None] * shape).ravel()


def _share(room, wanted):
    return np.where(wanted > room, room / np.where(wanted > 0.0, wanted, 1.0), 1.0)
