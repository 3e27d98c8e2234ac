"""The identity of a run: one hash over inputs, tables, recipe and version; and JSON that is
written the same whatever the order things were found in."""

import hashlib
import json
import math
from collections.abc import Mapping
from datetime import date
from pathlib import Path, PurePath, PurePosixPath, PureWindowsPath

CHUNK = 1 << 20
DIGITS = 16


def file_sha256(path):
    """SHA-256 of a file's bytes, as 64 hex digits. Reads it in pieces; OSError if it cannot."""
    digest = hashlib.sha256()
    with Path(path).open("rb") as file:
        while piece := file.read(CHUNK):
            digest.update(piece)
    return digest.hexdigest()


def identity(inputs, tables, recipe, version):
    """The identity of a run: 16 hex digits.

    inputs : path of a raw file -> its SHA-256; tables : name of a site table -> its SHA-256;
    recipe : the resolved recipe, every setting spelled out; version : of the program.
    The same whatever the order of the mappings and wherever the files lie: of an absolute path
    only the file's name counts. ValueError where the recipe holds an infinite number.

    >>> identity({"logs/a.dat": "00"}, {}, {}, "1") == identity({"/b/a.dat": "00"}, {}, {}, "1")
    False
    >>> identity({"/x/a.dat": "00"}, {}, {}, "1") == identity({"/y/a.dat": "00"}, {}, {}, "1")
    True
    """
    whole = {
        # pairs, not a mapping: two files of one name in two folders are two files
        "inputs": sorted([portable_name(path), digest] for path, digest in inputs.items()),
        "tables": sorted([str(name), digest] for name, digest in tables.items()),
        "recipe": recipe,
        "version": str(version),
    }
    return hashlib.sha256(canonical_json(whole).encode("utf-8")).hexdigest()[:DIGITS]


def portable_name(path):
    """A path as it may stand in a result: relative with slashes, or the name alone if absolute.

    >>> portable_name("logs\\\\a.dat"), portable_name("C:/data/a.dat"), portable_name("/data/a.dat")
    ('logs/a.dat', 'a.dat', 'a.dat')
    """
    text = str(path)
    if PurePosixPath(text).is_absolute() or PureWindowsPath(text).anchor:
        return PureWindowsPath(text).name
    return text.replace("\\", "/")


def canonical_json(value):
    """A value as JSON on one line: sorted keys, no blanks, ASCII, NaN as null.

    >>> canonical_json({"b": (1, float("nan")), "a": "ü"})
    '{"a":"\\\\u00fc","b":[1,null]}'
    """
    return json.dumps(plain(value), sort_keys=True, separators=(",", ":"), allow_nan=False)


def write_json(value, path):
    """Write a value as JSON for people to read: sorted keys, indented by two, NaN as null."""
    text = json.dumps(plain(value), sort_keys=True, indent=2, ensure_ascii=False, allow_nan=False)
    Path(path).write_text(text + "\n", encoding="utf-8", newline="\n")


def plain(value):
    """A value made of dict, list, str, int, float, bool and None alone; NaN becomes None.

    Takes mappings, sequences, sets, dates, paths, pydantic models, numpy scalars and arrays.
    ValueError for an infinite number, TypeError for anything else.
    """
    if value is None or isinstance(value, str | bool | int):
        return value
    if isinstance(value, float):
        if math.isinf(value):
            raise ValueError("an infinite number has no place in JSON")
        return None if math.isnan(value) else float(value)
    if isinstance(value, Mapping):
        named = {str(key): plain(item) for key, item in value.items()}
        if len(named) < len(value):
            raise ValueError("two keys are the same when written as text")
        return named
    if isinstance(value, set | frozenset):
        return sorted(plain(item) for item in value)
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    if isinstance(value, date):  # and datetime
        return value.isoformat()
    if isinstance(value, PurePath):
        return value.as_posix()
    if hasattr(value, "model_dump"):
        return plain(value.model_dump())
    if type(value).__module__ == "numpy":
        return str(value) if value.dtype.kind in "mM" else plain(value.tolist())
    raise TypeError(f"cannot be written as JSON: {type(value).__name__}")
