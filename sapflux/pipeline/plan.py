"""Whether a recipe can run on a site: checked whole before any data file is opened."""

from typing import get_args

from sapflux.errors import Fault, RecipeError
from sapflux.ingest.cube import METHODS, OWNER_OF, probe_names
from sapflux.ingest.unheated import natural_names
from sapflux.ingest.weather import weather_names
from sapflux.physics.heat_pulse import (
    PUBLISHED_SPACING,
    PUBLISHED_SPACING_SLACK,
    PUBLISHED_WINDOW,
    PUBLISHED_WINDOW_SLACK,
)
from sapflux.pipeline.recipe import ALL
from sapflux.schema import SIGNALS, TRACED, TRACES
from sapflux.site.installations import heating
from sapflux.site.sources import SOURCES, given_facts, source_in_words
from sapflux.units import MM

SUN = {"solar_elevation", "solar_time"}
# What needles and windows may differ by from those of the published wound correction: as needles
# go into wood, and by which it changes by less than 2 %. Source: own judgement.


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
        yield from _chain_faults(recipe, method, given_names(site, method), "flux_density")
    if methods:
        yield from _chain_faults(recipe, "scaling", given_names(site, "scaling"), None)
    yield from _ring_porous_faults(site, recipe)
    yield from _wound_faults(site, recipe)
    yield from _heating_faults(site, recipe)


def methods_beside(site, recipe):
    """What a recipe runs beside its own methods on this site.

    Returns (chosen, left_out), both lists of (chain, stage, method): with `beside = "all"` the
    methods whose needs the site does not meet are left out; those named one by one must be met.
    """
    chosen, left_out = [], []
    for chain in (*methods_of(site), "scaling"):
        available = set(given_names(site, chain))
        for step in recipe.chains[chain]:
            own = step.settings.get("method")
            every = [method for method in _choices(step.stage) if method != own]
            for method in every if step.beside == (ALL,) else step.beside:
                met = set(step.stage.method_needs.get(method, ())) <= available
                met = met and not (_is_published_wound(step, method) and _all_other_layouts(site))
                (chosen if met else left_out).append((chain, step.stage.name, method))
            available |= {*step.stage.makes, step.stage.table} - {""}
    return chosen, left_out


def given_names(site, chain):
    """Names that a chain finds before its first stage."""
    beside = given_facts(site) | weather_names(site) | SUN
    if chain == "scaling":
        return beside | {"flux_density", "quality", "origin"}
    return beside | measured_names(site, chain)


def measured_names(site, method):
    """Variables of the measured cube of a method."""
    probes = set(probe_names(site, method))
    signals = {c.quantity for c in site.table("channels") if c.kind == "probe" and c.id in probes}
    beside = {c.quantity for c in site.table("channels") if c.quantity in OWNER_OF}
    natural = natural_names(site, probes) if method == "heat_dissipation" else set()
    traced = set(TRACED) if signals & set(TRACES) else set()
    return signals | traced | beside | natural


def _chain_faults(recipe, chain, available, result):
    """Needs of the stages of a chain that neither the site nor an earlier stage gives."""
    available = set(available)
    for step in recipe.chains[chain]:
        stage = step.stage
        here = f"{recipe.where}, [[{chain}]] step {step.number}"
        needed = dict.fromkeys(stage.needs, "")
        for method in (step.settings.get("method"), *step.beside):
            for name in stage.method_needs.get(method, ()):
                needed.setdefault(name, method)
        for name, method in needed.items():
            if name in available or name == stage.table:
                continue
            named = f", method {method!r}," if method else ""
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
    elif name in OWNER_OF:
        remedy = f"The site would give it by channels of kind {OWNER_OF[name]}: {name}."
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
    calibrated = _calibrated(site, "continuous")
    probed = {
        p.tree
        for p in site.table("probes")
        if p.method == "heat_dissipation" and heating(p) == "continuous"
    }
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


def _calibrated(site, how_heated):
    """Species that `calibrations.csv` has coefficients of heat dissipation for, so heated."""
    return {
        row.species
        for row in site.table("calibrations")
        if (row.method, row.heating) == ("heat_dissipation", how_heated)
    }


