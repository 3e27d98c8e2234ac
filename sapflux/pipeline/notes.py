"""What a person should know of a run before using its numbers: fallbacks that were taken."""

from sapflux import quality
from sapflux.ingest.cube import METHODS
from sapflux.site.installations import heating
from sapflux.site.inventory import bark_known, composition, sapwood_depth, tree_row

MM_PER_M = 1000.0
LEAST_USABLE = 0.2  # share of usable records below which a probe is told of: own judgement
NEARLY_ALL = 0.9
OLD_D = 365  # days after which the age of a probe is told of: own judgement
NIGHTS_OF = {"no_baseline": "zero_flow_nights", "unusable_offset": "zero_ratio_nights"}

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
OUTER = (
    "the outermost flux density is carried inwards to the heartwood, which overstates trees whose "
    "flux falls with depth"
)

FEW_TREES = (
    "{} in {} has {} instrumented tree{}, and a total needs {} (fewest_trees of the recipe's "
    "stand_transpiration): it will have none"
)
SHORT_NEEDLE = (
    "the sapwood of tree{} {} is deeper than the needles reach, and no profile says how flux "
    "falls inwards: they will have no flow; give profiles.csv"
)


def notes_of(site, recipe):
    """Notes on this recipe on this site, as sentences."""
    return [
        *_calibration(site, recipe),
        *_bark(site),
        *_sapwood(site),
        *_radial(recipe),
        *_strata(site, recipe),
        *_needles(site, recipe),
    ]


def _calibration(site, recipe):
    steps = [s for s in recipe.chains["heat_dissipation"] if s.stage.name == "flux_density"]
    species = {tree.tree: tree.species for tree in site.table("trees")}
    probed = {
        species.get(probe.tree)
        for probe in site.table("probes")
        if probe.method == "heat_dissipation" and heating(probe) == "continuous"
    }
    own = {
        c.species
        for c in site.table("calibrations")
        if (c.method, c.heating) == ("heat_dissipation", "continuous")
    }
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


def _radial(recipe):
    for step in recipe.chains["scaling"]:
        if step.settings.get("method") == "outer_value_inwards":
            yield OUTER


def _settings(recipe, stage):
    """Settings of a stage of the scaling chain, None where the recipe has no such stage."""
    steps = [step for step in recipe.chains["scaling"] if step.stage.name == stage]
    return steps[0].settings if steps else None


def _strata(site, recipe):
    """Strata with some instrumented trees, but fewer than a total needs."""
    settings = _settings(recipe, "stand_transpiration")
    if settings is None:
        return
    trees = _probed_trees(site)
    for stand, species in composition(site):
        own = [row for row in trees if (row.stand, row.species) == (stand, species)]
        if 0 < len(own) < settings["fewest_trees"]:
            plural = "s" * (len(own) > 1)
            yield FEW_TREES.format(species, stand, len(own), plural, settings["fewest_trees"])


def _needles(site, recipe):
    """Trees whose probes end short of the sapwood, without a profile to go on with."""
    settings = _settings(recipe, "probe_flow")
    if settings is None or settings["method"] == "outer_value_inwards":
        return
    profiled = {row.tree or row.species for row in site.table("profiles")}
    short = set()
    for probe in site.table("probes"):
        tree = tree_row(site, probe.tree)
        if tree is None or not profiled.isdisjoint({tree.tree, tree.species}):
            continue
        depth = sapwood_depth(site, probe.tree)
        reach = max(probe.depth_to_mm, default=0.0) + settings["uncovered_mm"]
        if depth is not None and depth * MM_PER_M > reach:
            short.add(probe.tree)
    if short and settings["method"] == "relative_profile":
        yield SHORT_NEEDLE.format("s" * (len(short) > 1), _listed(short))


def _probed_trees(site):
    names = {probe.tree for probe in site.table("probes") if probe.method in METHODS}
    return [row for row in site.table("trees") if row.tree in names]


def notes_of_lives(lives, evidence):
    """Notes on probes of which next to nothing can be used, and why.

    lives : the table of installations; evidence : tables of the summarising stages.
    """
    poor = lives[(lives["records"] > 0) & (lives["usable_fraction"] < LEAST_USABLE)]
    masking = [name for name in quality.NATIVE if quality.FLAGS[name].masks]
    causes = poor[[f"{name}_fraction" for name in masking]].to_numpy()
    groups = {}
    for probe, shares in zip(poor["probe"], causes, strict=True):
        # Flags stand in the order of work: of those that take nearly all, the first is the cause.
        first = int((shares >= NEARLY_ALL * shares.max()).argmax())
        groups.setdefault(masking[first], []).append(probe)
    for flag, probes in groups.items():
        meaning = quality.FLAGS[flag].meaning
        nights = _nights(evidence.get(NIGHTS_OF.get(flag)), probes)
        yield (f"{_listed(set(probes))}: hardly any record can be used: {meaning} ({flag}){nights}")
    yield from _ageing(evidence.get("ageing_controls"))


def _ageing(controls):
    """What the run made of the age of its heat dissipation probes."""
    if controls is None:
        return
    for verdict, rows in controls.groupby("verdict", sort=False):
        old = rows[rows["oldest_age_d"] > OLD_D]
        if rows["applied"].any():
            yield f"sensitivity lost with the age of heat dissipation probes: {verdict}"
        elif len(old):
            yield f"{_listed(set(old['probe']))}: installed for more than {OLD_D} days; {verdict}"


def notes_of_methods(left_out):
    """A note on the methods that a recipe would run beside its own and the site cannot serve.

    left_out : (chain, stage, method) of each.
    """
    if left_out:
        names = ", ".join(f"{stage} {method}" for _, stage, method in left_out)
        yield f"methods the site has no data for, not run beside the recipe's own: {names}"


def _nights(nights, probes):
    """What most often kept the nights of these probes from being accepted."""
    if nights is None:
        return ""
    refused = nights[nights["probe"].isin(probes) & ~nights["accepted"].astype(bool)]
    if not len(refused):
        return ""
    kinds = refused["reason"].str.replace(r"\d+(\.\d+)?", "x", regex=True)
    kind = kinds.value_counts().index[0]
    example = refused["reason"][kinds == kind].iloc[0]
    share = (kinds == kind).mean()
    return f"; of its refused nights {share:.0%} for a reason like: {example}"


def _listed(names):
    return ", ".join(sorted(names))
