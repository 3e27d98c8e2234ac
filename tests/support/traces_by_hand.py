"""Temperature traces around heat pulses by the line source, and a small site that logs them."""

from pathlib import Path

import numpy as np

from sapflux.physics.pulse_maximum import finite_pulse_rise

CM_H = 0.01 / 3600.0
ENERGY, HEAT_CAPACITY = 1000.0, 2.69e6  # J m-1, J m-3 K-1


def traces(cm_h, seconds, *, diffusivity=2.5e-7, spacing=6e-3, pulse=8.0, drift=0.0, level=290.0):
    """(downstream, upstream), each (pulse, row) [K]: Marshall's line source, pulse by pulse.

    cm_h : (pulse) heat pulse velocities; seconds : (row) since the start of heating;
    drift : [K s-1] of the wood around both needles.
    """
    velocity = np.atleast_1d(np.asarray(cm_h, float))[:, None] * CM_H
    after = np.maximum(seconds, 0.0)
    return tuple(
        level
        + drift * seconds
        + np.where(
            seconds > 0,
            finite_pulse_rise(side, after, velocity, diffusivity, pulse, ENERGY, HEAT_CAPACITY),
            0.0,
        )
        for side in (spacing, -spacing)
    )


SITE = """\
[site]
name = "Ridge"
latitude_deg = 47.0
longitude_deg = 15.0
elevation_m = 900.0
utc_offset_h = 1.0
water_year_start = "10-01"
common_step_min = 60
[layouts.plain]
time_columns = ["time"]
time_format = "%Y-%m-%d %H:%M:%S"
[logs.H]
files = ["raw/H*.csv"]
layout = "plain"
interval_min = 30
stamp = "end"
clock = "utc+1"
trace_step_s = 1
[logs.W]
files = ["raw/W*.csv"]
layout = "plain"
interval_min = 30
stamp = "end"
clock = "utc+1"
"""
TABLES = {
    "channels": """\
log,column,kind,id,point,quantity,unit,from,to
H,down,probe,b1,1,temperature_trace_downstream,degC,,
H,up,probe,b1,1,temperature_trace_upstream,degC,,
W,vpd,site,,1,vapour_pressure_deficit,kPa,,
""",
    "probes": """\
probe,tree,method,height_m,depth_from_mm,depth_to_mm,needle_length_mm,spacing_downstream_mm,\
spacing_upstream_mm,pulse_length_s,window_from_s,window_to_s,installed
b1,B,heat_ratio,1.3,5,30,35,6,6,8,60,100,2031-05-25
""",
    "trees": "tree,stand,species\nB,slope,beech\n",
    "cores": "tree,date,sapwood_depth_cm\nB,2031-05-01,8\n",
    "stands": "stand\nslope\n",
    "plots": "plot,stand,plan_area_m2\nP,slope,400\n",
    "surveys": "plot,stem,species,date,diameter_cm\nP,B,beech,2031-05-01,25\n",
    "species": "species,anatomy,sapwood_area_a_cm2,sapwood_area_b\nbeech,diffuse_porous,0.7,1.9\n",
    "profiles": "species,relative_depth,ratio,source\nbeech,0,1,own\nbeech,1,0.2,own\n",
    "wood": "species,date,dry_density_kg_m3,water_content\nbeech,2031-05-01,500,1.0\n",
    "wounds": "probe,date,width_mm,source\nb1,2031-10-01,2.0,own\n",
}


def velocity_at(starts):
    """Heat pulse velocity [cm h-1] of the day's course at times of standard time: none at night."""
    hour = (starts - starts.astype("M8[D]")).astype("m8[s]").astype(float) / 3600.0
    return np.where((hour > 6) & (hour < 20), 15.0 * np.sin(np.pi * (hour - 6) / 14) ** 2, 0.0)


def trace_rows(starts, seconds, **changed):
    """Lines 'time,down,up' of the pulses that start at these times of standard time [s]."""
    down, up = (one - 273.15 for one in traces(velocity_at(starts), seconds, **changed))
    stamps = starts[:, None] + seconds.astype("m8[s]")
    texts = np.char.replace(np.datetime_as_string(stamps.astype("M8[s]")), "T", " ")
    cells = zip(texts.ravel(), down.ravel(), up.ravel(), strict=True)
    return [f"{time},{one:.9f},{other:.9f}" for time, one, other in cells]


def write_site(folder, days=8, changes=(), tables=TABLES, **changed):
    """Write the site with its downloads; (file, old, new) each replace text once. Its folder."""
    folder = Path(folder)
    (folder / "raw").mkdir(parents=True)
    texts = {"site.toml": SITE} | {f"{name}.csv": text for name, text in tables.items()}
    for file, old, new in changes:
        assert texts[file].count(old) == 1, f"{old!r} is not there once in {file}"
        texts[file] = texts[file].replace(old, new)
    for file, text in texts.items():
        (folder / file).write_text(text, encoding="utf-8")
    starts = np.datetime64("2031-06-01", "s") + np.arange(days * 48) * np.timedelta64(1800, "s")
    rows = trace_rows(starts, np.arange(-10.0, 121.0), **changed)
    (folder / "raw" / "H1.csv").write_text("\n".join(["time,down,up", *rows]) + "\n")
    ends = np.datetime_as_string(starts + np.timedelta64(1800, "s"))
    night = velocity_at(starts) == 0
    weather = [f"{end.replace('T', ' ')},{0.02 if quiet else 1.0}"
               for end, quiet in zip(ends, night, strict=True)]  # fmt: skip
    (folder / "raw" / "W1.csv").write_text("\n".join(["time,vpd", *weather]) + "\n")
    return folder
