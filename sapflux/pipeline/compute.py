"""One site from its files to its results, in memory."""

import time as clock
from dataclasses import dataclass, field

import pandas as pd
import xarray as xr

from sapflux import schema
from sapflux.errors import DataError, Fault
from sapflux.ingest.cube import answered_records, measured_cubes
from sapflux.ingest.logs import read_log
from sapflux.ingest.weather import weather_series
from sapflux.pipeline.beside import probe_chain_beside
from sapflux.pipeline.check import (
    displaced_notes,
    header_faults,
    rejection_notes,
    silent_logs,
    unheard_channels,
    uninstalled_notes,
)
from sapflux.pipeline.execute import BLOCK_DAYS, Chain, fitted_tables, run_blocks
from sapflux.pipeline.installation_lives import FlagCounts, installation_table, window_drifts
from sapflux.pipeline.join import Joined, common_grid
from sapflux.pipeline.notes import notes_of, notes_of_lives, notes_of_methods
from sapflux.pipeline.notes_corrections import notes_of_corrections
from sapflux.pipeline.plan import methods_beside
from sapflux.pipeline.scale import ground_of, labelled, scale
from sapflux.pipeline.side_by_side import Compared, Corrected, run_beside
from sapflux.pipeline.total_tables import days_of, total_tables
from sapflux.scaling.whole_stands import with_whole_stands


@dataclass
class Computed:
    """Everything a run found, not yet written."""

    logs: dict  # name -> log series
    probes: xr.Dataset = None  # flux density on the common step
    trees: xr.Dataset = None
    stand: xr.Dataset = None
    native: dict = field(default_factory=dict)  # method -> Dataset at the native step
    tables: dict = field(default_factory=dict)  # name -> DataFrame
    evidence: dict = field(default_factory=dict)  # table of a summarising stage -> DataFrame
    beside: Compared | None = None  # methods run beside the recipe's own
    history: list = field(default_factory=list)  # one line a stage
    notes: list = field(default_factory=list)  # what a person should know first
    seconds: dict = field(default_factory=dict)


def compute(site, recipe, *, native=False, block_days=BLOCK_DAYS, logs=None, known=None):
    """Run the recipe on the site. The recipe must have been checked against the site.

    logs : log series by name, of a run before; None: read them. known : (chain, cube) -> what is
    to replace the products of its stages, see `Chain`; None: nothing.
    DataError where the site has no logs, or its files lack what the channels name.
    """
    stopwatch = _Stopwatch()
    logs, notes = (logs, []) if logs is not None else _read_logs(site)
    known = known or (lambda chain, cube: {})
    stopwatch.lap("read")
    found = Computed(
        logs, notes=[*notes, *notes_of(site, recipe), *notes_of_corrections(site, recipe)]
    )
    cubes = measured_cubes(site, logs)
    weather = weather_series(site, logs)
    stopwatch.lap("assemble")
    step_s = site.position.common_step_min * 60
    ends = common_grid(cubes.values(), step_s, site.offset)
    if not len(ends):
        nothing = Fault(
            str(site.folder),
            "the downloads hold no record of a probe",
            f"Run `sapflux check {site.folder}`; see from and to in channels.csv.",
        )
        raise DataError([nothing, *silent_logs(site, logs)])
    joined = Joined(list(cubes.values()), ends, step_s, recipe.join["least_coverage"])
    counts, chains = FlagCounts(), {}
    for (method, interval_s), cube in cubes.items():
        chain = Chain(
            cube,
            recipe.chains[method],
            probe_chain_beside(site, cube, weather),
            offset=site.offset,
            known=known(method, cube),
        )
        answered = answered_records(site, logs, cube)
        tables = _run_method(chain, joined, found, counts, answered, native, block_days)
        chains[method, interval_s] = chain, tables, answered
        found.history += [f"{step.line()} at {interval_s} s" for step in chain.steps]
    stopwatch.lap("correct")
    found.probes = unscaled = labelled(site, joined.dataset())
    found.history.append(f"join: {dict(recipe.join)!r} to {step_s} s")
    replaced = known("scaling", found.probes)
    scaled = scale(site, recipe, found.probes, weather, block_days, replaced)
    found.probes, found.trees, found.stand = scaled.probes, scaled.trees, scaled.stand
    found.evidence |= scaled.tables
    found.history += [step.line() for step in recipe.chains["scaling"]]
    stopwatch.lap("scale")
    lives = installation_table(site, counts, found.evidence, window_drifts(site, cubes))
    found.tables["installations"] = lives
    found.notes += notes_of_lives(lives, found.evidence)
    days = None if found.stand is None else days_of(site, recipe, found.stand, weather)
    found.tables |= total_tables(site, recipe, found.trees, days)
    if found.stand is not None:
        found.stand = with_whole_stands(found.stand, ground_of(site, ends))
    stopwatch.lap("total")
    chosen, left_out = methods_beside(site, recipe)
    if chosen:
        corrected = Corrected(chains, unscaled, found.probes, weather, days, found.evidence)
        found.beside = run_beside(site, recipe, corrected, chosen, block_days)
        found.tables |= found.beside.tables()
    found.notes += notes_of_methods(left_out)
    stopwatch.lap("beside")
    found.seconds = stopwatch.seconds
    return found


