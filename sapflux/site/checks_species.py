"""`species.csv`: what must fit together, and with the survey."""

from sapflux.errors import Fault
from sapflux.site.checks_probes import SAP_FLOW
from sapflux.site.inventory import (
    core_rows,
    is_beyond_disc,
    latest_survey,
    living_stems,
    tree_row,
)
from sapflux.site.reading import parted, repeats

WHOLE_STAND = "all"  # how tables name the sum of a stand's species


def row_faults(reading):
    """Species that stand twice, whose name means something else, or of which half is told."""
    rows = list(reading.rows("species"))
    for where, row, former in repeats(rows, lambda r: r.species):
        yield Fault(
            where, f"species {row.species!r} stands in {former} already", "Keep one of them."
        )
    for where, row in rows:
        yield from parted(where, "species", row.species)
        if row.species == WHOLE_STAND:
            yield Fault(
                where,
                f"a species is called {WHOLE_STAND!r}",
                "Give it another name: in results this one is the whole stand.",
            )
        yield from _half_faults(
            where,
            row,
            "leaf_on",
            "leaf_off",
            "Give both, or neither for a species in leaf all year.",
        )
        yield from _half_faults(
            where,
            row,
            "sapwood_area_a_cm2",
            "sapwood_area_b",
            "Sapwood area is a * diameter^b: give both or neither.",
        )
        if row.leaf_on and row.leaf_on == row.leaf_off:
            yield Fault(
                where,
                f"leaf_on and leaf_off are both {row.leaf_on!r}",
                "leaf_off is the first day out of leaf.",
            )


def _half_faults(where, row, one, other, remedy):
    given, missing = (one, other) if getattr(row, one) else (other, one)
    if getattr(row, given) and not getattr(row, missing):
        yield Fault(where, f"species {row.species!r} has {given} and no {missing}", remedy)


def stand_in_faults(reading):
    """Species of the survey without probes or a stand-in, and stand-ins that cannot be."""
    site = reading.site
    measured = _measured_species(reading)
    whole = measured is not None and reading.are_whole("probes", "trees", "surveys", "plots")
    surveyed = {row.species for _, row in living_stems(site)}
    for where, row in reading.rows("species"):
        name = row.species
        if row.stand_in == name:
            yield Fault(
                where,
                f"species {name!r} is its own stand_in",
                "Name another species that has probes, or leave it blank.",
            )
        elif row.stand_in:
            yield from reading.unknown(where, "stand_in", "species", "species", row.stand_in)
            known = reading.has("species", "species", row.stand_in)
            if whole and measured and known and row.stand_in not in measured:
                yield Fault(
                    where,
                    f"the stand_in {row.stand_in!r} of species {name!r} has no probes itself",
                    f"Species with probes: {', '.join(sorted(measured))}.",
                )
        elif whole and measured and name in surveyed and name not in measured:
            yield Fault(
                where,
                f"species {name!r} is in surveys.csv and has neither probes nor a stand_in",
                f"Name one with probes as its stand_in: {', '.join(sorted(measured))}.",
            )


def _measured_species(reading):
    """Species with sap-flow probes; None where the species of a tree is in doubt (told there)."""
    site, measured = reading.site, set()
    for row in site.table("probes"):
        if row.method not in SAP_FLOW:
            continue
        tree, survey = tree_row(site, row.tree), latest_survey(site, row.tree)
        if tree is None or not reading.has("species", "species", tree.species):
            return None
        if survey is not None and survey.species != tree.species:
            return None
        measured.add(tree.species)
    return measured


def sapwood_faults(reading):
    """Species whose living stems have neither cores nor an allometry."""
    if not reading.are_whole("probes", "trees", "surveys", "plots", "cores"):
        return
    site = reading.site
    # A tree with probes is told with its probe.
    probed = {row.tree for row in site.table("probes") if row.method in SAP_FLOW}
    bare = {}
    for plot, stem in living_stems(site):
        if stem.stem not in probed and not core_rows(site, stem.stem):
            bare.setdefault(stem.species, []).append(f"{stem.stem!r} of plot {plot.plot!r}")
    for where, row in reading.rows("species"):
        stems = bare.get(row.species)
        if stems and row.sapwood_area_a_cm2 is None and row.sapwood_area_b is None:
            count = "1 living stem" if len(stems) == 1 else f"{len(stems)} living stems"
            yield Fault(
                where,
                f"species {row.species!r} has no allometry and {count} without a "
                f"core, the first {stems[0]}",
                "Give sapwood_area_a_cm2 and sapwood_area_b.",
            )


def allometry_faults(reading):
    """Species whose allometry gives most of their stems more sapwood than they have wood."""
    if not reading.are_whole("probes", "trees", "surveys", "plots", "cores"):
        return
    # A tree with probes is told with its probe.
    probed = {row.tree for row in reading.site.table("probes") if row.method in SAP_FLOW}
    judged = {}
    for _, stem in living_stems(reading.site):
        if stem.stem not in probed:
            judged.setdefault(stem.species, []).append(is_beyond_disc(reading.site, stem))
    for where, row in reading.rows("species"):
        stems = judged.get(row.species, [])
        if sum(stems) > len(stems) / 2:
            yield Fault(
                where,
                f"the allometry of species {row.species!r} gives {sum(stems)} of {len(stems)} "
                "stems without probes more sapwood than they have wood",
                "Sapwood area in cm2 is sapwood_area_a_cm2 times the diameter over bark in cm to "
                "the power of sapwood_area_b.",
            )


CHECKS = (row_faults, stand_in_faults, sapwood_faults, allometry_faults)
