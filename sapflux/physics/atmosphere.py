"""Vapour pressure and pressure of the air, by FAO-56.

Arguments are arrays that broadcast; NaN where one is NaN.

Source: Allen et al. (1998), FAO Irrigation and Drainage Paper 56.
"""

import numpy as np

from sapflux.constants import ZERO_CELSIUS

PA_PER_KPA = 1000.0


def saturation_vapour_pressure(temperature):
    """Vapour pressure [Pa] of air saturated over liquid water at `temperature` [K].

    Over water below freezing too, where over ice it would be lower (at -5 degC by 5 %). Between
    0 and 40 degC within 0.12 % of the formulation of ASHRAE.

    Source: FAO-56, eq. 11.

    >>> round(float(saturation_vapour_pressure(293.15)), 2)
    2338.28
    """
    celsius = np.asarray(temperature, float) - ZERO_CELSIUS
    return 610.8 * np.exp(17.27 * celsius / (celsius + 237.3))


def vapour_pressure_deficit(temperature, relative_humidity):
    """Vapour pressure [Pa] that air at `temperature` [K] lacks to saturation.

    `relative_humidity` is a share [1]. Above 1, as sensors drift, the deficit is negative: kept.

    Source: FAO-56, eq. 11 and 10.

    >>> round(float(vapour_pressure_deficit(298.15, 0.5)), 2)
    1583.89
    """
    return saturation_vapour_pressure(temperature) * (1.0 - relative_humidity)


def air_pressure(elevation):
    """Mean air pressure [Pa] at `elevation` [m] above sea level.

    Simplified ideal gas in a standard atmosphere of 20 degC: 0.3 % above the standard
    atmosphere of aviation at 1800 m.

    Source: FAO-56, eq. 7.

    >>> round(float(air_pressure(1800.0)), 1)
    81755.8
    """
    return 101.3e3 * ((293.0 - 0.0065 * np.asarray(elevation, float)) / 293.0) ** 5.26
