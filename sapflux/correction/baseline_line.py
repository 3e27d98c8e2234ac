"""The baseline between the nights that it rests on."""

import numpy as np

from sapflux.correction.nights import DAY_NS


def baseline_line(stamps, knots, values, farthest_d, widest_d):
    """The baseline at `stamps`: linear between nights, held constant near the ends of a span.

    stamps : of records, knots : of nights, both ascending [ns]; values : at the knots. NaN
    further than `farthest_d` from the nearest knot where the knots either side are over
    `widest_d` apart, or there is but one. Nights are few and days apart, and the line holds
    beyond its last; that is what tells it from the filling of short gaps in a record.

    >>> day = DAY_NS
    >>> stamps, knots = np.array([0, 2, 3, 9]) * day, np.array([1, 3]) * day
    >>> baseline_line(stamps, knots, np.array([10.0, 12.0]), 5.0, 42.0)
    array([10., 11., 12., nan])
    """
    # Only the knots around the stamps matter: a block sees few of the nights.
    low = max(np.searchsorted(knots, stamps[0], side="right") - 1, 0)
    high = np.searchsorted(knots, stamps[-1], side="right") + 1
    knots, values = knots[low:high], values[low:high]
    # Span k lies between knots k - 1 and k; the first and the last are open.
    edges = np.searchsorted(stamps, knots, side="left")
    span = np.repeat(np.arange(len(knots) + 1), np.diff([0, *edges, len(stamps)]))
    left = np.maximum(np.arange(len(knots) + 1) - 1, 0)
    right = np.minimum(left + 1, len(knots) - 1)
    right[0] = 0
    gap = knots[right] - knots[left]
    closed = (gap > 0) & (gap <= widest_d * DAY_NS)
    rise = values[right] - values[left]
    since = stamps - knots[left][span]
    line = values[left][span] + since / np.maximum(gap, 1)[span] * rise[span]
    rest = np.flatnonzero(~closed[span])
    if rest.size:
        since, until = np.abs(since[rest]), np.abs(knots[right][span[rest]] - stamps[rest])
        first = since <= until
        near = np.where(first, values[left][span[rest]], values[right][span[rest]])
        line[rest] = np.where(np.minimum(since, until) <= farthest_d * DAY_NS, near, np.nan)
    return line
