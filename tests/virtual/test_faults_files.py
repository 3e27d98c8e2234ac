"""Faults of clocks, files and trees: what the program's own reader finds in the files."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from sapflux import run_site
from sapflux.ingest.ledger import ledger_table
from sapflux.ingest.logs import read_log
from sapflux.ingest.parse import parse
from sapflux.ingest.text import as_utf8
from sapflux.site.load import load_site
from sapflux.site.tables import Channel
from sapflux.virtual import truth as tables
from sapflux.virtual.copy import grow_copy, write_copy
from sapflux.virtual.copy_files import downloads
from sapflux.virtual.faults import KINDS, Injected
from sapflux.virtual.faults_clock import drifted
from sapflux.virtual.faults_kinds import AFTER, BEFORE
from sapflux.virtual.faults_tree import with_deaths

SITE = load_site(Path(__file__).parents[2] / "configs" / "orvelin")
DAY = np.timedelta64(1, "D")
LOG, FIRST, SECOND = "pulse_a", "2032-05-31", "2032-06-15"  # its downloads, by their names


@pytest.fixture(scope="module")
def grown():
    truth, plan = grow_copy(SITE, seed=2, days=45)
    one = {LOG: plan.logs[LOG]}
    channels = tuple(row for row in plan.channels if row.log == LOG)
    return truth, replace(plan, logs=one, channels=channels)


def path(day, more=""):
    return f"raw/{LOG}/{LOG}_{day}{more}.txt"


def files_with(grown, *faults):
    truth, plan = grown
    return dict(downloads(replace(truth, faults=faults), SITE, plan))


def fault(kind, begin, end, size=1.0, name=LOG, log=LOG):
    begin, end = np.datetime64(begin, "s"), np.datetime64(end, "s")
    return Injected(kind, log, name, begin, end, size, "", 1)


def read(content):
    """The reader's records: (stamp, values by name)."""
    layout = SITE.layouts[SITE.logs[LOG].layout]
    found = parse(as_utf8(content, layout.encoding), layout)
    values = {name: found.values[:, n] for n, name in enumerate(found.columns)}
    return found.local.astype("datetime64[us]").astype("datetime64[s]"), values


WHOLE = ("2032-04-30T23:00", "2032-05-30T23:00")


def test_summer_time_moves_the_stamps_by_an_hour_and_no_value(grown):
    clean = files_with(grown)
    made = files_with(grown, fault("summer_time", "2032-05-10", "2032-05-20"))
    before, after = read(clean[path(FIRST)]), read(made[path(FIRST)])
    moved = (before[0] > np.datetime64("2032-05-10")) & (before[0] <= np.datetime64("2032-05-20"))
    gap = (after[0] - before[0]) / np.timedelta64(60, "s")
    assert set(gap[moved]) == {60.0} and set(gap[~moved]) == {0.0}
    assert moved.sum() == 480
    for name, values in before[1].items():
        np.testing.assert_array_equal(values, after[1][name])
    assert made[path(SECOND)] == clean[path(SECOND)]


def test_a_mixed_up_stamp_is_the_start_of_its_interval(grown):
    made = files_with(grown, fault("stamp_mixup", "2032-05-10", "2032-05-20", 30.0))
    before, after = read(files_with(grown)[path(FIRST)])[0], read(made[path(FIRST)])[0]
    gap = (after - before) / np.timedelta64(60, "s")
    assert sorted(set(gap)) == [-30.0, 0.0]
    assert (gap < 0).sum() == 480


def test_a_clock_without_its_date_counts_on_from_an_epoch(grown):
    made = files_with(grown, fault("clock_reset", "2032-05-10", "2032-05-12", 2.0))
    stamps = read(made[path(FIRST)])[0]
    old = stamps < np.datetime64("2031-01-01")
    assert old.sum() == 96
    assert str(stamps[old][0]) in ("1990-01-02T00:30:00", "2000-01-01T00:30:00")
    assert set(np.diff(stamps[old])) == {np.timedelta64(1800, "s")}


