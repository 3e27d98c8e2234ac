"""A site that logs temperature traces, from its files to flux density."""

import numpy as np
import pytest
import xarray as xr
from traces_by_hand import TABLES, velocity_at, write_site

from sapflux.physics import wood, wound_strip
from sapflux.pipeline.check import check_site, header_faults
from sapflux.pipeline.compute import compute
from sapflux.pipeline.installation_lives import window_drifts
from sapflux.pipeline.plan import plan_faults
from sapflux.pipeline.recipe import load_recipe
from sapflux.site.draft import draft_from_files
from sapflux.site.load import load_site

CM_H = 0.01 / 3600.0
X_OVER_K = 6e-3 / 2.5e-7  # log ratio per apparent velocity
RECIPE = """
[[heat_ratio]]
stage = "rises"
[[heat_ratio]]
stage = "log_heat_ratio"
estimator = "{estimator}"
[[heat_ratio]]
stage = "thermal_diffusivity"
method = "{method}"
[[heat_ratio]]
stage = "heat_pulse_velocity"
method = "as_given"
[[heat_ratio]]
stage = "flux_density"
[[scaling]]
stage = "probe_flow"
method = "relative_profile"
[[scaling]]
stage = "tree_flow"
[[scaling]]
stage = "stand_transpiration"
"""


def run(folder, method, estimator="log_of_means", **options):
    site = load_site(folder)
    path = folder / "recipe.toml"
    path.write_text(RECIPE.format(method=method, estimator=estimator))
    recipe = load_recipe(path)
    assert not list(plan_faults(site, recipe))
    found = compute(site, recipe, native=True, **options)
    return found, found.native["heat_ratio", 1800]


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return write_site(tmp_path_factory.mktemp("traces") / "ridge", days=8)


def velocities(native):
    starts = native["time"].values.astype("M8[s]") - np.timedelta64(1800, "s")
    return velocity_at(starts + np.timedelta64(3600, "s"))


@pytest.mark.parametrize("estimator", ["log_of_means", "mean_of_logs"])
def test_traces_return_the_velocity_with_the_diffusivity_in_place(folder, estimator):
    found, native = run(folder, "in_situ", estimator)
    nights = found.evidence["diffusivity_nights"]
    assert nights["accepted"].sum() >= 7 and nights["usable"].all()
    np.testing.assert_allclose(nights["decay_cm2_s"], 0.0025, rtol=1e-5)
    np.testing.assert_allclose(nights["maximum_cm2_s"], 0.0025, rtol=2e-3)
    velocity = native["heat_pulse_velocity"].values[0, 0] / CM_H
    np.testing.assert_allclose(velocity, velocities(native), rtol=1e-5, atol=1e-6)
    assert not native["quality"].values.any()
    lives = found.tables["installations"]
    assert lives["window_drift"].item() == pytest.approx(1.0, abs=1e-6)
    assert (lives["records"].item(), lives["usable_fraction"].item()) == (8 * 48, 1.0)


def test_one_wood_sample_feeds_diffusivity_and_conversion(folder, tmp_path):
    # The tree's own sample goes before the species' in both: flux density is
    # k(sample) / x * ln(ratio) * factor(sample), Burgess et al. (2001), Barrett et al. (1995).
    tables = TABLES | {"wood": "species,tree,date,dry_density_kg_m3,water_content\n"
                       "beech,,2031-05-01,400,1.5\n,B,2031-05-01,500,1.0\n"}  # fmt: skip
    _, native = run(write_site(tmp_path / "ridge", days=2, tables=tables), "wood")
    log_ratio = velocities(native) * CM_H * 6e-3 / 2.5e-7
    k = wood.thermal_diffusivity(500.0, 1.0)
    expected = k / 6e-3 * log_ratio * 0.643 * 1000.0  # factor calculated, three digits
    flux = native["flux_density"].values[0, 0]
    np.testing.assert_allclose(flux, expected, rtol=0.5e-3 / 0.643 + 1e-5, atol=1e-8)


