"""The demo site: what it promises, the mess in its downloads, and the same bytes every time."""

import csv
import subprocess
import sys
import tomllib
from collections import Counter, defaultdict
from pathlib import Path

import numpy as np
import pytest

from sapflux.site.load import load_site
from sapflux.virtual import demo, demo_forest, demo_plan, demo_raw, demo_signals
from sapflux.virtual.weather import quiet_nights

ROOT = Path(__file__).parents[2]
SITE, TRUTH = ROOT / "configs" / "orvelin", ROOT / "tests" / "truth" / "orvelin"


@pytest.fixture(scope="module")
def truth():
    return demo_forest.grow(demo_plan.SEED)


@pytest.fixture(scope="module")
def raw():
    return {path.name: path.read_bytes() for path in sorted((SITE / "raw").iterdir())}


def rows(path):
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def files_in(folder):
    return {p.relative_to(folder): p.read_bytes() for p in sorted(folder.rglob("*")) if p.is_file()}


def test_what_is_committed_is_what_the_generator_writes(tmp_path):
    """In a process of its own: no hash seed, no earlier draw may matter."""
    site, beside = tmp_path / "site", tmp_path / "truth"
    command = [sys.executable, "-m", "sapflux.virtual.demo", str(site), str(beside)]
    done = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=True)
    assert done.stdout.endswith(" MB\n")
    assert files_in(site) == files_in(SITE)
    assert files_in(beside) == files_in(TRUTH)


def test_another_seed_writes_another_site(tmp_path):
    demo.write_demo(tmp_path / "site", tmp_path / "truth", seed=demo_plan.SEED + 1)
    other = files_in(tmp_path / "site")
    same = {path for path, content in files_in(SITE).items() if other[path] == content}
    assert not any(path.parts[0] == "raw" and SITE.joinpath(path).stat().st_size > 300
                   for path in same)  # fmt: skip
    load_site(tmp_path / "site")


def test_the_repository_holds_at_most_four_megabytes():
    everything = {**files_in(SITE), **{Path("t") / p: c for p, c in files_in(TRUTH).items()}}
    assert sum(map(len, everything.values())) <= 4e6


def test_the_site_is_valid_and_knows_nothing_of_the_truth():
    site = load_site(SITE)
    assert site.key == "orvelin"
    names = " ".join(str(path) for path in files_in(SITE))
    assert "truth" not in names and "stems" not in names
    assert "vigour" not in "".join(p.read_text() for p in SITE.glob("*.csv"))


def test_enough_probes_and_trees():
    probes = rows(SITE / "probes.csv")
    methods = Counter(row["method"] for row in probes)
    assert methods["heat_dissipation"] >= 14 and methods["heat_ratio"] >= 4
    assert all(len(p["depth_to_mm"].split()) == 2 for p in probes if p["method"] == "heat_ratio")
    trees = {row["tree"]: row for row in rows(SITE / "trees.csv")}
    groups = defaultdict(set)
    for probe in probes:
        tree = trees[probe["tree"]]
        groups[tree["stand"], tree["species"]].add(probe["tree"])
    assert all(len(named) >= 3 for named in groups.values())
    assert {species for _, species in groups} == {"spruce", "beech", "oak"}


def test_weather_has_quiet_nights_and_a_dry_spell(truth):
    quiet = quiet_nights(truth.weather, 1.0)
    assert 0.25 <= quiet.mean() <= 0.40
    spells = "".join("q" if night else "." for night in quiet).split("q")
    assert max(map(len, spells)) >= 10
    assert truth.weather.air_temperature.min() > 273.15


def test_trees_differ_by_a_quarter_or_more(truth):
    seasons = defaultdict(list)
    for stem in truth.stems:
        if stem.alive:
            seasons[stem.species].append(truth.tree_flow(stem.name).sum() / stem.sapwood_area)
    for species in ("spruce", "beech", "oak"):
        flow = np.array(seasons[species])
        assert flow.std(ddof=1) / flow.mean() >= 0.25


def test_sapwood_against_the_needle(truth):
    for stem in demo_forest.instrumented(truth):
        if stem.species == "spruce":
            assert stem.sapwood_depth >= 0.040
        elif stem.species == "oak":
            assert 0.6 <= stem.sapwood_depth / 0.020 < 1.0
        else:
            assert stem.sapwood_depth > 0.030


