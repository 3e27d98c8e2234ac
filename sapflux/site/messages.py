"""Faults of validation in plain words: what was written, and what would be right."""

from sapflux.errors import nearest

BLANK = "A cell that is not known stays blank."

# Rules on text, by field: what a value that breaks the pattern should have looked like.
PATTERNS = {
    "water_year_start": "Write month and day of its first day, like '10-01'.",
    "leaf_on": "Write month and day, like '04-20', or leave it blank.",
    "leaf_off": "Write month and day, like '10-15', or leave it blank.",
    "clock": "Write 'utc', a fixed offset like 'utc+1' or 'utc-3.5', or the civil time of a zone "
    "like 'civil:Europe/Vienna'.",
}
BOUNDS = {
    "greater_than": ("gt", "above"),
    "greater_than_equal": ("ge", "of at least"),
    "less_than": ("lt", "below"),
    "less_than_equal": ("le", "of at most"),
}
KINDS = {
    "float": "a number",
    "int": "a whole number",
    "string": "text in quotes",
    "bool": "true or false, without quotes",
    "tuple": "a list in square brackets",
    "dict": "a section of keys",
    "model": "a section of keys",
}


def plain(error, known, *, cells):
    """(what, remedy) of one entry of pydantic's `errors()`.

    known : the names that would have been right where the entry complains of a name.
    cells : True for a table's cells, which are text; False for keys of `site.toml`.
    """
    kind, value, context = error["type"], error["input"], error.get("ctx", {})
    names = [part for part in error["loc"] if isinstance(part, str)]
    name = ".".join(names)
    word = "column" if cells else "key"
    said = f"{name} is {shown(value)}"
    if kind == "missing":
        if cells:
            return f"{name} is blank", "Give its value: the row has no meaning without it."
        return f"the key {name!r} is missing", "Add it."
    if kind == "extra_forbidden":
        return f"unknown {word} {name!r}", nearest(names[-1], known)
    if kind == "value_error":
        first, *rest = context["error"].args
        return f"{name}: {first}" if name else str(first), " ".join(map(str, rest))
    if kind == "literal_error":
        return said, _choices(value, context["expected"])
    if kind in BOUNDS:
        key, phrase = BOUNDS[kind]
        return said, f"Give {KINDS['float']} {phrase} {context[key]:g}."
    if kind == "finite_number":
        return said, f"Give a finite number. {BLANK}" if cells else "Give a finite number."
    if kind == "string_pattern_mismatch":
        return said, PATTERNS[names[-1]]
    if kind == "string_too_short":
        return f"{name} is blank", "Give its value."
    if kind in ("too_short", "too_long"):
        held = context["actual_length"] or "no"
        least, most = context.get("min_length"), context.get("max_length")
        bound = f"at least {least}" if most is None else f"at most {most}"
        return f"{name} has {held} entries", f"Give {bound}."
    return said, _type_remedy(kind, value, cells)


def shown(value):
    """A value as a message shows it.

    >>> shown("7,5")
    "'7,5'"
    >>> shown({"a": 1})
    'a section of keys'
    """
    if isinstance(value, dict):
        return "a section of keys"
    if isinstance(value, bool):
        return str(value).lower()
    return repr(value)


def _choices(value, expected):
    """The remedy where only some words are right; pydantic lists them as "'a', 'b' or 'c'"."""
    words = [part.strip().strip("'\"") for part in expected.replace("' or '", "', '").split("', '")]
    if all(word.replace("_", "").isalnum() for word in words):
        return nearest(str(value), words)
    return f"Known: {' '.join(repr(word) for word in words)}."  # marks, not words


def _type_remedy(kind, value, cells):
    start = kind.split("_")[0]
    if start == "bool" and cells:
        return "Write yes or no."
    if start in ("float", "int") and cells:
        if "," in str(value):
            return (
                "Write the decimal mark as a point, and part several numbers by blanks where a "
                "column takes several."
            )
        return f"Give {KINDS[start]}. {BLANK}"
    return f"Give {KINDS.get(start, 'a value of another type')}."
