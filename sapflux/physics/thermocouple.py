"""Voltage and temperature of type T (copper-constantan) thermocouples by ITS-90.

All functions work on arrays of any shape, which broadcast, and element by element: a value does
not depend on its neighbours. They are NaN outside -200..400 degC and where an argument is NaN.

Source: Burns et al. (1993), NIST Monograph 175, reference function of type T.
"""

import numpy as np

from sapflux.constants import ZERO_CELSIUS

LOWEST, HIGHEST = -200.0, 400.0  # degC

# Millivolt per degC**i. Source: NIST Monograph 175, type T, -270..0 degC and 0..400 degC.
BELOW_ZERO = (
    0.0, 0.387481063640e-1, 0.441944343470e-4, 0.118443231050e-6, 0.200329735540e-7,
    0.901380195590e-9, 0.226511565930e-10, 0.360711542050e-12, 0.384939398830e-14,
    0.282135219250e-16, 0.142515947790e-18, 0.487686622860e-21, 0.107955392700e-23,
    0.139450270620e-26, 0.797951539270e-30,
)  # fmt: skip
ABOVE_ZERO = (
    0.0, 0.387481063640e-1, 0.332922278800e-4, 0.206182434040e-6, -0.218822568460e-8,
    0.109968809280e-10, -0.308157587720e-13, 0.454791352900e-16, -0.275129016730e-19,
)  # fmt: skip

# A fixed number of steps, so that a value never depends on the others in its array. Four reach
# the last digits from anywhere in range, the fifth is for safety.
STEPS = 5

# Voltages of a heated needle [V], -10..29 K: here one polynomial stands for the inverse.
USUAL = (-0.4e-3, 1.2e-3)
DEGREE = 11  # of that polynomial: within 1e-11 K of the exact inverse
PIECE = 16384  # elements worked on at a time, so that they stay in the processor's cache


def emf(temperature):
    """Voltage [V] of a junction at `temperature` [K] against one at 0 degC.

    Source: NIST Monograph 175, type T.

    >>> round(float(emf(293.15)) * 1e3, 6)
    0.789612
    """
    return _emf_and_slope(np.asarray(temperature, float) - ZERO_CELSIUS)[0] * 1e-3


def sensitivity(temperature):
    """Voltage per kelvin [V K-1] of a junction at `temperature` [K]: the Seebeck coefficient.

    Source: NIST Monograph 175, type T, derivative of the reference function.

    >>> round(float(sensitivity(293.15)) * 1e6, 4)
    40.2654
    """
    return _emf_and_slope(np.asarray(temperature, float) - ZERO_CELSIUS)[1] * 1e-3


def temperature(emf):
    """Temperature [K] of a junction whose voltage against one at 0 degC is `emf` [V].

    The exact inverse of the reference function, not the approximate inverse polynomials of the
    monograph: a round trip over -20..60 degC returns the temperature within 1e-12 K.

    Source: NIST Monograph 175, type T, solved by Newton's method (own derivation).

    >>> round(float(temperature(0.789612e-3)), 3)
    293.15
    """
    millivolt = np.asarray(emf, float) * 1e3
    return _in_pieces(lambda v: _solve(v, v / ABOVE_ZERO[1]), millivolt) + ZERO_CELSIUS


def difference(emf, reference_temperature):
    """Temperature difference [K], hot minus reference, behind a differential voltage.

    Parameters
    ----------
    emf : [V]
        Voltage between two type T junctions; positive when the first is warmer.
    reference_temperature : [K]
        Temperature of the second junction. The voltage per kelvin rises by 0.2 % for each
        kelvin, so its error enters the difference by 0.2 % per kelvin.

    Source: NIST Monograph 175, type T: emf(hot) = emf(reference) + measured voltage.

    >>> round(float(difference(0.4e-3, 293.15)), 6)
    9.833701
    """
    reference = np.asarray(reference_temperature, float) - ZERO_CELSIUS
    if reference.ndim == 0 and 0.0 <= reference < HIGHEST - 50.0:
        return _difference_at_one_reference(emf, float(reference))
    return _in_pieces(_difference, np.asarray(emf, float), reference)


