"""How much sapwood each measuring point of a needle speaks for."""

import numpy as np

METHODS = ("relative_profile", "annuli", "outer_value_inwards")
ROUNDING = 1e-9  # m, of a depth that comes from millimetres in text


def point_weights(
    radius, depth, begins, ends, relative_depth=None, profile=None, *, method, uncovered=0.0
):
    """Weights W [m2] that make the sap flow of a stem from the flux densities J of its points.

    The flow is the sum of J_i W_i. The sapwood from cambium to `depth` is divided among the
    points, half-way between the end of one and the beginning of the next, and

        W_i = integral over the point's part of  s(r) / mean of s along the point  2 pi (R - r) dr

    with s the relative profile, or 1 without one. The integral is exact for a profile of straight
    lines. A needle gives the mean along its length, so s is averaged along the length of the point
    that lies in sapwood. A point that begins beyond the sapwood has weight 0.

    radius, depth : R under bark and depth of sapwood below cambium [m]; begins, ends : (point)
    depths below cambium [m], NaN for points the needle does not have, ends may equal begins;
    relative_depth, profile : s at relative depths 0 to 1; method : one of `METHODS`;
    uncovered : depth of sapwood beyond the deepest point [m] that may be left without flow.

    NaN for all points where the sapwood beyond the deepest one is unknown: under "annuli", and
    under "relative_profile" without a profile, which then does the same. NaN too where radius or
    depth is unknown or the profile's mean along a point is not positive.

    Source: annuli after Hatton, Catchpole & Vertessy (1990), Tree Physiol. 6, value from memory;
    the profile's weights are an own derivation.

    >>> begins, ends = np.array([0.0, 0.02, 0.04]), np.array([0.02, 0.04, 0.06])
    >>> (point_weights(0.15, 0.06, begins, ends, method="annuli") * 1e4).round(1).tolist()
    [175.9, 150.8, 125.7]
    """
    if method not in METHODS:
        raise ValueError(f"no method {method!r}; known: {', '.join(METHODS)}")
    weights = np.zeros(len(begins))
    order = [i for i in np.argsort(begins, kind="stable") if begins[i] < depth]
    order = [i for i in order if np.isfinite(ends[i])]
    unknown = np.full(len(begins), np.nan)
    if not order or not np.isfinite(radius) or not 0.0 < depth <= radius:
        return unknown
    relative = method == "relative_profile" and profile is not None and np.isfinite(profile).all()
    begins, ends = begins[order], np.minimum(ends[order], depth)
    borders = np.concatenate([[0.0], (ends[:-1] + begins[1:]) / 2.0, [depth]])
    if not relative and method != "outer_value_inwards":
        if depth - ends[-1] > uncovered + ROUNDING:
            return unknown
        borders[-1] = ends[-1]
    if relative:
        nodes, shape = relative_depth * depth, profile
    else:
        nodes, shape = np.array([0.0, depth]), np.ones(2)
    for place, begin, end, low, high in zip(
        order, begins, ends, borders[:-1], borders[1:], strict=True
    ):
        mean = _mean_between(begin, end, nodes, shape)
        if not mean > 0:
            return unknown
        weights[place] = _ring_integral(low, high, nodes, shape, radius) / mean
    return weights


def _parts(low, high, nodes):
    inside = nodes[(nodes > low) & (nodes < high)]
    return np.concatenate([[low], inside, [high]])


def _mean_between(low, high, nodes, shape):
    """Mean along a length; exact for straight lines."""
    if high <= low:
        return float(np.interp(low, nodes, shape))
    edges = _parts(low, high, nodes)
    values = np.interp(edges, nodes, shape)
    return float((np.diff(edges) * (values[1:] + values[:-1])).sum() / 2.0 / (high - low))


def _ring_integral(low, high, nodes, shape, radius):
    """Integral of the profile over rings, 2 pi (R - r) dr; Simpson's rule is exact here."""
    edges = _parts(low, high, nodes)
    middles = (edges[1:] + edges[:-1]) / 2.0
    at_edges = np.interp(edges, nodes, shape) * (radius - edges)
    at_middles = np.interp(middles, nodes, shape) * (radius - middles)
    parts = np.diff(edges) / 6.0 * (at_edges[:-1] + 4.0 * at_middles + at_edges[1:])
    return float(2.0 * np.pi * parts.sum())