def test_some_flow_on_dry_nights_and_hardly_any_on_quiet_ones(truth):
    flow = truth.outer(demo_forest.instrumented(truth)[0].name).reshape(-1, 144)
    before_dawn, noon = flow[:, 18:30].mean(axis=1), flow[:, 66:84].mean(axis=1)
    quiet = quiet_nights(truth.weather, 1.0)
    dry = ~quiet & (noon > np.median(noon))
    share = before_dawn[dry].mean() / noon[dry].mean()
    assert 0.01 < share < 0.10
    assert before_dawn[quiet].max() < 0.02 * noon.max()


def test_truth_parts_sum_to_the_stand():
    totals = defaultdict(lambda: np.zeros(2))
    whole = {}
    for row in rows(TRUTH / "daily.csv"):
        pair = np.array([float(row["sampled_mm"]), float(row["stand_mm"])])
        if row["species"] == "all":
            whole[row["stand"], row["date"]] = pair
        else:
            totals[row["stand"], row["date"]] += pair
    assert len(whole) == 2 * 70
    for key, pair in whole.items():
        np.testing.assert_allclose(totals[key], pair, atol=3e-6)


def test_sampled_millimetres_follow_from_the_trees_and_their_areas():
    """By hand from the printed tables: sum of kg over sum of areas, times area per ground."""
    stems = rows(TRUTH / "stems.csv")
    ground = {"lower": 400.0 + 450.0}
    day = "2031-08-30"
    kg = {r["tree"]: float(r["kg"]) for r in rows(TRUTH / "trees.csv") if r["date"] == day}
    oaks = [r for r in stems if (r["stand"], r["species"]) == ("lower", "oak")]
    carried = [r for r in oaks if r["instrumented"] == "1"]
    ratio = sum(kg[r["stem"]] for r in carried) / sum(float(r["sapwood_area_cm2"]) for r in carried)
    by_hand = ratio * sum(float(r["sapwood_area_cm2"]) for r in oaks) / ground["lower"]
    printed = next(
        float(r["sampled_mm"])
        for r in rows(TRUTH / "daily.csv")
        if (r["stand"], r["species"], r["date"]) == ("lower", "oak", day)
    )
    assert printed == pytest.approx(by_hand, rel=1e-5)


def test_stated_design_fits_the_tables():
    stated = tomllib.loads((TRUTH / "truth.toml").read_text(encoding="utf-8"))
    assert stated["seed"] == demo_plan.SEED
    for stand, row in stated["stands"].items():
        own = [r for r in rows(TRUTH / "daily.csv") if (r["stand"], r["species"]) == (stand, "all")]
        sampled = sum(float(r["sampled_mm"]) for r in own)
        assert sampled == pytest.approx(row["season_sampled_mm"], abs=1e-3)
        assert 0.03 < row["design_sampling_se_mm"] / row["season_stand_mm"] < 0.20


def test_allometry_is_near_the_truth(truth):
    table = {row["species"]: row for row in rows(SITE / "species.csv")}
    for name, species in demo_plan.SPECIES.items():
        a = float(table[name]["sapwood_area_a_cm2"])
        b = float(table[name]["sapwood_area_b"])
        given, true = a * 30.0**b, species.area_a_cm2 * 30.0**species.area_b
        assert given == pytest.approx(true, rel=0.05)


def test_power_loss_shows_in_all_heated_signals_and_only_there(truth):
    on = demo_signals.powered_share("upper", truth.weather.end, 600)
    assert (on < 0.5).sum() == 18 * 6
    dissipation = {
        group.log: probe
        for group, probe in demo_forest.grouped_probes(truth)
        if group.log != "pulse_a"
    }
    emf = demo_signals.dissipation_emf(truth, dissipation["upper"], on)
    lost = np.flatnonzero(on == 0.0)
    assert np.abs(emf[lost[3:]]).max() < 0.02 * emf.max()
    assert demo_signals.powered_share("lower", truth.weather.end, 600).min() == 1.0


# The mess: each kind is looked for in the bytes, not in the generator's own account.


def lines(raw, name):
    return raw[name].decode().splitlines()


