"""Whether a recipe can run on a site: checked whole before any data file is opened."""

from typing import get_args

from sapflux.errors import Fault, RecipeError
from sapflux.ingest.cube import METHODS, OWNER_OF, probe_names
from sapflux.ingest.weather import weather_names
from sapflux.schema import SIGNALS
from sapflux.site.sources import SOURCES, given_facts, source_in_words

SUN = {"solar_elevation", "solar_time"}


def methods_of(site):
    """The probe methods whose signals the site's logs carry."""
    logged = {c.quantity for c in site.table("channels") if c.kind == "probe"}
    return [m for m in METHODS if logged & set(SIGNALS[m]) and probe_names(site, m)]


def check_plan(site, recipe):
    """Raise RecipeError with every reason why this recipe cannot run on this site."""
    faults = list(plan_faults(site, recipe))
    if faults:
        raise RecipeError(faults)


def plan_faults(site, recipe):
    """Every reason why this recipe cannot run on this site."""
    methods = methods_of(site)
    for method in methods:
        if not recipe.chains[method]:
            yield Fault(
                recipe.where,
                f"site {site.key!r} has {method} probes and the recipe lists no stage for them",
                f"List their stages under [[{method}]].",
            )
            continue
        available = measured_names(site, method) | given_facts(site) | weather_names(site) | SUN
        yield from _chain_faults(recipe, method, available, "flux_density")
    if methods:
        given = (
            given_facts(site) | weather_names(site) | SUN | {"flux_density", "quality", "origin"}
        )
        yield from _chain_faults(recipe, "scaling", given, None)
    yield from _ring_porous_faults(site, recipe)


def measured_names(site, method):
    """Variables of the measured cube of a method."""
    probes = set(probe_names(site, method))
    signals = {c.quantity for c in site.table("channels") if c.kind == "probe" and c.id in probes}
    beside = {c.quantity for c in site.table("channels") if c.quantity in OWNER_OF}
    return signals | beside


def _chain_faults(recipe, chain, available, result):
    """Needs of the stages of a chain that neither the site nor an earlier stage gives."""
    available = set(available)
    for step in recipe.chains[chain]:
        stage = step.stage
        here = f"{recipe.where}, [[{chain}]] step {step.number}"
        method = step.settings.get("method")
        needs = (*stage.needs, *stage.method_needs.get(method, ()))
        for name in dict.fromkeys(needs):
            if name in available or name == stage.table:
                continue
            named = f", method {method!r}," if name in stage.method_needs.get(method, ()) else ""
            yield Fault(
                here,
                f"stage {stage.name!r}{named} needs {name}, which neither the site "
                "nor an earlier stage gives",
                _remedy(stage, method, name, available),
            )
        available |= {*stage.makes, stage.table} - {""}
    if result and result not in available:
        yield Fault(
            f"{recipe.where}, [[{chain}]]",
            f"no stage makes {result}",
            f"Add the stage {result!r} at the end.",
        )


def _remedy(stage, method, name, available):
    remedy = ""
    if name in SOURCES:
        remedy = f"The site would give it in {source_in_words(name)}."
    elif name == "vapour_pressure_deficit":
        remedy = (
            "The site would give it by channels of kind site: vapour_pressure_deficit, or "
            "air_temperature and relative_humidity."
        )
    others = [
        other
        for other in _choices(stage)
        if other != method and set(stage.method_needs.get(other, ())) <= available
    ]
    if others and name in stage.method_needs.get(method, ()):
        remedy += (
            f" Methods that do without: {', '.join(others)}; change it in a copy of the recipe "
            "(`sapflux stages --recipe NAME` prints one)."
        )
    return remedy.strip() or "Add a stage that makes it before this one."


def _choices(stage):
    parameter = stage.settings.get("method")
    return get_args(parameter.annotation) if parameter else ()


def _ring_porous_faults(site, recipe):
    """Ring-porous species under a general coefficient need the site's acknowledgement."""
    steps = [s for s in recipe.chains["heat_dissipation"] if s.stage.name == "flux_density"]
    if not steps:
        return
    method = steps[0].settings.get("method")
    calibrated = {c.species for c in site.table("calibrations") if c.method == "heat_dissipation"}
    probed = {p.tree for p in site.table("probes") if p.method == "heat_dissipation"}
    species_of = {t.tree: t.species for t in site.table("trees")}
    used = {species_of.get(tree) for tree in probed}
    for row, line in zip(site.table("species"), site.rows_at["species"], strict=True):
        general = method == "general" or row.species not in calibrated
        if row.species not in used:
            continue
        where = f"{site.folder}/species.csv, row {line}"
        if method == "species" and row.species not in calibrated:
            yield Fault(
                where,
                f"species {row.species!r} has no calibration and the recipe uses the species' own",
                "Add it to calibrations.csv.",
            )
        elif general and row.anatomy == "ring_porous" and not row.general_calibration_accepted:
            yield Fault(
                where,
                f"species {row.species!r} is ring-porous and would go under the "
                "general calibration, which reads such wood low by a factor of 2 to 5",
                "Add its own to calibrations.csv, or set general_calibration_accepted "
                "to yes to take relative values knowingly.",
            )
