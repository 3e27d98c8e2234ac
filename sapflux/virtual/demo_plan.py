"""The demo site: Orvelin, an invented catchment with two stands. Every value is invented.

Numbers are plausible for a mixed mountain forest of the middle latitudes; none was measured.
"""

from dataclasses import dataclass

from sapflux.site.config import Position
from sapflux.virtual.forest import Response
from sapflux.virtual.weather import Climate

SEED = 12
POSITION = Position(
    name="Orvelin catchment (invented)",
    latitude_deg=46.12,
    longitude_deg=9.31,
    elevation_m=880.0,
    utc_offset_h=1.0,
    water_year_start="10-01",
    common_step_min=30,
)
FIRST_DAY, DAYS = "2031-08-18", 70
STEP_S = 600
CLIMATE = Climate()


@dataclass(frozen=True)
class SpeciesPlan:
    """What is true of a species of the site, and how its stems differ. Lengths in m."""

    anatomy: str
    response: Response
    profile: tuple  # nodes of the mean shape
    area_a_cm2: float  # sapwood area = a * (diameter in cm)^b, cm2
    area_b: float
    area_spread: float  # standard deviation of ln area about it
    bark_share: float  # of the diameter, one side
    dry_density: float
    water_content: float
    stand_in: str = ""
    leafless: tuple = ("", "")  # leaf_on, leaf_off
    factor: float = 0.11899  # kg m-2 s-1, true calibration of the dissipation probes
    exponent: float = 1.231


SPECIES = {
    "spruce": SpeciesPlan(
        "conifer",
        Response(0.062, 900.0, 180.0, 0.05, 0.12, 2400.0),
        ((0.0, 0.95), (0.1, 1.0), (0.25, 1.0), (0.5, 0.80), (0.75, 0.45), (1.0, 0.10)),
        1.25, 1.70, 0.08, 0.025, 400.0, 1.25,
    ),
    "beech": SpeciesPlan(
        "diffuse_porous",
        Response(0.070, 800.0, 200.0, 0.06, 0.15, 2000.0, "2031-10-01", "2031-11-05"),
        ((0.0, 1.0), (0.2, 0.95), (0.4, 0.78), (0.6, 0.55), (0.8, 0.32), (1.0, 0.12)),
        0.90, 1.84, 0.08, 0.012, 580.0, 0.80, leafless=("05-01", "11-10"),
    ),
    "oak": SpeciesPlan(
        "ring_porous",
        Response(0.150, 850.0, 200.0, 0.07, 0.10, 1500.0, "2031-10-05", "2031-11-10"),
        ((0.0, 1.1), (0.25, 1.05), (0.5, 0.95), (0.75, 0.85), (1.0, 0.75)),
        3.35, 1.05, 0.07, 0.045, 600.0, 0.70, leafless=("05-05", "11-15"),
        factor=0.350, exponent=1.20,
    ),
    "maple": SpeciesPlan(
        "diffuse_porous",
        Response(0.064, 800.0, 200.0, 0.06, 0.15, 2000.0, "2031-09-25", "2031-10-30"),
        ((0.0, 1.0), (0.2, 0.95), (0.4, 0.80), (0.6, 0.58), (0.8, 0.35), (1.0, 0.12)),
        0.85, 1.82, 0.08, 0.015, 540.0, 0.80, stand_in="beech", leafless=("05-01", "11-01"),
    ),
}  # fmt: skip

VIGOUR_SPREAD = 0.32  # of ln flux density from stem to stem
TILT_SPREAD = 0.10
DEFICIT_SPREAD = 0.08  # of ln deficit scale


@dataclass(frozen=True)
class PlotPlan:
    """A survey plot; `slope_deg` above 0: its area was measured along the slope."""

    plot: str
    stand: str
    area_m2: float
    slope_deg: float
    stems: dict  # species -> number


PLOTS = (
    PlotPlan("U1", "upper", 425.0, 20.0, {"spruce": 11, "beech": 5, "maple": 1}),
    PlotPlan("U2", "upper", 400.0, 0.0, {"spruce": 10, "beech": 5, "maple": 1}),
    PlotPlan("L1", "lower", 400.0, 0.0, {"oak": 7, "beech": 8, "maple": 1}),
    PlotPlan("L2", "lower", 450.0, 0.0, {"oak": 8, "beech": 8, "maple": 2}),
)
STAND_AREAS_HA = {"upper": 14.0, "lower": 9.0}
DIAMETER = {
    "spruce": (0.33, 0.20),
    "beech": (0.31, 0.22),
    "oak": (0.36, 0.18),
    "maple": (0.24, 0.2),
}
SMALLEST_DIAMETER, LARGEST_DIAMETER = 0.18, 0.55  # m


@dataclass(frozen=True)
class ProbeGroup:
    """Probes of one kind on drawn trees of one species of one stand."""

    stand: str
    species: str
    method: str
    log: str
    probes: tuple
    stores: str  # quantity that the logger keeps


GROUPS = (
    ProbeGroup("upper", "spruce", "heat_dissipation", "upper",
               ("P01", "P02", "P03", "P04", "P05", "P06"), "heated_emf"),
    ProbeGroup("upper", "beech", "heat_dissipation", "upper",
               ("P07", "P08", "P09", "P10"), "heated_emf"),
    ProbeGroup("lower", "oak", "heat_dissipation", "lower",
               ("P11", "P12", "P13", "P14", "P15"), "heated_difference"),
    ProbeGroup("lower", "beech", "heat_ratio", "pulse_a", ("P16", "P17", "P18"), "rises"),
    ProbeGroup("lower", "beech", "heat_ratio", "pulse_b", ("P19",), "logged_velocity"),
    ProbeGroup("lower", "beech", "heat_ratio", "pulse_b", ("P20",), "log_heat_ratio"),
)  # fmt: skip
NEEDLE = (0.0, 0.020)
POINTS_FROM, POINTS_TO = (0.010, 0.025), (0.015, 0.030)
EMBEDDED_DIFFUSIVITY, EMBEDDED_SPACING = 2.5e-7, 6e-3

# Visits and downloads, standard time: arrival, and what was done.
VISITS = (
    ("2031-08-17 10:00", "loggers installed and tested, needles warmed up overnight"),
    ("2031-09-03 09:20", "download"),
    ("2031-09-18 13:10", "download"),
    ("2031-09-24 11:00", "program of the upper logger changed, columns in another order"),
    ("2031-10-07 10:40", "download, cable of P04 mended"),
    ("2031-10-27 08:30", "download, end of the season"),
)
POWER_LOSS = ("upper", "2031-09-12 14:00", "2031-09-13 08:00")  # heater supply, standard time
REPROGRAMMED = "2031-09-24 11:20"
EXCLUDED = ("P04", "2031-10-06 20:00", "2031-10-07 11:00", "cable bitten through, mended")