def test_files_without_data(raw):
    assert raw["lower_2031-08-17.csv"] == b""
    assert len(lines(raw, "upper_2031-08-17.dat")) == 4


def test_one_download_was_saved_twice(raw):
    assert raw["upper_2031-09-03.dat"] == raw["upper_2031-09-03_copy.dat"]


def test_downloads_overlap_and_three_cells_differ(raw):
    before = {x.split(",")[0]: x for x in lines(raw, "upper_2031-09-18.dat")[4:-1]}
    after = {x.split(",")[0]: x for x in lines(raw, "upper_2031-10-07.dat")[4:]}
    common = before.keys() & after.keys()
    assert len(common) > 60
    differing = [key for key in common if before[key] != after[key]]
    assert len(differing) == 3
    for key in differing:
        pairs = zip(before[key].split(","), after[key].split(","), strict=True)
        assert sum(one != two for one, two in pairs) == 1


def test_header_again_with_another_order(raw):
    names = [x for x in lines(raw, "upper_2031-10-07.dat") if x.startswith('"TIMESTAMP"')]
    assert len(names) == 2 and names[0] != names[1]
    assert sorted(names[0].split(",")) == sorted(names[1].split(","))
    assert lines(raw, "upper_2031-10-27.dat")[1] == names[1]


def test_header_again_in_the_same_order(raw):
    names = [x for x in lines(raw, "pulse_a_2031-09-18.txt") if x.startswith("time,")]
    assert len(names) == 2 and names[0] == names[1]


def test_torn_last_line(raw):
    content = raw["upper_2031-09-18.dat"]
    assert not content.endswith(b"\n")
    assert content.splitlines()[-1].count(b",") < content.splitlines()[4].count(b",")


def test_one_open_quote(raw):
    odd = [x for x in raw["upper_2031-10-27.dat"].splitlines() if x.count(b'"') % 2]
    assert len(odd) == 1


def test_ends_of_lines_nul_bytes_and_trailing_delimiters(raw):
    for name in ("lower_2031-09-03.csv", "lower_2031-10-27.csv"):
        assert raw[name].count(b"\r\n") == raw[name].count(b"\n") > 1000
    assert [n for n in raw if b"\0" in raw[n]] == ["lower_2031-09-18.csv"]
    assert all(x.endswith(";") for x in lines(raw, "lower_2031-10-07.csv"))
    assert not any(x.endswith(";") for x in lines(raw, "lower_2031-09-03.csv"))


def test_missing_codes(raw):
    assert raw["upper_2031-09-03.dat"].count(b'"NAN"') > 3
    assert raw["lower_2031-09-03.csv"].count(b";-6999") > 3


def test_the_repeated_hour_stands_twice(raw):
    stamps = [x.split(";")[0] for x in lines(raw, "lower_2031-10-27.csv")[2:]]
    twice = [stamp for stamp, count in Counter(stamps).items() if count > 1]
    assert twice == [f"26.10.2031 02:{minute:02d}" for minute in range(0, 60, 10)]


def test_midnight_as_2400(raw):
    cells = [x.split(",") for x in lines(raw, "weather_2031-09-18.csv")[1:]]
    assert sum(row[2] == "2400" for row in cells) == 31
    assert not any(row[2] == "0" for row in cells)


def test_the_account_names_real_lines(raw):
    told = {(row["file"], row["what"].split(",")[0]): row for row in rows(TRUTH / "mess.csv")}
    at = int(told["upper_2031-10-27.dat", "torn line with an open quote"]["line"])
    assert lines(raw, "upper_2031-10-27.dat")[at - 1].count('"') == 3
    at = int(told["lower_2031-09-18.csv", "NUL bytes in place of the rest of the line"]["line"])
    assert b"\0" in raw["lower_2031-09-18.csv"].split(b"\r\n")[at - 1]
    at = int(told["upper_2031-10-07.dat", "header again"]["line"])
    assert lines(raw, "upper_2031-10-07.dat")[at].startswith('"TIMESTAMP"')


def test_every_log_has_a_layout_of_its_own():
    assert len({log.layout for log in demo_raw.LOGS.values()}) == 5
    assert {log.stamp for log in demo_raw.LOGS.values()} == {"start", "end"}
