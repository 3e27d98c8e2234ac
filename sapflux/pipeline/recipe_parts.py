"""The parts of a recipe that are no stages: how methods meet, and when a period may be totalled."""

from sapflux.errors import Fault, nearest
from sapflux.pipeline.join import Joined
from sapflux.scaling.completeness import Completeness

JOIN = {"least_coverage": (0.75, 0.0, 1.0)}  # default, lowest, highest
# The two parts of a recipe that are no stages, and where their settings are explained.
PARTS = {"join": Joined, "totals": Completeness}


def known_settings(part):
    """name -> (default, lowest, highest) of a part of a recipe that is no stage."""
    if part == "join":
        return JOIN
    limits = Completeness.limits()
    return {name: (value, *limits[name]) for name, value in Completeness.defaults().items()}


def part_settings(raw, part, where, faults):
    """The settings of a part that is no stage."""
    known = known_settings(part)
    values = {key: default for key, (default, _, _) in known.items()}
    table = raw.get(part, {})
    if not isinstance(table, dict):
        faults.append(Fault(f"{where}, [{part}]", "not a table", f"Write its keys under [{part}]."))
        return values
    for key, value in table.items():
        if key not in known:
            faults.append(
                Fault(f"{where}, [{part}]", f"unknown setting {key!r}", nearest(key, known))
            )
            continue
        value, problem = number_fitting(value, type(values[key]), known[key][1:])
        if problem:
            faults.append(Fault(f"{where}, [{part}]", f"{key} = {value!r}", problem))
        values[key] = value
    return values


def number_fitting(value, kind, limits):
    """The value as `kind`, and what would be right where it is none or beyond its limits."""
    number = isinstance(value, int | float) and not isinstance(value, bool)
    if kind is float and number:
        value = float(value)
    elif type(value) is not kind:
        words = {float: "a number", int: "a whole number", bool: "true or false", str: "text"}
        return value, f"It takes {words.get(kind, kind.__name__)}."
    if limits and not limits[0] <= value <= limits[1]:
        return value, f"It takes {limits[0]:g} to {limits[1]:g}."
    return value, ""