def _read_logs(site):
    if not site.logs:
        raise DataError(
            Fault(
                f"{site.folder}/site.toml",
                "the site has no logs: it is a plan",
                "Name its downloads under [logs.NAME].",
            )
        )
    faults, notes, _ = header_faults(site)
    if faults:
        raise DataError(faults)
    logs = {name: read_log(site, name) for name in site.logs}
    notes += [str(fault) for fault in silent_logs(site, logs)]
    notes += [*unheard_channels(site, logs), *displaced_notes(site, logs)]
    notes += uninstalled_notes(site, logs)
    return logs, notes + rejection_notes(site, logs)


def _run_method(chain, joined, found, counts, answered, native, block_days):
    """Correct and join the probes of one cube; returns the tables its stages were fitted to."""
    tables = fitted_tables(chain, block_days)
    for name, rows in tables.items():
        known = found.evidence.get(name)
        found.evidence[name] = rows if known is None else pd.concat([known, rows])
    kept = []
    wanted = ("installation",)
    for block, working in run_blocks(chain, tables, block_days, wanted):
        core = {"time": block.core}
        bits = joined.add_block(chain, block, working, answered)
        here = slice(block.core_first, block.core_last)
        installation = working.variables["installation"].isel(core).values
        counts.add(chain.cube, installation, bits.values, answered[..., here])
        if "baseline_amplification" in working.variables:
            flux, gain = (
                working.variables[name].isel(core).transpose(*schema.RECORD).values
                for name in ("flux_density", "baseline_amplification")
            )
            counts.add_amplification(chain.cube, installation, flux, gain)
        if native:
            kept.append(_native_part(chain, working, bits, core))
    if native:
        whole = xr.concat(
            kept, "time", data_vars="minimal", coords="minimal", compat="override", join="override"
        )
        for name in chain.cube.data_vars:
            if name != "quality":
                whole[f"{name}" if name not in whole else f"measured_{name}"] = chain.cube[name]
        found.native[chain.cube.attrs["method"], chain.interval_s] = whole.assign_attrs(
            chain.cube.attrs
        )
    return tables


def _native_part(chain, working, bits, core):
    """What the stages made of the records of a block, with their flags."""
    names = {name for step in chain.steps for name in step.stage.makes}
    made = {
        name: working.variables[name].isel(core)
        for name in sorted(names & working.variables.keys())
        if working.variables[name].dims == schema.RECORD
    }
    return xr.Dataset({**made, "quality": bits}).drop_attrs()


class _Stopwatch:
    """Seconds between laps."""

    def __init__(self):
        self.seconds, self._last = {}, clock.perf_counter()

    def lap(self, name):
        now = clock.perf_counter()
        self.seconds[name] = round(now - self._last, 3)
        self._last = now
