"""What a virtual copy of a site takes where the site does not say. All values are invented.

They are plausible for closed forests; none is a measurement, and none is fitted to a result. Each
says what it means and from which range it is drawn. Source of all: own judgement.
"""

from sapflux.virtual.forest import Response

# Flux density below the cambium against weather, by wood anatomy: conductance, deficit, light,
# share open in the dark, soil, storage lag. The greatest values are never reached in any weather.
RESPONSES = {
    "conifer": Response(0.062, 900.0, 180.0, 0.05, 0.12, 2400.0),
    "diffuse_porous": Response(0.070, 800.0, 200.0, 0.06, 0.15, 2000.0),
    "ring_porous": Response(0.110, 850.0, 200.0, 0.07, 0.10, 1500.0),
    "other": Response(0.060, 850.0, 200.0, 0.06, 0.12, 2000.0),
}
# K, leaves below the air in the dark: 0.5 to 2 under a clear sky. Without it some sap flows on
# every humid night, and all methods that take such nights for nights at rest read 1-3 % too low.
NIGHT_COOLING = 0.5
SPECIES_SPREAD = 0.15  # of ln greatest flux density, from species to species of one anatomy
# Nodes (relative depth, ratio) of the mean radial shape, by wood anatomy.
PROFILES = {
    "conifer": ((0.0, 0.95), (0.1, 1.0), (0.25, 1.0), (0.5, 0.80), (0.75, 0.45), (1.0, 0.10)),
    "diffuse_porous": ((0.0, 1.0), (0.2, 0.95), (0.4, 0.78), (0.6, 0.55), (0.8, 0.32), (1.0, 0.12)),
    "ring_porous": ((0.0, 1.0), (0.25, 0.96), (0.5, 0.87), (0.75, 0.77), (1.0, 0.68)),
    "other": ((0.0, 1.0), (0.3, 0.95), (0.6, 0.65), (1.0, 0.20)),
}
# Dry density [kg m-3] and water content [1] of sapwood, by wood anatomy.
WOOD = {
    "conifer": (420.0, 1.20),
    "diffuse_porous": (560.0, 0.80),
    "ring_porous": (600.0, 0.70),
    "other": (500.0, 0.90),
}
# Thickness of one side's bark over the diameter [1], by wood anatomy.
BARK_SHARES = {"conifer": 0.025, "diffuse_porous": 0.012, "ring_porous": 0.045, "other": 0.02}

# How stems of a species differ; standard deviations.
VIGOUR_SPREAD = 0.30  # of ln flux density
TILT_SPREAD = 0.10  # of the turn of the radial shape; none where a tree has its own profile
LARGEST_TILT = 0.6  # beyond it a shape could turn negative
DEFICIT_SPREAD = 0.08  # of ln deficit scale
ALLOMETRY_SPREAD = 0.08  # of ln sapwood area about the species' allometry
CORE_SPREAD = 0.03  # of ln sapwood depth about what the site's cores say
AZIMUTH_AMPLITUDE = (0.0, 0.25)  # 1, of the cosine of flux density around a stem, if it has one
BARK_SPREAD = 0.06  # of ln bark thickness where the site does not know it
ALLOMETRY_EXPONENT = 1.8  # of the diameter, where the site has cores and no allometry
DEEPEST_SAPWOOD, SHALLOWEST_SAPWOOD = 0.95, 0.02  # of the radius under bark

# Leaves of species that shed them: days from leaf_on to full leaf, and of ageing to leaf_off.
DAYS_OF_FLUSHING, DAYS_OF_AGEING = 20.0, 30.0

# Water of the root zone: kg m-2 held, share of it there at the start, kg m-2 d-1 drawn in a day
# of 200 W m-2, share of the rain that reaches the soil.
SOIL = {"storage": 110.0, "start": 0.85, "draw": 2.2, "throughfall": 0.8}

# Heat dissipation probes. Uniform over (low, high), or normal with a standard deviation.
ZERO_FLOW = (8.6, 11.0)  # K, without flow in wood of 20 degC on the first day
DRIFT = (0.010, 0.030)  # share by which it has moved at the end, either sign
BOW_SPREAD = 0.002  # share, departure from a straight drift half-way
GRADIENT_SPREAD = 0.03  # K, natural gradient of a stem in full sun
DISSIPATION_NOISE = (0.005, 0.010)  # K
HEATER_VOLTAGE, HEATER_CURRENT = 2.0, 0.1  # V, A: 0.2 W

# Dendrometers.
SHRINKAGE = 1.5e-6  # m of diameter for each kg m-2 of sapwood that the store lacks
GROWTH, DAYS_OF_GROWTH = (0.5e-3, 3.0e-3), 150.0  # m in so many days
DENDROMETER_NOISE = 1e-6  # m

# Heat-ratio probes.
WOUNDS = (1.75e-3, 2.30e-3)  # m, width of a wound that the site does not know
OFFSETS = (-1.0, 1.0)  # cm h-1, shown without flow: needles not quite parallel
RATIO_NOISE = (0.001, 0.003)  # K, of a rise averaged over the window
PULSE = {"pulse_length": 8.0, "pulse_energy": 900.0, "window": (60.0, 100.0)}  # s, J m-1, s

# What a crew with knowledge "estimated" measures; standard deviations.
FACE_SPREAD = 0.05  # share by which sapwood is deeper at one face than at the other
CORE_READING = 0.015  # share, reading of a sapwood depth
BARK_READING = 0.5e-3  # m
ALLOMETRY_ERROR = 0.08  # of ln factor, one draw a species
WOUND_READING = 0.05e-3  # m
WOOD_READING = 0.03  # share, dry density and water content each
DIFFUSIVITY_READING = 0.03  # share, thermal diffusivity where the site measured it

# Logs of a plan that has none: minutes from record to record.
INTERVALS = {"heat_dissipation": 10, "unheated_pair": 10, "heat_ratio": 30, "weather": 30}
LONGEST_STEP_S = 600  # of the weather's clock
DAYS_OF_DOWNLOAD, DAYS_OF_OVERLAP = 30, 1

# Growing season: first day and first day after it, month and day, by hemisphere.
SEASONS = {"north": ("05-01", "10-01"), "south": ("11-01", "04-01")}
