"""Values between curves on a grid of wound width and thermal diffusivity.

Facts may change with every record, and a curve for each would be dear. The grid is the same for all
records, so that no value hangs on which of them are worked on together.
"""

import numpy as np

WIDTH_STEP = 5e-5  # m
DIFFUSIVITY_STEP = 0.02  # of the natural logarithm


def between(place, width, diffusivity, table_of):
    """Values at a place of the curves and their limits, linear between grid nodes: (1 + m, record).

    place : of each record on the curve, from 0 in steps of its table; beyond the last it is the
    last. width [m], diffusivity [m2 s-1] : of each record, all (record) and finite.
    table_of : width, diffusivity of a node -> (values at places 0, 1, ..., m limits).

    >>> along = lambda width, diffusivity: (np.arange(3.0) + 1e3 * width, (5.0,))
    >>> between(np.array([0.5]), np.array([2.02e-3]), np.array([2.5e-7]), along).round(6).tolist()
    [[2.52], [5.0]]
    """
    total = 0.0
    for wide, share_of_width in _neighbours(width / WIDTH_STEP):
        for fast, share_of_diffusivity in _neighbours(np.log(diffusivity) / DIFFUSIVITY_STEP):
            nodes, row = _nodes(wide, fast)
            tables = [
                table_of(float(w * WIDTH_STEP), float(np.exp(k * DIFFUSIVITY_STEP)))
                for w, k in nodes
            ]
            values = np.array([values for values, _ in tables])
            (below, not_above), (above, part) = _neighbours(
                np.minimum(place, values.shape[1] - 1.0 - 1e-9)
            )
            read = (
                values[row, below.astype(int)] * not_above + values[row, above.astype(int)] * part
            )
            limits = np.array([limits for _, limits in tables])[row].T
            total = total + share_of_width * share_of_diffusivity * np.vstack([read, limits])
    return total


def _nodes(wide, fast):
    """The different pairs (width, diffusivity) of whole numbers, and which is each record's.

    Counted, not sorted: the grid is small and the records are many.
    """
    first, low = wide.min(), fast.min()
    columns = int(fast.max() - low) + 1
    code = ((wide - first) * columns + (fast - low)).astype(np.int64)
    there = np.bincount(code) > 0
    found = np.flatnonzero(there)
    pairs = zip(found // columns + first, found % columns + low, strict=True)
    return list(pairs), (np.cumsum(there) - 1)[code]


def _neighbours(place):
    """Whole numbers below and above each place, and their shares in it."""
    below = np.floor(place)
    return (below, 1.0 - (place - below)), (below + 1.0, place - below)
