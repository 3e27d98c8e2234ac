"""What can be told of a site before its data are read: tables, recipe, headers."""

from sapflux.errors import DataError, Fault, SiteError, nearest
from sapflux.ingest import clock
from sapflux.ingest.logs import match_files, read_header
from sapflux.pipeline.notes import notes_of
from sapflux.pipeline.plan import methods_of, plan_faults
from sapflux.pipeline.recipe import load_recipe
from sapflux.site.inventory import composition
from sapflux.site.load import load_site

M2_PER_HA = 1e4


def check_site(path, recipe="stand_water_use"):
    """Counts and notes of a valid site; SiteError or RecipeError with every fault.

    Reads the headers of the downloads only. A plan without logs is valid.
    """
    site = load_site(path)
    recipe = load_recipe(recipe)
    faults, notes, files = header_faults(site)
    faults += plan_faults(site, recipe)
    if faults:
        raise SiteError(faults)
    notes += notes_of(site, recipe)
    if not site.logs:
        notes.append("a plan without logs: it can be checked, but there is nothing to run")
    elif not methods_of(site):
        notes.append("no channel carries a sap-flow signal yet")
    return {
        "site": site.position.name,
        "probes": len({row.probe for row in site.table("probes")}),
        "trees": len(site.table("trees")),
        "stands": len({row.stand for row in site.table("trees")}),
        "logs": len(site.logs),
        "files": files,
        "strata": [_stratum(*key, part) for key, part in composition(site).items()],
        "notes": notes,
    }


def _stratum(stand, species, part):
    """What the inventory says of a species in a stand, in the units of foresters."""
    return {
        "stand": stand,
        "species": species,
        "stems": part.stems,
        "stems_per_ha": part.stems_per_ha,
        "basal_area_m2_ha": part.basal_area_m2_ha,
        "sapwood_area_m2_ha": part.sapwood_per_ground * M2_PER_HA,
    }


def header_faults(site):
    """(faults, notes, number of files): whether the logs have the columns the channels name."""
    faults, notes, count = [], [], 0
    faults += phase_faults(site)
    for name, log in site.logs.items():
        layout = site.layouts[log.layout]
        try:
            paths = match_files(site, name)
        except DataError as error:
            faults += error.faults
            continue
        count += len(paths)
        headers = {}
        for path in paths:
            try:
                headers[path] = list(read_header(path, layout))
            except DataError as error:
                notes += [str(fault) for fault in error.faults]
        known = {column for header in headers.values() for column in header}
        if not headers:
            continue
        wanted = list(layout.time_columns)
        if layout.long:
            wanted += [*layout.long.name_columns, layout.long.value_column]
        for column in wanted:
            if column not in known:
                faults.append(
                    Fault(
                        f"{site.folder}/site.toml, [layouts.{log.layout}]",
                        f"no file of log {name!r} has the column {column!r}",
                        nearest(column, known),
                    )
                )
        if not layout.long:
            faults += _channel_faults(site, name, known)
    return faults, notes, count


def phase_faults(site):
    """Logs of probes whose whole intervals are not those of the site's standard time."""
    carried = {c.log for c in site.table("channels") if c.kind == "probe"}
    for name in sorted(carried & site.logs.keys()):
        log = site.logs[name]
        interval_s = round(log.interval_min * 60)
        shift_s = clock.standard_offset(log.clock) / clock.SECOND
        off_s = (site.offset.astype(int) - shift_s) % interval_s
        if off_s:
            yield Fault(
                f"{site.folder}/site.toml, [logs.{name}]",
                f"its whole intervals end {off_s / 60:g} min after those of the site's "
                f"standard time (utc_offset_h {site.position.utc_offset_h:g})",
                "Let utc_offset_h and the log's clock differ by whole intervals.",
            )


def unheard_channels(site, logs):
    """Notes on channels whose column is in no record read: a long table names them by its rows."""
    notes = []
    for row, line in zip(site.table("channels"), site.rows_at["channels"], strict=True):
        if row.log in logs and row.column not in logs[row.log].values:
            known = logs[row.log].values.keys()
            hint = nearest(row.column, known) if known else "The log holds no record."
            notes.append(f"{site.folder}/channels.csv, row {line}: log {row.log!r} has no value of "
                         f"{row.column!r}. {hint}")  # fmt: skip
    return notes


def _channel_faults(site, log, known):
    for row, line in zip(site.table("channels"), site.rows_at["channels"], strict=True):
        if row.log == log and row.column not in known:
            yield Fault(
                f"{site.folder}/channels.csv, row {line}",
                f"no file of log {log!r} has a column {row.column!r}",
                nearest(row.column, known),
            )
