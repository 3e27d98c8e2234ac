"""Run a chain of stages along time, block by block.

A stage that summarises needs the whole span before it can be evaluated: the steps before it run
over all blocks once to gather its rows, it is fitted, and the chain starts again. The chain after
parsing is cheap, so nothing is kept at the native step between these passes.

Variants of a chain, its stages with other settings, run side by side over the same blocks: what
they share, from the front, is done once a block.
"""

import inspect
from dataclasses import dataclass, field
from itertools import takewhile

import numpy as np
import pandas as pd
import xarray as xr

from sapflux import quality, schema
from sapflux.pipeline.blocks import NO_OFFSET, blocks, span
from sapflux.stage import bind

DAY_S = 86_400
BLOCK_DAYS = 60  # long enough that labels cost little beside arithmetic, short enough for memory


@dataclass(frozen=True)
class Chain:
    """What a chain runs on.

    cube : Dataset of measured variables with `time`, and `quality` if it has flags already.
    steps : tuple of Step.
    beside : (block's ends [UTC, datetime64[s]], names wanted) -> name -> DataArray: facts,
        weather and sun on those records.
    offset : fixed standard time minus UTC: blocks are cut at its midnights.
    spread_flags : whether a flag of fewer dims is spread over all points (method chains).
    known : stage -> name -> array on the cube's records that replaces what the stage made, where
        it made a value: how a chain is run again from any stage on, on perturbed or true values.
    """

    cube: xr.Dataset
    steps: tuple
    beside: object
    spread_flags: bool = True
    offset: np.timedelta64 = NO_OFFSET
    known: dict = field(default_factory=dict)

    @property
    def interval_s(self):
        """Seconds of a record."""
        return int(self.cube.attrs["interval_s"])

    @property
    def ends(self):
        """Ends of the records, datetime64[s]."""
        return self.cube["time"].values.astype("datetime64[s]")


@dataclass
class Working:
    """The variables of one block while the stages run over it."""

    variables: dict
    maskable: set  # names of what was measured or made; facts and weather are never masked
    quality: dict = field(default_factory=dict)  # dims -> int64 DataArray

    def with_tables(self, tables):
        """A copy that goes its own way from here; no stage writes into an array it is given."""
        return Working(self.variables | tables, set(self.maskable), dict(self.quality))


def fitted_tables(chain, block_days=BLOCK_DAYS):
    """Fit every summarising stage of the chain: table name -> DataFrame."""
    tables = {}
    fit_variants(chain, [(chain.steps, tables)], block_days)
    return tables


def run_blocks(chain, tables, block_days=BLOCK_DAYS, also=()):
    """Yield (block, working) for each block after all stages; only the block's core holds good.

    also : names beside those the stages read that the working set must hold.
    """
    for block, (working,) in run_variants(chain, [(chain.steps, tables)], block_days, also):
        yield block, working


def variants_of(chain, tables, others):
    """(steps, known tables) of each variant: the chain's own tables up to where it differs.

    tables : as of `fitted_tables`; others : tuples of Step, the chain's with other settings.
    """
    made = []
    for steps in others:
        same = {step.stage.table for step in steps[: _shared([chain.steps, steps])]}
        made.append((steps, {name: rows for name, rows in tables.items() if name in same}))
    return made


def fit_variants(chain, variants, block_days=BLOCK_DAYS):
    """Fit every summarising stage whose table a variant, (steps, tables), lacks: fills `tables`."""
    for index, step in enumerate(chain.steps):
        table = step.stage.table
        if step.stage.summarise is None:
            continue
        for steps, tables in variants:
            if table not in tables and (rows := _settled(chain, steps[index])) is not None:
                tables[table] = rows
        lacking = [(steps[: index + 1], own) for steps, own in variants if table not in own]
        if not lacking:
            continue
        parts = [_summaries(chain, lacking, block) for block in _blocks(chain, lacking, block_days)]
        for place, (steps, tables) in enumerate(lacking):
            tables[table] = _fit(steps[-1], [part[place] for part in parts])


def run_variants(chain, variants, block_days=BLOCK_DAYS, also=()):
    """Yield (block, workings of the variants one by one), as `run_blocks` does for one.

    variants : (steps, tables) of each.
    """
    for block in _blocks(chain, variants, block_days):
        yield block, _run(chain, variants, block, also)


def _blocks(chain, variants, block_days):
    reach = max(_reach(steps) for steps, _ in variants)
    return blocks(chain.ends, chain.interval_s, reach, block_days, chain.offset)


def _shared(variants):
    """How many steps, from the first on, are the same in all these tuples of Step."""
    return len(list(takewhile(_same, zip(*variants, strict=True))))


def _same(steps):
    return all(step.settings == steps[0].settings for step in steps)