def _difference(emf, reference):
    millivolt = emf * 1e3
    at_reference, slope = _emf_and_slope(reference)
    start = reference + millivolt / slope
    return _solve(at_reference + millivolt, start) - reference


def _difference_at_one_reference(emf, reference):
    """The difference as a polynomial of the voltage, where that is exact; else as ever."""
    at_reference = float(_emf_and_slope(reference)[0])
    # Not across 0 degC, where the reference function changes its curvature.
    low, high = max(USUAL[0], -at_reference * 1e-3), USUAL[1]
    middle, half = (low + high) / 2.0, (high - low) / 2.0
    nodes = middle + half * np.cos(np.pi * (np.arange(DEGREE + 1) + 0.5) / (DEGREE + 1))
    exact = _difference(nodes, np.full(nodes.shape, reference))
    fitted = np.polynomial.Chebyshev.fit(nodes, exact, DEGREE, domain=[low, high])
    coefficients = np.polynomial.chebyshev.cheb2poly(fitted.coef)

    def piece(voltage):
        x = (voltage - middle) / half
        value = np.full(x.shape, coefficients[-1])
        with np.errstate(over="ignore", invalid="ignore"):  # far out: replaced below
            for coefficient in coefficients[-2::-1]:
                value *= x
                value += coefficient
        beyond = (voltage < low) | (voltage > high)
        if beyond.any():
            far = voltage[beyond]
            value[beyond] = _difference(far, np.full(far.shape, reference))
        return value

    return _in_pieces(piece, np.asarray(emf, float))


def _in_pieces(function, *arrays):
    """`function` of flat pieces of the arrays, put together to their common shape."""
    arrays = np.broadcast_arrays(*arrays)
    shape = arrays[0].shape
    flat = [array.reshape(-1) for array in arrays]
    result = np.empty(flat[0].size)
    for start in range(0, result.size, PIECE):
        piece = slice(start, start + PIECE)
        result[piece] = function(*(array[piece] for array in flat))
    return result.reshape(shape)


def _solve(millivolt, start):
    """Temperature [degC] whose voltage [mV] is given, by Newton steps from `start`."""
    celsius = np.clip(start, LOWEST, HIGHEST)
    for _ in range(STEPS):
        value, slope = _emf_and_slope(celsius)
        celsius = np.clip(celsius - (value - millivolt) / slope, LOWEST, HIGHEST)
    # A millionth of a microvolt of slack, so that the ends of the range are inside it.
    inside = (millivolt >= EMF_RANGE[0] - 1e-9) & (millivolt <= EMF_RANGE[1] + 1e-9)
    return np.where(inside, celsius, np.nan)


def _emf_and_slope(celsius):
    """Reference function [mV] and its derivative [mV K-1] at `celsius`; NaN out of range."""
    celsius = np.asarray(celsius, float)
    flat = celsius.ravel()
    value, slope = _polynomial(ABOVE_ZERO, flat)
    below = flat < 0.0
    if below.any():
        value[below], slope[below] = _polynomial(BELOW_ZERO, flat[below])
    outside = (flat < LOWEST) | (flat > HIGHEST)
    if outside.any():
        value[outside] = slope[outside] = np.nan
    return value.reshape(celsius.shape), slope.reshape(celsius.shape)


def _polynomial(coefficients, x):
    value = np.full(x.shape, coefficients[-1])
    slope = np.zeros(x.shape)
    with np.errstate(over="ignore", invalid="ignore"):  # out of range: made NaN by the caller
        for coefficient in coefficients[-2::-1]:
            slope *= x
            slope += value
            value *= x
            value += coefficient
    return value, slope


EMF_RANGE = tuple(_emf_and_slope(np.array([LOWEST, HIGHEST]))[0])  # mV
