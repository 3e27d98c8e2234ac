"""What a site must tell before a virtual copy of it can be grown."""

from sapflux.errors import Fault, SiteError
from sapflux.site import inventory

SAP_FLOW = ("heat_dissipation", "heat_ratio")
NEEDED = {
    "probes": "List the probes of the design with their tree, method and depths.",
    "trees": "List the trees that carry probes, with stand and species.",
    "surveys": "List the stems of every plot with species and diameter.",
    "plots": "List the survey plots with stand and ground area.",
    "species": "List every species with its wood anatomy.",
}


def check_needs(site):
    """SiteError that names all that a site lacks for a virtual copy; None if nothing."""
    faults = [
        Fault(f"{site.folder}/{table}.csv", "there are no rows, and a virtual copy needs them",
              remedy)
        for table, remedy in NEEDED.items()
        if not site.table(table)
    ]  # fmt: skip
    if not faults:
        faults = [*_probe_faults(site), *_stem_faults(site)]
    if faults:
        raise SiteError(faults)


def _probe_faults(site):
    where = f"{site.folder}/probes.csv"
    if not any(row.method in SAP_FLOW for row in site.table("probes")):
        yield Fault(where, "no probe measures sap flow", "List one of heat dissipation or ratio.")
    for tree in dict.fromkeys(row.tree for row in site.table("probes")):
        if inventory.tree_row(site, tree) is None:
            yield Fault(where, f"tree {tree!r} is not in trees.csv", "Add it there.")
        elif inventory.xylem_radius(site, tree) is None:
            yield Fault(where, f"tree {tree!r} has no diameter", "Add it to surveys.csv.")


def _stem_faults(site):
    named = [(row.stem, row.species) for _, row in inventory.living_stems(site)]
    named += [(row.tree, row.species) for row in site.table("trees")]
    if not any(True for _ in inventory.living_stems(site)):
        yield Fault(f"{site.folder}/surveys.csv", "no stem is alive", "List the living stems.")
    told = set()
    for stem, species in named:
        row = inventory.species_row(site, species)
        bare = row is None or row.sapwood_area_a_cm2 is None
        if bare and species not in told and not inventory.core_rows(site, stem):
            told.add(species)
            yield Fault(
                f"{site.folder}/species.csv",
                f"species {species!r} has no allometry and stem {stem!r} no core",
                "Give sapwood_area_a_cm2 and sapwood_area_b.",
            )
