"""Heat dissipation: from the temperature difference of a heated needle to sap flux density.

Arguments are arrays that broadcast; NaN where an argument is NaN.
"""

import numpy as np

# Flux density at flow index 1 [kg m-2 s-1] and exponent of the index, for any species.
# Source: Granier (1985), Ann. Sci. For. 42; Granier (1987), Tree Physiology 3; value from memory.
GENERAL_FACTOR = 0.11899
GENERAL_EXPONENT = 1.231


def flow_index(zero_flow, measured):
    """How far sap flow has cooled the needle [1]: zero without flow, negative above the baseline.

    `zero_flow` and `measured` are heated minus reference needle temperature [K]. NaN where
    `measured` is not positive, which no heated needle gives.

    Source: Granier (1985).

    >>> float(flow_index(10.0, 8.0))
    0.25
    """
    measured = _positive(measured)
    return (zero_flow - measured) / measured


def sapwood_contact(measured, zero_flow, fraction):
    """Temperature difference [K] of that part of the needle that lies in conducting sapwood.

    `fraction` [1] of the needle lies in sapwood, the rest in wood without flow, where the
    difference stays at `zero_flow`. NaN where undefined: `measured` at or below the share of the
    dead part, (1 - fraction) * zero_flow, or a fraction outside (0, 1]. The error grows fast
    below a fraction of 0.5. Assumes uniform flow along the part in sapwood.

    Source: Clearwater et al. (1999), Tree Physiology 19.

    >>> float(sapwood_contact(9.0, 10.0, 0.5))  # the dead half at 10 K, so the other at 8 K
    8.0
    """
    fraction = np.asarray(fraction, float)
    fraction = np.where((fraction > 0.0) & (fraction <= 1.0), fraction, np.nan)
    return _positive(measured - (1.0 - fraction) * zero_flow) / fraction


def flux_density(index, factor=GENERAL_FACTOR, exponent=GENERAL_EXPONENT):
    """Sap flux density [kg m-2 s-1] of a flow index [1], by a power law.

    `factor` [kg m-2 s-1] is the flux density at index 1. A negative index, read above the
    baseline, gives the flux density of its magnitude with a minus sign (own convention: the
    calibrations know no negative index), so that noise about zero flow averages out instead of
    being clipped.

    Source: Granier (1985, 1987).

    >>> float(flux_density(1.0))
    0.11899
    >>> float(flux_density(-1.0))
    -0.11899
    """
    return np.copysign(factor * np.abs(index) ** exponent, index)


def index_of(flux_density, factor=GENERAL_FACTOR, exponent=GENERAL_EXPONENT):
    """Flow index [1] of a sap flux density [kg m-2 s-1], with its sign.

    Source: inverse of `flux_density`.

    >>> float(index_of(0.11899))
    1.0
    """
    return np.copysign((np.abs(flux_density) / factor) ** (1.0 / exponent), flux_density)


def amplification(index, exponent=GENERAL_EXPONENT):
    """Relative change of flux density per relative change of the zero-flow difference [1].

    At a flow index of 0.2 an error of 1 % in the baseline is one of 7.4 % in the flux density.
    NaN at an index of zero, where the relative change has no meaning.

    Source: derivative of the calibration, exponent * (1 + K) / K (own derivation).

    >>> round(float(amplification(0.2)), 1)
    7.4
    """
    index = np.asarray(index, float)
    index = np.where(index == 0.0, np.nan, index)
    return exponent * (1.0 + index) / index


def _positive(values):
    values = np.asarray(values, float)
    return np.where(values > 0.0, values, np.nan)
