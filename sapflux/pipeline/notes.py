"""What a person should know of a run before using its numbers: fallbacks that were taken."""

from sapflux.site.inventory import bark_known, composition

GENERAL = (
    "general calibration of heat dissipation for {}: published comparisons find it low by 35 to "
    "40 % on average (value from memory); relative use only until the species is calibrated"
)
RING_POROUS = (
    "ring-porous {} under the general calibration, as species.csv accepts: it reads such wood low "
    "by a factor of 2 to 5; relative use only"
)
NO_BARK = "no bark known for {}: its radius over bark is used, so its sapwood is too large"
BEYOND_DISC = (
    "{} stems of {} in {} have more sapwood by the allometry than they have wood: the sum keeps it"
)
ASSUMED = "wound width of {} is assumed, not measured: 0.1 mm changes its flux by 2 to 4 %"
OUTER = (
    "the outermost flux density is carried inwards to the heartwood, which overstates trees whose "
    "flux falls with depth"
)


def notes_of(site, recipe):
    """Notes on this recipe on this site, as sentences."""
    return [
        *_calibration(site, recipe),
        *_bark(site),
        *_sapwood(site),
        *_wounds(site),
        *_radial(recipe),
    ]


def _calibration(site, recipe):
    steps = [s for s in recipe.chains["heat_dissipation"] if s.stage.name == "flux_density"]
    species = {tree.tree: tree.species for tree in site.table("trees")}
    probed = {
        species.get(probe.tree)
        for probe in site.table("probes")
        if probe.method == "heat_dissipation"
    }
    own = {c.species for c in site.table("calibrations") if c.method == "heat_dissipation"}
    if not steps or steps[0].settings["method"] == "species":
        return
    general = probed if steps[0].settings["method"] == "general" else probed - own
    ring = {row.species for row in site.table("species") if row.anatomy == "ring_porous"}
    if general - ring:
        yield GENERAL.format(_listed(general - ring))
    if general & ring:
        yield RING_POROUS.format(_listed(general & ring))


def _bark(site):
    trees = [tree.tree for tree in site.table("trees") if not bark_known(site, tree.tree)]
    if trees:
        yield NO_BARK.format(f"tree{'s' * (len(trees) > 1)} {_listed(trees)}")


def _sapwood(site):
    for (stand, species), part in composition(site).items():
        if part.beyond_disc:
            yield BEYOND_DISC.format(part.beyond_disc, species, stand)


def _wounds(site):
    names = {
        row.probe or row.tree or row.species
        for row in site.table("wounds")
        if "assumed" in row.source.lower()
    }
    if names:
        yield ASSUMED.format(_listed(names))


def _radial(recipe):
    for step in recipe.chains["scaling"]:
        if step.settings.get("method") == "outer_value_inwards":
            yield OUTER


def _listed(names):
    return ", ".join(sorted(names))