def test_a_fast_clock_shows_what_was_before():
    """A ramp of one a second, 100 s d-1 fast: after two days a stamp holds 200 less."""
    end = np.datetime64("2032-05-01", "s") + np.arange(0, 10 * 86400, 1800).astype("m8[s]")
    ramp = ((end - end[0]) / np.timedelta64(1, "s"))[:, None]
    made = drifted(ramp, end, (fault("clock_drift", "2032-05-03", "2032-05-06", 100.0),))
    lost = dict(zip(end.astype(str), (ramp - made)[:, 0], strict=True))
    assert lost["2032-05-03T00:00:00"] == 0.0
    assert lost["2032-05-05T00:00:00"] == pytest.approx(200.0)
    assert lost["2032-05-06T00:30:00"] == 0.0


def test_a_new_order_of_columns_keeps_what_each_holds(grown):
    clean = files_with(grown)
    made = files_with(grown, fault("column_order", "2032-05-20", "2032-06-14T23:00"))
    for day in (FIRST, SECOND):
        assert made[path(day)] != clean[path(day)]
        before, after = read(clean[path(day)]), read(made[path(day)])
        np.testing.assert_array_equal(before[0], after[0])
        for name, values in before[1].items():
            np.testing.assert_array_equal(values, after[1][name])
    heads = [line for line in made[path(FIRST)].decode().splitlines() if line.startswith("time")]
    assert len(heads) == 2 and heads[0] != heads[1]
    assert made[path(SECOND)].decode().startswith(heads[1] + "\n")


def test_conflicts_are_the_share_of_the_overlap(grown):
    clean = files_with(grown)
    made = files_with(
        grown, fault("overlap_conflict", "2032-05-29T23:00", "2032-06-14T23:00", 0.25, path(SECOND))
    )
    assert made[path(FIRST)] == clean[path(FIRST)]
    (stamps, before), (_, after) = (read(one[path(SECOND)]) for one in (clean, made))
    other = np.zeros(len(stamps), bool)
    for name, values in before.items():
        other |= values != after[name]
    assert other.sum() == 12  # of 48
    assert stamps[other].max() <= np.datetime64("2032-05-30T23:00")


def test_a_truncated_download_lacks_its_last_days(grown):
    cut = fault("truncated_file", "2032-05-26T23:00", WHOLE[1], 4.0, path(FIRST))
    made = files_with(grown, cut)
    stamps = read(made[path(FIRST)])[0]
    assert str(stamps[-1]) == "2032-05-26T23:00:00"
    assert len(stamps) == 26 * 48


def test_files_are_saved_twice_left_empty_torn_and_spoiled(grown):
    clean = files_with(grown)[path(FIRST)]
    lines = clean.decode().splitlines()
    made = {
        kind: files_with(grown, fault(kind, *WHOLE, size, path(FIRST)))
        for kind, size in (
            ("duplicate_file", 1.0), ("empty_file", 1.0), ("torn_line", 0.5), ("nul_bytes", 40.0),
            ("trailing_delimiters", 1.0), ("header_again", 1.0),
        )
    }  # fmt: skip
    assert made["duplicate_file"][path(FIRST, "_copy")] == clean
    assert made["empty_file"][path(FIRST, "_empty")] == b""
    assert made["empty_file"][path(FIRST)] == clean
    torn = made["torn_line"][path(FIRST)]
    assert clean.startswith(torn)
    assert len(torn) == pytest.approx(len(clean) - 1 - len(lines[-1]) / 2, abs=1)
    assert made["nul_bytes"][path(FIRST)].count(b"\0") == 40
    trailing = made["trailing_delimiters"][path(FIRST)].decode().splitlines()
    assert trailing == [line + "," for line in lines]
    again = made["header_again"][path(FIRST)].decode().splitlines()
    assert again.count(lines[0]) == 2 and len(again) == len(lines) + 1
    assert [line for line in again if line != lines[0]] == lines[1:]


