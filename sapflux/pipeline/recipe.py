"""Recipes: how data are treated, read from TOML and bound to the stages' own signatures."""

import inspect
import tomllib
from dataclasses import dataclass, replace
from importlib import resources
from pathlib import Path
from types import MappingProxyType
from typing import Literal, get_args, get_origin

import sapflux.correction
import sapflux.scaling
from sapflux.errors import Fault, RecipeError, nearest
from sapflux.pipeline.agreement import disagreements, followed
from sapflux.pipeline.recipe_parts import number_fitting, part_settings
from sapflux.stage import CHAINS, REGISTRY, Stage

BESIDE = "beside"  # key of a step: methods to run beside its own
ALL = "all"


@dataclass(frozen=True)
class Step:
    """One stage of a chain with all its settings.

    beside : other values of its setting `method`, run side by side with the recipe's own.
    """

    stage: Stage
    settings: MappingProxyType
    number: int  # place in its list, from 1
    beside: tuple = ()

    def line(self):
        """The step as one history line, every setting spelled out."""
        spelled = ", ".join(f"{name}={value!r}" for name, value in self.settings.items())
        return f"{self.stage.chain}: {self.stage.name}({spelled})"

    def plain(self):
        """The step as a recipe would write it, every setting spelled out."""
        listed = ALL if self.beside == (ALL,) else list(self.beside)
        beside = {BESIDE: listed} if self.beside else {}
        return {"stage": self.stage.name, **self.settings, **beside}


@dataclass(frozen=True)
class Recipe:
    """A recipe with every setting resolved."""

    name: str
    title: str
    where: str  # the file, for messages
    chains: MappingProxyType  # chain -> tuple of Step
    join: MappingProxyType
    totals: MappingProxyType

    def resolved(self):
        """The recipe as plain data: what `run.json` keeps and the identity is made of."""
        steps = {chain: [step.plain() for step in steps] for chain, steps in self.chains.items()}
        return {
            "name": self.name,
            "title": self.title,
            **steps,
            "join": dict(self.join),
            "totals": dict(self.totals),
        }

    def alone(self):
        """The recipe with nothing run beside its own methods."""
        chains = {
            chain: tuple(replace(step, beside=()) for step in steps)
            for chain, steps in self.chains.items()
        }
        return replace(self, chains=MappingProxyType(chains))

    def with_method(self, chain, stage, method):
        """The recipe with another method of one stage, and nothing run beside it."""
        other = self.alone()
        steps = tuple(
            replace(step, settings=MappingProxyType({**step.settings, "method": method}))
            if step.stage.name == stage
            else step
            for step in other.chains[chain]
        )
        return replace(other, chains=MappingProxyType({**other.chains, chain: followed(steps)}))

    def unverified(self, chains):
        """Published values that its stages in `chains` rest on, known from memory only."""
        values = [
            value
            for chain in chains
            for step in self.chains[chain]
            for value in step.stage.unverified
        ]
        return list(dict.fromkeys(values))


def recipe_folders():
    """Where recipes are found by name: in the package, or beside it in a checkout."""
    package = Path(str(resources.files("sapflux")))
    return [
        folder for folder in (package / "recipes", package.parent / "pipelines") if folder.is_dir()
    ]


def recipe_names():
    """Names of the recipes that come with the program."""
    return sorted({path.stem for folder in recipe_folders() for path in folder.glob("*.toml")})


def find_recipe(name):
    """Path of a recipe, given by name or as a path to a TOML file.

    RecipeError if there is none.
    """
    path = Path(name)
    if path.suffix == ".toml":
        if path.is_file():
            return path
        raise RecipeError(Fault(str(name), "no such recipe file", "Give the path of a TOML file."))
    for folder in recipe_folders():
        if (folder / f"{name}.toml").is_file():
            return folder / f"{name}.toml"
    raise RecipeError(Fault("--recipe", f"no recipe {name!r}", nearest(name, recipe_names())))


