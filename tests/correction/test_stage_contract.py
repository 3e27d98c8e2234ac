"""What holds for every correction, whatever it corrects."""

import inspect
from typing import Literal, get_args, get_origin

import numpy as np
import pytest
import xarray as xr
from correction_records import beside, fact, record, stamps, table_of

import sapflux.correction
from sapflux import quality, schema
from sapflux.stage import ORDER, REGISTRY, Stage, bind, stage

METHODS = ("heat_dissipation", "heat_ratio")
STAGES = {key: stage for key, stage in REGISTRY.items() if key[0] in METHODS}
CALLS = [
    (key, method)
    for key, stage in STAGES.items()
    for method in (
        get_args(stage.settings["method"].annotation) if "method" in stage.settings else (None,)
    )
]


def inputs(holes):
    """Every variable that a correction reads, with faults; facts lack values for some probes."""
    generator = np.random.default_rng(7)
    time = stamps("2031-03-01", 9)
    shape = (5, 2, len(time))

    def noisy(centre, spread):
        values = generator.normal(centre, spread, shape)
        if holes:
            values[generator.random(shape) < 0.05] = np.nan
        return record(values, time)

    like = record(np.zeros(shape), time)
    nan = np.nan
    stem = 288.0 + generator.normal(0, 3, (5, len(time)))
    stem[:, 20:30] = nan
    arrays = {
        "heated_emf": noisy(0.35e-3, 0.2e-3),
        "stem_temperature": xr.DataArray(
            stem, {"probe": like["probe"].values, "time": time}, ("probe", "time")
        ),
        "zero_flow_difference": noisy(10.0, 0.1),
        "flow_index": noisy(0.3, 0.4),
        "temperature_before_downstream": noisy(290.0, 0.1),
        "temperature_after_downstream": noisy(290.5, 0.4),
        "temperature_before_upstream": noisy(290.0, 0.1),
        "temperature_after_upstream": noisy(290.5, 0.4),
        "heat_ratio": noisy(1.5, 1.0),
        "heat_pulse_velocity": noisy(20 / 3.6e5, 12 / 3.6e5),
        "log_heat_ratio": noisy(0.5, 0.5),
        "heated_difference": noisy(7.0, 3.0),
        "contact_fraction": fact([1.0, 0.8, 0.4, 0.5, nan], like),
        "calibration_factor": fact([0.2, nan, 0.3, nan, nan], like),
        "calibration_exponent": fact([1.5, nan, 2.0, nan, nan], like),
        "calibration_lowest": fact([0.1, nan, nan, nan, nan], like),
        "calibration_highest": fact([0.9, nan, nan, nan, nan], like),
        "given_diffusivity": fact([2.4e-7, nan, nan, nan, 2e-7], like),
        "dry_density": fact([500.0, 450.0, nan, 480.0, nan], like),
        "water_content": fact([1.0, 1.2, 0.9, nan, nan], like),
        "thermal_diffusivity": fact([2.4e-7, 2.5e-7, nan, nan, 2e-7], like),
        "spacing_downstream": fact([6e-3] * 5, like),
        "spacing_upstream": fact([6e-3] * 5, like),
        "wound_width": fact([2e-3, 1.7e-3, nan, 3.3e-3, 2.5e-3], like),
    }
    return arrays | beside(like, deficit_Pa=np.where(np.arange(len(time)) < 200, 20.0, 300.0))


def made_by(stage, method, arrays):
    """Result of a stage, and the arrays that it read."""
    changed = {"method": method} if method else {}
    available = dict(arrays)
    if stage.name in ("heated_difference", "rises"):
        available.pop(stage.name, None)
    if stage.name == "log_heat_ratio":
        del available["log_heat_ratio"]
    if stage.table:
        series = {n: a for n, a in available.items() if "time" in a.dims}
        available[stage.table] = table_of(stage, series, **changed)
    result = bind(stage.function, available, stage.defaults() | changed)
    read = {n: available[n] for n, _ in _positional(stage) if n in available and n != stage.table}
    return result, read


def _positional(stage):
    parameters = inspect.signature(stage.function).parameters.values()
    return [(p.name, p) for p in parameters if p.kind is p.POSITIONAL_ONLY]


@pytest.mark.parametrize(("key", "method"), CALLS, ids=str)
@pytest.mark.parametrize("holes", [False, True])
def test_a_value_is_lost_only_where_a_masking_flag_says_so(key, method, holes):
    stage = STAGES[key]
    result, read = made_by(stage, method, inputs(holes))
    assert set(result) <= {*stage.makes, *stage.flags}
    assert set(stage.makes) <= set(result)
    masked = False
    for name in stage.flags:
        if name in result:
            assert result[name].dtype == bool
            if quality.FLAGS[name].masks:
                masked = masked | result[name]
    for name in stage.makes:
        value = result[name]
        assert value.dims == schema.RECORD[: len(value.dims)]
        absent_before = False
        for array in read.values():
            if array.dims == schema.RECORD and holes:
                absent_before = absent_before | array.isnull()
        unexplained = value.isnull() & ~(absent_before | masked)
        assert not unexplained.any(), f"{name} is NaN without a flag"
        left = value.notnull() & masked
        assert not left.any(), f"{name} has a value under a masking flag"


