"""Sites that differ from the demo in one thing: what happens, and what is said of it."""

import shutil
from pathlib import Path

import numpy as np
import pytest

from sapflux import quality, run_site
from sapflux.cli import main
from sapflux.errors import DataError, SiteError
from sapflux.pipeline.api import run_and_keep, summary
from sapflux.pipeline.check import check_site
from sapflux.pipeline.recipe import find_recipe

SITE = Path(__file__).parents[1] / "configs" / "orvelin"


@pytest.fixture
def site(tmp_path):
    folder = tmp_path / "orvelin"
    shutil.copytree(SITE, folder)
    return folder


def run_alone(site, out):
    """The run of a site without the methods beside."""
    return run_and_keep(site, recipe="stand_water_use", out=out, beside=False)[0]


def edit(site, table, change):
    path = site / table
    text = path.read_text(encoding="utf-8") if path.exists() else ""
    path.write_text(change(text), encoding="utf-8")


def append(site, table, *rows):
    edit(site, table, lambda text: text.rstrip("\n") + "\n" + "\n".join(rows) + "\n")


def test_an_unheated_pair_is_no_probe_of_flow(site, tmp_path):
    append(site, "probes.csv", "N01,U2-05,unheated_pair,1.3,240,0,20,20,,,,,,,,,,2031-08-17 12:00")
    edit(
        site,
        "channels.csv",
        lambda text: text.replace(
            "upper,panel_C,log,upper,1,panel_temperature,degC",
            "upper,panel_C,probe,N01,1,unheated_difference,degC",
        ),
    )
    edit(site, "pairs.csv", lambda text: "unheated,heated\nN01,P01\n")
    run = run_alone(site, tmp_path / "out")
    assert "N01" not in run.probes["probe"].values
    assert "N01" in run.table("installations")["probe"].tolist()


def test_excluded_weather_sets_no_baseline(site, tmp_path):
    append(
        site,
        "exclusions.csv",
        'log,weather,2031-08-01 00:00,2031-12-01 00:00,"mouse in the shield",field crew',
    )
    run = run_alone(site, tmp_path / "out")
    assert run.table("zero_flow_nights")["accepted"].sum() == 0
    assert quality.has(run.probes["quality"].sel(probe="P01", point=1).values, "no_baseline").all()
    (note,) = [text for text in run.record["notes"] if "(no_baseline)" in text]
    assert note.startswith("P01, P02, ") and "P15: hardly any record can be used: " in note


def move_p01(site):
    """P01 goes from the 10 min logger to a 30 min logger at noon of 11 September."""
    raw = site / "raw"
    lines = ["TIMESTAMP,dT_P01"]
    stamps = np.arange("2031-09-11T12:00", "2031-10-27T00:00", 30, dtype="datetime64[m]")[1:]
    lines += [f"{str(stamp).replace('T', ' ')}:00,0.2800" for stamp in stamps]
    (raw / "spare.csv").write_text("\n".join(lines) + "\n")
    edit(
        site,
        "site.toml",
        lambda text: (
            text
            + (
                '\n[layouts.spare]\n\n[logs.spare]\nfiles = ["raw/spare.csv"]\nlayout = "spare"\n'
                'interval_min = 30.0\nstamp = "end"\nclock = "utc+1"\n'
            )
        ),
    )
    edit(
        site,
        "channels.csv",
        lambda text: (
            text.replace("quantity,unit\n", "quantity,unit,from,to\n")
            .replace(
                "upper,dT_P01,probe,P01,1,heated_emf,mV",
                "upper,dT_P01,probe,P01,1,heated_emf,mV,,2031-09-11 12:00\n"
                "spare,dT_P01,probe,P01,1,heated_emf,mV,2031-09-11 12:00,",
            )
            .replace("mV\n", "mV,,\n")
            .replace(",K\n", ",K,,\n")
        ),
    )
    edit(
        site,
        "channels.csv",
        lambda text: (
            "\n".join(
                row if row.count(",") == 8 else row + "," * (8 - row.count(","))
                for row in text.splitlines()
            )
            + "\n"
        ),
    )


