"""Run a chain of stages along time, block by block.

A stage that summarises needs the whole span before it can be evaluated: the steps before it run
over all blocks once to gather its rows, it is fitted, and the chain starts again. The chain after
parsing is cheap, so nothing is kept at the native step between these passes.
"""

import inspect
from dataclasses import dataclass, field

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
    quality: dict = field(default_factory=dict)  # dims -> int32 DataArray


def fitted_tables(chain, block_days=BLOCK_DAYS):
    """Fit every summarising stage of the chain: table name -> DataFrame."""
    tables = {}
    for index, step in enumerate(chain.steps):
        if step.stage.summarise is None:
            continue
        settled = _settled(chain, step)
        if settled is not None:
            tables[step.stage.table] = settled
            continue
        rows = [
            _summary(chain, step, index, block, tables)
            for block in _blocks(chain, chain.steps[: index + 1], block_days)
        ]
        tables[step.stage.table] = _fit(step, [part for part in rows if len(part)] or rows)
    return tables


def run_blocks(chain, tables, block_days=BLOCK_DAYS, also=()):
    """Yield (block, working) for each block after all stages; only the block's core holds good.

    also : names beside those the stages read that the working set must hold.
    """
    for block in _blocks(chain, chain.steps, block_days):
        yield block, _run(chain, chain.steps, block, tables, also)


def _blocks(chain, steps, block_days):
    return blocks(chain.ends, chain.interval_s, _reach(steps), block_days, chain.offset)


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


def _summary(chain, step, index, block, tables):
    working = _run(chain, chain.steps[:index], block, tables, step.stage.reads)
    rows = bind(step.stage.summarise, working.variables, step.settings)
    first, last = span(chain.ends, chain.interval_s, block)
    start = rows["start"].to_numpy().astype("datetime64[s]")
    return rows[(start >= first) & (start < last)]


def _fit(step, parts):
    rows = pd.concat(parts, ignore_index=True) if parts else pd.DataFrame()
    keys = [key for key in ("probe", "point", "start") if key in rows]
    rows = rows.sort_values(keys, kind="stable", ignore_index=True) if keys else rows
    return bind_rows(step.stage.fit, rows, step.settings) if step.stage.fit else rows


def bind_rows(fit, rows, settings):
    """Call a `fit` with its rows and the settings that its signature names."""
    parameters = inspect.signature(fit).parameters
    return fit(rows, **{name: settings[name] for name in parameters if name in settings})


def _run(chain, steps, block, tables, also=()):
    """The working set of a block after `steps`."""
    part = chain.cube.isel(time=block.whole)
    wanted = {name for step in steps for name in step.stage.reads} | set(also)
    measured = {name: part[name] for name in part.data_vars if name != "quality"}
    beside = chain.beside(chain.ends[block.whole], wanted)
    working = Working({**beside, **measured, **tables}, set(measured))
    if "quality" in part:
        _add_flags(working, part["quality"])
    for step in steps:
        _apply(step, working, chain.spread_flags)
        for name, values in chain.known.get(step.stage.name, {}).items():
            made = working.variables[name]
            here = np.where(np.isnan(made.values), np.nan, values[..., block.whole])
            working.variables[name] = made.copy(data=here)
    return working


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
    mask = np.int32(quality.FLAGS[name].mask)
    return where.copy(data=np.where(where.values, mask, np.int32(0)))


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
