"""The commands as a person meets them: exit codes, what goes to stdout and what to stderr."""

import json
import subprocess
import sys
from pathlib import Path

import pytest

from sapflux.cli import main

ROOT = Path(__file__).parents[2]
SITE = str(ROOT / "configs" / "orvelin")


@pytest.fixture(scope="module")
def starter(tmp_path_factory):
    folder = tmp_path_factory.mktemp("sites") / "mine"
    assert main(["init", str(folder)]) == 0
    return folder


def broken(starter, tmp_path, name="broken"):
    folder = tmp_path / name
    folder.mkdir()
    text = (starter / "site.toml").read_text(encoding="utf-8")
    (folder / "site.toml").write_text(text.replace("latitude_deg", "latitude"), encoding="utf-8")
    return folder


def test_init_says_what_comes_next(tmp_path, capsys):
    assert main(["init", str(tmp_path / "new")]) == 0
    assert f"sapflux check {tmp_path / 'new'}" in capsys.readouterr().out


def test_init_refuses_a_folder_with_files(starter, capsys):
    assert main(["init", str(starter)]) == 2
    assert str(starter) in capsys.readouterr().err


def test_init_from_logger_files_drafts_their_columns(tmp_path, capsys):
    files = sorted(str(path) for path in (Path(SITE) / "raw").glob("upper_2031-09-*.dat"))
    assert main(["init", str(tmp_path / "new"), "--from", *files]) == 0
    channels = (tmp_path / "new" / "channels.csv").read_text(encoding="utf-8")
    assert "dT_P01" in channels and "mV" in channels


def test_check_passes_the_demo_site(capsys):
    assert main(["check", SITE]) == 0
    assert "no fault. 20 probes, 20 trees, 2 stands, 5 logs, 21 files." in capsys.readouterr().out


def test_check_lists_faults_on_stderr(starter, tmp_path, capsys):
    folder = broken(starter, tmp_path)
    assert main(["check", str(folder)]) == 2
    told = capsys.readouterr()
    assert told.out == ""
    assert "unknown key 'latitude'" in told.err or "'latitude'" in told.err
    assert told.err.rstrip().endswith("faults")


def test_check_prints_json_alone(starter, tmp_path, capsys):
    folder = broken(starter, tmp_path)
    assert main(["check", SITE, str(folder), "--json"]) == 2
    told = json.loads(capsys.readouterr().out)
    assert told[SITE]["faults"] == [] and told[str(folder)]["faults"]


def test_check_names_a_column_no_file_has(tmp_path, capsys):
    import shutil

    folder = tmp_path / "orvelin"
    shutil.copytree(SITE, folder)
    table = folder / "channels.csv"
    table.write_text(table.read_text().replace("upper,dT_P03", "upper,dT_PO3"), encoding="utf-8")
    assert main(["check", str(folder)]) == 2
    told = capsys.readouterr().err
    assert (
        f"{folder}/channels.csv, row 4: no file of log 'upper' has a column 'dT_PO3'. "
        "Did you mean 'dT_P03'?"
    ) in told


def test_run_prints_totals_ledger_and_files(tmp_path, capsys):
    assert main(["run", SITE, "--out", str(tmp_path)]) == 0
    told = capsys.readouterr().out
    for word in [
        "Season totals",
        "The same days by other methods",
        "nightly_maximum",
        "values known from memory only",
        "upper",
        "spruce",
        "kept",
        "duplicate",
        "daily.csv",
        "not of evapotranspiration",
    ]:
        assert word in told


def test_a_failing_site_does_not_stop_the_others(starter, tmp_path, capsys):
    folder = broken(starter, tmp_path)
    code = main(["run", str(folder), SITE, "--out", str(tmp_path / "out")])
    told = capsys.readouterr()
    assert code == 3
    assert "1 ok, 1 failed" in told.out
    assert "latitude" in told.err
    assert (tmp_path / "out" / "orvelin" / "season.csv").is_file()