def test_a_probe_that_moves_to_a_slower_logger_stays_one_probe_with_its_flags(site, tmp_path):
    move_p01(site)
    append(site, "exclusions.csv", "log,upper,2031-09-20 00:00,2031-09-21 00:00,test,me")
    run = run_site(site, out=tmp_path / "out")
    assert run.probes["probe"].values.tolist().count("P01") == 1
    own = run.probes.sel(probe="P01", point=1)
    early = own["quality"].sel(time=slice("2031-08-20", "2031-09-05")).values
    assert not quality.has(early, "no_record").all()
    # what happened on the first logger is told as on a probe that did not move
    outage = own["quality"].sel(time=slice("2031-09-04T12:00", "2031-09-04T13:00")).values
    stays = run.probes.sel(probe="P02", point=1)
    assert (
        outage == stays["quality"].sel(time=slice("2031-09-04T12:00", "2031-09-04T13:00")).values
    ).all()
    # an exclusion of the first logger after the move does not touch it
    later = slice("2031-09-20T02:00", "2031-09-20T20:00")
    assert not quality.has(own["quality"].sel(time=later).values, "excluded").any()
    assert quality.has(stays["quality"].sel(time=later).values, "excluded").all()
    assert own["flux_density"].sel(time=later).notnull().any()


def test_two_trees_are_too_few_and_every_refused_day_says_so(site, tmp_path):
    gone = ("P07,", "P08,")
    edit(
        site,
        "probes.csv",
        lambda text: "\n".join(row for row in text.splitlines() if not row.startswith(gone)) + "\n",
    )
    edit(
        site,
        "channels.csv",
        lambda text: (
            "\n".join(row for row in text.splitlines() if "P07" not in row and "P08" not in row)
            + "\n"
        ),
    )
    note = (
        "beech in upper has 2 instrumented trees, and a total needs 3 (fewest_trees of the "
        "recipe's stand_transpiration): it will have none"
    )
    assert note in check_site(site)["notes"]
    daily = run_alone(site, tmp_path / "out").table("daily")
    beech = daily.query("stand == 'upper' and species == 'beech'")
    assert (beech["valid"] == 0).all()
    usual = beech["reason"].value_counts().idxmax()
    assert usual == "too few live trees: at most 2 at a time"


def test_a_needle_short_of_the_sapwood_without_a_profile_is_told_and_flagged(site, tmp_path):
    edit(
        site,
        "profiles.csv",
        lambda text: (
            "\n".join(row for row in text.splitlines() if not row.startswith("spruce")) + "\n"
        ),
    )
    notes = check_site(site)["notes"]
    assert any("is deeper than the needles reach, and no profile says" in note for note in notes)
    run = run_alone(site, tmp_path / "out")
    bits = run.probes["quality"].sel(probe="P01", point=1).values
    assert quality.has(bits, "incomplete_radius").any()


def test_a_mistyped_name_in_a_long_table_is_told(site, tmp_path):
    (site / "raw" / "long.csv").write_text(
        "TIMESTAMP,probe,what,value\n2031-09-01 00:10:00,N1,volts,12.1\n"
    )
    edit(
        site,
        "site.toml",
        lambda text: (
            text
            + (
                "\n[layouts.rows]\n"
                'long = {name_columns = ["probe", "what"], value_column = "value"}\n'
                '\n[logs.rows]\nfiles = ["raw/long.csv"]\nlayout = "rows"\ninterval_min = 10.0\n'
                'stamp = "end"\nclock = "utc"\n'
            )
        ),
    )
    append(site, "channels.csv", "rows,N1/vlots,log,rows,1,battery_voltage,V")
    run = run_alone(site, tmp_path / "out")
    line = len((site / "channels.csv").read_text().splitlines())
    assert (
        f"{site}/channels.csv, row {line}: log 'rows' has no value of 'N1/vlots'. "
        "Did you mean 'N1/volts'? Known: N1/volts."
    ) in run.record["notes"]


def test_hourly_logs_that_miss_the_half_hour_of_the_site_are_told_before_a_run(site):
    edit(site, "site.toml", lambda text: text.replace("utc_offset_h = 1.0", "utc_offset_h = 1.75"))
    with pytest.raises(SiteError) as caught:
        check_site(site)
    assert (
        f"{site}/site.toml, [logs.upper]: its whole intervals end 5 min after those of the site's "
        "standard time (utc_offset_h 1.75). Let utc_offset_h and the log's clock differ by whole "
        "intervals."
    ) in [str(fault) for fault in caught.value.faults]


