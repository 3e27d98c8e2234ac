"""`probes.csv` and `pairs.csv`: what must fit together."""

from itertools import pairwise

from sapflux.errors import Fault
from sapflux.site.inventory import (
    bark_thickness,
    core_rows,
    latest_survey,
    sapwood_depth,
    species_row,
    tree_row,
    xylem_radius,
)
from sapflux.site.reading import backwards, clashes, parted
from sapflux.units import MM_PER_M

SAP_FLOW = ("heat_dissipation", "heat_ratio")


def row_faults(reading):
    """Installations that cannot be."""
    for where, row in reading.rows("probes"):
        yield from backwards(where, row, "installed", "removed")
        yield from reading.unknown(where, "tree", "trees", "tree", row.tree)
        yield from _depth_faults(where, row)
        if row.method == "heat_ratio":
            yield from _spacing_faults(where, row)
        if None not in (row.window_from_s, row.window_to_s):
            yield from _window_faults(where, row)


def _depth_faults(where, row):
    outer, inner = row.depth_from_mm, row.depth_to_mm
    if len(outer) != len(inner):
        yield Fault(
            where,
            f"depth_from_mm has {len(outer)} and depth_to_mm {len(inner)} numbers",
            "Give both for each point, outermost first.",
        )
        return
    for start, end in zip(outer, inner, strict=True):
        if start >= end:
            yield Fault(
                where,
                f"a point begins at {start:g} mm and ends at {end:g} mm",
                "Depths grow inwards: depth_from_mm is the smaller.",
            )
            return
    for end, start in pairwise(part for both in zip(outer, inner, strict=True) for part in both):
        if start < end:
            yield Fault(
                where,
                f"the points overlap: one ends at {end:g} mm and the next begins at {start:g} mm",
                "List the points from the outermost inwards.",
            )
            return
    span = inner[-1] - outer[0]
    if row.needle_length_mm is not None and span > row.needle_length_mm:
        yield Fault(
            where,
            f"the points span {span:g} mm and needle_length_mm is {row.needle_length_mm:g}",
            "A needle is at least as long as its points.",
        )


def _spacing_faults(where, row):
    for column in ("spacing_downstream_mm", "spacing_upstream_mm"):
        if getattr(row, column) is None:
            yield Fault(
                where,
                f"{column} is blank and the method is heat_ratio",
                "Give the distance from the heater to that needle.",
            )


def _window_faults(where, row):
    if row.window_from_s >= row.window_to_s:
        yield Fault(
            where,
            f"the reading window begins at {row.window_from_s:g} s and ends at "
            f"{row.window_to_s:g} s",
            "Count both from the end of heating.",
        )


def name_faults(reading):
    """Probe names that stand for two things, or that outputs cannot write."""
    rows = list(reading.rows("probes"))
    for where, row, former, _ in clashes(
        rows, lambda r: r.probe, lambda r: (r.installed, r.removed)
    ):
        yield Fault(
            where,
            f"probe {row.probe!r} is installed already in {former}",
            "Give that row the day of removal, or this probe a name of its own.",
        )
    first = {}
    for where, row in rows:
        if row.probe not in first:
            yield from parted(where, "probe", row.probe)
        where_first, known = first.setdefault(row.probe, (where, row))
        former = where_first.rpartition(", ")[2]
        for column in ("tree", "method"):
            if getattr(row, column) != getattr(known, column):
                yield Fault(
                    where,
                    f"probe {row.probe!r} has {column} {getattr(row, column)!r} "
                    f"here and {getattr(known, column)!r} in {former}",
                    "A probe keeps its tree and method: give this one a name of its own.",
                )


def tree_faults(reading):
    """Probes whose tree has no diameter or sapwood, or less wood than the needle is long."""
    if not reading.are_whole("trees", "surveys", "plots", "cores", "species"):
        return
    site, told = reading.site, set()
    for where, row in reading.rows("probes"):
        tree = tree_row(site, row.tree)
        if tree is None or not reading.has("stands", "stand", tree.stand):
            continue
        survey, radius = latest_survey(site, row.tree), xylem_radius(site, row.tree)
        sits = f"probe {row.probe!r} sits in tree {row.tree!r}, "
        if radius is None:
            if survey is None and row.tree not in told:
                yield Fault(
                    where,
                    f"{sits}which has no diameter in surveys.csv",
                    f"Add it as a stem of that name in a plot of stand {tree.stand!r}, or give "
                    "its diameter_cm in trees.csv if it stands outside all plots.",
                )
            told.add(row.tree)
            continue
        if row.depth_to_mm and max(row.depth_to_mm) > radius * MM_PER_M:
            yield Fault(
                where,
                f"depth_to_mm is {max(row.depth_to_mm):g} and the xylem radius of "
                f"tree {row.tree!r} is {radius * MM_PER_M:.0f} mm",
                "Depths are in mm below cambium, diameters in cm.",
            )
        elif row.needle_length_mm and row.needle_length_mm > _through_bark_mm(site, row, radius):
            yield Fault(
                where,
                f"needle_length_mm is {row.needle_length_mm:g} and the stem of tree {row.tree!r} "
                f"has {_through_bark_mm(site, row, radius):.0f} mm from bark to pith",
                "Lengths of needles are in mm, diameters in cm.",
            )
        if (
            row.method in SAP_FLOW
            and row.tree not in told
            and sapwood_depth(site, row.tree) is None
        ):
            told.add(row.tree)
            yield from _sapwood_fault(where, sits, site, tree)


def _through_bark_mm(site, row, radius):
    return (radius + (bark_thickness(site, row.tree) or 0.0)) * MM_PER_M


def _sapwood_fault(where, sits, site, tree):
    species = species_row(site, tree.species)
    if core_rows(site, tree.tree) or species is None:
        return
    if species.sapwood_area_a_cm2 is None or species.sapwood_area_b is None:
        yield Fault(
            where,
            f"{sits}which has no sapwood_depth_cm",
            "Add it to cores.csv, or list an allometry for its species.",
        )
    else:
        yield Fault(
            where,
            f"{sits}to which the allometry of {tree.species!r} gives more sapwood "
            "than the stem has wood",
            "Add its sapwood_depth_cm to cores.csv.",
        )


def pair_faults(reading):
    """Unheated pairs that cannot serve the probe they are listed for."""
    probes = {}
    for row in reading.site.table("probes"):
        probes.setdefault(row.probe, row)
    for where, row in reading.rows("pairs"):
        yield from backwards(where, row)
        for column, method in (("unheated", "unheated_pair"), ("heated", "heat_dissipation")):
            name = getattr(row, column)
            yield from reading.unknown(where, f"{column} probe", "probes", "probe", name)
            if name in probes and probes[name].method != method:
                yield Fault(
                    where,
                    f"{column} probe {name!r} is of the method {probes[name].method}",
                    f"Name a probe of the method {method}.",
                )
        if row.unheated in probes and row.heated in probes:
            trees = probes[row.unheated].tree, probes[row.heated].tree
            if trees[0] != trees[1]:
                yield Fault(
                    where,
                    f"unheated probe {row.unheated!r} sits in tree {trees[0]!r} and "
                    f"heated probe {row.heated!r} in {trees[1]!r}",
                    "The gradient of another stem says nothing: pair probes of one stem.",
                )
    for where, row, former, _ in clashes(
        reading.rows("pairs"), lambda r: r.heated, lambda r: (r.from_, r.to)
    ):
        yield Fault(
            where,
            f"heated probe {row.heated!r} has another unheated pair for the same time in {former}",
            "End one where the other begins.",
        )


CHECKS = (row_faults, name_faults, tree_faults, pair_faults)
