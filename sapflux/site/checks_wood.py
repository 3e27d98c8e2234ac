"""`wood.csv`, `wounds.csv`, `profiles.csv` and `calibrations.csv`: what must fit together."""

from sapflux.constants import WATER_DENSITY
from sapflux.errors import Fault
from sapflux.physics.wood import void_fraction
from sapflux.site.reading import backwards, clashes, repeats

# Oven-dry density of sapwood, kg m-3: from lighter than balsa to heavier than any wood that
# carries probes. Source: common practice.
DRY_DENSITIES = (150.0, 1200.0)
# Water mass over dry mass. Cell walls alone take up 0.3 (fibre saturation), so that wood below it
# has no liquid water to conduct. Source: common practice.
FIBRE_SATURATION = 0.3
PER_CENT = 3.0
# Least share of the pores outside cell walls that water fills in conducting sapwood. Below it a
# fraction of fresh mass is likelier. Source: own judgement.
LEAST_FILLED = 0.15
# What errors of measurement may add to the volume of water and wood. Source: own judgement.
VOLUME_ERROR = 0.05
DIFFUSIVITIES = (0.0005, 0.01)  # cm2 s-1; a factor of four about 0.0025. Source: own judgement
WOUNDS = (0.5, 6.0)  # mm; needles are 1.3 to 3 mm thick. Source: common practice

WET_BASIS = "Give water mass over DRY mass, for sapwood mostly 0.4 to 2.2"


def wood_faults(reading):
    """Wood samples of nothing known, or with values that sapwood cannot have."""
    rows = list(reading.rows("wood"))
    for where, row, former in repeats(rows, lambda r: (r.species, r.tree, r.date)):
        yield Fault(
            where,
            f"the sample of {row.tree or row.species!r} of {row.date} stands in {former} already",
            "Keep one of them.",
        )
    for where, row in rows:
        yield from owner_faults(reading, where, row, ("species", "tree"))
        yield from _value_faults(where, row)
        yield from _water_faults(where, row)


def owner_faults(reading, where, row, columns):
    """Rows that must belong to exactly one known thing of several kinds."""
    given = [column for column in columns if getattr(row, column)]
    if len(given) != 1:
        held = " and ".join(f"{column} {getattr(row, column)!r}" for column in given)
        held = held or f"neither {' nor '.join(columns)}"
        yield Fault(where, f"the row names {held}", f"Name one of them: {' or '.join(columns)}.")
    for column in given:
        table = {"species": "species", "tree": "trees", "probe": "probes"}[column]
        yield from reading.unknown(where, column, table, column, getattr(row, column))


def _value_faults(where, row):
    density, diffusivity = row.dry_density_kg_m3, row.diffusivity_cm2_s
    if density is None and row.water_content is None and diffusivity is None:
        yield Fault(
            where,
            "the sample has no value",
            "Give dry_density_kg_m3 and water_content, or diffusivity_cm2_s.",
        )
    if density is not None and not DRY_DENSITIES[0] <= density <= DRY_DENSITIES[1]:
        yield Fault(
            where,
            f"dry_density_kg_m3 is {density:g}",
            "Give dry mass over fresh volume in kg m-3: sapwood lies between 150 and 1200.",
        )
    if diffusivity is not None and not DIFFUSIVITIES[0] <= diffusivity <= DIFFUSIVITIES[1]:
        yield Fault(
            where,
            f"diffusivity_cm2_s is {diffusivity:g}",
            "Give it in cm2 s-1: fresh sapwood lies about 0.0025.",
        )


def _water_faults(where, row):
    water, density = row.water_content, row.dry_density_kg_m3
    if water is None:
        return
    if water > PER_CENT:
        yield Fault(
            where,
            f"water_content is {water:g}, which looks like a per cent",
            f"{WET_BASIS}: {water:g} % is {water / 100:g}.",
        )
        return
    fresh = "which looks like a fraction of fresh mass"
    turned = f"{WET_BASIS}: a fraction f of fresh mass is f / (1 - f)"
    turned += f", here {water / (1 - water):.2f}." if water < 1 else "."
    if water < FIBRE_SATURATION:
        yield Fault(where, f"water_content is {water:g}, {fresh}", turned)
        return
    if density is None or not DRY_DENSITIES[0] <= density <= DRY_DENSITIES[1]:
        return
    void = void_fraction(density, water)
    pores = void_fraction(density, FIBRE_SATURATION)
    if void < -VOLUME_ERROR:
        most = water + void * WATER_DENSITY / density
        yield Fault(
            where,
            f"water_content is {water:g}, and wood of {density:g} kg m-3 has room for {most:.2f}",
            f"{WET_BASIS}, and density as dry mass over FRESH volume.",
        )
    elif 1.0 - void / pores < LEAST_FILLED:
        yield Fault(
            where,
            f"water_content is {water:g}, {fresh}: it would fill "
            f"{100 * (1.0 - void / pores):.0f} % of the pores of wood of {density:g} "
            "kg m-3",
            turned,
        )


