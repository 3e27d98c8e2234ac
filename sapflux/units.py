"""Units of logger columns and tables, and how they become SI."""

import re

from sapflux.constants import ZERO_CELSIUS
from sapflux.schema import QUANTITIES

# Factors to SI. Exact by definition (SI brochure, 9th edition, 2019).
MM = 1e-3  # in m
CM = 1e-2  # in m
CM2 = 1e-4  # in m2
CM2_PER_S = 1e-4  # in m2 s-1
G = 1e-3  # in kg
# What divides a length, and what multiplies one to show it: a quotient of short decimal numbers is
# rounded once, a product with a rounded factor twice.
MM_PER_M = 1000.0
CM_PER_M = 100.0
M2_PER_HA = 1e4

# unit as written -> (SI unit, factor, offset): si = value * factor + offset.
# Factors are exact by definition (SI brochure, 9th edition, 2019).
UNITS = {
    "1": ("1", 1.0, 0.0),
    "%": ("1", 0.01, 0.0),
    "V": ("V", 1.0, 0.0),
    "mV": ("V", 1e-3, 0.0),
    "uV": ("V", 1e-6, 0.0),
    "A": ("A", 1.0, 0.0),
    "mA": ("A", 1e-3, 0.0),
    "K": ("K", 1.0, 0.0),
    "degC": ("K", 1.0, ZERO_CELSIUS),
    "degF": ("K", 5.0 / 9.0, 459.67 * 5.0 / 9.0),
    "Pa": ("Pa", 1.0, 0.0),
    "hPa": ("Pa", 100.0, 0.0),
    "kPa": ("Pa", 1000.0, 0.0),
    "MPa": ("Pa", 1e6, 0.0),
    "W m-2": ("W m-2", 1.0, 0.0),
    "m": ("m", 1.0, 0.0),
    "cm": ("m", CM, 0.0),
    "mm": ("m", MM, 0.0),
    "um": ("m", 1e-6, 0.0),
    "m s-1": ("m s-1", 1.0, 0.0),
    "km h-1": ("m s-1", 1000.0 / 3600.0, 0.0),
    "cm h-1": ("m s-1", CM / 3600.0, 0.0),
    "mm h-1": ("m s-1", MM / 3600.0, 0.0),
    "cm s-1": ("m s-1", CM, 0.0),
    "m3 m-3": ("1", 1.0, 0.0),
    "m3 s-1": ("m3 s-1", 1.0, 0.0),
    "L s-1": ("m3 s-1", 1e-3, 0.0),
    "kg m-2": ("kg m-2", 1.0, 0.0),
    "mm water": ("kg m-2", 1.0, 0.0),
}
# Units that a column of a quantity may be written in, where these are not all units of its SI unit.
WATER_DEPTH = ("mm", "mm water", "kg m-2")
PRESSURES_OF_AIR = ("Pa", "hPa", "kPa")
WRITTEN = {
    "heat_ratio": ("1",),
    "log_heat_ratio": ("1",),
    "logged_velocity": ("cm h-1", "mm h-1", "cm s-1", "m s-1"),
    "heater_state": ("1", "%"),
    "relative_humidity": ("%", "1"),
    "soil_moisture": ("m3 m-3", "%", "1"),
    "vapour_pressure_deficit": PRESSURES_OF_AIR,
    "air_pressure": PRESSURES_OF_AIR,
    "wind_speed": ("m s-1", "km h-1"),
    "precipitation": WATER_DEPTH,
    "throughfall": WATER_DEPTH,
    "stage": ("m", "cm", "mm"),
}

# Factors to SI of config keys, by the unit that `unit_of_key` finds; units of SI are left out.
KEY_FACTORS = {"mm": MM, "cm": CM, "min": 60.0, "cm2_s": CM2_PER_S, "g_m2_s": G}

# A temperature difference has no offset, whatever scale it is written in.
DIFFERENCE_FACTORS = {"K": 1.0, "degC": 1.0, "degF": 5.0 / 9.0}


def accepted(quantity):
    """The units a logger column of a quantity may be written in. KeyError for no quantity.

    >>> accepted("wind_speed"), accepted("heated_emf")
    (('m s-1', 'km h-1'), ('V', 'mV', 'uV'))
    """
    inside = QUANTITIES[quantity].units
    return WRITTEN.get(quantity) or tuple(u for u, (si, _, _) in UNITS.items() if si == inside)


def meant(unit, quantity):
    """The unit of the table that a column's unit means: 'mm' of precipitation is a depth of water.

    Source: 1 mm of water on 1 m2 is 1 kg, at 1000 kg m-3 (WMO-No. 8, from memory).

    >>> meant("mm", "precipitation"), meant("mm", "stage")
    ('mm water', 'mm')
    """
    return "mm water" if unit == "mm" and WRITTEN.get(quantity) is WATER_DEPTH else unit


def to_si(values, unit, *, difference=False):
    """Values as written, in SI. KeyError for a unit that is not in the table.

    `difference` marks a temperature difference, which takes no offset. A unit that depends on the
    quantity goes through `meant` first.

    >>> to_si(3.6, "cm h-1")
    1e-05
    >>> to_si(20.0, "degC")
    293.15
    >>> to_si(8.0, "degC", difference=True)
    8.0
    """
    if difference and unit in DIFFERENCE_FACTORS:
        return values * DIFFERENCE_FACTORS[unit]
    _, factor, offset = UNITS[unit]
    return values * factor + offset if offset else values * factor


def factor_of_key(key):
    """What turns the value of a config key into SI, by the unit that it carries after its name.

    >>> factor_of_key("wound_width_mm"), factor_of_key("window_from_s"), factor_of_key("exponent")
    (0.001, 1.0, 1.0)
    """
    return KEY_FACTORS.get(unit_of_key(key), 1.0)


def unit_of_key(key):
    """The unit a config key carries after its name, or '' if it carries none.

    >>> unit_of_key("wound_width_mm")
    'mm'
    """
    found = re.search(r"_(mm|cm|m2|m|K|kPa|Pa|h|min|s|d|deg|V|ohm|cm2_s|kg_m3|g_m2_s|J_m)$", key)
    return found.group(1) if found else ""
