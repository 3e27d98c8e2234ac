"""THE table of names: every dimension, coordinate and variable, its units and its meaning.

Nothing else in the package spells the unit of a variable. Units are SI. A variable whose
`columns` is set may be logged: its name is then the `quantity` of `channels.csv`, and says to
which kinds of thing a logger column of it may belong.
"""

from dataclasses import dataclass


@dataclass(frozen=True)
class Variable:
    """One name of the cube.

    `low` and `high` bound what a working instrument can give; None is unbounded.
    `difference` marks temperature differences, which take no offset when converted.
    """

    name: str
    dims: tuple
    units: str
    long_name: str
    standard_name: str = ""
    low: float | None = None
    high: float | None = None
    columns: tuple = ()
    difference: bool = False

    def attributes(self):
        """CF attributes of the variable, whole."""
        attrs = {"long_name": self.long_name, "units": self.units}
        if self.standard_name:
            attrs["standard_name"] = self.standard_name
        return attrs


RECORD = ("probe", "point", "time")
PROBE = ("probe", "time")
WEATHER = ("time",)
ROWS = [
    # Heat dissipation, measured
    Variable("heated_emf", RECORD, "V", "thermocouple voltage, heated against reference needle",
             low=-2e-3, high=5e-3, columns=("probe",)),
    Variable("heated_difference", RECORD, "K", "temperature of heated minus reference needle",
             low=-5, high=40, columns=("probe",), difference=True),
    Variable("unheated_emf", RECORD, "V", "thermocouple voltage of an unheated pair",
             low=-1e-3, high=1e-3, columns=("probe",)),
    Variable("unheated_difference", RECORD, "K", "temperature difference of an unheated pair",
             low=-15, high=15, columns=("probe",), difference=True),
    Variable("natural_difference", RECORD, "K",
             "temperature difference of the unheated pair that serves the probe",
             low=-15, high=15, difference=True),
    Variable("natural_emf", RECORD, "V", "voltage of the unheated pair that serves the probe",
             low=-1e-3, high=1e-3),
    # Heat ratio, measured
    Variable("temperature_before_downstream", RECORD, "K",
             "temperature downstream of the heater before the pulse",
             low=233, high=343, columns=("probe",)),
    Variable("temperature_after_downstream", RECORD, "K",
             "mean temperature downstream of the heater in the window after the pulse",
             low=233, high=343, columns=("probe",)),
    Variable("temperature_before_upstream", RECORD, "K",
             "temperature upstream of the heater before the pulse",
             low=233, high=343, columns=("probe",)),
    Variable("temperature_after_upstream", RECORD, "K",
             "mean temperature upstream of the heater in the window after the pulse",
             low=233, high=343, columns=("probe",)),
    Variable("rise_downstream", RECORD, "K", "temperature rise downstream of the heater",
             low=-2, high=15, columns=("probe",), difference=True),
    Variable("rise_upstream", RECORD, "K", "temperature rise upstream of the heater",
             low=-2, high=15, columns=("probe",), difference=True),
    Variable("heat_ratio", RECORD, "1", "ratio of downstream to upstream temperature rise",
             low=0, high=200, columns=("probe",)),
    Variable("log_heat_ratio", RECORD, "1",
             "natural logarithm of the ratio of downstream to upstream temperature rise",
             low=-5, high=5.5, columns=("probe",)),
    Variable("logged_velocity", RECORD, "m s-1",
             "heat pulse velocity as the logger stored it, with its embedded constants",
             low=-6e-4, high=6e-4, columns=("probe",)),
    Variable("temperature_trace_downstream", RECORD, "K",
             "temperature downstream of the heater, second by second around the pulse",
             low=233, high=343, columns=("probe",)),
    Variable("temperature_trace_upstream", RECORD, "K",
             "temperature upstream of the heater, second by second around the pulse",
             low=233, high=343, columns=("probe",)),
    # Heat ratio, read from the trace after a pulse
    Variable("mean_log_ratio", RECORD, "1",
             "mean over the reading window of the logarithms of downstream over upstream rise"),
    Variable("early_log_ratio", RECORD, "1",
             "logarithm of the ratio of the rises in the first half of the reading window"),
    Variable("late_log_ratio", RECORD, "1",
             "logarithm of the ratio of the rises in the second half of the reading window"),
    Variable("time_of_maximum_downstream", RECORD, "s",
             "time from the start of heating to the highest downstream rise"),
    Variable("time_of_maximum_upstream", RECORD, "s",
             "time from the start of heating to the highest upstream rise"),
    Variable("decay_time", RECORD, "s",
             "squared spacing over four times the diffusivity, from the decay of both rises"),
    Variable("pre_pulse_drift", RECORD, "K s-1", "drift of the temperature before the pulse"),
    # Electrical and stem channels
    Variable("heater_voltage", PROBE, "V", "heater voltage", low=0, high=30,
             columns=("probe", "log")),
    Variable("heater_current", PROBE, "A", "heater current", low=0, high=20,
             columns=("probe", "log")),
    Variable("heater_state", PROBE, "1", "share of the interval with the heater on",
             low=0, high=1, columns=("probe", "log")),
    Variable("battery_voltage", WEATHER, "V", "logger supply voltage", low=0, high=60,
             columns=("log",)),
    Variable("panel_temperature", WEATHER, "K", "logger panel temperature", low=213, high=363,
             columns=("log",)),
    Variable("stem_temperature", PROBE, "K", "stem temperature at the reference needle",
             low=233, high=343, columns=("tree", "probe")),
    Variable("stem_diameter_change", PROBE, "m", "change of stem diameter since a start",
             low=-0.05, high=0.5, columns=("tree",)),
    # Weather, soil and water
    Variable("air_temperature", WEATHER, "K", "air temperature", "air_temperature",
             213, 333, ("site", "stand")),
    Variable("relative_humidity", WEATHER, "1", "relative humidity", "relative_humidity",
             0, 1.1, ("site", "stand")),
    Variable("vapour_pressure_deficit", WEATHER, "Pa", "vapour pressure deficit of the air",
             "water_vapor_saturation_deficit_in_air", -100, 15000, ("site", "stand")),
    Variable("shortwave_radiation", WEATHER, "W m-2", "incoming shortwave radiation",
             "surface_downwelling_shortwave_flux_in_air", -20, 1600, ("site", "stand")),
    Variable("net_radiation", WEATHER, "W m-2", "net radiation",
             "surface_net_downward_radiative_flux", -300, 1300, ("site", "stand")),
    Variable("wind_speed", WEATHER, "m s-1", "wind speed", "wind_speed", 0, 75,
             ("site", "stand")),
    Variable("air_pressure", WEATHER, "Pa", "air pressure", "air_pressure", 45e3, 110e3,
             ("site", "stand")),
    Variable("precipitation", WEATHER, "kg m-2", "precipitation in the interval",
             "precipitation_amount", 0, 150, ("site", "stand")),
    Variable("throughfall", WEATHER, "kg m-2", "throughfall in the interval", "", 0, 150,
             ("stand",)),
    Variable("soil_moisture", WEATHER, "1", "volumetric water content of the soil", "", 0, 1,
             ("stand", "site")),
    Variable("stage", WEATHER, "m", "water level at the gauge", "", -5, 50, ("site",)),
    Variable("discharge", WEATHER, "m3 s-1", "stream discharge",
             "water_volume_transport_in_river_channel", 0, 1e5, ("site",)),
    # Sun
    Variable("solar_elevation", WEATHER, "degree", "elevation of the sun above the horizon",
             "solar_elevation_angle"),
    Variable("solar_time", WEATHER, "h", "true solar time, 12 when the sun crosses the meridian"),
    # Derived
    Variable("zero_flow_difference", RECORD, "K", "temperature difference expected without flow"),
    Variable("natural_gradient", RECORD, "K",
             "temperature difference that the stem shows without heating"),
    Variable("flow_index", RECORD, "1", "flow index of heat dissipation, zero without flow"),
    Variable("baseline_amplification", RECORD, "1",
             "relative change of flux density per relative change of the zero-flow difference"),
    Variable("thermal_diffusivity", PROBE, "m2 s-1", "thermal diffusivity of fresh sapwood"),
    Variable("zero_flow_log_ratio", RECORD, "1",
             "logarithm of the ratio of the rises expected without flow"),
    Variable("heat_pulse_velocity", RECORD, "m s-1", "heat pulse velocity"),
    Variable("flux_density", RECORD, "kg m-2 s-1", "sap flux density per sapwood area"),
    Variable("probe_flow", PROBE, "kg s-1", "sap flow of the tree as one probe sees it"),
    Variable("probe_filled_share", PROBE, "1",
             "share of the probe's flow that rests on filled values"),
    Variable("tree_flow", ("tree", "time"), "kg s-1", "sap flow of the tree"),
    Variable("tree_filled_share", ("tree", "time"), "1",
             "share of the tree's flow that rests on filled values"),
    Variable("stand_filled_share", ("stand_species", "time"), "1",
             "share of the transpiration that rests on filled values"),
    Variable("live_trees", ("stand_species", "time"), "1", "trees that carry the value"),
    Variable("in_leaf", ("stand_species", "time"), "1", "1 while the species is in leaf, else 0"),
    Variable("stand_transpiration", ("stand_species", "time"), "kg m-2 s-1",
             "transpiration per ground area", "transpiration_flux"),
    Variable("stand_origin", ("stand_species", "time"), "1", "how the transpiration came to be"),
    # Facts laid on the records or constant for a probe
    Variable("installation", PROBE, "1", "number of the installation, -1 outside"),
    Variable("visited", PROBE, "1", "1 while somebody is at the logger, else 0"),
    Variable("at_rest", PROBE, "1", "1 while a person vouches that no sap flows, else 0"),
    Variable("installed_age", PROBE, "s", "time since the probe was installed"),
    Variable("probe_tree", ("probe",), "1", "tree that the probe sits in"),
    Variable("probe_stratum", ("probe",), "1", "stand and species of the tree that it sits in"),
    Variable("paired", PROBE, "1", "1 while an unheated pair serves the probe, else 0"),
    Variable("power_off", PROBE, "1", "1 while the heater is off on purpose, else 0"),
    Variable("heater_state_given", PROBE, "1", "1 while a channel gives heater_state, else 0"),
    Variable("heating_on", ("probe",), "s", "time heated in a heating cycle, NaN without one"),
    Variable("heating_off", ("probe",), "s", "time not heated in a heating cycle"),
    Variable("radial_from", ("probe", "point"), "m", "depth below cambium where the point begins"),
    Variable("radial_to", ("probe", "point"), "m", "depth below cambium where the point ends"),
    Variable("contact_fraction", ("probe", "point"), "1",
             "share of the needle in conducting sapwood", low=0, high=1),
    Variable("spacing_downstream", ("probe",), "m", "distance from heater to downstream needle"),
    Variable("spacing_upstream", ("probe",), "m", "distance from heater to upstream needle"),
    Variable("window_from", ("probe",), "s", "start of the reading window after heating"),
    Variable("window_to", ("probe",), "s", "end of the reading window after heating"),
    Variable("pulse_length", ("probe",), "s", "length of the heat pulse"),
    Variable("embedded_diffusivity", ("probe",), "m2 s-1",
             "thermal diffusivity inside the logged velocity"),
    Variable("embedded_spacing", ("probe",), "m", "spacing inside the logged velocity"),
    Variable("given_diffusivity", ("probe",), "m2 s-1", "thermal diffusivity given for the wood"),
    Variable("dry_density", ("probe",), "kg m-3", "dry mass over fresh volume of sapwood"),
    Variable("water_content", ("probe",), "1", "water mass over dry mass of sapwood"),
    Variable("wound_width", ("probe",), "m", "width of the wounded wood across the needles"),
    Variable("calibration_factor", ("probe",), "kg m-2 s-1",
             "flux density at flow index 1 by the species' own calibration"),
    Variable("calibration_exponent", ("probe",), "1",
             "exponent of the flow index by the species' own calibration"),
    Variable("calibration_lowest", ("probe",), "1", "lowest flow index the calibration covers"),
    Variable("calibration_highest", ("probe",), "1", "highest flow index the calibration covers"),
    Variable("xylem_radius", ("probe",), "m", "radius of the stem under bark at probe height"),
    Variable("sapwood_depth", ("probe",), "m", "depth of conducting sapwood below cambium"),
    Variable("relative_profile", ("probe", "relative_depth"), "1",
             "relative flux density at depths from cambium (0) to heartwood (1)"),
    Variable("relative_depth", ("relative_depth",), "1", "depth below cambium over sapwood depth"),
    Variable("sapwood_area", ("tree",), "m2", "conducting sapwood area at probe height"),
    Variable("sapwood_per_ground", ("stand_species",), "1",
             "sapwood area of the species per ground area of the stand"),
    Variable("quality", RECORD, "1", "what is known to be wrong with the record",
             "quality_flag"),
    # Only in files: the second word of `quality`, see sapflux/quality.py
    Variable("faults", RECORD, "1", "what is found wrong with the instrument", "quality_flag"),
    Variable("origin", RECORD, "1", "how the value came to be"),
]  # fmt: skip

VARIABLES = {row.name: row for row in ROWS}
QUANTITIES = {row.name: row for row in ROWS if row.columns}

# Signals that a probe of each method may log, by quantity.
SIGNALS = {
    "heat_dissipation": ("heated_emf", "heated_difference"),
    "unheated_pair": ("unheated_emf", "unheated_difference"),
    "heat_ratio": (
        "temperature_before_downstream",
        "temperature_after_downstream",
        "temperature_before_upstream",
        "temperature_after_upstream",
        "rise_downstream",
        "rise_upstream",
        "heat_ratio",
        "log_heat_ratio",
        "logged_velocity",
        "temperature_trace_downstream",
        "temperature_trace_upstream",
    ),
}
# Temperature traces around a heat pulse, and the variables of a record that they are reduced to.
TRACES = ("temperature_trace_downstream", "temperature_trace_upstream")
TRACED = (
    "rise_downstream",
    "rise_upstream",
    "mean_log_ratio",
    "early_log_ratio",
    "late_log_ratio",
    "time_of_maximum_downstream",
    "time_of_maximum_upstream",
    "decay_time",
    "pre_pulse_drift",
)
CONVENTIONS = "CF-1.11, ACDD-1.3"
