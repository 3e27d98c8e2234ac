"""Tables of the demo site: what its people measured and wrote down, with their small errors."""

import math

import numpy as np

from sapflux.virtual import demo_plan as plan
from sapflux.virtual.demo_columns import channel_rows
from sapflux.virtual.demo_forest import grouped_probes, instrumented
from sapflux.virtual.seeds import generator

INSTALLED = "2031-08-17 12:00"
EARLIER_CORES = 40


def all_tables(truth):
    """Name of the table -> (columns, rows of text), in the order of the files."""
    return {
        "channels": channel_rows(truth),
        "probes": _probes(truth),
        "trees": _trees(truth),
        "cores": _cores(truth),
        "plots": _plots(),
        "surveys": _surveys(truth),
        "stands": _stands(),
        "species": _species(truth.seed),
        "profiles": _profiles(),
        "wood": _wood(),
        "wounds": _wounds(truth),
        "calibrations": _calibrations(),
        "visits": _visits(truth.seed),
        "exclusions": _exclusions(),
        "events": (["stand", "kind", "from", "to", "note"], []),
    }


def allometry(species, seed):
    """a [cm2] and b of a species by a fit to earlier cores, with the correction exp(s2 / 2).

    The cores were taken from 40 other stems of the catchment, whose areas scatter about the true
    relation; a straight line is fitted to the logarithms.
    """
    of_species = plan.SPECIES[species]
    rng = generator(seed, "earlier cores", species)
    low, high = plan.SMALLEST_DIAMETER, plan.LARGEST_DIAMETER
    x = np.log(rng.uniform(low, high, EARLIER_CORES) * 100.0)
    noise = rng.normal(0.0, of_species.area_spread, EARLIER_CORES)
    y = math.log(of_species.area_a_cm2) + of_species.area_b * x + noise
    slope = float(((x - x.mean()) * (y - y.mean())).sum() / ((x - x.mean()) ** 2).sum())
    level = float(y.mean() - slope * x.mean())
    s2 = float(((y - level - slope * x) ** 2).sum()) / (EARLIER_CORES - 2)
    return math.exp(level + s2 / 2.0), slope


def _probes(truth):
    columns = [
        "probe",
        "tree",
        "method",
        "height_m",
        "azimuth_deg",
        "depth_from_mm",
        "depth_to_mm",
        "needle_length_mm",
        "spacing_downstream_mm",
        "spacing_upstream_mm",
        "pulse_length_s",
        "pulse_energy_J_m",
        "window_from_s",
        "window_to_s",
        "heater_resistance_ohm",
        "embedded_diffusivity_cm2_s",
        "embedded_spacing_mm",
        "installed",
    ]
    rows = []
    for group, probe in grouped_probes(truth):
        rng = generator(truth.seed, "installation", probe.name)
        azimuth = str(int(rng.integers(0, 24)) * 15)
        if group.method == "heat_dissipation":
            ohm = f"{rng.normal(20.0, 0.3):.1f}"
            geometry = ["0", "20", "20", "", "", "", "", "", "", ohm, "", ""]
        else:
            geometry = ["10 25", "15 30", "35", "6", "6", "8", "900", "60", "100", "37", "", ""]
            if group.stores == "logged_velocity":
                geometry[-2:] = ["0.0025", "6"]
        rows.append([probe.name, probe.tree, group.method, "1.3", azimuth, *geometry, INSTALLED])
    return columns, rows


def _trees(truth):
    rows = []
    for stem in instrumented(truth):
        rng = generator(truth.seed, "tree", stem.name)
        height = 1.3 + 32.0 * (1.0 - math.exp(-3.6 * stem.diameter)) * rng.uniform(0.95, 1.05)
        bark = stem.bark * 1000.0 + rng.normal(0.0, 0.3)
        rows.append([stem.name, stem.stand, stem.species, f"{height:.1f}", f"{bark:.1f}"])
    return ["tree", "stand", "species", "height_m", "bark_mm"], rows


def _cores(truth):
    """Two opposite faces a tree: their mean is the stem's, each is read with a small error."""
    rows = []
    for stem in instrumented(truth):
        rng = generator(truth.seed, "core", stem.name)
        skew = rng.normal(0.0, 0.05)
        for face, share in (("E", 1.0 + skew), ("W", 1.0 - skew)):
            depth = stem.sapwood_depth * 100.0 * share * (1.0 + rng.normal(0.0, 0.015))
            bark = stem.bark * 1000.0 + rng.normal(0.0, 0.5)
            rows.append([stem.name, face, "2031-08-12", f"{bark:.1f}", f"{depth:.2f}"])
    return ["tree", "face", "date", "bark_mm", "sapwood_depth_cm"], rows


