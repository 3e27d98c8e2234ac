"""The text of a starter site: every key explained, every table with its header."""

from sapflux.site.quantities import table_lines

SITE_TOML = """\
# What is there: position, clock, logs and their layouts. How data are treated stands in the
# recipe. All values here are examples: put your own in their place.
#
# Tables stand beside this file as CSV: a line of column names, then one row a line. A message of
# 'row 4' means line 4 of the file, as an editor or a spreadsheet counts it: the line of column
# names is counted, and so are comments (lines that begin with '#') and blank lines.

[site]
name = "My site"
latitude_deg = 47.05        # north positive
longitude_deg = 15.43       # east positive
elevation_m = 720.0         # above sea level
utc_offset_h = 1.0          # the site's fixed standard time minus UTC, all year round
water_year_start = "10-01"  # month-day
common_step_min = 60        # step on which all logs meet; a multiple of their intervals

# A layout says how the text of a logger file is laid out. Columns are found by name.
[layouts.table]
delimiter = ","             # "," ";" "tab" "|" or "space"
decimal = "."               # "." or ","
quote = '"'                 # the character around texts; "" for none
encoding = "utf-8"          # a byte order mark may stand before it
comment = ""                # lines that begin with this are no data; "" for none
names_line = 2              # the line of the column names; 1 is the first line of the file
units_line = 3              # 0 where the file has none
aggregation_line = 4        # the line that says Avg, Smp, Tot; 0 where the file has none
header_lines = 4            # all lines above the first record; 0: up to the last of the above
time_columns = ["TIMESTAMP"]          # one, or two or three that make the time together
time_format = "%Y-%m-%d %H:%M:%S"     # strptime codes, columns joined by a blank;
                                      # with %z a stamp's own offset goes before the clock;
                                      # or "year_day_hhmm" (three columns, hhmm up to 2400)
missing_text = ["", "NAN", "NaN", "nan", "NA"]  # cells that mean: no value
missing_numbers = []                            # numbers that mean it, like -9999
# A long table, one value a line, needs this too; a channel's column is then "T07/dT":
# long = { name_columns = ["probe", "quantity"], value_column = "value" }

# A log is one table of one logger, in as many downloads as there are.
[logs.T1]
files = ["raw/T1*.dat"]     # patterns below this folder; order and overlap do not matter
layout = "table"
interval_min = 10           # from one record to the next
stamp = "end"               # whether a stamp marks the "end" or the "start" of its interval
clock = "utc+1"             # "utc", "utc+1", "utc-3.5", or civil time: "civil:Europe/Vienna"
# A log of temperature traces, a row every second around each heat pulse, needs this too;
# interval_min is then the time from pulse to pulse:
# trace_step_s = 1          # from one row to the next, each stamped with its own moment
# pulse_starts_s = 0        # seconds from each whole interval to the start of heating
"""

TIMES = "Times are the site's fixed standard time; a blank end is open."

