"""What a trace of rises after a heat pulse tells: the time of its maximum, and its decay.

Traces are (pulse, row), rows a regular step apart in a time that counts from the START of heating;
NaN where a row is missing. Results are (pulse,), NaN where a trace does not tell.
"""

import numpy as np

# Rows around the top that are fitted, either side of it in the logarithm of time (27 to 60 s around
# 40 s), and the running mean that finds the top. Source: own judgement.
TOP_SHARE = 0.4
SMOOTH_S = 9.0
NEWTON_ROUNDS = 20
# Share of the rows of a fit that must be there, and of the highest rise that a row of the decay
# must reach: earlier rows hang on the needle's own width. Source: own judgement.
LEAST_ROWS = 0.75
LEAST_RISE = 0.5
FEWEST_ROWS = 20
# Quadrature over the pulse, and rounds of the fit: both far beyond the precision of a logger.
NODES, WEIGHTS = np.polynomial.legendre.leggauss(5)
ROUNDS = 4


def time_of_maximum(rise, time):
    """Time from the start of heating to the highest rise [s], by a quartic in ln t through the top.

    rise : (pulse, row) [K], rows from after the end of heating; time : (row) [s], regular. In ln t
    the rise is nearly even about its top, as it is not in t. NaN where the rows do not reach
    TOP_SHARE to either side of the top, or too few of them are there.

    Accuracy: within 0.05 s of the line source at -40 to 40 cm h-1, 1.5 to 3.5e-7 m2 s-1 and pulses
    of 2 to 8 s; 0.25 s of scatter for a noise of 0.5 % of the rise (tests).

    Source: own derivation (least squares).

    >>> time = np.arange(9.0, 100.0)
    >>> float(np.round(time_of_maximum(1.0 - np.log(time / 40.25) ** 2, time), 6))
    40.25
    """
    rise, logs = np.asarray(rise, float), np.log(time)
    if len(time) < 2:
        return np.full(rise.shape[:-1], np.nan)
    there = np.isfinite(rise)
    half = max(1, round(SMOOTH_S / (time[1] - time[0]) / 2))
    total, count = (_running_sum(part, half) for part in (np.where(there, rise, 0.0), there))
    mean = np.where(count >= LEAST_ROWS * (2 * half + 1), total / np.maximum(count, 1), -np.inf)
    top = mean.argmax(axis=-1)
    centre = logs[top][..., None]
    inside = (logs[0] <= centre - TOP_SHARE) & (logs[-1] >= centre + TOP_SHARE)
    near = np.abs(logs - centre) <= TOP_SHARE
    known = near & there
    told = inside[..., 0] & (known.sum(axis=-1) >= LEAST_ROWS * near.sum(axis=-1))
    place = (logs - centre) / TOP_SHARE
    level = np.where(told, np.take_along_axis(mean, top[..., None], axis=-1)[..., 0], 0.0)
    values = np.where(known & told[..., None], rise - level[..., None], 0.0)
    weights = np.where(told[..., None], known, 1.0)
    powers = _least_squares(place[..., None] ** np.arange(5), values, weights)
    shift = np.zeros(told.shape)
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        for _ in range(NEWTON_ROUNDS):
            slope, bend = _slope_and_bend(powers, shift)
            shift = shift - slope / bend
        told &= (np.abs(shift) <= 1.0) & (_slope_and_bend(powers, shift)[1] < 0.0)
    return np.where(told, np.exp(centre[..., 0] + shift * TOP_SHARE), np.nan)


