"""Constants of nature and of the published methods, in SI units, each with its source."""

# The longest heating cycle of a needle that is heated intermittently; those in use last 20 to
# 60 min. Source: own judgement.
LONGEST_CYCLE_S = 7200.0

# 0 degC on the thermodynamic scale, exact. Source: SI brochure, 9th edition (2019).
ZERO_CELSIUS = 273.15

# Water at 20 degC as the sap flow literature rounds it. Source: Burgess et al. (2001),
# Tree Physiology 21; value from memory.
WATER_DENSITY = 1000.0  # kg m-3
WATER_SPECIFIC_HEAT = 4182.0  # J kg-1 K-1

# Source: Swanson (1983) as used by Burgess et al. (2001); value from memory.
WATER_CONDUCTIVITY = 0.5984  # W m-1 K-1

# Oven-dry wood at 20 degC. Source: Edwards & Warwick (1984), New Zealand J. Agric. Res. 27;
# value from memory.
DRY_WOOD_SPECIFIC_HEAT = 1200.0  # J kg-1 K-1

# 0.0820 MJ m-2 min-1, the solar constant of FAO-56 (1366.67 W m-2). Satellites since have
# measured about 1361; kept so that radiation agrees with the FAO-56 tables.
# Source: Allen et al. (1998), FAO Irrigation and Drainage Paper 56, eq. 21.
SOLAR_CONSTANT = 0.0820e6 / 60.0  # W m-2