def wound_faults(reading):
    """Wound widths of nothing known, that no drill makes, or that grow by half a time course."""
    rows = list(reading.rows("wounds"))
    for where, row, former in repeats(rows, lambda r: (r.probe, r.tree, r.species, r.date)):
        yield Fault(
            where,
            f"the wound of {row.probe or row.tree or row.species!r} of {row.date} "
            f"stands in {former} already",
            "Keep one of them.",
        )
    for where, row in rows:
        yield from owner_faults(reading, where, row, ("probe", "tree", "species"))
        if not WOUNDS[0] <= row.width_mm <= WOUNDS[1]:
            yield Fault(
                where,
                f"width_mm is {row.width_mm:g}",
                "Give the width of wounded wood across the needles in mm: it lies between "
                "0.5 and 6.",
            )
        yield from _course_faults(where, row)


def _course_faults(where, row):
    final, constant = row.final_width_mm, row.time_constant_d
    if (final is None) != (constant is None):
        given, missing = "final_width_mm", "time_constant_d"
        if final is None:
            given, missing = missing, given
        yield Fault(
            where,
            f"the row has {given} and no {missing}",
            "Give both for a wound that grows by a time course, or neither.",
        )
    elif final is not None and final < row.width_mm:
        yield Fault(
            where,
            f"final_width_mm {final:g} is less than width_mm {row.width_mm:g}",
            "A wound grows: give in width_mm the width at `date`, in final_width_mm the last one.",
        )
    if final is not None and final > WOUNDS[1]:
        yield Fault(
            where,
            f"final_width_mm is {final:g}",
            "Give the width of wounded wood across the needles in mm: it lies between 0.5 and 6.",
        )


def profile_faults(reading):
    """Radial profiles of nothing known, with too few nodes, or two at once."""
    groups = {}
    for where, row in reading.rows("profiles"):
        yield from owner_faults(reading, where, row, ("species", "tree"))
        yield from backwards(where, row)
        if row.ratio < 0:
            yield Fault(where, f"ratio is {row.ratio:g}", "Give a ratio of at least 0.")
        key = (row.species, row.tree, row.from_, row.to)
        groups.setdefault(key, []).append((where, row))
    whole = reading.are_whole("profiles")
    for (species, tree, _, _), rows in groups.items():
        where, of = rows[0][0], f"the profile of {tree or species!r}"
        if whole and len(rows) < 2:
            yield Fault(where, f"{of} has one node", "Give at least two relative depths.")
        if whole and not any(row.ratio > 0 for _, row in rows):
            yield Fault(where, f"{of} is 0 at every depth", "Give a ratio above 0 somewhere.")
        where_first, first = rows[0]
        where, other = next(((w, r) for w, r in rows if r.source != first.source), (None, None))
        if other is not None:
            yield Fault(
                where,
                f"{of} has nodes of source {other.source!r} here and of {first.source!r} in "
                f"{where_first.rpartition(', ')[2]}",
                "Two profiles do not mix: give each its own time, or keep one of them.",
            )
            continue
        for where, row, former in repeats(rows, lambda r: r.relative_depth):
            yield Fault(
                where,
                f"{of} has relative_depth {row.relative_depth:g} in {former} already",
                "Give each depth once.",
            )
    heads = [rows[0] for rows in groups.values()]
    for where, row, former, _ in clashes(
        heads, lambda r: (r.species, r.tree), lambda r: (r.from_, r.to)
    ):
        yield Fault(
            where,
            f"{row.tree or row.species!r} has another profile for the same time from {former} on",
            "End one where the other begins.",
        )


def calibration_faults(reading):
    """Calibrations that stand twice, of an unknown species, or with a range turned round."""
    rows = list(reading.rows("calibrations"))
    for where, row, former in repeats(rows, lambda r: r.calibration):
        yield Fault(
            where,
            f"calibration {row.calibration!r} stands in {former} already",
            "Give each a name of its own.",
        )
    for where, row, former in repeats(rows, lambda r: (r.species, r.method, r.heating, r.date)):
        yield Fault(
            where,
            f"species {row.species!r} has a calibration for {row.method} of {row.date} in {former} "
            "already",
            "The latest counts: keep one of them, or give the dates on which they were made.",
        )
    for where, row in rows:
        yield from reading.unknown(where, "species", "species", "species", row.species)
        low, high = row.lowest_index, row.highest_index
        if None not in (low, high) and low >= high:
            yield Fault(
                where,
                f"lowest_index {low:g} is not below highest_index {high:g}",
                "Give the range of flow index that the calibration covers.",
            )


CHECKS = (wood_faults, wound_faults, profile_faults, calibration_faults)