def test_a_new_column_leaves_what_the_others_hold(grown):
    clean = files_with(grown)
    added = fault("column_added", "2032-05-20", "2032-06-14T23:00")
    again = fault("header_again", *WHOLE, 1.0, path(FIRST))
    for faults in ((added,), (added, again)):
        made = files_with(grown, *faults)
        before, after = read(clean[path(FIRST)]), read(made[path(FIRST)])
        assert set(after[1]) - set(before[1]) == {"lithium_V"}
        new = after[0] > np.datetime64("2032-05-20")
        assert np.isnan(after[1]["lithium_V"][~new]).all()
        np.testing.assert_allclose(after[1]["lithium_V"][new], 3.6, atol=0.2)
        for name, values in before[1].items():
            np.testing.assert_array_equal(values, after[1][name])


def test_a_decimal_comma_in_mid_file_spares_the_stamps(grown):
    clean = files_with(grown)[path(FIRST)].decode().splitlines()
    comma = fault("decimal_comma", "2032-05-26T23:00", WHOLE[1], 4.0, path(FIRST))
    made = files_with(grown, comma)[path(FIRST)].decode().splitlines()
    changed = [n for n, pair in enumerate(zip(clean, made, strict=True)) if len(set(pair)) > 1]
    assert changed == list(range(len(clean) - 4 * 48, len(clean)))
    for n in changed:
        stamp, _, numbers = clean[n].partition(",")
        assert made[n] == f"{stamp},{numbers.replace('.', ',')}"


def test_lines_are_garbled_and_repeated(grown):
    clean = files_with(grown)[path(FIRST)].decode().splitlines()
    few = fault("garbled_line", *WHOLE, 3.0, path(FIRST))
    made = files_with(grown, few)[path(FIRST)].decode().splitlines()
    ((old, new),) = [p for p in zip(clean, made, strict=True) if len(set(p)) > 1]
    assert len(old) == len(new)
    assert sum(a != b for a, b in zip(old, new, strict=True)) <= 3
    twice = fault("repeated_lines", *WHOLE, 60.0, path(FIRST))
    made = files_with(grown, twice)[path(FIRST)].decode().splitlines()
    assert len(made) == len(clean) + 60
    assert list(dict.fromkeys(made)) == clean


@pytest.fixture(scope="module")
def short():
    return grow_copy(SITE, seed=2, days=5)