def _reach(steps):
    """Seconds of halo that keep the core right: each stage spoils at most its own reach."""
    return sum(step.stage.reach_s(step.settings) for step in steps if step.stage.reach_s)


def _settled(chain, step):
    """The table of a summarising stage where facts alone settle it, else None."""
    if step.stage.settled is None:
        return None
    ends = chain.ends[:: max(1, DAY_S // chain.interval_s)]
    facts = chain.beside(ends, set(inspect.signature(step.stage.settled).parameters))
    return bind(step.stage.settled, {**facts, "probe": chain.cube["probe"]}, step.settings)


def _summaries(chain, variants, block):
    """The rows of a block that the last step of each variant makes of what those before it made."""
    lasts = [steps[-1] for steps, _ in variants]
    before = [(steps[:-1], tables) for steps, tables in variants]
    first, last = span(chain.ends, chain.interval_s, block)
    made = []
    workings = _run(chain, before, block, {name for step in lasts for name in step.stage.reads})
    for step, working in zip(lasts, workings, strict=True):
        rows = bind(step.stage.summarise, working.variables, step.settings)
        start = rows["start"].to_numpy().astype("datetime64[s]")
        made.append(rows[(start >= first) & (start < last)])
    return made


def _fit(step, parts):
    parts = [part for part in parts if len(part)] or parts
    rows = pd.concat(parts, ignore_index=True) if parts else pd.DataFrame()
    keys = [key for key in ("probe", "point", "start") if key in rows]
    rows = rows.sort_values(keys, kind="stable", ignore_index=True) if keys else rows
    return bind_rows(step.stage.fit, rows, step.settings) if step.stage.fit else rows


def bind_rows(fit, rows, settings):
    """Call a `fit` with its rows and the settings that its signature names."""
    parameters = inspect.signature(fit).parameters
    return fit(rows, **{name: settings[name] for name in parameters if name in settings})


def _run(chain, variants, block, also=()):
    """The working set of a block after the steps of each variant, made one by one."""
    every = [steps for steps, _ in variants]
    shared = _shared(every)
    reads = {name for steps in every for step in steps for name in step.stage.reads}
    start = _begun(chain, block, reads | set(also)).with_tables(variants[0][1])
    _go_on(chain, every[0][:shared], block, start)
    for steps, tables in variants:
        working = start.with_tables(tables)
        _go_on(chain, steps[shared:], block, working)
        yield working


def _begun(chain, block, wanted):
    """The working set of a block before the first step."""
    part = chain.cube.isel(time=block.whole)
    measured = {name: part[name] for name in part.data_vars if name != "quality"}
    beside = chain.beside(chain.ends[block.whole], wanted)
    working = Working({**beside, **measured}, set(measured))
    if "quality" in part:
        _add_flags(working, part["quality"])
    return working


def _go_on(chain, steps, block, working):
    """Run the steps on the working set, in place."""
    for step in steps:
        _apply(step, working, chain.spread_flags)
        for name, values in chain.known.get(step.stage.name, {}).items():
            made = working.variables[name]
            here = np.where(np.isnan(made.values), np.nan, values[..., block.whole])
            working.variables[name] = made.copy(data=here)


def _apply(step, working, spread_flags):
    stage = step.stage
    result = bind(stage.function, working.variables, step.settings)
    if not isinstance(result, dict):
        result = {stage.makes[0]: result}
    unknown = result.keys() - {*stage.makes, *stage.flags}
    if unknown:
        raise TypeError(f"stage {stage.name!r} returned what it did not declare: {unknown}")
    for name in stage.makes:
        if name in result:
            made = result[name]
            made.attrs = schema.VARIABLES[name].attributes()  # replaced whole, never merged
            working.variables[name] = made
            working.maskable.add(name)
    for name in stage.flags:
        if name in result:
            _add_flags(working, _bits(result[name], name, working, spread_flags))


def _bits(where, name, working, spread_flags):
    """Flag bits from where a flag is set, spread over all points where the chain wants it."""
    record = working.quality.get(schema.RECORD)
    if spread_flags and record is not None and where.dims != schema.RECORD:
        where = where.broadcast_like(record).transpose(*schema.RECORD)
    return where.copy(data=quality.bits(**{name: where.values}))


def _add_flags(working, bits):
    """Keep the bits, and take masked records from the working variables of the same dims."""
    dims = bits.dims
    if dims in working.quality:
        known = working.quality[dims]
        working.quality[dims] = known.copy(data=known.values | bits.values)
    else:
        working.quality[dims] = bits
    masked = quality.masked(bits.values)
    if not masked.any():
        return
    for name in working.maskable:
        variable = working.variables[name]
        if variable.dims == dims and variable.dtype.kind == "f":
            values = np.where(masked, np.nan, variable.values)
            working.variables[name] = variable.copy(data=values)
