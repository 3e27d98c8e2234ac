"""What a stage is: a plain function, registered under its own name.

Parameters before `/` are found by name: variables and coordinates of the cube, weather on the
records, `solar_elevation`, `solar_time`, or the table of this stage or an earlier one; one with a
default may be absent. Parameters after `*` are settings of the recipe, and carry their unit in
their name. A stage looks at one record; or at a window, whose reach it declares; or it
*summarises*: `summarise` reduces a block to table rows, `fit` is called once on the rows of all
probes and the whole span, and the stage then evaluates the fitted table on a block.

A stage returns one array for one name, or a dict of all that it declared. It turns a value into
NaN only where it also returns a masking flag.
"""

import inspect
from collections.abc import Callable
from dataclasses import dataclass, field

# The order of work: every stage of each chain, in the order in which a recipe must list those it
# takes. Faults first, then the zero, then geometry, then the calibration; then gaps, the stem, the
# tree, the stand. A stage works on what those before it have made.
ORDER = {
    "heat_dissipation": (
        "heated_difference",
        "heating_cycle",
        "natural_gradient",
        "screen_power_loss",
        "screen_frost",
        "zero_flow_difference",
        "sapwood_contact",
        "flow_index",
        "ageing",
        "flux_density",
    ),
    "heat_ratio": (
        "rises",
        "log_heat_ratio",
        "screen_frost",
        "thermal_diffusivity",
        "zero_flow_ratio",
        "heat_pulse_velocity",
        "wound",
        "high_flow",
        "flux_density",
    ),
    "scaling": (
        "short_gaps",
        "probe_flow",
        "tree_flow",
        "stand_transpiration",
        "dormancy",
    ),
}
CHAINS = tuple(ORDER)


@dataclass(frozen=True)
class Stage:
    """A registered stage. Read by the runner; the function itself stays untouched."""

    name: str
    function: Callable
    chain: str
    makes: tuple
    flags: tuple
    table: str = ""
    summarise: Callable | None = None
    fit: Callable | None = None
    reach_s: Callable | None = None
    settled: Callable | None = None
    method_needs: dict = field(default_factory=dict)
    limits: dict = field(default_factory=dict)
    unverified: tuple = ()
    follows: dict = field(default_factory=dict)

    @property
    def after(self):
        """Stages that, where the recipe lists them, must come earlier than this one."""
        order = ORDER.get(self.chain, ())
        return order[: order.index(self.name)] if self.name in order else ()

    @property
    def needs(self):
        """Names that must be there (positional parameters without a default)."""
        return tuple(n for n, p in _positional(self.function) if p.default is p.empty)

    @property
    def reads(self):
        """All names the stage may read, of its own and of its `summarise`."""
        names = [n for n, _ in _positional(self.function)]
        if self.summarise:
            names += [n for n, _ in _positional(self.summarise) if n not in names]
        return tuple(names)

    @property
    def settings(self):
        """name -> inspect.Parameter of each setting, in order."""
        parameters = inspect.signature(self.function).parameters.values()
        return {p.name: p for p in parameters if p.kind is p.KEYWORD_ONLY}

    def defaults(self):
        """The settings as they stand when the recipe is silent."""
        return {n: p.default for n, p in self.settings.items() if p.default is not p.empty}


REGISTRY = {}  # (chain, name) -> Stage


def stage(*, chain, makes=(), flags=(), **declared):
    """Register a function as a stage and return it untouched.

    chain : name or names of the recipe lists it may stand in (see `ORDER`).
    makes, flags : variables and quality flags it returns.
    table : name of its table; summarise, fit : the functions that make it (see module).
    reach_s : settings -> seconds it looks to either side of a record, or of a row's start.
    settled : facts on one record a day, and `probe` -> the table where they settle it, so that the
        records need not be summarised; else None.
    method_needs : method -> names needed by that `method` setting only.
    limits : setting -> (lowest, highest) allowed.
    unverified : published values that it rests on and that are known from memory only, each as
        what it is, source in brackets.
    follows : setting -> (stage, setting) of the same chain whose value it takes where the recipe
        lists that stage; a recipe that writes another is refused.

    ValueError if the chain has a stage of that name, or `ORDER` gives it no place in the chain.
    """

    def register(function):
        name = function.__name__
        for one in _names(chain):
            if (one, name) in REGISTRY:
                raise ValueError(f"stage {name!r} stands twice in {one}")
            if one in ORDER and name not in ORDER[one]:
                raise ValueError(f"stage {name!r} has no place in the order of work of {one}")
            REGISTRY[one, name] = Stage(
                name=name,
                function=function,
                chain=one,
                makes=_names(makes),
                flags=_names(flags),
                **declared,
            )
        return function

    return register


def _names(value):
    return (value,) if isinstance(value, str) else tuple(value)


def _positional(function):
    parameters = inspect.signature(function).parameters.values()
    return [(p.name, p) for p in parameters if p.kind is p.POSITIONAL_ONLY]


def bind(function, available, settings):
    """Call `function` with the arrays and settings that its signature names.

    `available` maps names to arrays or tables; KeyError names one that is needed and missing.
    """
    arguments = []
    for name, parameter in _positional(function):
        if name in available:
            arguments.append(available[name])
        elif parameter.default is parameter.empty:
            raise KeyError(name)
        else:
            arguments.append(parameter.default)
    named = {
        p.name: settings[p.name]
        for p in inspect.signature(function).parameters.values()
        if p.kind is p.KEYWORD_ONLY and p.name in settings
    }
    return function(*arguments, **named)
