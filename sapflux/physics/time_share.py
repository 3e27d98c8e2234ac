"""Share of its time that heat spends outside a strip about the line where it set out and came back.

Across the stem heat wanders as by diffusion. Of heat that is met at the heater's own line after
some time, the path across the line is a Brownian bridge from 0 to 0; theta is the share of the time
that it lies beyond half the width w of the strip. It hangs on z = w / (2 sqrt(k t)) alone, with k
the diffusivity across. All arrays are plain numbers; NaN where z is NaN.
"""

import math

import numpy as np

NODES = 5
REACH = 9.0  # beyond it u**17 exp(-u**2) is below 1e-18 of its largest
_U, _DU = np.polynomial.legendre.leggauss(48)
_U, _DU = 0.5 * REACH * (_U + 1.0), 0.5 * REACH * _DU
# Least pivot, as a share of the moment it came from, at which rounding has left it digits enough:
# the nodes lie within 0 and 1 and give back all moments to 1e-7 at any z (own measurement).
LEAST_PIVOT = 1e-10


def _sums(count):
    """Factors (n, j) of exp(-(j z + u)**2) u**(2n - 1) du in the n-th moment, and those powers."""
    orders = np.arange(1, count + 1)
    factors = np.array([
        [math.factorial(n) * 2.0 * j / n * math.comb(2 * n, n - j) / math.factorial(2 * n - 1)
         if j <= n else 0.0 for j in orders]
        for n in orders
    ])  # fmt: skip
    return factors, _DU[:, None] * _U[:, None] ** (2 * orders - 1)


_FACTORS, _POWERS = _sums(2 * NODES - 1)


def moments(z):
    """Moments m_0 = 1, m_1, ... m_9 of theta at z >= 0: (..., 10).

    Source: own derivation: m_n = n! sqrt(pi) sum over j = 1..n of (j/n) C(2n, n-j)
    i^(2n-1)erfc(j z), with i^n erfc(x) = 2/sqrt(pi) int_0^inf u^n/n! exp(-(x + u)^2) du by
    Gauss-Legendre quadrature, since the forward recurrence loses digits.

    Without a strip all time is outside it, and m_1 = exp(-z^2) - sqrt(pi) z erfc(z):

    >>> [round(float(one), 12) for one in moments(0.0)[:3]]
    [1.0, 1.0, 1.0]
    >>> round(float(moments(0.5)[1]), 4)
    0.3539
    """
    z = np.asarray(z, float)[..., None, None]
    steps = np.arange(1, 2 * NODES)[:, None] * z
    repeated = np.exp(-np.square(steps + _U)) @ _POWERS  # (..., j, n)
    higher = np.einsum("...jn,nj->...n", repeated, _FACTORS)
    return np.concatenate([np.ones((*higher.shape[:-1], 1)), higher], axis=-1)


def rule(z):
    """(theta, weight), both (..., 5): the mean of a smooth f(theta) is sum(weight f(theta)).

    The Gauss rule of five nodes of the distribution of theta, exact for powers up to 9. Where the
    distribution is so narrow that rounding has taken the moments' digits (a strip narrower than
    about a tenth of a millimetre), of fewer nodes: the others have weight 0.

    Source: Golub and Welsch (1969), Mathematics of Computation 23: Cholesky factor of the
    Hankel matrix of the moments, eigenvectors of the Jacobi matrix.
    """
    moment = moments(z)
    place = np.arange(NODES)
    hankel = moment[..., place[:, None] + place]
    shifted = moment[..., place[:, None] + place + 1]
    lower, known = _cholesky(hankel)
    half = np.linalg.solve(lower, shifted)
    jacobi = np.linalg.solve(lower, np.swapaxes(half, -1, -2))
    jacobi = np.where(known[..., None, :] & known[..., :, None], jacobi, 0.0)
    theta, vectors = np.linalg.eigh(np.nan_to_num(jacobi))
    weight = np.where(np.isnan(moment[..., 1:2]), np.nan, np.square(vectors[..., 0, :]))
    return theta, weight


def _cholesky(matrix):
    """Lower factor, and which of its columns rounding has left; rows of the others are of unity."""
    lower = np.zeros_like(matrix)
    known = np.ones(matrix.shape[:-1], dtype=bool)
    for j in range(NODES):
        pivot = matrix[..., j, j] - np.sum(np.square(lower[..., j, :j]), axis=-1)
        known[..., j] = pivot > LEAST_PIVOT * matrix[..., j, j]
        if j:
            known[..., j] &= known[..., j - 1]
        root = np.where(known[..., j], np.sqrt(np.where(known[..., j], pivot, 1.0)), 1.0)
        lower[..., j, j] = root
        below = matrix[..., j + 1 :, j] - np.einsum(
            "...ik,...k->...i", lower[..., j + 1 :, :j], lower[..., j, :j]
        )
        lower[..., j + 1 :, j] = np.where(known[..., j, None], below / root[..., None], 0.0)
    return lower, known