def test_blocks_of_any_length_give_the_same_bytes(folder):
    (one, whole), (other, cut) = (
        run(folder, "in_situ"), run(folder, "in_situ", block_days=1)
    )  # fmt: skip
    xr.testing.assert_identical(whole, cut)
    assert one.evidence["diffusivity_nights"].equals(other.evidence["diffusivity_nights"])


def test_a_site_of_traces_runs_by_the_default_recipe_and_accounts_for_every_line(folder):
    told = check_site(folder)
    assert (told["probes"], told["logs"], told["files"]) == (1, 2, 2)
    site = load_site(folder)
    found = compute(site, load_recipe("stand_water_use"))
    (record,) = found.logs["H"].files
    assert (record.lines, record.header, record.kept) == (8 * 48 * 131 + 1, 1, 8 * 48 * 131)
    assert np.isfinite(found.probes["flux_density"].values).all()


def test_rows_at_another_step_than_declared_are_told(tmp_path):
    change = ("site.toml", "trace_step_s = 1\n", "trace_step_s = 2\n")
    site = load_site(write_site(tmp_path / "ridge", days=1, changes=[change]))
    (fault,), _, _ = header_faults(site)
    assert fault.what == (
        "steps of 1 s are commonest between the rows of its files, and trace_step_s is 2"
    )


def test_a_draft_from_a_log_of_traces_asks_for_its_pulses(folder, tmp_path):
    paths = draft_from_files(tmp_path / "new", [folder / "raw" / "H1.csv"])
    text = next(path for path in paths if path.name == "site.toml").read_text()
    assert "\ntrace_step_s = 1\n" in text and "# interval_min = 30\n" in text
    assert "\ninterval_min" not in text


# The drift of the ratio within the window


def cube_of(early, late, quality=0):
    shape = (1, 1, len(early))
    ends = np.datetime64("2031-06-01T01:00", "ns") + np.arange(len(early)) * np.timedelta64(30, "m")
    record = ("probe", "point", "time")
    return xr.Dataset(
        {
            "early_log_ratio": (record, np.reshape(early, shape)),
            "late_log_ratio": (record, np.reshape(late, shape)),
            "quality": (record, np.broadcast_to(np.int64(quality), shape)),
        },
        {"probe": ["b1"], "point": [1], "time": ends},
    )


def drift_of(folder, *arrays):
    found = window_drifts(load_site(folder), {("heat_ratio", 1800): cube_of(*arrays)})
    return found.get(("b1", 0))


@pytest.mark.parametrize(("width", "drift"), [(0.20, 0.943), (0.30, 0.911)])
def test_a_wound_shows_in_the_drift_of_the_window(folder, width, drift):
    # Vh(60-80 s) over Vh(80-100 s) of a strip in which no sap moves, own derivation, at low flow:
    # 0.943 at 0.20 cm, 0.911 at 0.30 cm, 1.00 without; half a unit of the last digit.
    velocity = np.concatenate([-np.linspace(8, 10, 10), np.linspace(8, 10, 10)]) * CM_H
    early, late = (
        wound_strip.apparent_velocity(
            velocity, wound_strip.Strip(width * 1e-2, window_from=begin, window_to=begin + 20.0)
        )
        * X_OVER_K
        for begin in (60.0, 80.0)
    )
    found = drift_of(folder, early, late)
    assert found == pytest.approx(drift, abs=0.0005)


def test_records_without_flow_or_with_a_flag_tell_no_drift(folder):
    still = np.full(20, 0.1)
    assert drift_of(folder, still * 2, still) is None
    flow = np.full(20, 1.0)
    assert drift_of(folder, flow, flow) == 1.0
    assert drift_of(folder, flow, flow, 2) is None
    assert drift_of(folder, np.full(9, 1.0), np.full(9, 1.0)) is None
    mixed = np.where(np.arange(20) < 8, np.nan, 0.9)
    assert drift_of(folder, mixed, flow) == pytest.approx(0.9)