def test_all_sites_failing_by_configuration_is_a_usage_error(starter, tmp_path, capsys):
    assert main(["run", str(broken(starter, tmp_path)), "--out", str(tmp_path / "out")]) == 2


def test_two_jobs_give_the_same_bytes(tmp_path, capsys):
    import shutil

    twin = tmp_path / "twin"
    shutil.copytree(SITE, twin)
    assert main(["run", SITE, str(twin), "--out", str(tmp_path / "two"), "--jobs", "2"]) == 0
    first, second = tmp_path / "two" / "orvelin", tmp_path / "two" / "twin"
    assert (first / "daily.csv").read_bytes() == (second / "daily.csv").read_bytes()


def test_dry_run_writes_nothing(tmp_path, capsys):
    assert main(["run", SITE, "--out", str(tmp_path / "out"), "--dry-run"]) == 0
    assert "Nothing was run." in capsys.readouterr().out
    assert not (tmp_path / "out").exists()


def test_run_of_a_plan_without_logs_says_so(tmp_path, capsys):
    folder = tmp_path / "plan"
    folder.mkdir()
    text = (Path(SITE) / "site.toml").read_text(encoding="utf-8")
    (folder / "site.toml").write_text(text.split("[layouts")[0], encoding="utf-8")
    assert main(["check", str(folder)]) == 0
    assert "a plan without logs" in capsys.readouterr().out
    assert main(["run", str(folder), "--out", str(tmp_path / "out")]) == 1
    assert "the site has no logs: it is a plan" in capsys.readouterr().err


def test_an_unknown_recipe_is_a_usage_error(capsys):
    assert main(["run", SITE, "--recipe", "stand_wateruse", "--dry-run"]) == 2
    assert "Did you mean 'stand_water_use'?" in capsys.readouterr().err


def test_stages_lists_and_explains(capsys):
    assert main(["stages"]) == 0
    assert "zero_flow_difference" in capsys.readouterr().out
    assert main(["stages", "zero_flow_difference"]) == 0
    told = capsys.readouterr().out
    (row,) = [line.split() for line in told.splitlines() if line.startswith("  highest_deficit_k")]
    assert row[:3] == ["highest_deficit_kPa", "0.05", "kPa"] and "Source:" in told
    assert "Unverified: published values known from memory only" in told


def test_stages_explains_the_parts_that_are_no_stages(capsys):
    assert main(["stages", "least_daylight"]) == 0
    assert "longest_daylight_gap_h" in capsys.readouterr().out
    assert main(["stages", "join", "--json"]) == 0
    (part,) = json.loads(capsys.readouterr().out)
    assert part["settings"][0]["setting"] == "least_coverage"


def test_every_setting_that_carries_a_unit_in_its_name_prints_that_unit(capsys):
    assert main(["stages", "--json"]) == 0
    endings = {
        "_K": "K",
        "_kPa": "kPa",
        "_h": "h",
        "_um_h": "um h-1",
        "_d": "d",
        "_min": "min",
        "_V": "V",
        "_mm": "mm",
        "_cm_h": "cm h-1",
        "_degC": "degC",
        "_uV_per_K": "uV K-1",
        "_percent_per_K": "% K-1",
    }
    seen = set()
    for stage in json.loads(capsys.readouterr().out):
        for row in stage["settings"]:
            fitting = [e for e in endings if row["setting"].endswith(e)]
            if fitting:
                longest = max(fitting, key=len)
                assert row["unit"] == endings[longest], row
                seen.add(longest)
    assert seen == set(endings)


def test_stages_lists_quantities_with_units_and_kinds(capsys):
    assert main(["stages", "--quantities"]) == 0
    told = capsys.readouterr().out
    row = next(line for line in told.splitlines() if line.split()[0] == "heated_emf")
    assert "mV" in row and row.split()[-1] == "probe"


