"""Numerical inverses, so that a formula under test is never undone by its own algebra."""

import numpy as np


def inverse_of(function, target, low, high, steps=80):
    """Where a rising function takes the values `target`, by bisection between `low` and `high`.

    function : array -> array of the same shape, rising; target : array in its unit.
    80 halvings leave an interval 1e-24 of the first: the result is exact to rounding. A target
    outside the function's range on [low, high] gives the nearer end.

    >>> round(float(inverse_of(lambda x: x**3, 8.0, 0.0, 5.0)), 12)
    2.0
    """
    target = np.asarray(target, float)
    low = np.full(target.shape, float(low))
    high = np.full(target.shape, float(high))
    for _ in range(steps):
        middle = 0.5 * (low + high)
        below = function(middle) < target
        low = np.where(below, middle, low)
        high = np.where(below, high, middle)
    return 0.5 * (low + high)


def power_table(function, lowest=1e-9, highest=50.0, nodes=4001):
    """Inverse of a positive rising function as a table, interpolated between logarithms.

    Exact for a power law, else to about 1e-6. Values not above zero give zero.

    >>> inverse = power_table(lambda x: 3.0 * x**1.5)
    >>> round(float(inverse(24.0)), 9), float(inverse(0.0))
    (4.0, 0.0)
    """
    arguments = np.geomspace(lowest, highest, nodes)
    logs, values = np.log(arguments), np.log(function(arguments))

    def inverse(target):
        target = np.asarray(target, float)
        positive = target > 0.0
        log = np.log(np.where(positive, target, 1.0))
        return np.where(positive, np.exp(np.interp(log, values, logs)), 0.0)

    return inverse
