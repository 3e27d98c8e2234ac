"""`trees.csv` and `cores.csv`: what must fit together."""

from sapflux.errors import Fault
from sapflux.site.inventory import bark_thickness, latest_survey, xylem_radius
from sapflux.site.reading import parted, repeats
from sapflux.units import CM_PER_M, MM_PER_M


def row_faults(reading):
    """Trees that stand twice, name what is not there, or have a name that outputs cannot write."""
    rows = list(reading.rows("trees"))
    for where, row, former in repeats(rows, lambda r: r.tree):
        yield Fault(
            where,
            f"tree {row.tree!r} stands in {former} already",
            "Give each tree a name of its own.",
        )
    for where, row in rows:
        yield from parted(where, "tree", row.tree)
        yield from reading.unknown(where, "stand", "stands", "stand", row.stand)
        yield from reading.unknown(where, "species", "species", "species", row.species)


def survey_faults(reading):
    """Trees that are another species in the survey, or have more bark than diameter."""
    if not reading.are_whole("trees", "surveys", "plots", "cores"):
        return
    for where, row in reading.rows("trees"):
        survey = latest_survey(reading.site, row.tree)
        if survey is None:
            continue
        known = reading.has("species", "species", row.species)
        if known and survey.species != row.species:
            yield Fault(
                where,
                f"tree {row.tree!r} is {row.species!r} here and {survey.species!r} in surveys.csv",
                "Mend the one that is wrong.",
            )
        if xylem_radius(reading.site, row.tree) is None:
            bark = bark_thickness(reading.site, row.tree) * MM_PER_M
            yield Fault(
                where,
                f"bark of {bark:g} mm leaves no wood in tree {row.tree!r} of "
                f"{survey.diameter_cm:g} cm",
                "Give the bark of one side in mm.",
            )


def diameter_faults(reading):
    """Trees whose diameter stands in the survey and in `trees.csv`."""
    for where, row in reading.rows("trees"):
        survey = latest_survey(reading.site, row.tree)
        if row.diameter_cm is not None and survey is not None and survey is not row:
            yield Fault(
                where,
                f"tree {row.tree!r} has diameter_cm {row.diameter_cm:g} here and "
                f"{survey.diameter_cm:g} in surveys.csv",
                "Leave it blank here, where it is for trees outside all plots; a decimal comma in "
                "the row may have shifted its cells.",
            )


def core_faults(reading):
    """Cores that stand twice, belong to no stem, or hold more sapwood than the stem has wood."""
    rows = list(reading.rows("cores"))
    for where, row, former in repeats(rows, lambda r: (r.tree, r.face, r.date)):
        face = f" at face {row.face!r}" if row.face else ""
        yield Fault(
            where,
            f"the core of tree {row.tree!r}{face} of {row.date} stands in {former} already",
            "Keep one of them, or name their faces.",
        )
    for where, row in rows:
        if not reading.has("surveys", "stem", row.tree):
            yield from reading.unknown(where, "tree", "trees", "tree", row.tree)
        if not reading.are_whole("trees", "surveys", "plots", "cores"):
            continue
        radius = xylem_radius(reading.site, row.tree)
        if radius is not None and row.sapwood_depth_cm > radius * CM_PER_M:
            yield Fault(
                where,
                f"sapwood_depth_cm is {row.sapwood_depth_cm:g} and the xylem radius "
                f"of tree {row.tree!r} is {radius * CM_PER_M:.1f} cm",
                "Sapwood is at most as deep as the radius under bark; depths are in cm.",
            )


CHECKS = (row_faults, survey_faults, diameter_faults, core_faults)
