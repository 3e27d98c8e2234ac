"""Closed loop: from the demo site's logger files back to the transpiration it was made from.

The truth lies in tests/truth; the pipeline never sees it, and nothing in the recipe is tuned to it.
Bounds are those a user is promised: 5 % of error-free sampling of the same trees, and the
design's own sampling error (one standard error) of the whole stand.
"""

import shutil
import tomllib
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sapflux import quality, run_site
from sapflux.pipeline.api import run_and_keep

ROOT = Path(__file__).parents[1]
SITE = ROOT / "configs" / "orvelin"
TRUTH = Path(__file__).parent / "truth" / "orvelin"
TOTALS = ("season", "daily", "monthly", "water_year", "tree_daily")


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    return run_site(SITE, out=tmp_path_factory.mktemp("results"), native=True)


@pytest.fixture(scope="module")
def daily_truth():
    return pd.read_csv(TRUTH / "daily.csv")


def paired(run, daily_truth):
    """Valid days of the run beside the truth of the same days."""
    daily = run.table("daily").rename(columns={"start": "date"})
    return daily[daily["valid"] == 1].merge(daily_truth, on=["stand", "species", "date"])


@pytest.mark.parametrize("stand", ["upper", "lower"])
def test_season_total_is_within_5_percent_of_error_free_sampling(run, daily_truth, stand):
    days = paired(run, daily_truth).query("stand == @stand and species == 'all'")
    assert len(days) > 55
    assert days["transpiration_mm"].sum() == pytest.approx(days["sampled_mm"].sum(), rel=0.05)


@pytest.mark.parametrize("stand", ["upper", "lower"])
def test_season_total_is_within_the_sampling_error_of_the_whole_stand(run, daily_truth, stand):
    design = tomllib.loads((TRUTH / "truth.toml").read_text(encoding="utf-8"))
    days = paired(run, daily_truth).query("stand == @stand and species == 'all'")
    error = days["transpiration_mm"].sum() - days["stand_mm"].sum()
    assert abs(error) < design["stands"][stand]["design_sampling_se_mm"]


def test_the_season_row_sums_the_days_that_may_be_totalled(run):
    daily = run.table("daily")
    for row in run.table("season").itertuples():
        own = daily[(daily["stand"] == row.stand) & (daily["species"] == row.species)]
        valid = own[own["valid"] == 1]
        assert len(valid) == row.days
        assert len(own) - len(valid) == row.days_refused
        # the tables are printed to 4 decimals
        assert valid["transpiration_mm"].sum() == pytest.approx(row.transpiration_mm, abs=0.005)


def test_species_of_a_stand_sum_to_the_stand_every_day(run):
    daily = run.table("daily")
    whole = daily[(daily["species"] == "all") & (daily["valid"] == 1)]
    parts = daily[daily["species"] != "all"].groupby(["stand", "start"])["transpiration_mm"].sum()
    for row in whole.itertuples():
        assert parts[row.stand, row.start] == pytest.approx(row.transpiration_mm, abs=0.0005)


def test_every_line_of_every_file_is_accounted_for(run):
    ledger = run.table("ledger")
    classes = ["header", "kept", "duplicate", "conflicting", "rejected", "blank", "outside"]
    assert (ledger[classes].sum(axis=1) == ledger["lines"]).all()
    for row in ledger.itertuples():
        text = (SITE / row.file).read_bytes()
        assert row.lines == text.count(b"\n") + (not text.endswith(b"\n") and bool(text))


def test_the_power_loss_gives_no_flux(run):
    probes = run.probes
    lost = (
        probes["flux_density"]
        .sel(probe="P01", point=1)
        .sel(time=slice("2031-09-12T14:00", "2031-09-13T07:00"))
    )
    assert lost.isnull().all()
    bits = (
        probes["quality"]
        .sel(probe="P01", point=1)
        .sel(time=slice("2031-09-12T14:00", "2031-09-13T07:00"))
    )
    told = quality.has(bits.values, "heater_failure") | quality.has(bits.values, "heater_recovery")
    assert told.all()