def test_the_files_say_where_along_the_needle_a_value_was_measured(tmp_path):
    run = run_alone(SITE, tmp_path / "out")
    probes = run.probes
    assert probes["radial_from"].sel(probe="P16").values.tolist() == [0.010, 0.025]
    assert probes["radial_to"].sel(probe="P16").values.tolist() == [0.015, 0.030]
    assert set(np.unique(probes["installation"].values)) == {0}
    trees = run.trees
    assert "quality" in trees["tree_flow"].attrs["ancillary_variables"]
    assert quality.has(trees["quality"].values, "heater_failure").any()


def test_channels_that_leave_no_record_of_a_probe_are_told(site, tmp_path):
    head, *rows = (site / "channels.csv").read_text().splitlines()
    late = [f"{row},2040-01-01" for row in rows]
    (site / "channels.csv").write_text("\n".join([head + ",from", *late]) + "\n")
    with pytest.raises(DataError) as caught:
        run_alone(site, tmp_path / "out")
    first, *of_logs = map(str, caught.value.faults)
    assert first == (
        f"{site}: the downloads hold no record of a probe. Run `sapflux check {site}`; see from "
        "and to in channels.csv."
    )
    assert (
        f"{site}/site.toml, [logs.upper]: log 'upper' gives no record: 12690 of 12692 data lines "
        "lie outside from and to of all its channels. Correct from and to in channels.csv, or "
        "'clock' and 'time_format' of the log."
    ) in of_logs


def test_a_column_in_the_wrong_unit_empties_the_totals_and_the_reason_is_told(site, tmp_path):
    edit(site, "channels.csv", lambda text: text.replace("heated_emf,mV", "heated_emf,V"))
    run = run_alone(site, tmp_path / "out")
    (note,) = [text for text in run.record["notes"] if "(out_of_range)" in text]
    assert note == (
        "P01, P02, P03, P04, P05, P06, P07, P08, P09, P10: hardly any record can be used: beyond "
        "what the instrument can give (out_of_range)"
    )
    (told,) = summary(run)["refused"]
    assert told.startswith("upper: 70 days refused, most often because: no instrumented tree has")


@pytest.mark.parametrize("last", ["join", "probe_flow", "tree_flow", "stand_transpiration"])
def test_a_recipe_may_end_at_any_level(last, tmp_path, capsys):
    text = find_recipe("stand_water_use").read_text(encoding="utf-8")
    head, _, rest = text.partition("# From flux density to trees")
    scaling, _, totals = rest.partition("# When a period")
    blocks = scaling.split("[[scaling]]")[1:]
    names = [block.split('"')[1] for block in blocks]
    kept = blocks[: names.index(last) + 1] if last != "join" else []
    recipe = tmp_path / "mine.toml"
    recipe.write_text(head + "".join(f"[[scaling]]{b}" for b in kept) + "# When" + totals)
    assert main(["run", str(SITE), "--recipe", str(recipe), "--out", str(tmp_path / "out")]) == 0
    told = capsys.readouterr().out
    assert ("Season totals" in told) == (last == "stand_transpiration")
    written = {path.stem for path in (tmp_path / "out" / "orvelin").glob("*.nc")}
    levels = {
        "join": set(),
        "probe_flow": set(),
        "tree_flow": {"trees"},
        "stand_transpiration": {"trees", "stand"},
    }
    assert written == {"probes", "origin"} | levels[last]


def test_a_clock_that_fell_back_to_its_epoch_stretches_nothing_and_is_told(site, tmp_path):
    path = site / "raw" / "upper_2031-09-18.dat"
    lines = path.read_text(encoding="utf-8").splitlines(keepends=True)
    lost = [line.replace('"2031-09-', '"1990-01-', 1) for line in lines[1000:1100]]
    path.write_text("".join([*lines[:1000], *lost, *lines[1100:]]), encoding="utf-8")
    run = run_alone(site, tmp_path / "out")
    assert str(run.probes["time"].values[0]) > "2031"
    assert "100 records of log 'upper' lie outside the installations of its probes" in " ".join(
        run.record["notes"]
    )
