"""The runner on toy stages of all three kinds: the same bytes for every block length."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from sapflux import quality, schema
from sapflux.pipeline.execute import Chain, fitted_tables, run_blocks
from sapflux.pipeline.recipe import Step
from sapflux.stage import Stage

INTERVAL = 3600


def chain(steps, days=9, values=None):
    time = np.datetime64("2031-06-01T01", "ns") + np.arange(24 * days) * np.timedelta64(1, "h")
    if values is None:
        values = np.random.default_rng(5).normal(10, 1, (2, 1, len(time)))
        values[0, 0, 30:40] = np.nan
    cube = xr.Dataset(
        {
            "heated_difference": (schema.RECORD, values),
            "quality": (schema.RECORD, np.zeros(values.shape, np.int64)),
        },
        {"probe": ["T01", "T02"], "point": [1], "time": time},
        attrs={"interval_s": INTERVAL},
    )
    return Chain(cube, tuple(steps), lambda ends, wanted: {})


def step(function, number=1, settings=None, **declared):
    declared = {"makes": (), "flags": ()} | declared
    return Step(
        Stage(function.__name__, function, "heat_dissipation", **declared), settings or {}, number
    )


def below(heated_difference, /, *, smallest=9.0):
    return {"heater_failure": heated_difference < smallest}


def running_mean(heated_difference, /):
    """A window of three hours to either side."""
    return heated_difference.rolling(time=7, center=True, min_periods=1).mean()


def day_maxima(heated_difference, /):
    frame = heated_difference.max("point").to_dataframe("highest").reset_index()
    frame["start"] = (frame["time"] - pd.Timedelta("1s")).dt.floor("D")
    return frame.groupby(["probe", "start"], as_index=False)["highest"].max()


def scaled(rows, /):
    return rows.assign(highest=rows["highest"] - rows["highest"].mean())


def day_level(heated_difference, zero_flow_nights, /):
    table = zero_flow_nights.pivot(index="probe", columns="start", values="highest")
    days = (pd.DatetimeIndex(heated_difference["time"].values) - pd.Timedelta("1s")).floor("D")
    level = table.reindex(columns=days).to_numpy()[:, None, :]
    return heated_difference.copy(data=np.broadcast_to(level, heated_difference.shape))


STEPS = [
    step(below, flags=("heater_failure",)),
    step(running_mean, 2, makes=("heated_difference",), reach_s=lambda settings: 3 * 3600),
    step(
        day_level,
        3,
        makes=("zero_flow_difference",),
        table="zero_flow_nights",
        summarise=day_maxima,
        fit=scaled,
        reach_s=lambda settings: 24 * 3600,
    ),
]


def results(days):
    one = chain(STEPS)
    tables = fitted_tables(one, days)
    parts = {"heated_difference": [], "zero_flow_difference": [], "quality": []}
    for block, working in run_blocks(one, tables, days):
        for name in parts:
            found = working.quality[schema.RECORD] if name == "quality" else working.variables[name]
            parts[name].append(found.isel(time=block.core).values)
    return {name: np.concatenate(part, axis=-1).tobytes() for name, part in parts.items()}


@pytest.mark.parametrize("days", [1, 2, 5])
def test_results_are_the_same_bytes_for_every_block_length(days):
    assert results(days) == results(None)


def test_masked_records_reach_later_stages_as_absent():
    one = chain([step(below, flags=("heater_failure",))])
    ((_, working),) = run_blocks(one, {}, None)
    low = one.cube["heated_difference"].values < 9
    assert low.any()
    assert np.isnan(working.variables["heated_difference"].values[low]).all()
    assert quality.has(working.quality[schema.RECORD].values, "heater_failure")[low].all()


def test_the_measurement_itself_is_not_edited():
    one = chain(STEPS)
    before = one.cube["heated_difference"].values.copy()
    list(run_blocks(one, fitted_tables(one, 2), 2))
    np.testing.assert_array_equal(one.cube["heated_difference"].values, before)


def test_a_flag_of_the_probe_is_spread_over_its_points():
    def first_probe(heated_difference, /):
        return {
            "no_wood_sample": xr.zeros_like(heated_difference.isel(point=0, drop=True), bool)
            | (heated_difference["probe"] == "T01")
        }

    one = chain([step(first_probe, flags=("no_wood_sample",))])
    ((_, working),) = run_blocks(one, {}, None)
    assert np.isnan(working.variables["heated_difference"].sel(probe="T01")).all()
    assert np.isfinite(working.variables["heated_difference"].sel(probe="T02")).all()


def test_attributes_come_from_the_schema_and_not_from_the_operands():
    ((_, working),) = run_blocks(chain(STEPS), fitted_tables(chain(STEPS), None), None)
    made = working.variables["zero_flow_difference"]
    assert made.attrs == schema.VARIABLES["zero_flow_difference"].attributes()


def test_a_stage_that_returns_what_it_did_not_declare_is_a_defect():
    def undeclared(heated_difference, /):
        return {"flow_index": heated_difference}

    with pytest.raises(TypeError, match="returned what it did not declare"):
        list(run_blocks(chain([step(undeclared)]), {}, None))


def test_facts_are_never_masked():
    def fact_of_block(ends, wanted):
        size = (2, 1, len(ends))
        return {"installation": xr.DataArray(np.ones(size), dims=schema.RECORD)}

    one = chain([step(below, flags=("heater_failure",))])
    one = Chain(one.cube, one.steps, fact_of_block)
    ((_, working),) = run_blocks(one, {}, None)
    assert (working.variables["installation"] == 1).all()