def test_refused_periods_say_why(run):
    for name in ("daily", "monthly", "water_year"):
        table = run.table(name)
        refused = table[table["valid"] == 0]
        assert refused["transpiration_mm"].isna().all()
        assert refused["reason"].str.len().gt(5).all()
    assert (run.table("water_year")["valid"] == 0).all()


def totals(folder, out):
    run, _ = run_and_keep(folder, recipe="stand_water_use", out=out, beside=False)
    return {name: (run.folder / f"{name}.csv").read_bytes() for name in TOTALS}


def copied(tmp_path, change):
    folder = tmp_path / "orvelin"
    shutil.copytree(SITE, folder)
    change(folder / "raw")
    return folder


def duplicate(raw):
    shutil.copy(raw / "lower_2031-09-18.csv", raw / "lower_again.csv")


def reverse_names(raw):
    files = sorted(raw.glob("upper*.dat"))
    for place, path in enumerate(files):
        path.rename(raw / f"upper_z{len(files) - place:02d}.dat")


def split(raw):
    path = raw / "upper_2031-10-07.dat"
    lines = path.read_bytes().splitlines(keepends=True)
    path.write_bytes(b"".join(lines[:900]))
    (raw / "upper_part2.dat").write_bytes(b"".join(lines[:4] + lines[900:]))


@pytest.mark.parametrize("change", [duplicate, reverse_names, split])
def test_files_given_otherwise_change_no_byte_of_the_totals(run, tmp_path, change):
    expected = {name: (run.folder / f"{name}.csv").read_bytes() for name in TOTALS}
    assert totals(copied(tmp_path, change), tmp_path / "out") == expected


def test_the_length_of_blocks_changes_no_byte(run, tmp_path):
    other = run_site(SITE, out=tmp_path, block_days=9)
    for path in run.folder.glob("*.csv"):
        assert (other.folder / path.name).read_bytes() == path.read_bytes(), path.name


def test_a_kept_sample_is_found_again_in_the_line_it_came_from(run):
    origin = run.dataset("origin")
    rows = origin["row_size"].values
    logs = [str(name) for name in origin["log"].values]
    at = rows[: logs.index("upper")].sum() + 1234
    file = str(origin["file"].values[int(origin["file_index"][at])])
    line = (SITE / file).read_text("latin-1").splitlines()[int(origin["line"][at]) - 1]
    local = pd.Timestamp(origin["time"].values[at]) + pd.Timedelta(hours=1)
    assert line.startswith(f'"{local:%Y-%m-%d %H:%M:%S}"')


def test_the_stand_file_holds_the_stand_itself(run):
    stand = run.stand["stand_transpiration"]
    names = [str(name) for name in run.stand["stand_species"].values]
    whole = stand[names.index("upper/all")]
    parts = stand[[names.index(name) for name in names if name.startswith("upper/")][:-1]]
    np.testing.assert_allclose(whole, parts.sum("stand_species", skipna=False), rtol=1e-12)


def test_every_netcdf_file_passes_the_convention_checker(run, tmp_path):
    # compliance-checker, CF-1.11, with the standard name table it carries
    from compliance_checker.runner import CheckSuite, ComplianceChecker

    files = sorted(run.folder.glob("*.nc"))
    assert [path.stem for path in files] == [
        "heat_dissipation", "heat_ratio", "origin", "probes", "stand", "trees",
    ]  # fmt: skip
    # what a stage changed stands beside the signal as it was logged; what none changed stands once
    ratio = run.dataset("heat_ratio")
    assert {"measured_rise_upstream", "rise_upstream", "logged_velocity"} <= set(ratio.data_vars)
    assert "measured_logged_velocity" not in ratio
    CheckSuite.load_all_available_checkers()
    for path in files:
        report = tmp_path / "report.txt"
        passed, errors = ComplianceChecker.run_checker(
            str(path), ["cf:1.11"], 0, "strict", output_filename=str(report)
        )
        assert passed and not errors, report.read_text()


def test_how_a_stand_value_came_to_be_can_be_read_from_the_file(run):
    origin = run.stand["stand_origin"]
    assert origin.attrs["flag_meanings"].split()[1] == "measured"
    assert "stand_origin" in run.stand["stand_transpiration"].attrs["ancillary_variables"]