def decay_time(rise_downstream, rise_upstream, time, pulse):
    """Squared spacing over four times the diffusivity [s], from the whole decay of both rises.

    Of an instantaneous pulse the mean logarithm of both rises times t is linear in 1/t and in t:
    c - (x**2 / 4k) / t - (V**2 / 4k) t; the flow's share xV/2k is of opposite sign in the two. The
    time is counted from the middle of the pulse, and the logarithm corrected for the pulse's
    length with the fit itself, round after round. Rows count by the inverse of the variance of
    their logarithm, where both rises are at least LEAST_RISE of their highest.

    rise_downstream, rise_upstream : (pulse, row) [K], from after the end of heating; time : (row)
    [s]; pulse : length of the heating [s]. Where the spacings differ it is the mean of x**2 / 4k.

    Accuracy: within 1e-6 of the line source without noise, at -40 to 40 cm h-1 and pulses of 2 to
    10 s; within 1e-3 for spacings of 6 and 7 mm (tests). A wound makes it long: it slows the rise.

    Source: Marshall (1958), Plant Physiology 33 (line source); own derivation of the fit.
    """
    down, up = np.asarray(rise_downstream, float), np.asarray(rise_upstream, float)
    with np.errstate(invalid="ignore"):
        used = (down >= LEAST_RISE * _highest(down)) & (up >= LEAST_RISE * _highest(up))
        used &= (down > 0.0) & (up > 0.0)
    told = used.sum(axis=-1) >= FEWEST_ROWS
    used &= told[..., None]
    safe_down, safe_up = np.where(used, down, 1.0), np.where(used, up, 1.0)
    since = np.asarray(time, float) - pulse / 2.0
    logs = 0.5 * np.log(safe_down * safe_up) + np.log(since)
    weights = (safe_down * safe_up) ** 2 / (safe_down**2 + safe_up**2)
    weights = np.where(told[..., None], np.where(used, weights, 0.0), 1.0)
    columns = np.stack([np.ones_like(since), -1.0 / since, -since], axis=-1)
    _, scale, loss = np.moveaxis(_least_squares(columns, logs, weights), -1, 0)
    for _ in range(ROUNDS if pulse else 0):
        longer = _of_pulse(since, pulse, scale[..., None], loss[..., None])
        _, scale, loss = np.moveaxis(_least_squares(columns, logs - longer, weights), -1, 0)
    return np.where(told & (scale > 0.0), scale, np.nan)


def diffusivity_of_decay(decay_time, spacing_downstream, spacing_upstream):
    """Thermal diffusivity [m2 s-1] behind a decay time [s] at two spacings [m].

    Source: definition of the decay time, the mean of x**2 / 4k (own derivation).

    >>> float(diffusivity_of_decay(36.0, 6e-3, 6e-3))
    2.5e-07
    """
    return (spacing_downstream**2 + spacing_upstream**2) / (8.0 * decay_time)


def _of_pulse(since, pulse, scale, loss):
    """Logarithm of the rise of a pulse of some length over that of all its heat at its middle."""
    total = 0.0
    for node, weight in zip(NODES, WEIGHTS, strict=True):
        moved = since - node * pulse / 2.0
        change = scale * (1.0 / since - 1.0 / moved) + loss * (since - moved)
        total = total + 0.5 * weight * since / moved * np.exp(change)
    return np.log(total)


def _slope_and_bend(powers, at):
    """First and second derivative of (..., 5) coefficients of powers."""
    _, a, b, c, d = np.moveaxis(powers, -1, 0)
    return a + at * (2 * b + at * (3 * c + at * 4 * d)), 2 * b + at * (6 * c + at * 12 * d)


def _highest(rise):
    return np.max(np.where(np.isfinite(rise), rise, -np.inf), axis=-1, keepdims=True)


def _running_sum(values, half):
    """(..., row) sums over `half` rows either side; fewer at the ends."""
    total = np.cumsum(np.pad(values.astype(float), [(0, 0)] * (values.ndim - 1) + [(1, 0)]), -1)
    rows = np.arange(values.shape[-1])
    return (
        total[..., np.minimum(rows + half + 1, len(rows))] - total[..., np.maximum(rows - half, 0)]
    )


def _least_squares(columns, values, weights):
    """(..., column) coefficients of the weighted fit of (..., row) values by (..., row, column)."""
    size = np.abs(columns).max(axis=-2, keepdims=True)
    columns = columns / size
    weighted = weights[..., None] * columns
    normal = np.swapaxes(weighted, -1, -2) @ columns
    right = np.swapaxes(weighted, -1, -2) @ values[..., None]
    return np.linalg.solve(normal, right)[..., 0] / size[..., 0, :]
