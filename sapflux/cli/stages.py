"""`sapflux stages`: what each stage does, with settings, units and sources."""

import inspect
import sys
from typing import Literal, get_args, get_origin

import sapflux.correction
import sapflux.scaling
from sapflux.cli.text import columns, print_json
from sapflux.errors import nearest
from sapflux.stage import CHAINS, REGISTRY
from sapflux.units import unit_of_key

_ = (sapflux.correction, sapflux.scaling)  # imported for the stages they register


def stages(options):
    """List all stages, or explain one in full; exit code 2 for an unknown name."""
    found = [stage for (_, name), stage in REGISTRY.items() if options.name in (None, name)]
    if not found:
        known = {name for _, name in REGISTRY}
        print(f"no stage {options.name!r}. {nearest(options.name, known)}", file=sys.stderr)
        return 2
    if options.json:
        print_json([describe(stage) for stage in found])
    elif options.name:
        for stage in found:
            _explain(stage)
    else:
        _list(found)
    return 0


def describe(stage):
    """A stage as plain data."""
    return {
        "stage": stage.name,
        "chain": stage.chain,
        "does": inspect.getdoc(stage.function).splitlines()[0],
        "reads": list(stage.reads),
        "makes": list(stage.makes),
        "flags": list(stage.flags),
        "table": stage.table,
        "settings": [
            {
                "setting": name,
                "default": None if parameter.default is parameter.empty else parameter.default,
                "unit": unit_of_key(name),
                "takes": _takes(stage, name, parameter),
            }
            for name, parameter in stage.settings.items()
        ],
        "text": inspect.getdoc(stage.function),
    }


def _takes(stage, name, parameter):
    if get_origin(parameter.annotation) is Literal:
        return ", ".join(map(str, get_args(parameter.annotation)))
    if name in stage.limits:
        low, high = stage.limits[name]
        return f"{low:g} to {high:g}"
    return ""


def _list(found):
    for chain in CHAINS:
        rows = [
            [stage.name, inspect.getdoc(stage.function).splitlines()[0]]
            for stage in found
            if stage.chain == chain
        ]
        print(f"[[{chain}]]")
        for line in columns(rows, ["stage", "what it gives"]):
            print(f"  {line}")
        print()
    print("sapflux stages NAME explains one with its settings and sources.")


def _explain(stage):
    print(f"{stage.name}  ([[{stage.chain}]])\n")
    print(inspect.getdoc(stage.function))
    rows = [
        [
            row["setting"],
            "needed" if row["default"] is None else row["default"],
            row["unit"],
            row["takes"],
        ]
        for row in describe(stage)["settings"]
    ]
    if rows:
        print("\nSettings")
        for line in columns(rows, ["setting", "default", "unit", "takes"]):
            print(f"  {line}")
    if stage.flags:
        print(f"\nFlags: {', '.join(stage.flags)}")
    print()
