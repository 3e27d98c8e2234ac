"""`load_site`: a site folder as one validated object, or every fault of it at once."""

import difflib
import tomllib
from pathlib import Path

from pydantic import ValidationError

from sapflux.errors import Fault, SiteError, nearest
from sapflux.site.checks import cross_faults
from sapflux.site.config import Layout, Log, Position, SiteConfig
from sapflux.site.csvfile import Table, read_table, read_text
from sapflux.site.gathering import gathered
from sapflux.site.messages import plain
from sapflux.site.model import Site
from sapflux.site.reading import Reading
from sapflux.site.tables import TABLES

SPREADSHEETS = (".xlsx", ".xls", ".ods")
# Stands in while `[site]` is at fault, so that the tables can be checked all the same.
SOMEWHERE = Position.model_construct(
    name="", latitude_deg=0.0, longitude_deg=0.0, elevation_m=0.0, utc_offset_h=0.0,
    water_year_start="01-01", common_step_min=60,
)  # fmt: skip


def load_site(folder):
    """The `Site` of a folder: `site.toml` and its CSV tables, each table optional.

    Raises SiteError with all faults at once: of the files, of single values, and of what does not
    fit together. Downloads are not opened.
    """
    reading, faults = read_site(folder)
    faults += cross_faults(reading)
    if faults:
        raise SiteError(gathered(faults))
    return reading.site


def read_site(folder):
    """(`Reading`, faults) of a folder, cross checks left out. SiteError if there is no folder."""
    folder = Path(folder)
    if not folder.is_dir():
        what = "is a file" if folder.exists() else "there is no such folder"
        raise SiteError(Fault(str(folder), what, "Name the folder that holds site.toml."))
    config, raw, faults = read_config(folder / "site.toml")
    tables = {}
    for name, row_class in TABLES.items():
        path = folder / f"{name}.csv"
        tables[name] = read_table(path, row_class) if path.exists() else Table(cells={})
        faults += tables[name].faults
    faults += _file_faults(folder, config["logs"])
    whole = {name for name, table in tables.items() if not table.faults}
    whole |= {part for part in ("site", "layouts", "logs") if raw["whole"][part]}
    site = Site(
        folder=folder,
        key=folder.resolve().name,
        position=config["site"] or SOMEWHERE,
        layouts=config["layouts"],
        logs=config["logs"],
        tables={name: table.rows for name, table in tables.items()},
        rows_at={name: table.lines for name, table in tables.items()},
    )
    names = {name: table.cells or {} for name, table in tables.items()}
    for part in ("layouts", "logs"):
        names[part] = {} if raw["names"][part] is None else {"name": raw["names"][part]}
    return Reading(site, names, frozenset(whole)), faults


def read_config(path):
    """(parts, raw, faults) of `site.toml`.

    parts : "site" (None at fault), "layouts" and "logs" (the valid ones by name).
    raw : "names" of all layouts and logs written, None where unreadable; "whole" by part.
    """
    parts = {"site": None, "layouts": {}, "logs": {}}
    raw = {"names": {"layouts": None, "logs": None}, "whole": dict.fromkeys(parts, False)}
    document, fault = _parse(path)
    if fault:
        return parts, raw, [fault]
    known = list(SiteConfig.model_fields)
    faults = [
        Fault(str(path), f"unknown key {name!r}", nearest(name, known))
        for name in document
        if name not in known
    ]
    found = _section(f"{path}, [site]", document.get("site"), Position)
    parts["site"], wrong = found
    raw["whole"]["site"] = not wrong
    faults += wrong
    for part, model in (("layouts", Layout), ("logs", Log)):
        if part not in document and difflib.get_close_matches(part, document, n=1):
            continue  # misspelt, and told as an unknown key: its names are not known
        sections = document.get(part, {})
        if not isinstance(sections, dict):
            faults.append(
                Fault(
                    f"{path}, {part}",
                    f"{part} is not a group of sections",
                    f"Begin each with a line like [{part}.NAME].",
                )
            )
            continue
        before = len(faults)
        for name, section in sections.items():
            made, wrong = _section(f"{path}, [{part}.{name}]", section, model)
            faults += wrong
            if made is not None:
                parts[part][name] = made
        raw["names"][part] = tuple(sections)
        raw["whole"][part] = len(faults) == before
    return parts, raw, faults


def _parse(path):
    if not path.is_file():
        return None, Fault(
            str(path),
            "there is no such file",
            "A site folder needs it; `sapflux init` writes a starter.",
        )
    text, fault = read_text(path)
    if fault:
        return None, fault
    try:
        return tomllib.loads(text.replace("\r\n", "\n")), None
    except tomllib.TOMLDecodeError as error:
        return None, Fault(
            str(path),
            f"it is not valid TOML: {error}",
            "Mend that line; text stands in double quotes, a key stands once.",
        )


def _section(where, section, model):
    """(validated section or None, faults)."""
    if section is None:
        keys = ", ".join(name for name, f in model.model_fields.items() if f.is_required())
        return None, [Fault(where, "the section is missing", f"Add it with the keys {keys}.")]
    if not isinstance(section, dict):
        return None, [
            Fault(
                where,
                f"{section!r} stands where a section of keys is expected",
                "Begin the section with its name in square brackets.",
            )
        ]
    try:
        return model.model_validate(section), []
    except ValidationError as error:
        return None, [
            Fault(where, *plain(entry, _keys(model, entry["loc"]), cells=False))
            for entry in error.errors(include_url=False)
        ]


def _keys(model, loc):
    """The keys that may stand where an unknown one was found."""
    for part in loc[:-1]:
        if part not in model.model_fields:
            break  # an entry of a list: it has no keys
        inner = model.model_fields[part].annotation
        candidates = getattr(inner, "__args__", (inner,))
        model = next((c for c in candidates if hasattr(c, "model_fields")), model)
    return list(model.model_fields)


def _file_faults(folder, logs):
    """CSV files of the folder that are no table, and tables that a log takes for downloads."""
    downloads = set()
    for name, log in logs.items():
        matched = {path for pattern in log.files for path in folder.glob(pattern)}
        downloads |= matched
        own = sorted(p.name for p in matched if p.parent == folder and p.stem in TABLES)
        if own:
            yield Fault(
                f"{folder}/site.toml, [logs.{name}]",
                f"files matches the site's own {', '.join(own)}",
                "Keep downloads in a folder of their own and name it, like 'raw/*.csv'.",
            )
    for path in sorted(folder.iterdir()):
        if path.suffix.lower() in SPREADSHEETS and not path.name.startswith((".", "~$")):
            yield Fault(
                str(path),
                "the file is a spreadsheet, and tables are read as CSV",
                "Save it as CSV in UTF-8 under the name of its table, or keep it in a folder of "
                "its own.",
            )
        if path.name.startswith(".") or path.suffix.lower() != ".csv" or path in downloads:
            continue
        if path.name not in {f"{name}.csv" for name in TABLES}:
            yield Fault(
                str(path),
                f"no table is called {path.name!r}",
                nearest(path.name, [f"{name}.csv" for name in TABLES])
                + " Keep other files in a folder of their own.",
            )
