"""What a person should know of the corrections of a run: what is left out, and what not known."""

from sapflux.pipeline.plan import given_names, methods_of
from sapflux.stage import ORDER

LEFT_OUT = "the recipe leaves out, of the order of work of {}: {}"
NO_GRADIENT = (
    "the natural temperature gradient of the stem is not taken off {} of {} heat dissipation "
    "probes: no unheated pair in the same stem and no power-off night"
)
PAIR_ENDS = (
    "the unheated pair of {} does not cover its whole installation: outside the dates of pairs.csv "
    "no gradient is taken off, which may make a step"
)
NOT_LOGGED = "not logged, so that it keeps no night from setting a zero-flow baseline: {}"
NO_TEMPERATURE = (
    "neither stem nor air temperature is logged: frozen wood is not found and not left out"
)
# What keeps a night from setting a baseline, and the names of which one at least must be given.
BARS = {
    "frost (air or stem temperature)": {"air_temperature", "stem_temperature"},
    "a wet connector (precipitation)": {"precipitation"},
    "a change of power (heater voltage)": {"heater_voltage"},
    "a visit (visits.csv)": {"visited"},
}
ADDITIVE = (
    "the zero offset of the heat ratio is taken off as a velocity (additive_offset): where a "
    "needle is out of place its gain stays wrong, by half the share of the spacing"
)
PROVISIONAL = (
    "wound width of {} is provisional, assumed and not measured: 0.1 mm changes its flux by 2 to "
    "4 %"
)
ASSUMED = "assumed"  # in the source of a wound width: nobody has measured it


def notes_of_corrections(site, recipe):
    """Notes on what this recipe corrects on this site, as sentences."""
    methods = methods_of(site)
    return [
        *_left_out(recipe, methods),
        *_frost(site, methods),
        *(_heat_dissipation(site, recipe) if "heat_dissipation" in methods else ()),
        *(_heat_ratio(site, recipe) if "heat_ratio" in methods else ()),
    ]


def _left_out(recipe, methods):
    for method in methods:
        listed = {step.stage.name for step in recipe.chains[method]}
        missing = [name for name in ORDER[method] if name not in listed]
        if missing:
            yield LEFT_OUT.format(method.replace("_", " "), ", ".join(missing))


def _frost(site, methods):
    if methods and not {"air_temperature", "stem_temperature"} & given_names(site, methods[0]):
        yield NO_TEMPERATURE


def _step(recipe, chain, stage):
    return next((step for step in recipe.chains[chain] if step.stage.name == stage), None)


def _heat_dissipation(site, recipe):
    probes = [
        row
        for row in site.table("probes")
        if row.method == "heat_dissipation" and row.heating_on_min is None
    ]
    names = list(dict.fromkeys(row.probe for row in probes))
    if probes and _step(recipe, "heat_dissipation", "natural_gradient"):
        without = [name for name in names if not _has_gradient(site, name)]
        if without:
            yield NO_GRADIENT.format(len(without), len(names))
        short = sorted({row.probe for row in probes if _ends_within(site, row)})
        if short:
            yield PAIR_ENDS.format(", ".join(short))
    if _step(recipe, "heat_dissipation", "zero_flow_difference"):
        given = given_names(site, "heat_dissipation")
        unknown = [bar for bar, logged in BARS.items() if not logged & given]
        if unknown:
            yield NOT_LOGGED.format(", ".join(unknown))


def _has_gradient(site, probe):
    tree = next(row.tree for row in site.table("probes") if row.probe == probe)
    species = next((row.species for row in site.table("trees") if row.tree == tree), "")
    off = any(
        row.kind == "power_off"
        and row.probe in ("", probe)
        and (row.probe or row.species in ("", species))
        for row in site.table("references")
    )
    return off or any(pair.heated == probe for pair in site.table("pairs"))


def _ends_within(site, row):
    """Whether pairs serve a part of the installation only."""
    pairs = [pair for pair in site.table("pairs") if pair.heated == row.probe]
    open_end = [
        pair for pair in pairs if pair.to is None or (row.removed and pair.to >= row.removed)
    ]
    from_start = [pair for pair in pairs if pair.from_ is None or pair.from_ <= row.installed]
    return bool(pairs) and not (open_end and from_start)


def _heat_ratio(site, recipe):
    velocity = _step(recipe, "heat_ratio", "heat_pulse_velocity")
    if velocity and velocity.settings.get("method") == "additive_offset":
        yield ADDITIVE
    provisional = {
        row.probe or row.tree or row.species
        for row in site.table("wounds")
        if ASSUMED in row.source.lower()
    }
    if provisional:
        yield PROVISIONAL.format(", ".join(sorted(provisional)))
