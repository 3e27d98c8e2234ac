"""What can be told of a site before its data are read: tables, recipe, the heads of its files."""

from sapflux.errors import DataError, Fault, SiteError, nearest
from sapflux.ingest import clock
from sapflux.ingest.declared import MOST_REJECTED, head_faults
from sapflux.ingest.files import match_files, stray_notes
from sapflux.ingest.reasons import commonest
from sapflux.pipeline.notes import notes_of
from sapflux.pipeline.plan import methods_of, plan_faults
from sapflux.pipeline.recipe import load_recipe
from sapflux.site.installations import installed_span
from sapflux.site.inventory import composition
from sapflux.site.load import load_site

M2_PER_HA = 1e4


def check_site(path, recipe="stand_water_use"):
    """Counts and notes of a valid site; SiteError or RecipeError with every fault.

    Reads no more than the heads of the downloads. A plan without logs is valid.
    """
    site = load_site(path)
    recipe = load_recipe(recipe)
    faults, notes, files = header_faults(site, sampled=True)
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


def header_faults(site, sampled=False):
    """(faults, notes, number of files): whether the heads of the files read as they are declared.

    Faults: column names that cannot be found, columns that no file has, logs of which no sampled
    record can be read, and steps between records that are not the log's interval. If `sampled`,
    the notes name files of which many of the first records would be rejected.
    """
    faults, notes, count = list(phase_faults(site)), [], 0
    for name in site.logs:
        try:
            paths = match_files(site, name)
        except DataError as error:
            faults += error.faults
            continue
        count += len(paths)
        notes += stray_notes(site, name)
        told, more = head_faults(site, name, paths, sampled)
        faults += told
        notes += more
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


def silent_logs(site, logs):
    """A fault for each log of which no record was read: the commonest reason and its first line.

    logs : name -> log series, as for the notes below.
    """
    faults = []
    for name, series in logs.items():
        if len(series.end):
            continue
        layout = site.logs[name].layout
        lines = sum(_data_lines(record) for record in series.files)
        outside = sum(record.outside for record in series.files)
        where = f"{site.folder}/site.toml, [logs.{name}]"
        worst = commonest(series.rejected, name, layout)
        what, right = "its files hold no line of data", "Put its downloads there."
        if worst and worst.count > outside:
            where = f"{site.folder}/{worst.file}, line {worst.line}"
            what = f"{worst.count} of {lines} data lines are rejected: {worst.reason}"
            right = worst.remedy
        elif outside:
            what = f"{outside} of {lines} data lines lie outside from and to of all its channels"
            right = "Correct from and to in channels.csv, or 'clock' and 'time_format' of the log."
        faults.append(Fault(where, f"log {name!r} gives no record: {what}", right))
    return faults


def uninstalled_notes(site, logs):
    """Notes on logs with records from outside all installations of the probes they carry."""
    notes = []
    for name, series in logs.items():
        carried = {c.id for c in site.table("channels") if c.kind == "probe" and c.log == name}
        if not carried or not len(series.end):
            continue
        first, last = installed_span(site, carried)
        outside = (series.end <= first) | (series.end > last)
        if outside.any():
            begin = str(series.end[outside][0]).replace("T", " ")
            notes.append(
                f"{int(outside.sum())} records of log {name!r} lie outside the installations of "
                f"its probes, the first at {begin} UTC: is its clock right, are the dates in "
                "probes.csv?"
            )
    return notes


def displaced_notes(site, logs):
    """Notes on logs with records that came to nothing because another is nearer to their step."""
    return [
        f"{series.lost} record{'s' if series.lost > 1 else ''} of log {name!r} fell on a step that "
        f"another record is nearer to: see rejected.csv; is interval_min "
        f"({site.logs[name].interval_min:g}) right?"
        for name, series in logs.items()
        if series.lost
    ]


def rejection_notes(site, logs):
    """Notes on files of which more than MOST_REJECTED of the data lines are rejected."""
    notes = []
    for name, series in logs.items():
        for record in series.files:
            lines = _data_lines(record)
            if record.rejected <= MOST_REJECTED * lines:
                continue
            here = [line for line in series.rejected if line[0] == record.path]
            worst = commonest(here, name, site.logs[name].layout)
            notes.append(
                f"{site.folder}/{record.path}: {100 * record.rejected / lines:.0f} % of its "
                f"{lines} data lines are rejected, most often (first in line {worst.line}): "
                f"{worst.reason.rstrip('.')}. {worst.remedy}"
            )
    return notes


def _data_lines(record):
    """Lines of a file that are neither header nor blank."""
    return record.lines - record.header - record.blank