def _heating_faults(site, recipe):
    """Probes heated in cycles that a recipe would read as if heated without a break."""
    steps = {step.stage.name: step for step in recipe.chains["heat_dissipation"]}
    calibrated = _calibrated(site, "intermittent")
    species_of = {t.tree: t.species for t in site.table("trees")}
    for row, line in zip(site.table("probes"), site.rows_at["probes"], strict=True):
        if row.method != "heat_dissipation" or heating(row) == "continuous" or not steps:
            continue
        where, species = f"{site.folder}/probes.csv, row {line}", species_of.get(row.tree)
        if "heating_cycle" not in steps:
            yield Fault(
                where,
                f"probe {row.probe!r} is heated in cycles and the recipe takes no heating_cycle",
                "List the stage 'heating_cycle' after 'heated_difference'.",
            )
        if "flux_density" not in steps:
            continue
        if steps["flux_density"].settings.get("method") == "general":
            yield Fault(
                where,
                f"probe {row.probe!r} is heated in cycles and the recipe takes the general "
                "calibration, which is of continuous heating",
                "Take method species_else_general in a copy of the recipe.",
            )
        elif species not in calibrated:
            yield Fault(
                where,
                f"probe {row.probe!r} is heated in cycles and species {species!r} has no "
                "calibration of such heating: coefficients of continuous heating do not hold",
                "Add one to calibrations.csv with 'intermittent' in the column heating.",
            )


def _is_published_wound(step, method):
    return step.stage.name == "wound" and method == "published"


def _wound_faults(site, recipe):
    """Probes that the published correction was not made for; a strip for another log ratio."""
    if any(
        _is_published_wound(step, method)
        for step in recipe.chains["heat_ratio"]
        for method in (step.settings.get("method"), *step.beside)
    ):
        yield from _other_layouts(site)
    steps = {step.stage.name: step for step in recipe.chains["heat_ratio"]}
    if not {"wound", "log_heat_ratio"} <= steps.keys():
        return
    wound, ratio = steps["wound"], steps["log_heat_ratio"].settings.get("estimator")
    used = wound.settings.get("method") == "strip" or set(wound.beside) & {"strip", ALL}
    if used and wound.settings.get("estimator") != ratio:
        yield Fault(
            f"{recipe.where}, [[heat_ratio]] step {wound.number}",
            f"stage 'wound' corrects a log ratio of estimator {wound.settings.get('estimator')!r}, "
            f"and log_heat_ratio makes one of {ratio!r}",
            "Give both stages the same estimator.",
        )


def _all_other_layouts(site):
    """Whether the published wound correction is for none of the site's heat ratio probes."""
    rows = [row for row in site.table("probes") if row.method == "heat_ratio"]
    return bool(rows) and len(_other_layouts(site)) == len(rows)


def _other_layouts(site):
    """One fault a probe whose needles or window the published wound correction is not for."""
    faults = []
    usual, (begin, end) = PUBLISHED_SPACING / MM, PUBLISHED_WINDOW
    for row, line in zip(site.table("probes"), site.rows_at["probes"], strict=True):
        if row.method != "heat_ratio":
            continue
        needles = [row.spacing_downstream_mm, row.spacing_upstream_mm]
        window = [row.window_from_s, row.window_to_s]
        has = []
        if not _near(needles, [usual, usual], PUBLISHED_SPACING_SLACK / MM):
            has.append(f"needles {' and '.join(map(_written, needles))} mm from the heater")
        if not _near(window, [begin, end], PUBLISHED_WINDOW_SLACK):
            has.append(f"a window of {' to '.join(map(_written, window))} s")
        if has:
            faults.append(Fault(
                f"{site.folder}/probes.csv, row {line}",
                f"probe {row.probe!r} has {' and '.join(has)}, and the published wound correction "
                f"is for {usual:g} mm and {begin:g} to {end:g} s",
                "Take method 'strip' of the stage 'wound' in a copy of the recipe "
                "(`sapflux stages --recipe NAME` prints one).",
            ))  # fmt: skip
    return faults


def _near(given, usual, slack):
    """Whether what is given is about as usual; a blank is not held against it."""
    pairs = zip(given, usual, strict=True)
    return all(one is None or abs(one - other) <= slack + 1e-9 for one, other in pairs)


def _written(value):
    return "?" if value is None else f"{value:g}"