# table -> (comment lines, example rows by column; a row that begins with "#" is only shown)
EXAMPLES = {
    "channels": (
        ("Which logger column is what. kind: probe, tree, log, stand or site; id: its name, blank",
         f"for the site; point 1 is the outermost of a needle. {TIMES}",
         *table_lines()),
        ({"log": "T1", "column": "dT_P01", "kind": "probe", "id": "P01", "point": "1",
          "quantity": "heated_emf", "unit": "mV"},
         {"log": "T1", "column": "AirT", "kind": "site", "point": "1",
          "quantity": "air_temperature", "unit": "degC"},
         {"log": "T1", "column": "RH", "kind": "site", "point": "1",
          "quantity": "relative_humidity", "unit": "%"}),
    ),
    "probes": (
        ("One row an installation. method: heat_dissipation, heat_ratio or unheated_pair. Depths",
         "are below cambium, one for each point, outermost first, parted by blanks: 0 20 / 20 40.",
         "Needles heated in cycles have heating_on_min and heating_off_min."),
        ({"probe": "P01", "tree": "A01", "method": "heat_dissipation", "height_m": "1.3",
          "azimuth_deg": "0", "depth_from_mm": "0", "depth_to_mm": "20",
          "needle_length_mm": "20", "installed": "2026-04-15 12:00"},),
    ),
    "trees": (
        ("Trees that carry probes. Their diameters stand in surveys.csv under the same name; one",
         "outside all plots has its diameter_cm (over bark) here, which is blank for all others."),
        ({"tree": "A01", "stand": "slope", "species": "spruce", "height_m": "24",
          "bark_mm": "8"},),
    ),
    "cores": (
        ("Increment cores, one row a face. Sapwood depth is in cm below cambium.",),
        ({"tree": "A01", "face": "N", "date": "2026-04-15", "bark_mm": "8",
          "sapwood_depth_cm": "4.2"},),
    ),
    "plots": (
        ("Survey plots. Give plan_area_m2 (horizontal), or slope_area_m2 with slope_deg. A plot",
         "that lies in a larger one names it in `within`; one without a stem has yes in `empty`."),
        ({"plot": "slope-1", "stand": "slope", "plan_area_m2": "400",
          "smallest_diameter_cm": "7"},),
    ),
    "surveys": (
        ("One row a stem and survey. Diameters in cm, over bark unless under_bark is yes. status:",
         "alive, dead or removed."),
        ({"plot": "slope-1", "stem": "A01", "species": "spruce", "date": "2026-04-15",
          "diameter_cm": "31.5", "under_bark": "no", "status": "alive"},
         {"plot": "slope-1", "stem": "S02", "species": "spruce", "date": "2026-04-15",
          "diameter_cm": "27.0", "under_bark": "no", "status": "alive"}),
    ),
    "stands": (
        ("The stands of the site.",),
        ({"stand": "slope", "area_ha": "3.5", "description": "even-aged, north-facing"},),
    ),
    "species": (
        ("anatomy: conifer, diffuse_porous, ring_porous or other. leaf_on and leaf_off as",
         "month-day, blank where it is in leaf all year. Where no core was taken, sapwood area in",
         "cm2 is a * diameter over bark in cm ^ b. A species without probes names a stand_in."),
        ({"species": "spruce", "anatomy": "conifer", "sapwood_area_a_cm2": "0.6",
          "sapwood_area_b": "1.8", "general_calibration_accepted": "no"},),
    ),
    "profiles": (
        ("Relative radial profiles: 0 is the cambium, 1 the border of sapwood and heartwood.",),
        ({"species": "spruce", "relative_depth": "0", "ratio": "1", "source": "example"},
         {"species": "spruce", "relative_depth": "1", "ratio": "0.2", "source": "example"}),
    ),
    "wood": (
        ("Sapwood samples of a species or a tree. Density is dry mass over fresh volume, water",
         "content is water mass over DRY mass (mostly 0.4 to 2.2)."),
        ({"species": "spruce", "date": "2026-04-15", "dry_density_kg_m3": "400",
          "water_content": "1.3"},),
    ),
    "wounds": (
        ("Widths of wounded wood across the needles, of a probe, a tree or a species. With",
         "final_width_mm and time_constant_d it grows from width_mm at date on, as",
         "final - (final - width) * exp(-days / time constant)."),
        ({"#": "", "probe": "P02", "date": "2026-10-20", "width_mm": "2.0",
          "source": "measured at removal"},),
    ),
    "calibrations": (
        ("Own calibrations: flux density = factor * flow index ^ exponent. heating: continuous, or",
         "intermittent for needles heated in cycles."),
        ({"#": "", "calibration": "spruce-lab", "species": "spruce",
          "method": "heat_dissipation", "factor_g_m2_s": "119", "exponent": "1.23",
          "lowest_index": "0.05", "highest_index": "0.9", "source": "cut segments, laboratory",
          "date": "2026-03-01"},),
    ),
    "pairs": (
        ("Which unheated pair serves which heated probe of the same stem.",),
        ({"#": "", "unheated": "P03", "heated": "P01", "from": "2026-04-15"},),
    ),
    "references": (
        ("Spans without sap flow (kind dormant or cut), or with the heater off (power_off), of a",
         "probe or a species."),
        ({"#": "", "kind": "power_off", "probe": "P01", "from": "2026-06-01 20:00",
          "to": "2026-06-02 04:00"},),
    ),
    "potentials": (
        ("Measured water potentials: kind soil names a stand, kind leaf a tree.",),
        ({"#": "", "kind": "leaf", "tree": "A01", "time": "2026-07-01 04:30",
          "potential_MPa": "-0.6"},),
    ),
    "events": (
        (f"What was done to a stand, such as thinning or irrigation. {TIMES}",),
        ({"#": "", "stand": "slope", "kind": "thinning", "from": "2026-09-01",
          "to": "2026-09-03"},),
    ),
    "visits": (
        ("Visits to a logger. clock_offset_s is logger clock minus reference clock.",),
        ({"log": "T1", "arrival": "2026-05-20 10:00", "departure": "2026-05-20 11:30",
          "clock_offset_s": "-35", "done": "download"},),
    ),
    "exclusions": (
        ("Records a person takes out. kind: probe, tree, log or stand.",),
        ({"#": "", "kind": "probe", "id": "P01", "from": "2026-06-10", "to": "2026-06-12",
          "reason": "cable bitten", "who": "initials"},),
    ),
    "decisions": (
        ("Answers to what the program proposes about the data: accept or reject.",),
        (),
    ),
}  # fmt: skip
