"""A small valid site folder as text, and its faults after some text was replaced."""

from pathlib import Path

import pytest

from sapflux.errors import SiteError
from sapflux.site.load import load_site

TEXTS = {
    "site.toml": """\
[site]
name = "Ridge"
latitude_deg = 47.0
longitude_deg = 15.0
elevation_m = 900.0
utc_offset_h = 1.0
water_year_start = "10-01"
common_step_min = 60
[layouts.wide]
names_line = 2
units_line = 3
[layouts.long]
delimiter = ";"
long = { name_columns = ["probe", "what"], value_column = "value" }
[logs.T1]
files = ["raw/T1*.dat"]
layout = "wide"
interval_min = 10
stamp = "end"
clock = "utc+1"
[logs.H1]
files = ["raw/H1*.dat"]
layout = "long"
interval_min = 30
stamp = "start"
clock = "civil:Europe/Vienna"
""",
    "channels.csv": """\
log,column,kind,id,point,quantity,unit,from,to
T1,dT_a,probe,a1,1,heated_emf,mV,,2026-06-01
T1,dT_u,probe,u1,1,unheated_emf,uV,,
H1,b1/ratio1,probe,b1,1,heat_ratio,1,,
H1,b1/ratio2,probe,b1,2,heat_ratio,1,,
T1,AirT,site,,1,air_temperature,degC,,
T1,Batt,log,T1,1,battery_voltage,V,,
""",
    "probes.csv": """\
probe,tree,method,height_m,depth_from_mm,depth_to_mm,needle_length_mm,spacing_downstream_mm,\
spacing_upstream_mm,window_from_s,window_to_s,embedded_diffusivity_cm2_s,installed,removed
a1,A,heat_dissipation,1.3,0,20,20,,,,,,2026-04-01,2026-06-01
u1,A,unheated_pair,1.3,0,20,20,,,,,,2026-04-01,
b1,B,heat_ratio,1.3,5 20,15 30,35,6,6,60,100,0.0025,2026-04-01,
""",
    "trees.csv": """\
tree,stand,species,bark_mm
A,slope,spruce,10
B,slope,beech,
""",
    "cores.csv": """\
tree,face,date,sapwood_depth_cm
A,N,2026-04-01,5
A,S,2026-04-01,6
B,,2026-04-01,8
""",
    "stands.csv": "stand\nslope\nflat\n",
    "plots.csv": """\
plot,stand,plan_area_m2,slope_area_m2,slope_deg,within
P1,slope,400,,,
P2,slope,,100,20,P1
""",
    "surveys.csv": """\
plot,stem,species,date,diameter_cm
P1,A,spruce,2026-04-01,30
P1,B,beech,2026-04-01,25
P1,C,oak,2026-04-01,20
P2,D,spruce,2026-04-01,10
""",
    "species.csv": """\
species,anatomy,leaf_on,leaf_off,sapwood_area_a_cm2,sapwood_area_b,stand_in
spruce,conifer,,,0.6,1.8,
beech,diffuse_porous,04-20,10-20,0.7,1.9,
oak,ring_porous,05-01,10-20,0.3,1.7,beech
""",
    "profiles.csv": """\
species,tree,relative_depth,ratio,source,from,to
spruce,,0,1,own,,
spruce,,1,0.2,own,,
,B,0,1,own,2026-01-01,2026-06-01
,B,0.5,1,own,2026-01-01,2026-06-01
""",
    "wood.csv": """\
species,tree,date,dry_density_kg_m3,water_content,diffusivity_cm2_s
spruce,,2026-04-01,400,1.3,
,B,2026-04-01,580,0.8,0.0025
""",
    "wounds.csv": """\
probe,tree,species,date,width_mm,source
b1,,,2026-10-01,2.0,own
,,beech,2026-10-01,2.1,own
""",
    "calibrations.csv": """\
calibration,species,factor_g_m2_s,exponent,lowest_index,highest_index,source,date
lab,spruce,119,1.23,0.1,0.9,own,2026-03-01
""",
    "pairs.csv": "unheated,heated,from,to\nu1,a1,2026-04-01,\n",
    "references.csv": "kind,probe,species,from,to\npower_off,a1,,2026-05-01,2026-05-02\n",
    "potentials.csv": "kind,stand,tree,time,potential_MPa\nleaf,,A,2026-05-01 04:00,-0.5\n",
    "events.csv": "stand,kind,from,to\nslope,thinning,2026-05-01,2026-05-02\n",
    "visits.csv": """\
log,arrival,departure,clock_offset_s
T1,2026-05-01 10:00,2026-05-01 11:00,-30
T1,2026-06-01 10:00,2026-06-01 11:00,
""",
    "exclusions.csv": "kind,id,from,to,reason,who\nprobe,a1,2026-05-03,2026-05-04,ants,xy\n",
    "decisions.csv": """\
log,kind,first_record,answer,who,date
T1,swap,2026-05-01 10:00,reject,xy,2026-05-20
""",
}  # fmt: skip


def write_folder(changes=(), texts=TEXTS):
    """Write the folder `ridge` in the working folder; (file, old, new) each replace text once."""
    texts = dict(texts)
    for file, old, new in changes:
        assert texts[file].count(old) == 1, f"{old!r} is not there once in {file}"
        texts[file] = texts[file].replace(old, new)
    folder = Path("ridge")
    folder.mkdir(exist_ok=True)
    for file, text in texts.items():
        (folder / file).write_text(text, encoding="utf-8", newline="")
    return folder


def faults_of(folder):
    """Messages of every fault of a folder."""
    with pytest.raises(SiteError) as caught:
        load_site(folder)
    return [str(fault) for fault in caught.value.faults]
