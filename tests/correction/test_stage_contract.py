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

    def points(values):
        return xr.DataArray(np.array(values), dims=("probe", "point"))

    def names(values):
        return xr.DataArray(np.array(values), {"probe": like["probe"].values}, ("probe",))

    nan = np.nan
    stem = 288.0 + generator.normal(0, 3, (5, len(time)))
    stem[:, 20:30] = nan
    on_probes = {"probe": like["probe"].values, "time": time}
    seen, resting = np.zeros((2, 5, len(time)))
    seen[1, 100:104] = 1.0
    resting[:3, 150:300] = 1.0
    swelling = np.abs(np.arange(len(time)) % 48 - 24.0) * 1e-6
    off = np.zeros((5, len(time)))
    off[2, 35:60] = 1.0  # from an evening to the next midday
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
        "radial_from": points([[0.0, 0.02]] * 5),
        "radial_to": points([[0.02, 0.04]] * 5),
        "sapwood_depth": fact([0.06, 0.036, 0.03, 0.05, nan], like),
        "relative_profile": xr.DataArray(
            np.outer([1.0, 1.0, 1.0, nan, 1.0], np.linspace(1.0, 0.1, 11)),
            {"relative_depth": np.linspace(0.0, 1.0, 11)},
            ("probe", "relative_depth"),
        ),
        "installed_age": xr.DataArray(
            np.linspace(0.0, 9.0, len(time)) * 86400.0 + np.array([[9e7], [0], [8e7], [0], [0]]),
            {"probe": like["probe"].values, "time": time},
            ("probe", "time"),
        ),
        "probe_tree": names(["T1", "T1", "T2", "T2", "T3"]),
        "probe_stratum": names(["ridge/oak"] * 4 + ["ridge/fir"]),
        "calibration_factor": fact([0.2, nan, 0.3, nan, nan], like),
        "calibration_exponent": fact([1.5, nan, 2.0, nan, nan], like),
        "calibration_lowest": fact([0.1, nan, nan, nan, nan], like),
        "calibration_highest": fact([0.9, nan, nan, nan, nan], like),
        "given_diffusivity": fact([2.4e-7, nan, nan, nan, 2e-7], like),
        "dry_density": fact([500.0, 450.0, nan, 480.0, nan], like),
        "water_content": fact([1.0, 1.2, 0.9, nan, nan], like),
        "thermal_diffusivity": fact([2.4e-7, 2.5e-7, nan, nan, 2e-7], like),
        "spacing_downstream": fact([6e-3] * 5, like),
        "spacing_upstream": fact([6e-3, 6e-3, 6e-3, 6e-3, 7e-3], like),
        "window_from": fact([60.0, 60.0, 60.0, 60.0, nan], like),
        "window_to": fact([100.0] * 5, like),
        "pulse_length": fact([8.0] * 5, like),
        "zero_flow_log_ratio": noisy(0.02, 0.02),
        "decay_time": noisy(36.0, 0.5),
        "time_of_maximum_downstream": noisy(40.3, 0.5),
        "time_of_maximum_upstream": noisy(40.3, 0.5),
        "mean_log_ratio": noisy(0.5, 0.5),
        "pre_pulse_drift": noisy(0.0, 1e-4),
        "natural_difference": noisy(0.1, 0.1),
        "natural_emf": noisy(4e-6, 4e-6),
        "paired": fact([1.0, 1.0, 0.0, 0.0, 1.0], like),
        "power_off": xr.DataArray(
            off, {"probe": like["probe"].values, "time": time}, ("probe", "time")
        ),
        "heating_on": fact([nan, nan, nan, nan, 1800.0], like),
        "heating_off": fact([nan, nan, nan, nan, 1800.0], like),
        "wound_width": fact([2e-3, 1.7e-3, nan, 3.3e-3, 2.5e-3], like),
        "air_temperature": xr.DataArray(280.0 + swelling * 1e5, {"time": time}, "time"),
        "precipitation": xr.DataArray(1.0 * (swelling < 1e-6), {"time": time}, "time"),
        "heater_voltage": xr.DataArray(np.full((5, len(time)), 2.0), on_probes, ("probe", "time")),
        "visited": xr.DataArray(seen, on_probes, ("probe", "time")),
        "at_rest": xr.DataArray(resting, on_probes, ("probe", "time")),
        "stem_diameter_change": xr.DataArray(
            np.tile(swelling, (5, 1)), on_probes, ("probe", "time")
        ),
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
        available[stage.table] = table_of(stage, available, **changed)
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
        assert value.dims in (schema.RECORD[: len(value.dims)], schema.VARIABLES[name].dims)
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
        annotation = stage.settings[name].annotation
        if get_origin(annotation) is Literal:
            assert value in get_args(annotation)
            assert name != "method" or set(stage.method_needs) <= set(get_args(annotation))
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
        ("heat_ratio", "thermal_diffusivity", "zero_flow_ratio"),
        ("heat_ratio", "zero_flow_ratio", "heat_pulse_velocity"),
        ("heat_ratio", "heat_pulse_velocity", "wound"),
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
