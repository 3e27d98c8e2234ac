"""What a run writes: every file of `<out>/<site>/`."""

from datetime import UTC, datetime

import numpy as np

import sapflux
from sapflux.ingest.ledger import conflicts_table, ledger_table, rejected_table
from sapflux.pipeline import netcdf
from sapflux.pipeline.identity import file_sha256, identity, write_json
from sapflux.pipeline.night_columns import night_tables
from sapflux.pipeline.plan import methods_of
from sapflux.pipeline.tables import write_csv

# Every file a run may write, and what it says of it on screen.
FILES = {
    "season.csv": "totals over the days that may be totalled",
    "daily.csv": "transpiration by day",
    "monthly.csv": "by month",
    "water_year.csv": "by water year",
    "tree_daily.csv": "water use of each instrumented tree",
    "installations.csv": "the life of each probe",
    "power_off_nights.csv": "every night with a heater off on purpose",
    "zero_flow_nights.csv": "every night looked at for the baseline",
    "diffusivity_nights.csv": "every night looked at for the diffusivity in place",
    "zero_ratio_nights.csv": "every night looked at for the ratio at zero flow",
    "zero_flow_nights_beside.csv": "the same by the methods run beside the recipe's",
    "zero_ratio_nights_beside.csv": "nights of the ratio at zero flow by the methods beside",
    "diffusivity_nights_beside.csv": "nights of the diffusivity by the methods beside",
    "power_off_nights_beside.csv": "nights of the natural gradient by the methods beside",
    "methods_beside.csv": "what other methods of a stage make of the stands, in mm",
    "probe_methods_beside.csv": "and of each probe, by month, in mm",
    "ageing_controls.csv": "older and newer probes compared, and the sensitivity lost with age",
    "ledger.csv": "what became of every line",
    "rejected.csv": "lines that gave no data, and why",
    "conflicts.csv": "cells that two downloads give differently",
    "probes.nc": "flux density of every probe",
    "trees.nc": "sap flow of every tree",
    "stand.nc": "transpiration of every stand and species",
    "origin.nc": "file and line of every kept sample",
    "heat_dissipation.nc": "signals at the native step",
    "heat_ratio.nc": "signals at the native step",
    "run.json": "version, identity, recipe, inputs",
    "timings.json": "seconds of each part",
}


def input_hashes(found):
    """Path within the site folder -> SHA-256 of every raw file."""
    return {r.path: r.sha256 for series in found.logs.values() for r in series.files}


def table_hashes(site):
    """Name -> SHA-256 of `site.toml` and of every table."""
    paths = [site.folder / "site.toml", *(site.folder / f"{name}.csv" for name in site.tables)]
    return {path.name: file_sha256(path) for path in paths if path.is_file()}


def run_identity(site, recipe, found):
    """The identity of the run: inputs, tables, resolved recipe and version."""
    return identity(input_hashes(found), table_hashes(site), recipe.resolved(), sapflux.__version__)


def write_run(folder, site, recipe, found, identity_of_run):
    """Write every file of the run into an empty folder."""
    for name, frame in _frames(found).items():
        write_csv(frame, folder / f"{name}.csv", name)
    attributes = {
        "identity": identity_of_run,
        "history": found.history,
        "recipe": recipe.resolved(),
        "inputs": input_hashes(found),
        "date_created": datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ"),
    }
    for name, dataset in _datasets(found, site, attributes).items():
        netcdf.write_netcdf(dataset, folder / f"{name}.nc")
    write_json(_record(site, recipe, found, identity_of_run, folder), folder / "run.json")
    write_json(found.seconds, folder / "timings.json")


def _frames(found):
    series = list(found.logs.values())
    return {
        **found.tables,
        **night_tables(found.evidence, found.beside.evidence if found.beside else ()),
        "ledger": ledger_table(*series),
        "rejected": rejected_table(*series),
        "conflicts": conflicts_table(*series),
    }


def _datasets(found, site, attributes):
    made = {"probes": netcdf.probes_dataset(found.probes, site, attributes)}
    if found.trees is not None:
        made["trees"] = netcdf.trees_dataset(found.trees, site, attributes)
    if found.stand is not None:
        made["stand"] = netcdf.stand_dataset(found.stand, site, attributes)
    several = len({method for method, _ in found.native}) < len(found.native)
    for (method, interval_s), dataset in found.native.items():
        name = f"{method}_{interval_s}s" if several else method
        made[name] = netcdf.native_dataset(dataset, site, attributes)
    samples = {name: _samples(series) for name, series in found.logs.items()}
    made["origin"] = netcdf.origin_dataset(netcdf.origin_records(samples), site, attributes)
    return made


def _samples(series):
    """(ends, interval, files, lines) of every kept sample of a log, one a line it came from."""
    names = np.array([record.path for record in series.files], dtype=object)
    file, line, end = series.file, series.line, series.end
    if line.ndim == 2:
        row = np.repeat(np.arange(len(end)), line.shape[1])
        pairs = np.column_stack([row, file.ravel(), line.ravel()])
        row, file, line = np.unique(pairs[pairs[:, 2] > 0], axis=0).T
        end = end[row]
    return end, series.interval_s, names[file], line


def _span(site, found):
    """First and last day of the records, standard time, the last exclusive."""
    ends = found.probes["time"].values.astype("datetime64[s]")
    days = site.day_of(ends[[0, -1]])
    return {"from": str(days[0]), "to": str(days[1] + 1)}


def _record(site, recipe, found, identity_of_run, folder):
    position = site.position.model_dump()
    written = {path.name for path in folder.iterdir()} | {"run.json", "timings.json"}
    return {
        "program": "sapflux",
        "version": sapflux.__version__,
        "identity": identity_of_run,
        "site": position,
        "span": _span(site, found),
        "recipe": recipe.resolved(),
        "history": found.history,
        "inputs": input_hashes(found),
        "tables": table_hashes(site),
        "unverified": recipe.unverified([*methods_of(site), "scaling"]),
        "seeds": {},
        "notes": found.notes,
        "written": {name: FILES.get(name, "signals at the native step") for name in written},
    }
