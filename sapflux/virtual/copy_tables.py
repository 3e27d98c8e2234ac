"""Tables of a virtual copy: the truth itself, or what a crew would have measured of it."""

import math
from datetime import datetime

import numpy as np

from sapflux.constants import WATER_DENSITY
from sapflux.physics.wood import void_fraction
from sapflux.site.tables import TABLES, columns_of
from sapflux.units import CM2, CM2_PER_S, CM_PER_M, MM_PER_M, G
from sapflux.virtual import assumptions, forest
from sapflux.virtual.copy_probes import installations, true_diffusivity, true_wood
from sapflux.virtual.seeds import generator
from sapflux.virtual.sensors import RatioProbe

FINE_DEPTHS = np.linspace(0.0, 1.0, 101)  # of an exact profile
DAYS_BEFORE = 7  # the crew's work, before the first day
NOT_COPIED = ("references", "potentials", "events", "visits", "exclusions", "decisions")


def all_tables(truth, site, plan):
    """Name of the table -> (columns, rows of text); tables without rows are left out."""
    exact = truth.knowledge == "exact"
    date = truth.dates[0] - DAYS_BEFORE
    made = {
        "channels": list(plan.channels),
        "probes": [_probe(row, truth.dates[0] - 1) for row in installations(site)],
        "trees": _trees(truth, site, exact),
        "cores": _exact_cores(truth, date) if exact else _read_cores(truth, date),
        "plots": _plots(truth, site),
        "surveys": _surveys(truth, date),
        "stands": site.table("stands"),
        "species": _species(truth, site, exact),
        "profiles": _exact_profiles(truth) if exact else _mean_profiles(truth),
        "wood": _wood(truth, site, exact, date),
        "wounds": _wounds(truth, exact, date),
        "calibrations": [*site.table("calibrations"), *(_general(truth, date) if exact else ())],
        "pairs": _pairs(site),
    }
    return {name: table_text(name, rows) for name, rows in made.items() if rows}


def simplifications(site):
    """What of the site's tables its copy has in a simpler way, in words."""
    if any(row.final_width_mm is not None for row in site.table("wounds")):
        yield "table wounds: widths that grow; those of the copy stay as they are"
    for name in NOT_COPIED:
        if site.table(name):
            yield f"table {name}: of another time than the copy's"


def table_text(name, rows):
    """(columns, rows of text) of rows given as objects of the table or as dicts by column.

    Columns that are blank in every row are left out, unless the table asks for them.
    """
    fields = columns_of(TABLES[name])
    cells = [
        [_text(_cell(row, column)) for column in fields]
        for row in rows
    ]  # fmt: skip
    needed = [field.is_required() for field in fields.values()]
    kept = [at for at, must in enumerate(needed) if must or any(row[at] for row in cells)]
    return [list(fields)[at] for at in kept], [[row[at] for at in kept] for row in cells]


def _cell(row, column):
    if isinstance(row, dict):
        return row.get(column)
    return getattr(row, {"from": "from_"}.get(column, column))


def _text(value):
    if value is None or value is False:
        return ""
    if value is True:
        return "yes"
    if isinstance(value, tuple):
        return " ".join(_text(part) for part in value)
    if isinstance(value, float):
        return f"{value:.10g}"
    if isinstance(value, datetime):
        return f"{value:%Y-%m-%d %H:%M:%S}".removesuffix(":00")
    return str(value)


def _probe(row, day):
    """One installation from the day before the first one on, contact as the sapwood gives it.

    Heated without a break, as all needles of a copy are.
    """
    change = {"installed": datetime.fromisoformat(f"{day}T12:00"), "removed": None}
    change |= dict.fromkeys(("contact_fraction", "heating_on_min", "heating_off_min"))
    return row.model_copy(update=change)


def _trees(truth, site, exact):
    rows = []
    for row in site.table("trees"):
        one = truth.known.get(row.tree)
        change = {"bark_mm": row.bark_mm, "diameter_cm": None}
        if one is not None:
            error = generator(truth.seed, "bark", row.tree).normal(0.0, assumptions.BARK_READING)
            bark = one.stem.bark if exact else round(max(one.stem.bark + error, 0.0), 4)
            outside = not one.stem.plot
            change = {
                "bark_mm": bark * MM_PER_M,
                "diameter_cm": one.stem.diameter * CM_PER_M if outside else None,
            }
        rows.append(row.model_copy(update=change))
    return rows


def _core(stem, face, date, bark, depth):
    return {"tree": stem.name, "face": face, "date": date, "bark_mm": bark * MM_PER_M,
            "sapwood_depth_cm": depth * CM_PER_M}  # fmt: skip


def _exact_cores(truth, date):
    return [_core(stem, "", date, stem.bark, stem.sapwood_depth) for stem in truth.stems]


def _read_cores(truth, date):
    """Two opposite faces of each tree with probes: their mean is the stem's."""
    rows = []
    for one in truth.known.values():
        if not one.instrumented:
            continue
        rng = generator(truth.seed, "core", one.stem.name)
        skew = rng.normal(0.0, assumptions.FACE_SPREAD)
        for face, share in (("E", 1.0 + skew), ("W", 1.0 - skew)):
            depth = one.stem.sapwood_depth * share
            depth *= 1.0 + rng.normal(0.0, assumptions.CORE_READING)
            bark = max(one.stem.bark + rng.normal(0.0, assumptions.BARK_READING), 0.0)
            depth = min(depth, 0.98 * one.stem.xylem_radius)
            rows.append(_core(one.stem, face, date, round(bark, 4), round(depth, 4)))
    return rows


def _plots(truth, site):
    stocked = {stem.plot for stem in truth.stems}
    return [
        row.model_copy(update={"empty": row.plot not in stocked}) for row in site.table("plots")
    ]


