"""A calibration of heat dissipation from gravimetric flux: flux density = factor * index**exponent.

The mean flux density is modelled itself, not its logarithm, so that the curve is the mean and needs
no correction on the way back from logarithms. Its spread is taken as a share of it: the
quasi-likelihood with a logarithmic link and a variance in proportion to the square of the mean.
Single observations may be zero or negative; only the mean must be positive. Where they are so at
one end of the range together, no power law is their mean, and there is no estimate.
"""

from dataclasses import dataclass

import numpy as np

FEWEST_STEMS = 3  # from which the covariance follows the scatter among stems: own judgement
STEPS = 100
CLOSE = 1e-12
ROUNDING = 1e-12  # of a sum that is to fall


@dataclass(frozen=True)
class PowerLaw:
    """A fitted calibration.

    factor : flux density at index 1, in the unit of the data; exponent [1]; covariance : (2, 2) of
    (ln factor, exponent); by_stem : whether it follows the scatter among stems; residual_spread :
    standard deviation of (flux - mean) / mean [1]; lowest, highest : index of the data [1];
    points, stems : their numbers, 0 stems where they are not told apart.
    """

    factor: float
    exponent: float
    covariance: np.ndarray
    by_stem: bool
    residual_spread: float
    lowest: float
    highest: float
    points: int
    stems: int

    @property
    def ln_factor_error(self):
        """Standard error of the logarithm of the factor [1]."""
        return float(np.sqrt(self.covariance[0, 0]))

    @property
    def exponent_error(self):
        """Standard error of the exponent [1]."""
        return float(np.sqrt(self.covariance[1, 1]))

    @property
    def error_correlation(self):
        """Correlation of both errors [1]; 0 where one of them is 0."""
        scale = self.ln_factor_error * self.exponent_error
        return float(self.covariance[0, 1] / scale) if scale > 0.0 else 0.0

    def mean(self, index):
        """Mean flux density at a flow index, in the unit of the data."""
        return self.factor * np.asarray(index, float) ** self.exponent


def fit_power_law(index, flux, stems=None):
    """The `PowerLaw` of flow indices (all > 0) and gravimetric flux densities.

    stems : (point) labels, or None. With at least 3 stems the covariance is the jackknife that
    leaves out one stem after the other; else the model's own, with the spread of all points.

    ValueError where the estimate does not settle, as where the sum of the flux is not positive.

    Source: McCullagh & Nelder (1989), Generalized Linear Models, chapter 9 (quasi-likelihood),
    chapter 2.5 (iterated weighted least squares); Efron (1982), The Jackknife, the Bootstrap and
    Other Resampling Plans, chapter 3.

    >>> index = np.array([0.1, 0.2, 0.4, 0.8])
    >>> found = fit_power_law(index, 120.0 * index**1.2)
    >>> round(found.factor, 9), round(found.exponent, 9)
    (120.0, 1.2)
    """
    index, flux = np.asarray(index, float), np.asarray(flux, float)
    design = np.column_stack([np.ones(len(index)), np.log(index)])
    if not flux.sum() > 0.0:
        raise ValueError("the sum of the flux is not positive")
    estimate = _settled(design, flux)
    relative = flux / np.exp(design @ estimate) - 1.0
    spread = np.sqrt((relative**2).sum() / (len(index) - 2))
    labels = np.asarray(stems if stems is not None else [], dtype=str)
    names = np.unique(labels)
    by_stem = len(names) >= FEWEST_STEMS
    if by_stem:
        covariance = _jackknife(design, flux, labels, names)
    else:
        covariance = spread**2 * np.linalg.inv(design.T @ design)
    return PowerLaw(
        float(np.exp(estimate[0])), float(estimate[1]), covariance, by_stem, float(spread),
        float(index.min()), float(index.max()), len(index), len(names),
    )  # fmt: skip


def _settled(design, flux):
    """(ln factor, exponent) by iterated least squares."""

    def deviance(estimate):
        logarithm = design @ estimate
        return (flux * np.exp(-logarithm) + logarithm).sum()

    estimate = np.array([np.log(flux.mean()), 0.0])
    for _ in range(STEPS):
        # With this variance the weights of the iterated least squares are all one.
        relative = flux / np.exp(design @ estimate) - 1.0
        step = np.linalg.lstsq(design, relative, rcond=None)[0]
        step = step / max(1.0, np.abs(design @ step).max())  # a factor of e at most
        known = deviance(estimate)
        while deviance(estimate + step) > known + ROUNDING * abs(known):
            step = step / 2.0
        estimate = estimate + step
        if np.abs(step).max() < CLOSE:
            return estimate
    raise ValueError("the estimate does not settle")


def _jackknife(design, flux, labels, names):
    """Covariance by leaving out each stem in turn, so that the points of a stem depart together.

    With few stems the sandwich of the same data is a tenth to a quarter too small.
    """
    left = np.array([_settled(design[labels != n], flux[labels != n]) for n in names])
    departure = left - left.mean(axis=0)
    return (len(names) - 1) / len(names) * departure.T @ departure
