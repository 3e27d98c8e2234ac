"""What a logger column may be, guessed from its name and unit. A guess is only ever proposed."""

import re

# Units as loggers write them, lower case without blanks -> as `channels.csv` writes them.
WRITTEN_UNITS = {
    "degc": "degC", "°c": "degC", "c": "degC", "celsius": "degC", "deg_c": "degC",
    "degf": "degF", "°f": "degF", "k": "K", "kelvin": "K",
    "v": "V", "volt": "V", "volts": "V", "vdc": "V", "mv": "mV", "uv": "uV", "µv": "uV",
    "μv": "uV", "microvolts": "uV", "millivolts": "mV",
    "a": "A", "ma": "mA", "amps": "A",
    "1": "1", "%": "%", "percent": "%", "%rh": "%",
    "pa": "Pa", "hpa": "hPa", "mbar": "hPa", "kpa": "kPa", "mpa": "MPa",
    "w/m^2": "W m-2", "w/m2": "W m-2", "w/m²": "W m-2", "wm-2": "W m-2", "watts/meter^2": "W m-2",
    "m/s": "m s-1", "ms-1": "m s-1", "meters/second": "m s-1",
    "km/h": "km h-1", "km/hr": "km h-1", "kmh-1": "km h-1", "kph": "km h-1",
    "cm/h": "cm h-1", "cm/hr": "cm h-1", "cmh-1": "cm h-1", "mm/h": "mm h-1",
    "mm": "mm", "cm": "cm", "m": "m", "um": "um", "µm": "um",
    "m3/m3": "m3 m-3", "m^3/m^3": "m3 m-3", "m3m-3": "m3 m-3",
    "m3/s": "m3 s-1", "m^3/s": "m3 s-1", "l/s": "L s-1",
}  # fmt: skip

# pattern of the name (lower case) -> kind, quantity, units it may have (none: any)
NAMES = [
    (r"batt|supply", "log", "battery_voltage", ("V", "mV", "")),
    (r"ptemp|panel", "log", "panel_temperature", ("degC", "K", "degF", "")),
    (r"heat(er)?_?v|vheat", "log", "heater_voltage", ("V", "mV", "")),
    (r"heat(er)?_?(a|i|curr)|iheat", "log", "heater_current", ("A", "mA", "")),
    (r"vpd|deficit", "site", "vapour_pressure_deficit", ("Pa", "hPa", "kPa", "")),
    (r"^rh|_rh|humid", "site", "relative_humidity", ("%", "1", "")),
    (r"air_?t|t_?air|airtc|^ta(_|$)", "site", "air_temperature", ("degC", "K", "degF", "")),
    (r"net_?rad|^rn", "site", "net_radiation", ("W m-2",)),
    (r"slr|solar|short_?wave|sw_?in|global|^rg|rad", "site", "shortwave_radiation", ("W m-2",)),
    (r"rain|precip", "site", "precipitation", ("mm", "")),
    (r"throughfall|^tf", "stand", "throughfall", ("mm", "")),
    (r"wind|^ws", "site", "wind_speed", ("m s-1", "km h-1", "")),
    (r"pressure|baro|^bp", "site", "air_pressure", ("Pa", "hPa", "kPa")),
    (r"vwc|soil_?m|swc|theta", "stand", "soil_moisture", ("m3 m-3", "%", "1", "")),
    (r"discharge|runoff", "site", "discharge", ("m3 s-1", "L s-1", "")),
    (r"stage|level|gauge", "site", "stage", ("m", "cm", "mm", "")),
    (r"stem_?t|trunk_?t", "tree", "stem_temperature", ("degC", "K", "degF", "")),
    (r"dendro|diam", "tree", "stem_diameter_change", ("um", "mm", "cm", "")),
    (r"unheat|ref_?dt", "probe", "unheated_emf", ("mV", "uV", "V")),
    (r"unheat|ref_?dt", "probe", "unheated_difference", ("K", "degC", "degF")),
    (r"ln_?ratio|log_?ratio", "probe", "log_heat_ratio", ("1", "")),
    (r"ratio", "probe", "heat_ratio", ("1", "")),
    (r"^vh|_vh|velocity", "probe", "logged_velocity", ("cm h-1", "mm h-1", "cm s-1", "m s-1")),
    (r"dt|diff|sap|probe|^tc", "probe", "heated_emf", ("mV", "uV")),
    (r"dt|diff|sap|probe", "probe", "heated_difference", ("K", "degC", "degF")),
]  # fmt: skip


def written_unit(text):
    """A unit of `channels.csv` from a logger's units line; '' where it is not known.

    >>> written_unit("Deg C"), written_unit("[W/m^2]"), written_unit("furlongs")
    ('degC', 'W m-2', '')
    """
    bare = re.sub(r"[\s\[\]()]", "", text).lower()
    return WRITTEN_UNITS.get(bare, "")


def guess_channel(column, unit_text):
    """kind, quantity and unit of a column, blank where there is no guess.

    >>> guess_channel("AirTC_Avg", "Deg C")
    {'kind': 'site', 'quantity': 'air_temperature', 'unit': 'degC'}
    >>> guess_channel("x17", "mV")
    {'kind': '', 'quantity': '', 'unit': 'mV'}
    """
    inside = re.search(r"[\[(]([^\])]*)[\])]\s*$", column)
    unit = written_unit(unit_text) or (written_unit(inside[1]) if inside else "")
    for pattern, kind, quantity, units in NAMES:
        if unit in units and re.search(pattern, column.lower()):
            return {"kind": kind, "quantity": quantity, "unit": unit}
    return {"kind": "", "quantity": "", "unit": unit}