def _surveys(truth, date):
    return [
        {"plot": stem.plot, "stem": stem.name, "species": stem.species, "date": date,
         "diameter_cm": stem.diameter * CM_PER_M, "status": "alive"}
        for stem in truth.stems
        if stem.plot
    ]  # fmt: skip


def _species(truth, site, exact):
    """Sapwood area a D^b in cm2: a is right in the mean of the stems, then misjudged.

    A species that the site calibrates for heating cycles alone is under the general calibration
    in a copy, which heats without a break and is made with that calibration.
    """
    cycled = {c.species for c in site.table("calibrations") if c.heating == "intermittent"}
    rows = []
    for row in site.table("species"):
        stems = [stem for stem in truth.stems if stem.species == row.species]
        a, b = row.sapwood_area_a_cm2, row.sapwood_area_b
        if stems:
            b = b or assumptions.ALLOMETRY_EXPONENT
            areas = math.fsum(stem.sapwood_area for stem in stems) / CM2
            a = areas / math.fsum((stem.diameter * CM_PER_M) ** b for stem in stems)
            error = generator(truth.seed, "allometry", row.species).normal(0.0, 1.0)
            if not exact:
                a = min(a * math.exp(assumptions.ALLOMETRY_ERROR * error), _whole_stems(stems, b))
        change = {"sapwood_area_a_cm2": a, "sapwood_area_b": b}
        if row.species in cycled and not truth.species[row.species].registered:
            change["general_calibration_accepted"] = True
        rows.append(row.model_copy(update=change))
    return rows


def _whole_stems(stems, b):
    """The factor a of an allometry that gives half of the stems no more sapwood than a disc."""
    return float(np.median([
        math.pi * (stem.diameter / 2.0) ** 2 / CM2 / (stem.diameter * CM_PER_M) ** b
        for stem in stems
    ])) * 0.98  # fmt: skip


def _exact_profiles(truth):
    rows = []
    for one in truth.known.values():
        if one.instrumented:
            ratios = forest.profile_at(one.nodes, one.stem.tilt, FINE_DEPTHS)
            rows += _profile("tree", one.stem.name, zip(FINE_DEPTHS, ratios, strict=True))
    return rows


def _mean_profiles(truth):
    rows = []
    carried = [one for one in truth.known.values() if one.instrumented]
    for name in dict.fromkeys(one.stem.species for one in carried):
        rows += _profile("species", name, truth.species[name].nodes)
    for one in carried:
        if one.own_profile:
            rows += _profile("tree", one.stem.name, one.nodes)
    return rows


def _profile(kind, name, nodes):
    return [
        {kind: name, "relative_depth": float(depth), "ratio": float(ratio), "source": "virtual"}
        for depth, ratio in nodes
    ]


def _wood(truth, site, exact, date):
    """A sample of each tree with heat-ratio probes, or one of each of their species."""
    trees = dict.fromkeys(
        parts[0].tree for parts in truth.probes.values() if isinstance(parts[0], RatioProbe)
    )
    samples = {}
    for tree in trees:
        species = truth.known[tree].stem.species
        own = truth.species[species]
        diffusivity = true_diffusivity(site, tree, own)
        sample = (*true_wood(site, tree, own), np.nan if diffusivity is None else diffusivity)
        samples.setdefault(("tree", tree) if exact else ("species", species), []).append(sample)
    rows = []
    for (kind, name), taken in samples.items():
        density, water = np.mean(taken, axis=0)[:2]
        measured = [diffusivity for *_, diffusivity in taken if np.isfinite(diffusivity)]
        diffusivity = math.fsum(measured) / len(measured) / CM2_PER_S if measured else None
        if not exact:
            rng = generator(truth.seed, "wood sample", name)
            error = 1.0 + assumptions.WOOD_READING * rng.normal(0.0, 1.0, 2)
            density, water = density * error[0], water * error[1]
            # no more water than the wood has room for
            water += min(void_fraction(density, water) * WATER_DENSITY / density, 0.0)
            if measured:
                rng = generator(truth.seed, "wood diffusivity", name)
                diffusivity *= 1.0 + assumptions.DIFFUSIVITY_READING * rng.normal()
        rows.append({kind: name, "date": date, "dry_density_kg_m3": float(density),
                     "water_content": float(water), "diffusivity_cm2_s": diffusivity})  # fmt: skip
    return rows


def _wounds(truth, exact, date):
    rows = []
    for name, parts in truth.probes.items():
        if not isinstance(parts[0], RatioProbe):
            continue
        width = parts[0].wound_width
        if not exact:
            error = generator(truth.seed, "wound section", name).normal(0.0, 1.0)
            width = np.clip(width + assumptions.WOUND_READING * error, 1.7e-3, 3.0e-3)
        rows.append({"probe": name, "date": date, "width_mm": float(width) * MM_PER_M,
                     "source": "virtual"})  # fmt: skip
    return rows


def _general(truth, date):
    """The calibration of each species with heat-dissipation probes that registers none."""
    names = sorted({
        truth.known[parts[0].tree].stem.species
        for parts in truth.probes.values()
        if not isinstance(parts[0], RatioProbe)
    })  # fmt: skip
    return [
        {"calibration": f"virtual-{name}", "species": name, "method": "heat_dissipation",
         "factor_g_m2_s": own.factor / G, "exponent": own.exponent, "source": "virtual",
         "date": date}
        for name, own in ((name, truth.species[name]) for name in names)
        if not own.registered
    ]  # fmt: skip


def _pairs(site):
    rows = {}
    for row in site.table("pairs"):
        rows[row.heated] = row.model_copy(update={"from_": None, "to": None})
    return list(rows.values())
