"""Heat dissipation along a needle: what it reads where sap flows unevenly past it.

A needle shows the mean temperature difference along its length. Each part of it is cooled by the
flux density there, J s(r), where s is the shape along the part in sapwood with mean 1 and J the
mean flux density of that part. Under a calibration J = factor * K**exponent the flow index at r is
K s(r)**(1 / exponent), with K the index of J, so that

    difference / zero-flow difference = 1 - a + a * mean of 1 / (1 + K s(r)**(1 / exponent))

with a the share of the needle in sapwood. Only the exponent of the calibration enters. Here the
unknown is 1 / (1 + K), the ratio of the differences of a needle that is cooled evenly by J: it is
1 without flow, and everything is smooth across it.
"""

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from scipy.interpolate import CubicHermiteSpline

# Gauss-Legendre nodes on short pieces of the shape, along which it changes little, ...
SHORT = 5
# ... and on those where it comes near zero, whose root would spoil the rule: there through a map
# of 0 to 1 with three derivatives of zero at both ends.
STEEP = 24
MAP = np.polynomial.Polynomial([0, 0, 0, 0, 35, -84, 70, -20])
RATIOS = 513  # nodes of the table from infinite flow to none
WARMER = 257  # and from there to the highest ratio
HIGHEST = 2.0  # ratio beyond which the table goes on straight


@dataclass(frozen=True)
class EvenCooling:
    """Ratio of differences that a needle shows -> ratio that even cooling would show, 1 / (1 + K).

    NaN at or below `lowest`, the share of the needle past which no sap flows. Above `highest` the
    relation goes on straight: such readings are no flow, but their sign and size are kept.

    Accuracy: J within 1e-9 of itself for indices from 0.01 to 10, 2e-9 from -0.05 to -0.01
    (tested against adaptive quadrature).
    """

    table: CubicHermiteSpline
    lowest: float
    highest: float

    def __call__(self, ratio):
        """ratio : (...) [1]; the same shape [1]."""
        ratio = np.asarray(ratio, float)
        inside = self.table(np.clip(ratio, self.lowest, self.highest))
        beyond = self.table(self.highest, 1) * np.maximum(ratio - self.highest, 0.0)
        return np.where(ratio > self.lowest, inside + beyond, np.nan)


@lru_cache(maxsize=1024)
def even_cooling(contact, begin, end, depth, exponent, relative_depth, profile):
    """The `EvenCooling` of one needle; None where no shape is known along it.

    That is where a value of the profile is absent, or it is negative somewhere along the needle or
    nowhere positive, or the needle has no length in sapwood.

    contact : share of the needle in sapwood [1], over which the shape from `begin` to `end` or
    `depth`, whichever comes first, is laid; begin, end : of the needle, and depth of the sapwood,
    below cambium [m]; exponent : of the calibration [1]; relative_depth, profile : tuples, the
    shape at depths from cambium (0) to heartwood (1), straight between, on any scale.

    Source: the mean of temperature after Clearwater et al. (1999), Tree Physiology 19; the
    inversion is an own derivation.

    >>> flat = (0.0, 1.0), (1.0, 1.0)  # half the needle in evenly cooled sapwood, 9 of 10 K read
    >>> round(float(even_cooling(0.5, 0.0, 0.02, 0.01, 1.231, *flat)(0.9)), 12)
    0.8
    """
    end = min(end, depth)
    if not (contact > 0.0 and begin < end <= depth and np.isfinite(profile).all()):
        return None
    shape, weights = _along(begin / depth, end / depth, relative_depth, profile)
    if shape.min() < 0.0 or shape.max() == 0.0:
        return None
    # Index over the index of the mean, at the nodes along the needle.
    power = (shape / (shape @ weights)) ** (1.0 / exponent)
    # A part with power p shows even / (even + (1 - even) p), which has a pole above 1.
    highest = HIGHEST if power.max() <= 1.5 else 1.0 + 0.5 / (power.max() - 1.0)
    cooled = np.linspace(0.0, 1.0, RATIOS) ** 2  # closer where the relation bends most
    even = np.concatenate([cooled, np.linspace(1.0, highest, WARMER)[1:]])
    part = even[:, np.newaxis] + (1.0 - even[:, np.newaxis]) * power
    read = np.divide(even[:, np.newaxis], part, out=np.ones(part.shape), where=part > 0.0)
    slope = np.divide(power, part**2, out=np.zeros(part.shape), where=part > 0.0)
    ratio = 1.0 - contact + contact * (read @ weights)
    ratio[RATIOS - 1] = 1.0  # no flow is no flow, whatever the rounding
    table = CubicHermiteSpline(ratio, even, 1.0 / (contact * (slope @ weights)))
    return EvenCooling(table, float(ratio[0]), float(ratio[-1]))


def _along(low, high, relative_depth, profile):
    """The shape at nodes along a needle between two relative depths; weights that sum to 1."""
    inner = [place for place in relative_depth if low < place < high]
    edges = np.array([low, *inner, high])
    at_edges = np.interp(edges, relative_depth, profile)
    lower, upper = np.sort([at_edges[:-1], at_edges[1:]], axis=0)
    steep = lower < 0.7 * upper
    values, weights = [], []
    for pieces, (places, shares) in ((~steep, _rule(SHORT)), (steep, _mapped_rule(STEEP))):
        first, width = edges[:-1][pieces, np.newaxis], np.diff(edges)[pieces, np.newaxis]
        values.append(np.interp(first + width * places, relative_depth, profile).ravel())
        weights.append((width * shares).ravel())
    weights = np.concatenate(weights)
    return np.concatenate(values), weights / weights.sum()


def _rule(count):
    """Places and weights of the Gauss-Legendre rule on 0 to 1."""
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return 0.5 * (nodes + 1.0), 0.5 * weights


def _mapped_rule(count):
    places, weights = _rule(count)
    return MAP(places), weights * MAP.deriv()(places)
