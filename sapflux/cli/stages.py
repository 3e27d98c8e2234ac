"""`sapflux stages`: what each stage does, with settings, units and sources."""

import inspect
import re
import sys
from typing import Literal, get_args, get_origin

import sapflux.correction
import sapflux.scaling
from sapflux.cli import DONE, USAGE
from sapflux.cli.text import columns, print_json
from sapflux.errors import nearest
from sapflux.pipeline.recipe import find_recipe
from sapflux.pipeline.recipe_parts import PARTS, known_settings
from sapflux.site.quantities import table_lines
from sapflux.stage import ORDER, REGISTRY

_ = (sapflux.correction, sapflux.scaling)  # imported for the stages they register


def stages(options):
    """List all stages, or explain one in full; exit code 2 for an unknown name."""
    if options.quantities:
        print("\n".join(table_lines()))
        return DONE
    if options.recipe:
        print(find_recipe(options.recipe).read_text(encoding="utf-8"), end="")
        return DONE
    found = [stage for (_, name), stage in REGISTRY.items() if options.name in (None, name)]
    parts = [part for part in PARTS if options.name in (None, part, *known_settings(part))]
    if not found and not parts:
        known = {name for _, name in REGISTRY} | PARTS.keys()
        print(f"no stage {options.name!r}. {nearest(options.name, known)}", file=sys.stderr)
        return USAGE
    if options.json:
        print_json([*map(describe, found), *map(describe_part, parts)])
    elif options.name:
        for description in [*map(describe, found), *map(describe_part, parts)]:
            _explain(description)
    else:
        _list(found)
    return DONE


def describe_part(part):
    """A part of a recipe that is no stage, as plain data."""
    settings = [
        {"setting": name, "default": default, "unit": unit_in(PARTS[part], name),
         "takes": f"{low:g} to {high:g}"}
        for name, (default, low, high) in known_settings(part).items()
    ]  # fmt: skip
    return {"stage": f"[{part}]", "chain": "", "flags": [], "unverified": [], "settings": settings,
            "text": inspect.getdoc(PARTS[part])}  # fmt: skip


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
        "unverified": list(stage.unverified),
        "settings": [
            {
                "setting": name,
                "default": None if parameter.default is parameter.empty else parameter.default,
                "unit": unit_in(stage.function, name),
                "takes": _takes(stage, name, parameter),
            }
            for name, parameter in stage.settings.items()
        ],
        "text": inspect.getdoc(stage.function),
    }


def unit_in(explained, name):
    """The unit that a docstring gives a setting: `name : type [unit]`."""
    found = re.search(rf"^{name} : [^\n]*\[([^\]]+)\]", inspect.getdoc(explained), re.M)
    return found.group(1) if found else ""


def _takes(stage, name, parameter):
    if get_origin(parameter.annotation) is Literal:
        return ", ".join(map(str, get_args(parameter.annotation)))
    if name in stage.limits:
        low, high = stage.limits[name]
        return f"{low:g} to {high:g}"
    return ""


def _list(found):
    by_name = {(stage.chain, stage.name): stage for stage in found}
    for chain, names in ORDER.items():
        rows = [
            [name, inspect.getdoc(by_name[chain, name].function).splitlines()[0]]
            for name in names
            if (chain, name) in by_name
        ]
        print(f"[[{chain}]]")
        for line in columns(rows, ["stage", "what it gives"]):
            print(f"  {line}")
        print()
    unverified = [[stage.name, value] for stage in by_name.values() for value in stage.unverified]
    if unverified:
        print("Unverified: published values known from memory only")
        for line in columns(unverified, ["stage", "value"]):
            print(f"  {line}")
        print()
    print("[join], [totals]")
    print("  the two parts that are no stages: how methods meet, and when a period may be totalled")
    print("\nsapflux stages NAME explains one with its settings and sources.")


def _explain(found):
    print(f"{found['stage']}  ([[{found['chain']}]])\n" if found["chain"] else found["stage"])
    print(found["text"])
    rows = [
        [row["setting"], "needed" if row["default"] is None else row["default"], row["unit"],
         row["takes"]]
        for row in found["settings"]
    ]  # fmt: skip
    if rows:
        print("\nSettings")
        for line in columns(rows, ["setting", "default", "unit", "takes"]):
            print(f"  {line}")
    if found["flags"]:
        print(f"\nFlags: {', '.join(found['flags'])}")
    if found["unverified"]:
        print("\nUnverified: published values known from memory only")
        for value in found["unverified"]:
            print(f"  {value}")
    print()