@pytest.mark.parametrize(("key", "method"), CALLS, ids=str)
def test_inputs_are_never_edited(key, method):
    arrays = inputs(holes=True)
    kept = {name: array.copy(deep=True) for name, array in arrays.items()}
    made_by(STAGES[key], method, arrays)
    for name, array in arrays.items():
        assert array.identical(kept[name]), name


@pytest.mark.parametrize("key", STAGES, ids=str)
def test_absent_signal_stays_absent(key):
    arrays = {
        name: array.where(False) if array.dims == schema.RECORD else array
        for name, array in inputs(holes=False).items()
    }
    stage = STAGES[key]
    result, _ = made_by(stage, stage.defaults().get("method"), arrays)
    for name in set(stage.makes) - {"thermal_diffusivity"}:
        assert result[name].isnull().all()


@pytest.mark.parametrize("key", STAGES, ids=str)
def test_settings_have_defaults_within_their_limits(key):
    stage = STAGES[key]
    assert set(stage.limits) <= set(stage.settings)
    assert set(stage.defaults()) == set(stage.settings)
    for name, value in stage.defaults().items():
        if name == "method":
            assert get_origin(stage.settings[name].annotation) is Literal
            assert value in get_args(stage.settings[name].annotation)
            assert set(stage.method_needs) <= set(get_args(stage.settings[name].annotation))
        else:
            low, high = stage.limits[name]
            assert low <= value <= high
    assert set(stage.flags) <= quality.FLAGS.keys()


@pytest.mark.parametrize("key", STAGES, ids=str)
def test_settings_are_documented_with_their_unit(key):
    text = inspect.getdoc(STAGES[key].function).splitlines()
    for name in STAGES[key].settings:
        line = next(line for line in text if line.startswith(f"{name} :"))
        assert line.endswith(": text") or line.endswith("]"), line


@pytest.mark.parametrize("chain", METHODS)
def test_every_stage_of_the_order_of_work_is_there(chain):
    assert {name for one, name in STAGES if one == chain} == set(ORDER[chain])


@pytest.mark.parametrize(
    ("chain", "earlier", "later"),
    # Faults, then the zero, then geometry, then the calibration: common practice.
    [
        ("heat_dissipation", "screen_power_loss", "zero_flow_difference"),
        ("heat_dissipation", "zero_flow_difference", "sapwood_contact"),
        ("heat_dissipation", "sapwood_contact", "flow_index"),
        ("heat_dissipation", "flow_index", "flux_density"),
        ("heat_ratio", "rises", "thermal_diffusivity"),
        ("heat_ratio", "thermal_diffusivity", "zero_offset"),
        ("heat_ratio", "zero_offset", "wound"),
        ("heat_ratio", "wound", "flux_density"),
    ],
)
def test_the_order_of_work_is_that_of_the_trade(chain, earlier, later):
    assert earlier in STAGES[chain, later].after
    assert later not in STAGES[chain, earlier].after


@pytest.mark.parametrize("key", STAGES, ids=str)
def test_what_a_stage_needs_is_made_before_it(key):
    made_in_chain = {name for one in ORDER[key[0]] for name in STAGES[key[0], one].makes}
    made_before = {name for one in STAGES[key].after for name in STAGES[key[0], one].makes}
    assert set(STAGES[key].needs) & made_in_chain <= made_before


def test_a_stage_without_a_place_in_the_order_of_work_is_refused():
    def polish(flow_index, /):
        return flow_index

    with pytest.raises(ValueError, match=r"^stage 'polish' has no place in the order of work of "):
        stage(chain="heat_dissipation")(polish)
    assert ("heat_dissipation", "polish") not in REGISTRY
    # A stage that is made without registering it stands anywhere.
    assert Stage("polish", polish, "heat_dissipation", (), ()).after == ()


def test_a_name_stands_once_in_a_chain():
    def wound(heat_pulse_velocity, /):
        return heat_pulse_velocity

    with pytest.raises(ValueError, match=r"^stage 'wound' stands twice in heat_ratio$"):
        stage(chain="heat_ratio")(wound)


def test_every_module_of_the_package_is_imported():
    assert {f"{stage.function.__module__}".split(".")[-1] for stage in STAGES.values()} <= set(
        sapflux.correction.__all__
    )
