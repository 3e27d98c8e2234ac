"""Settings of a recipe that must agree with another stage's: they follow it."""

from dataclasses import replace
from types import MappingProxyType

from sapflux.errors import Fault


def followed(steps):
    """The steps of a chain, each setting that follows another stage's with that stage's value."""
    settings = {step.stage.name: step.settings for step in steps}
    made = []
    for step in steps:
        taken = {
            name: settings[stage][other]
            for name, (stage, other) in step.stage.follows.items()
            if stage in settings
        }
        whole = MappingProxyType({**step.settings, **taken})
        made.append(replace(step, settings=whole) if taken else step)
    return tuple(made)


def disagreements(steps, tables, where):
    """A fault for each setting that a recipe writes otherwise than the stage it follows has it.

    steps : the resolved steps of a chain, before `followed`; tables : the chain as written.
    """
    settings = {step.stage.name: step.settings for step in steps}
    for step in steps:
        for name, (stage, other) in step.stage.follows.items():
            if stage not in settings or name not in tables[step.number - 1]:
                continue
            wanted = settings[stage][other]
            if step.settings[name] != wanted:
                yield Fault(
                    f"{where}, [[{step.stage.chain}]] step {step.number}",
                    f"{step.stage.name}: {name} = {step.settings[name]!r}, and {other} of "
                    f"{stage!r} is {wanted!r}",
                    f"Remove {name}: it follows {other} of {stage!r}.",
                )