@pytest.mark.parametrize("log", SITE.logs)
def test_the_reader_accounts_for_every_line_of_every_spoiled_file(short, log, tmp_path):
    """The classes of the ledger sum to the lines; only lines that were struck are rejected."""
    truth, plan = short
    one = replace(plan, logs={log: plan.logs[log]},
                  channels=tuple(row for row in plan.channels if row.log == log))  # fmt: skip
    column = one.channels[0].column
    begin, end = truth.weather.end[0], truth.weather.end[-1]
    late = end - 2 * DAY
    rejected = {}
    ((name, _),) = downloads(truth, SITE, one)
    for kind, start, size in (
        ("column_added", begin, 1.0), ("decimal_comma", late, 2.0), ("repeated_lines", begin, 30.0),
        ("garbled_line", begin, 4.0), ("text_code", late, 48.0), ("header_again", begin, 1.0),
    ):  # fmt: skip
        struck = Injected(kind, log, name if kind != "text_code" else column, start, end, size, "",
                          1, (column,) if kind == "text_code" else ())  # fmt: skip
        folder = tmp_path / kind
        ((name, content),) = downloads(replace(truth, faults=(struck,)), SITE, one)
        (folder / name).parent.mkdir(parents=True)
        (folder / name).write_bytes(content)
        channels = tuple(r for r in SITE.table("channels") if r.log == log)
        site = replace(SITE, folder=folder, logs=one.logs, layouts=one.layouts,
                       tables={**SITE.tables, "channels": channels})  # fmt: skip
        ledger = ledger_table(read_log(site, log)).iloc[0]
        classes = ledger[["header", "kept", "duplicate", "conflicting", "rejected", "blank",
                          "outside"]]  # fmt: skip
        assert classes.sum() == ledger["lines"] == content.decode().count("\n"), kind
        rejected[kind] = ledger["rejected"]
        if kind == "repeated_lines":
            assert ledger["duplicate"] == 30
    every_s = round(one.logs[log].interval_min * 60)
    assert rejected["column_added"] == rejected["repeated_lines"] == rejected["header_again"] == 0
    assert rejected["garbled_line"] <= 1
    assert 0 < rejected["decimal_comma"] <= 2 * 86400 // every_s
    assert rejected["text_code"] in (0, 2 * 86400 // every_s)  # INF is no value, ERROR no number


def test_a_dead_tree_takes_its_flow_out_of_the_truth_and_its_probes(grown):
    truth, plan = grown
    tree = truth.probes["P16"][0].tree
    begin = truth.weather.end[20 * 144 - 1]
    died = Injected("tree_death", LOG, tree, begin, truth.weather.end[-1], 2.0, "d", 2)
    dead = with_deaths(replace(truth, faults=(died,)))
    after = truth.weather.end > begin + 2 * DAY
    assert not dead.tree_flow(tree)[after].any()
    assert truth.tree_flow(tree)[after].max() > 0.0
    early = truth.weather.end <= begin
    np.testing.assert_array_equal(dead.tree_flow(tree)[early], truth.tree_flow(tree)[early])
    assert not dead.point_flux("P16")[:, after].any()
    stem = truth.known[tree].stem
    one, other = (t.strata[stem.stand][stem.species] for t in (truth, dead))
    lost = (one.daily_kg - other.daily_kg).sum(axis=0)
    flow = truth.tree_flow(tree) - dead.tree_flow(tree)
    np.testing.assert_allclose(lost, tables.daily_sums(flow, truth.step_s), atol=1e-12)
    assert lost[:20].max() == 0.0 and lost[23:].max() > 0.0
    before = read(dict(downloads(truth, SITE, plan))[path(SECOND)])[1]
    shown = read(dict(downloads(dead, SITE, plan))[path(SECOND)])[1]
    swing = [np.ptp(np.log(v["P16_1_down"] / v["P16_1_up"])) for v in (before, shown)]
    assert swing[1] < 0.2 * swing[0]


FEW_PROBES = {"P01", "P02", "P11", "P16", "P20"}


def test_the_pipeline_runs_to_its_end_with_many_faults(tmp_path):
    probes = tuple(row for row in SITE.table("probes") if row.probe in FEW_PROBES)
    channels = tuple(
        row for row in SITE.table("channels") if row.kind != "probe" or row.id in FEW_PROBES
    )
    # P16 keeps temperatures at its outer point and a bare ratio at the inner one.
    channels = [row for row in channels if row.id != "P16"]
    channels += [
        Channel(log="pulse_a", column=name, kind="probe", id="P16", point=point, quantity=name,
                unit=unit)
        for point, name, unit in (*((1, name, "degC") for name in (*BEFORE, *AFTER)),
                                  (2, "heat_ratio", "1"))
    ]  # fmt: skip
    site = replace(SITE, tables={**SITE.tables, "probes": probes, "channels": tuple(channels)})
    truth = write_copy(site, tmp_path / "copy", seed=1, days=42, faults="many")
    assert {fault.kind for fault in truth.faults} >= set(KINDS) - {"frost"}
    run = run_site(tmp_path / "copy", out=tmp_path / "out")
    ledger = run.table("ledger")
    assert ledger["rejected"].sum() > 0 and ledger["duplicate"].sum() > 0
    trees = run.table("tree_daily")
    season = trees[(trees["start"] >= "2032-05-01") & (trees["valid"] == 1)]
    assert set(season["tree"]) <= {probe[0].tree for probe in truth.probes.values()}
    assert len(season) > 42
    assert np.isfinite(season["water_use_kg"]).all()
