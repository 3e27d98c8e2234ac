"""Text of a site folder: its CSV tables and `site.toml`, written."""

import csv
import io
import json
import re

from pydantic import BaseModel


def csv_text(columns, rows):
    """A CSV table as text, lines ended by a line feed.

    >>> csv_text(["a", "b"], [["1", "x, y"]])
    'a,b\\n1,"x, y"\\n'
    """
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(rows)
    return out.getvalue()


def config_text(comment, position, layouts, logs, skip=()):
    """`site.toml` with those parts; fields at their defaults and those in `skip` are left out.

    comment : lines of text for its top; position : `Position`; layouts, logs : name -> object.
    """
    lines = [*(f"# {line}" for line in comment), "", "[site]", *_lines(position, ())]
    for kind, parts in (("layouts", layouts), ("logs", logs)):
        for name, part in parts.items():
            lines += ["", f"[{kind}.{_key(name)}]", *_lines(part, skip)]
    return "\n".join(lines) + "\n"


def _lines(model, skip):
    """The fields of a config object that differ from their defaults, as lines of TOML."""
    return [f"{name} = {_value(value)}" for name, value in _given(model, skip)]


def _given(model, skip=()):
    for name, field in type(model).model_fields.items():
        value = getattr(model, name)
        if name not in skip and (field.is_required() or value != field.default):
            yield name, value


def _value(value):
    if isinstance(value, BaseModel):
        return "{ " + ", ".join(f"{name} = {_value(part)}" for name, part in _given(value)) + " }"
    if isinstance(value, tuple):
        return f"[{', '.join(_value(part) for part in value)}]"
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False)
    return repr(value)


def _key(name):
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else json.dumps(name, ensure_ascii=False)