def test_stages_names_the_nearest_of_an_unknown_one(capsys):
    assert main(["stages", "flow_indx"]) == 2
    assert "Did you mean 'flow_index'?" in capsys.readouterr().err


def test_help_imports_nothing_heavy():
    code = (
        "import sys, sapflux.cli\n"
        "sapflux.cli.parser().format_help()\n"
        "print([m for m in ('numpy', 'pandas', 'xarray', 'dask') if m in sys.modules])"
    )
    told = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=ROOT)
    assert told.stdout.strip() == "[]"


def test_the_module_runs_like_the_command():
    told = subprocess.run(
        [sys.executable, "-m", "sapflux", "--version"], capture_output=True, text=True, cwd=ROOT
    )
    assert told.stdout.startswith("sapflux 0.")


def test_two_sites_of_one_name_are_refused(tmp_path, capsys):
    import shutil

    twin = tmp_path / "other" / "orvelin"
    shutil.copytree(SITE, twin)
    assert main(["run", SITE, str(twin), "--out", str(tmp_path / "out")]) == 1
    assert (
        f"{SITE}, {twin}: sites of the same folder name 'orvelin' would share their results. Name "
        "each site once, give each folder its own name, or run them with another --out."
    ) in capsys.readouterr().err
    assert not (tmp_path / "out").exists()


def test_results_that_are_a_file_are_told(tmp_path, capsys):
    (tmp_path / "results").write_text("mine")
    assert main(["run", SITE, "--out", str(tmp_path / "results")]) == 1
    told = capsys.readouterr().err
    assert told.startswith(
        f"{tmp_path / 'results'}: the folder of results cannot be made (File exists). It, or a "
        "part of its path, is a file: choose another --out."
    )


def test_a_recipe_can_be_printed_changed_and_used(tmp_path, capsys):
    assert main(["stages", "--recipe", "stand_water_use"]) == 0
    text = capsys.readouterr().out.replace(
        'method = "quiet_nights"', 'method = "nightly_maximum"', 1
    )
    mine = tmp_path / "mine.toml"
    mine.write_text(text)
    assert main(["run", SITE, "--recipe", str(mine), "--dry-run"]) == 0
    assert "zero_flow_difference(method='nightly_maximum'" in capsys.readouterr().out


def test_a_dry_run_lists_files_and_goes_on_after_a_fault(starter, tmp_path, capsys):
    folder = broken(starter, tmp_path)
    assert main(["run", str(folder), SITE, "--dry-run"]) == 2
    told = capsys.readouterr()
    assert "upper_2031-09-03_copy.dat" in told.out and "latitude" in told.err


def test_jobs_takes_a_whole_number(capsys):
    with pytest.raises(SystemExit) as caught:
        main(["run", SITE, "--jobs", "x"])
    assert caught.value.code == 2
    assert "argument --jobs: takes a whole number from 1" in capsys.readouterr().err


def test_an_unknown_table_of_a_run_names_those_there_are(tmp_path):
    from sapflux import run_site
    from sapflux.errors import UserError

    run = run_site(SITE, out=tmp_path)
    with pytest.raises(UserError, match=r"no table 'dayly' in this run\. Did you mean 'daily'\?"):
        run.table("dayly")


def test_interrupts_end_a_batch_at_once(tmp_path):
    import shutil
    import signal
    import time

    twin = tmp_path / "twin"
    shutil.copytree(SITE, twin)
    command = [sys.executable, "-m", "sapflux", "run", SITE, str(twin), "--jobs", "2"]
    process = subprocess.Popen(
        [*command, "--out", str(tmp_path / "out")],
        stderr=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
        cwd=ROOT,
        start_new_session=True,
    )
    time.sleep(1.5)
    for _ in range(2):
        process.send_signal(signal.SIGINT)
        time.sleep(0.02)
    process.communicate(timeout=30)
    assert process.returncode in (0, 130, -signal.SIGINT)
