"""Density, heat capacity and heat conduction of fresh sapwood.

Arguments of all functions, arrays that broadcast, NaN where either is NaN:
`dry_density` is dry mass over fresh volume [kg m-3]; `water_content` is water mass over dry
mass [1]. They hold for unfrozen wood with less water than its voids can take
(water_content < 1000 / dry_density - 0.6536).
"""

import numpy as np

from sapflux.constants import (
    DRY_WOOD_SPECIFIC_HEAT,
    WATER_CONDUCTIVITY,
    WATER_DENSITY,
    WATER_SPECIFIC_HEAT,
)


def fresh_density(dry_density, water_content):
    """Fresh mass over fresh volume [kg m-3].

    Source: mass balance (own derivation).

    >>> fresh_density(500.0, 1.0)
    1000.0
    """
    return dry_density * (1.0 + water_content)


def specific_heat(water_content):
    """Heat capacity of fresh wood per fresh mass [J kg-1 K-1]: dry wood and water by mass.

    Source: Edwards & Warwick (1984); Burgess et al. (2001).

    >>> specific_heat(1.0)  # halfway between 1200 and 4182
    2691.0
    """
    heat = DRY_WOOD_SPECIFIC_HEAT + water_content * WATER_SPECIFIC_HEAT
    return heat / (1.0 + water_content)


def volumetric_heat_capacity(dry_density, water_content):
    """Heat capacity of fresh wood per fresh volume [J m-3 K-1].

    Source: product of density and specific heat (own derivation).

    >>> volumetric_heat_capacity(500.0, 1.0)
    2691000.0
    """
    return fresh_density(dry_density, water_content) * specific_heat(water_content)


def void_fraction(dry_density, water_content):
    """Share of the fresh volume that is filled with gas [1]; negative: wetter than possible.

    Source: Swanson (1983) as used by Burgess et al. (2001); values from memory.

    >>> round(void_fraction(500.0, 1.0), 4)
    0.1732
    """
    return 1.0 - dry_density / WATER_DENSITY * (0.6536 + water_content)


def thermal_conductivity(dry_density, water_content):
    """Thermal conductivity of fresh wood [W m-1 K-1].

    Source: Swanson (1983), form of Burgess et al. (2001); values from memory.

    >>> round(thermal_conductivity(500.0, 1.0), 3)
    0.666
    """
    water = water_content * dry_density / WATER_DENSITY
    rest = 0.04182 * (21.0 - 20.0 * void_fraction(dry_density, water_content))
    return WATER_CONDUCTIVITY * water + rest * (1.0 - water)


def fibre_saturation(dry_density):
    """Water mass over dry mass up to which wood binds water in its cell walls [1].

    Source: as used by Vandegehuchte & Steppe (2012): 0.2 G**-0.5, G the dry density over that of
    water; from memory.

    >>> round(float(fibre_saturation(500.0)), 3)
    0.283
    """
    return 0.2 * np.sqrt(WATER_DENSITY / dry_density)


def conductivity_bound_water_apart(dry_density, water_content, saturation):
    """Thermal conductivity of fresh wood [W m-1 K-1], bound water counted with the cell walls.

    saturation : water content at fibre saturation [1]; drier wood has no free water.

    Source: Vandegehuchte & Steppe (2012); values from memory.

    >>> round(float(conductivity_bound_water_apart(500.0, 1.0, 0.26)), 3)
    0.646
    """
    bound = np.minimum(water_content, saturation)
    free = WATER_CONDUCTIVITY * (water_content - bound) * dry_density / WATER_DENSITY
    return free + 0.04186 * (21.0 - 20.0 * void_fraction(dry_density, bound))


def thermal_diffusivity(dry_density, water_content, saturation=None):
    """Thermal diffusivity of fresh wood [m2 s-1]: conductivity over heat capacity.

    saturation : None, all water conducts as free water does; else the water content at fibre
    saturation [1], and bound water is counted with the cell walls.

    Uncertain by 5-10 %, as wood conducts differently along and across the grain.

    Source: Swanson (1983), form of Burgess et al. (2001); Vandegehuchte & Steppe (2012) for bound
    water; values from memory.

    >>> round(thermal_diffusivity(500.0, 1.0) * 1e7, 2)
    2.47
    """
    if saturation is None:
        conductivity = thermal_conductivity(dry_density, water_content)
    else:
        conductivity = conductivity_bound_water_apart(dry_density, water_content, saturation)
    return conductivity / volumetric_heat_capacity(dry_density, water_content)


def conversion_factor(dry_density, water_content):
    """Volume flux of sap over heat pulse velocity [1].

    Heat is carried by the sap but stored in wood and sap; the factor is the heat capacity of
    fresh wood over that of the same volume of water.

    Source: Barrett et al. (1995), Plant Cell Environ. 18; Burgess et al. (2001).

    >>> round(conversion_factor(500.0, 1.0), 3)
    0.643
    """
    heat_of_water = WATER_DENSITY * WATER_SPECIFIC_HEAT
    return volumetric_heat_capacity(dry_density, water_content) / heat_of_water


def flux_density(heat_pulse_velocity, dry_density, water_content):
    """Sap flux density [kg m-2 s-1] behind a heat pulse velocity [m s-1]; keeps the sign.

    Source: Barrett et al. (1995); Burgess et al. (2001).

    >>> round(flux_density(1e-4, 500.0, 1.0), 5)
    0.06435
    """
    factor = conversion_factor(dry_density, water_content)
    return heat_pulse_velocity * factor * WATER_DENSITY