def load_recipe(name="stand_water_use"):
    """A recipe by name or path. RecipeError carries every fault in it."""
    path = find_recipe(name)
    where = f"pipelines/{path.name}" if path.parent in recipe_folders() else str(name)
    try:
        raw = tomllib.loads(path.read_text(encoding="utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise RecipeError(
            Fault(where, f"not readable as TOML: {error}", "Mend that line.")
        ) from None
    return read_recipe(raw, where, path.stem)


def read_recipe(raw, where, name):
    """A recipe from parsed TOML. RecipeError carries every fault in it."""
    faults = []
    known = {"title", "join", "totals", *CHAINS}
    for key in raw.keys() - known:
        faults.append(Fault(where, f"unknown part {key!r}", nearest(key, known)))
    chains = {}
    for chain in CHAINS:
        steps = raw.get(chain, [])
        if not _list_of_tables(steps):
            faults.append(
                Fault(
                    where,
                    f"{chain} is not a list of stages",
                    f"Write each stage under its own [[{chain}]].",
                )
            )
            steps = []
        chains[chain] = tuple(
            step
            for number, table in enumerate(steps, 1)
            if (step := _step(table, chain, number, where, faults))
        )
        faults += _order_faults(chains[chain], where)
        faults += disagreements(chains[chain], steps, where)
        chains[chain] = followed(chains[chain])
    if not any(chains.values()) and not faults:
        faults.append(Fault(where, "the recipe has no stage", "List stages under [[scaling]], ..."))
    recipe = Recipe(
        name=name,
        title=str(raw.get("title", name)),
        where=where,
        chains=MappingProxyType(chains),
        join=MappingProxyType(part_settings(raw, "join", where, faults)),
        totals=MappingProxyType(part_settings(raw, "totals", where, faults)),
    )
    if faults:
        raise RecipeError(faults)
    return recipe


def _list_of_tables(value):
    return isinstance(value, list) and all(isinstance(item, dict) for item in value)


def _step(table, chain, number, where, faults):
    """A resolved step; None where the stage is unknown or a setting is wrong."""
    here = f"{where}, [[{chain}]] step {number}"
    name = table.get("stage")
    stages = {key[1]: stage for key, stage in REGISTRY.items() if key[0] == chain}
    if not isinstance(name, str) or name not in stages:
        what = f"no stage {name!r}" if name is not None else "no 'stage' is named"
        faults.append(Fault(here, what, nearest(str(name), stages)))
        return None
    stage = stages[name]
    before = len(faults)
    settings = stage.defaults()
    for key, value in table.items():
        if key in ("stage", BESIDE):
            continue
        if key not in stage.settings:
            faults.append(
                Fault(
                    here,
                    f"stage {name!r} has no setting {key!r}",
                    nearest(key, stage.settings) if stage.settings else "It has none.",
                )
            )
            continue
        value, problem = _fitting(value, stage.settings[key], stage.limits.get(key))
        if problem:
            faults.append(Fault(here, f"{name}: {key} = {value!r}", problem))
        settings[key] = value
    for key in stage.settings.keys() - settings.keys():
        faults.append(
            Fault(here, f"stage {name!r} needs the setting {key!r}", "It has no default: state it.")
        )
    beside = _beside(table, stage, settings, here, faults)
    if len(faults) > before:
        return None
    return Step(stage, MappingProxyType(settings), number, beside)


def _beside(table, stage, settings, here, faults):
    """Methods to run beside the step's own, as listed; "all" stays for the site to settle."""
    listed = table.get(BESIDE, [])
    parameter = stage.settings.get("method")
    if BESIDE in table and parameter is None:
        faults.append(Fault(here, f"stage {stage.name!r} has one method", f"Remove {BESIDE}."))
        return ()
    if listed == ALL:
        return (ALL,)
    choices = get_args(parameter.annotation) if listed else ()
    others = [method for method in choices if method != settings["method"]]
    if not isinstance(listed, list) or not all(method in others for method in listed):
        faults.append(
            Fault(
                here,
                f"{stage.name}: {BESIDE} = {listed!r}",
                f'It takes "{ALL}", or a list of other methods than the step\'s own: '
                f"{', '.join(others) or 'there is none'}.",
            )
        )
        return ()
    return tuple(dict.fromkeys(listed))


def _fitting(value, parameter, limits):
    """The value in the setting's own type, and what would be right where it does not fit."""
    if get_origin(parameter.annotation) is Literal:
        choices = get_args(parameter.annotation)
        if value not in choices:
            return value, f"It takes one of: {', '.join(map(str, choices))}."
        return value, ""
    default = parameter.default
    kind = float if default is inspect.Parameter.empty else type(default)
    return number_fitting(value, kind, limits)


def _order_faults(steps, where):
    """A stage twice, or one that stands before another it must follow."""
    place = {}
    for step in steps:
        here = f"{where}, [[{step.stage.chain}]] step {step.number}"
        if step.stage.name in place:
            yield Fault(
                here,
                f"stage {step.stage.name!r} stands at step {place[step.stage.name]} already",
                "A correction is applied once: remove one.",
            )
        place.setdefault(step.stage.name, step.number)
    for step in steps:
        for earlier in step.stage.after:
            if place.get(earlier, 0) > step.number:
                yield Fault(
                    f"{where}, [[{step.stage.chain}]] step {step.number}",
                    f"stage {step.stage.name!r} stands before {earlier!r} (step {place[earlier]})",
                    f"{step.stage.name!r} works on what {earlier!r} has made: move it after.",
                )


# The stage modules are imported for what they register.
_ = (sapflux.correction, sapflux.scaling)