def _plots():
    columns = [
        "plot",
        "stand",
        "plan_area_m2",
        "slope_area_m2",
        "slope_deg",
        "smallest_diameter_cm",
    ]
    rows = []
    for plot in plan.PLOTS:
        area = f"{plot.area_m2:g}"
        sloping = plot.slope_deg > 0.0
        areas = ["", area, f"{plot.slope_deg:g}"] if sloping else [area, "", ""]
        rows.append([plot.plot, plot.stand, *areas, "15"])
    return columns, rows


def _surveys(truth):
    rows = [
        [s.plot, s.name, s.species, "2031-08-11", f"{s.diameter * 100:.1f}",
         "alive" if s.alive else "dead"]
        for s in truth.stems
    ]  # fmt: skip
    return ["plot", "stem", "species", "date", "diameter_cm", "status"], rows


def _stands():
    notes = {"upper": "spruce with beech on the north slope", "lower": "oak and beech at the brook"}
    return ["stand", "area_ha", "description"], [
        [stand, f"{area:g}", notes[stand]] for stand, area in plan.STAND_AREAS_HA.items()
    ]


def _species(seed):
    columns = [
        "species",
        "anatomy",
        "leaf_on",
        "leaf_off",
        "sapwood_area_a_cm2",
        "sapwood_area_b",
        "stand_in",
    ]
    rows = []
    for species, of_species in plan.SPECIES.items():
        a, b = allometry(species, seed)
        rows.append([species, of_species.anatomy, *of_species.leafless, f"{a:.4f}", f"{b:.4f}",
                     of_species.stand_in])  # fmt: skip
    return columns, rows


def _profiles():
    rows = [
        [species, f"{depth:g}", f"{ratio:g}", "measured on felled trees of the site"]
        for species, of_species in plan.SPECIES.items()
        if not of_species.stand_in
        for depth, ratio in of_species.profile
    ]
    return ["species", "relative_depth", "ratio", "source"], rows


def _wood():
    """One sample a species, mean of several cores: within about 1 % of the truth."""
    measured = {"spruce": ("405", "1.24"), "beech": ("583", "0.795"), "oak": ("596", "0.71")}
    rows = [[species, "2031-08-12", *pair] for species, pair in measured.items()]
    return ["species", "date", "dry_density_kg_m3", "water_content"], rows


def _wounds(truth):
    rows = []
    for group, probe in grouped_probes(truth):
        if group.method == "heat_ratio":
            error = generator(truth.seed, "wound section", probe.name).normal(0.0, 0.03)
            width = probe.wound_width * 1000.0 + error
            rows.append(
                [probe.name, "2031-08-17", f"{width:.2f}", "section at removal, taken as constant"]
            )
    return ["probe", "date", "width_mm", "source"], rows


def _calibrations():
    columns = [
        "calibration",
        "species",
        "method",
        "factor_g_m2_s",
        "exponent",
        "lowest_index",
        "highest_index",
        "ln_factor_error",
        "exponent_error",
        "error_correlation",
        "source",
        "date",
    ]
    oak = plan.SPECIES["oak"]
    factor, exponent = f"{oak.factor * 1000:g}", f"{oak.exponent:g}"
    source = "cut stems of the catchment under suction (invented)"
    return columns, [
        ["oak-2029", "oak", "heat_dissipation", factor, exponent, "0", "1.2",
         "0.09", "0.05", "0.6", source, "2029-07-04"],
    ]  # fmt: skip


def _visits(seed):
    rows = []
    for log in ("upper", "lower", "pulse_a", "pulse_b", "weather"):
        for arrival, done in plan.VISITS:
            if ("upper logger" in done or "P04" in done) and log != "upper":
                if "download" not in done:
                    continue
                done = "download"
            offset = int(generator(seed, "clock", f"{log} {arrival}").integers(-4, 5))
            minutes = int(generator(seed, "stay", f"{log} {arrival}").integers(15, 40))
            leave = np.datetime64(arrival.replace(" ", "T"), "m") + minutes
            rows.append([log, arrival, str(leave).replace("T", " "), str(offset), done])
    return ["log", "arrival", "departure", "clock_offset_s", "done"], rows


def _exclusions():
    probe, begin, end, reason = plan.EXCLUDED
    return ["kind", "id", "from", "to", "reason", "who"], [
        ["probe", probe, begin, end, reason, "field crew"]
    ]
