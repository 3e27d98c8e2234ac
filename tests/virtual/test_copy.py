"""The virtual copy of a site: complete, loadable, the same by seed, and true to what it tells."""

import csv
import tomllib
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from sapflux import run_site
from sapflux.errors import SiteError
from sapflux.site import inventory
from sapflux.site.config import Layout, LongTable
from sapflux.site.load import load_site
from sapflux.site.tables import Channel, Pair, Plot, Probe, Survey, Tree
from sapflux.virtual import truth as tables
from sapflux.virtual.copy import grow_copy, period, write_copy
from sapflux.virtual.copy_channels import SUPPORTED
from sapflux.virtual.copy_values import log_values, stem_diameter_change
from sapflux.virtual.forest import effective_area

SITE = load_site(Path(__file__).parents[2] / "configs" / "orvelin")


def with_tables(site, **tables_of):
    return replace(site, tables={**site.tables, **tables_of})


PLAN = replace(with_tables(SITE, channels=(), visits=(), exclusions=()), layouts={}, logs={})


def files_in(folder):
    return {p.relative_to(folder): p.read_bytes() for p in sorted(folder.rglob("*")) if p.is_file()}


def rows(path):
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


@pytest.fixture(scope="module")
def exact(tmp_path_factory):
    folder = tmp_path_factory.mktemp("copies") / "exact"
    return folder, write_copy(SITE, folder, seed=3, days=45, knowledge="exact")


def test_same_seed_same_bytes_and_another_seed_other_bytes(tmp_path):
    for name, seed in (("a", 1), ("b", 1), ("c", 2)):
        write_copy(PLAN, tmp_path / name, seed=seed, days=3)
    one, again, other = (files_in(tmp_path / name) for name in "abc")
    assert one == again
    raw = [path for path in one if path.parts[0] == "raw"]
    assert len(raw) == 3
    assert all(one[path] != other[path] for path in raw)


def test_the_copy_keeps_position_design_layouts_and_logs(exact):
    folder, _ = exact
    copy = load_site(folder)
    assert copy.position == SITE.position
    assert copy.layouts == SITE.layouts
    for name, log in SITE.logs.items():
        assert copy.logs[name].model_copy(update={"files": log.files}) == log
    assert copy.table("channels") == SITE.table("channels")
    for name in ("probe", "tree", "method", "depth_from_mm", "depth_to_mm", "embedded_spacing_mm"):
        given, made = SITE.table("probes"), copy.table("probes")
        assert [getattr(r, name) for r in made] == [getattr(r, name) for r in given]


def test_downloads_overlap_by_a_day(exact):
    folder, _ = exact
    first, second = sorted((folder / "raw" / "pulse_a").iterdir())
    stamps = [
        [line.split(",")[0] for line in path.read_text().splitlines()[1:]]
        for path in (first, second)
    ]
    assert len(set(stamps[0]) & set(stamps[1])) == 48
    assert stamps[1][-1] == "2032-06-14T23:00"


@pytest.mark.parametrize("site", [SITE, PLAN], ids=["with logs", "a plan without logs"])
def test_the_pipeline_finds_the_season_of_the_trees_with_probes(site, tmp_path):
    """Within 1 % of error-free sampling, the bound that the program promises for clean sites."""
    truth = write_copy(site, tmp_path / "copy", seed=3, days=70, knowledge="exact", gradients=False)
    run = run_site(tmp_path / "copy", out=tmp_path / "out")
    assert run.table("ledger")["rejected"].sum() == 0
    daily = run.table("daily").query("species == 'all' and valid == 1")
    dates = [str(day) for day in truth.dates]
    for stand, by_species in truth.strata.items():
        own = daily[daily["stand"] == stand]
        assert len(own) > 65
        sampled = sum(truth.sampled_mm(stand, species) for species in by_species)
        expected = sampled[[dates.index(day) for day in own["start"]]].sum()
        assert own["transpiration_mm"].sum() == pytest.approx(expected, rel=0.01)


def test_exact_tables_say_the_truth_of_every_stem(exact):
    folder, truth = exact
    copy = load_site(folder)
    for stem in truth.stems:
        row = next(r for r in copy.table("surveys") if r.stem == stem.name)
        species = inventory.species_row(copy, stem.species)
        bark = inventory.bark_thickness(copy, stem.name)
        cores = inventory.core_rows(copy, stem.name)
        area = inventory.stem_sapwood_area(row, cores, bark, species)
        assert area == pytest.approx(stem.sapwood_area, rel=1e-8)
    per_ground = inventory.sapwood_per_ground(copy)
    for stand, by_species in truth.strata.items():
        for species, stratum in by_species.items():
            expected = stratum.counted_area / stratum.ground
            assert per_ground[stand, species] == pytest.approx(expected, rel=1e-8)


def test_exact_tables_say_the_truth_of_every_probe(exact):
    folder, truth = exact
    copy = load_site(folder)
    widths = {row.probe: row.width_mm for row in copy.table("wounds")}
    samples = {row.tree: row for row in copy.table("wood")}
    for name in ("P16", "P20"):
        (probe,) = truth.probes[name]
        assert widths[name] == pytest.approx(probe.wound_width * 1000.0, rel=1e-8)
        assert samples[probe.tree].dry_density_kg_m3 == pytest.approx(probe.dry_density)
        assert samples[probe.tree].water_content == pytest.approx(probe.water_content)
    calibrations = {row.species: row for row in copy.table("calibrations")}
    for name in ("P01", "P11"):
        (probe,) = truth.probes[name]
        row = calibrations[truth.known[probe.tree].stem.species]
        assert row.factor_g_m2_s == pytest.approx(probe.factor * 1000.0)
        assert row.exponent == probe.exponent


def test_an_exact_profile_integrates_to_the_flow_of_its_tree(exact):
    """Rings by hand: flow = vigour * outer flux * sum of 2 pi (R - r) s(r) dr."""
    folder, truth = exact
    copy = load_site(folder)
    stem = truth.known["U2-05"].stem
    nodes = [(r.relative_depth, r.ratio) for r in copy.table("profiles") if r.tree == "U2-05"]
    depth = (np.arange(20000) + 0.5) / 20000 * stem.sapwood_depth
    shape = np.interp(depth / stem.sapwood_depth, *np.array(nodes).T)
    ring = 2.0 * np.pi * (stem.xylem_radius - depth) * stem.sapwood_depth / 20000
    by_hand = (ring * shape).sum() * stem.vigour * truth.outer("U2-05")
    np.testing.assert_allclose(truth.tree_flow("U2-05"), by_hand, rtol=1e-4)


def test_estimated_tables_are_near_the_truth_and_not_the_truth(tmp_path):
    truth = write_copy(PLAN, tmp_path / "copy", seed=3, days=2)
    copy = load_site(tmp_path / "copy")
    cored = {row.tree for row in copy.table("cores")}
    assert cored == {row.tree for row in copy.table("probes")}
    errors = []
    for name in cored:
        faces = [row.sapwood_depth_cm / 100.0 for row in copy.table("cores") if row.tree == name]
        assert len(faces) == 2
        errors.append(np.mean(faces) / truth.known[name].stem.sapwood_depth - 1.0)
    assert 0.003 < np.std(errors) < 0.03
    assert all(row.species and not row.tree for row in copy.table("profiles"))
    widths = {row.probe: row.width_mm for row in copy.table("wounds")}
    off = [widths[f"P{n}"] - truth.probes[f"P{n}"][0].wound_width * 1000.0 for n in range(16, 21)]
    assert 0.0 < np.abs(off).max() < 0.2
    for row in copy.table("species"):
        stems = [stem for stem in truth.stems if stem.species == row.species]
        given = sum(
            row.sapwood_area_a_cm2 * (s.diameter * 100) ** row.sapwood_area_b for s in stems
        )
        ratio = given / sum(stem.sapwood_area * 1e4 for stem in stems)
        assert 0.75 < ratio < 1.3 and abs(ratio - 1.0) > 1e-4


def test_truth_parts_sum_to_the_stand(exact):
    _, truth = exact
    seconds = truth.step_s
    for stand, by_species in truth.strata.items():
        whole = sum(tables.stand_mm(stratum) for stratum in by_species.values())
        stems = [stem for stem in truth.stems if stem.stand == stand]
        ground = printed_ground(stand)
        by_stem = sum(truth.tree_flow(stem.name).sum() * seconds for stem in stems) / ground
        assert whole.sum() == pytest.approx(by_stem, rel=1e-9)


def printed_ground(stand):
    """Plan areas of the plots as printed in plots.csv: U1 lies on a slope of 20 degrees."""
    return {"upper": 425.0 * np.cos(np.radians(20.0)) + 400.0, "lower": 850.0}[stand]


def test_stand_ins_carry_species_without_probes(exact):
    _, truth = exact
    assert truth.carriers == {"maple": "beech"}
    maple, beech = truth.strata["lower"]["maple"], truth.strata["lower"]["beech"]
    np.testing.assert_allclose(
        truth.sampled_mm("lower", "maple") / truth.sampled_mm("lower", "beech"),
        maple.areas.sum() / beech.areas.sum(),
    )


def test_point_flux_is_the_mean_along_the_part_in_sapwood(exact):
    _, truth = exact
    for name in ("P11", "P16"):
        parts = truth.probes[name]
        stem = truth.known[parts[0].tree].stem
        flux = truth.point_flux(name)
        ratio = []
        for begin, end in ((0.0, 0.020),) if name == "P11" else ((0.010, 0.015), (0.025, 0.030)):
            depth = np.linspace(begin, min(end, stem.sapwood_depth), 4001)
            ratio.append(truth.flux_at(stem.name)(depth)[:, 6 * 12].mean())
        # eight Gauss nodes against the kinks of the profile
        np.testing.assert_allclose(flux[:, 6 * 12], ratio, rtol=2e-3)
    assert effective_area(stem, truth.known[stem.name].nodes) < stem.sapwood_area


def test_zero_flow_is_what_the_logger_shows_at_rest(exact):
    """The logged difference stays below it by day and meets it on a humid night."""
    folder, truth = exact
    kelvin = truth.zero_flow("P11")
    path = sorted((folder / "raw" / "lower").iterdir())[0]
    lines = path.read_text().splitlines()
    place = lines[1].split(";").index("dT_P11")
    text = [line.split(";")[place] for line in lines[2:]]
    logged = np.array([float(cell.replace(",", ".")) for cell in text])
    share = logged / kelvin[: len(logged)]
    assert share.max() == pytest.approx(1.0, abs=0.01)
    assert share.min() < 0.9
    assert 8.0 < truth.zero_flow("P01").min() < truth.zero_flow("P01").max() < 12.0
    with pytest.raises(KeyError, match="not of heat dissipation"):
        truth.zero_flow("P16")
    with pytest.raises(KeyError, match="no probe"):
        truth.point_flux("P99")


def test_what_a_site_lacks_is_told_all_at_once(tmp_path):
    site = with_tables(SITE, probes=(), surveys=(), species=())
    with pytest.raises(SiteError) as told:
        write_copy(site, tmp_path / "copy", seed=1)
    assert [str(fault).partition(": ")[0].rpartition("/")[2] for fault in told.value.faults] == [
        "probes.csv", "surveys.csv", "species.csv",
    ]  # fmt: skip
    assert "List the probes of the design" in str(told.value)
    assert not (tmp_path / "copy").exists()


def test_sapwood_that_nothing_tells_is_a_fault(tmp_path):
    bare = tuple(
        row.model_copy(update={"sapwood_area_a_cm2": None, "sapwood_area_b": None})
        for row in SITE.table("species")
    )
    with pytest.raises(SiteError, match="'maple' has no allometry and stem 'U1-17' no core"):
        write_copy(with_tables(SITE, species=bare), tmp_path / "copy", seed=1)


def test_a_folder_that_holds_something_is_left_alone(tmp_path):
    (tmp_path / "note.txt").write_text("mine")
    with pytest.raises(SiteError, match="something is there already"):
        write_copy(PLAN, tmp_path, seed=1, days=2)
    assert [path.name for path in tmp_path.iterdir()] == ["note.txt"]


def test_settings_that_cannot_be_are_refused(tmp_path):
    with pytest.raises(ValueError, match="exact, estimated"):
        write_copy(PLAN, tmp_path / "copy", seed=1, knowledge="perfect")
    with pytest.raises(ValueError, match="at least 2"):
        write_copy(PLAN, tmp_path / "copy", seed=1, days=1)


def test_the_period_is_a_growing_season_after_the_latest_survey():
    assert [str(part) for part in period(SITE)] == ["2032-05-01", "153"]
    south = replace(SITE, position=SITE.position.model_copy(update={"latitude_deg": -43.0}))
    assert [str(part) for part in period(south)] == ["2031-11-01", "152"]
    assert [str(part) for part in period(SITE, "2033-06-15", 731)] == ["2033-06-15", "731"]


def test_a_southern_site_has_its_summer_at_the_turn_of_the_year(tmp_path):
    position = SITE.position.model_copy(
        update={"latitude_deg": -43.5, "longitude_deg": 171.0, "utc_offset_h": 12.0}
    )
    leafy = tuple(
        row.model_copy(update={"leaf_on": "10-01", "leaf_off": "05-15"}) if row.leaf_on else row
        for row in SITE.table("species")
    )
    site = with_tables(replace(PLAN, position=position), species=leafy)
    truth, _ = grow_copy(site, seed=1, first_day="2032-01-01", days=366)
    light = tables.daily_sums(truth.weather.shortwave_radiation, truth.step_s)
    warmth = tables.daily_sums(truth.weather.air_temperature, truth.step_s)
    for series in (light, warmth):
        assert series[:60].mean() > series[150:210].mean()
    beech = tables.stand_mm(truth.strata["lower"]["beech"])
    assert beech[:60].mean() > 0.3
    assert beech[150:210].max() < 1e-6  # out of leaf from 15 May on
    load_site(written(site, tmp_path))


def written(site, tmp_path, **settings):
    write_copy(site, tmp_path / "copy", seed=1, days=2, **settings)
    return tmp_path / "copy"


LAYOUTS = {
    "blanks": Layout(delimiter="space", units_line=2, time_columns=("d", "t"),
                     time_format="%d/%m/%y %H:%M"),
    "blanks, stamp in quotes": Layout(delimiter="space", time_format="%Y-%m-%d %H:%M"),
    "own offset, utf-16": Layout(delimiter="|", decimal=",", encoding="utf-16",
                                 time_format="%Y-%m-%d %H:%M:%S%z"),
    "long": Layout(delimiter=";", decimal=",", quote="", time_format="%Y-%m-%d %H:%M",
                   long=LongTable(name_columns=("what", "column"), value_column="value")),
}  # fmt: skip


@pytest.mark.parametrize("name", LAYOUTS)
def test_every_layout_gives_the_same_records_as_the_plain_one(name, tmp_path):
    channels = tuple(
        row.model_copy(update={"column": f"{row.kind}/{row.column}"})
        for row in SITE.table("channels")
    )
    read = []
    for place, layout in enumerate((Layout(), LAYOUTS[name])):
        site = replace(SITE, layouts=dict.fromkeys(SITE.layouts, layout))
        site = with_tables(site, channels=channels)
        write_copy(site, tmp_path / str(place), seed=1, days=2)
        read.append(parsed(load_site(tmp_path / str(place))))
    plain, other = read
    assert plain.keys() == other.keys()
    for log, values in plain.items():
        np.testing.assert_array_equal(values, other[log])


def parsed(site):
    """log -> (record, channel) of its only download, read with the program's reader."""
    from sapflux.ingest.parse import parse
    from sapflux.ingest.text import as_utf8

    found = {}
    for name, log in site.logs.items():
        (path,) = site.folder.glob(log.files[0])
        layout = site.layouts[log.layout]
        read = parse(as_utf8(path.read_bytes(), layout.encoding), layout)
        columns = [row.column for row in site.table("channels") if row.log == name]
        if read.cell is None:
            found[name] = read.values[:, [read.columns.index(column) for column in columns]]
        else:
            by_column = [read.values[read.cell == read.columns.index(c), 0] for c in columns]
            found[name] = np.array(by_column).T
    return found


def test_every_supported_quantity_is_written_and_others_are_told(tmp_path):
    probes = (
        *SITE.table("probes"),
        probe("N1", "U2-05", "heat_dissipation", "0 20", "20 40"),
        probe("N2", "U2-05", "unheated_pair", "0", "20"),
        probe("N3", "L1-12", "heat_ratio", "10", "15",
              spacing_downstream_mm=6, spacing_upstream_mm=6.2),
    )  # fmt: skip
    wanted = [("probe", "N1", 1, "heated_difference", "degF"),
              ("probe", "N1", 2, "heated_difference", "K"),
              ("probe", "N1", 1, "heater_state", "%"),
              ("probe", "N1", 1, "heater_current", "mA"),
              ("probe", "N2", 1, "unheated_emf", "uV"),
              ("probe", "N2", 1, "unheated_difference", "K"),
              *(("probe", "N3", 1, f"temperature_{when}_{where}stream", "degC")
                for when in ("before", "after") for where in ("down", "up")),
              ("probe", "N3", 1, "heat_ratio", "1"),
              ("tree", "U2-05", 1, "stem_temperature", "degF"),
              ("tree", "U2-05", 1, "stem_diameter_change", "um"),
              ("site", "", 1, "vapour_pressure_deficit", "kPa"),
              ("site", "", 1, "net_radiation", "W m-2"),
              ("site", "", 1, "discharge", "L s-1"),
              ("stand", "upper", 1, "air_temperature", "degC")]  # fmt: skip
    more = [
        Channel(
            log="upper", column=f"n{at}", kind=kind, id=name, point=point, quantity=q, unit=unit
        )
        for at, (kind, name, point, q, unit) in enumerate(wanted)
    ]
    pairs = (Pair(unheated="N2", heated="N1"),)
    site = with_tables(SITE, probes=probes, channels=(*SITE.table("channels"), *more), pairs=pairs)
    truth = write_copy(site, tmp_path / "copy", seed=1, days=2)
    copy = load_site(tmp_path / "copy")
    shown = {row.quantity for row in copy.table("channels")}
    assert shown == SUPPORTED
    assert [text for text in truth.left_out if text.startswith("channel")] == [
        "channel n15 of log upper: discharge is not supported",
    ]
    values = parsed(copy)["upper"]
    assert np.isfinite(values).all()
    at = [row.column for row in copy.table("channels") if row.log == "upper"].index
    after, before = values[:, at("n8")], values[:, at("n6")]
    assert 0.2 < (after - before).mean() < 2.0
    kelvin = values[:, at("n0")] / 1.8  # degrees Fahrenheit of a difference
    share = kelvin / truth.zero_flow("N1")
    assert 0.6 < share.min() < 0.99 and 0.98 < share.max() < 1.01
    assert truth.point_flux("N1").shape == (2, len(truth.weather.end))
    assert copy.table("pairs") == pairs


def test_an_unheated_pair_shows_what_its_stem_adds_to_the_heated_one():
    """Of a steep gradient, in kelvin: the heated probe with it less that without is the pair's."""
    unheated = probe("N2", "U2-05", "unheated_pair", "0", "20")
    pair = Channel(log="upper", column="pair", kind="probe", id="N2",
                   quantity="unheated_difference", unit="K")  # fmt: skip
    heated = next(row for row in SITE.table("probes") if row.tree == "U2-05")
    assert heated.method == "heat_dissipation"
    kelvin = Channel(log="upper", column="heated", kind="probe", id=heated.probe,
                     quantity="heated_difference", unit="K")  # fmt: skip
    pairs = (Pair(unheated="N2", heated=heated.probe),)
    probes = (*SITE.table("probes"), unheated)
    site = with_tables(SITE, probes=probes, channels=(kelvin, pair), pairs=pairs)
    shown = []
    for gradients in (True, False):
        truth, plan = grow_copy(site, seed=2, days=6, gradients=gradients)
        truth = replace(truth, gradients={name: 10.0 * g for name, g in truth.gradients.items()})
        parts = {
            name: tuple(replace(part, gradient=10.0 * part.gradient) for part in own)
            if name == heated.probe else own
            for name, own in truth.probes.items()
        }  # fmt: skip
        rows = [row for row in plan.channels if row.column in ("heated", "pair")]
        shown.append(log_values(replace(truth, probes=parts), site, rows, 1))
    added = shown[0] - shown[1]
    assert np.ptp(added[:, 1]) > 0.1
    # a type T pair gives 0.1 % more for each kelvin of wood: at 10 K above the reference 1 %
    np.testing.assert_allclose(added[:, 0], added[:, 1], rtol=0.03, atol=1e-4)


def test_a_dendrometer_shrinks_with_flow_and_is_level_once_the_store_is_full():
    """By hand: at a steady flow the store lacks lag * flow; 1.5 um for each kg m-2 of sapwood."""
    truth, _ = grow_copy(SITE, seed=2, days=20)
    stem = truth.known["U2-05"].stem
    change = stem_diameter_change(truth, "U2-05")
    flow = truth.tree_flow("U2-05") / stem.sapwood_area
    lag = truth.species[stem.species].response.storage_lag
    grown = change + 1.5e-6 * lag * (flow - flow[0])
    growth = np.diff(grown)
    np.testing.assert_allclose(growth, growth[0], rtol=1e-6)  # a straight line of growth
    assert 0.5e-3 < growth[0] * 150 * 144 < 3.0e-3
    days = (change - grown).reshape(20, 144)
    hours = (np.arange(144) + 0.5) / 6.0
    assert (20e-6 < np.ptp(days, axis=1)).sum() > 12  # tens of micrometres on a sunny day
    deepest = hours[np.argmin(days, axis=1)]
    assert 11.0 < np.median(deepest) < 18.0
    before_dawn = np.abs(np.diff(days[:, 12:24], axis=1)).max(axis=1)
    assert np.median(before_dawn) < 0.02 * np.median(np.ptp(days, axis=1))


def test_a_site_with_traces_cycles_and_growing_wounds_is_copied_in_a_simpler_way(tmp_path):
    """Each simplification is named, and the pipeline runs on the copy."""
    probes = tuple(
        row.model_copy(update={"heating_on_min": 10.0, "heating_off_min": 10.0})
        if row.probe == "P11" else row
        for row in SITE.table("probes")
    )  # fmt: skip
    kept = [row for row in SITE.table("channels") if row.log != "pulse_a"]
    traces = [
        Channel(log="pulse_a", column=f"P16_{side}", kind="probe", id="P16",
                quantity=f"temperature_trace_{side}stream", unit="degC")
        for side in ("down", "up")
    ]  # fmt: skip
    battery = next(row for row in SITE.table("channels") if row.column == "battery")
    log = SITE.logs["pulse_a"].model_copy(update={"trace_step_s": 1.0, "pulse_starts_s": 30.0})
    wounds = tuple(
        row.model_copy(update={"final_width_mm": row.width_mm + 0.3, "time_constant_d": 40.0})
        for row in SITE.table("wounds")
    )
    stranger = Tree(tree="X1", stand="upper", species="spruce")
    growing = Channel(log="upper", column="D", kind="tree", id="X1",
                      quantity="stem_diameter_change", unit="mm")  # fmt: skip
    site = with_tables(SITE, probes=probes, channels=(*kept, *traces, battery, growing),
                       wounds=wounds, trees=(*SITE.table("trees"), stranger))  # fmt: skip
    site = replace(site, logs={**SITE.logs, "pulse_a": log})
    truth = write_copy(site, tmp_path / "copy", seed=1, days=4)
    told = "\n".join(truth.left_out)
    for part in ("heating cycle of probe P11", "traces of pulses", "widths that grow",
                 "diameter of tree X1"):  # fmt: skip
        assert part in told
    copy = load_site(tmp_path / "copy")
    assert copy.logs["pulse_a"].trace_step_s is None
    assert {c.quantity for c in copy.table("channels") if c.id == "P16"} == {
        "rise_downstream", "rise_upstream",
    }  # fmt: skip
    run = run_site(tmp_path / "copy", out=tmp_path / "out")
    assert run.table("ledger")["rejected"].sum() == 0


def test_a_measured_diffusivity_is_the_woods_and_is_carried(tmp_path):
    """Given 0.0031 cm2 s-1: the copy's wood has it, its table says it exactly or within 15 %."""
    wood = tuple(row.model_copy(update={"diffusivity_cm2_s": 0.0031}) for row in SITE.table("wood"))
    site = with_tables(SITE, wood=wood)
    for knowledge, bound in (("exact", 1e-9), ("estimated", 0.15)):
        folder = tmp_path / knowledge
        truth = write_copy(site, folder, seed=3, days=2, knowledge=knowledge)
        assert truth.probes["P16"][0].wood_diffusivity == pytest.approx(3.1e-7)
        shown = {row.diffusivity_cm2_s for row in load_site(folder).table("wood")}
        off = np.array([value / 0.0031 - 1.0 for value in shown])
        assert np.abs(off).max() < bound
        assert knowledge == "exact" or np.abs(off).min() > 1e-4
    truth, _ = grow_copy(SITE, seed=3, days=2)
    assert truth.probes["P16"][0].diffusivity is None


def probe(name, tree, method, begin, end, **more):
    return Probe(probe=name, tree=tree, method=method, height_m=1.3, depth_from_mm=begin,
                 depth_to_mm=end, installed="2031-08-17", **more)  # fmt: skip


def test_what_was_logged_of_an_earlier_installation_is_left_out():
    """P01 had two points and was re-drilled with one; its column was renamed on the way."""
    first = next(row for row in SITE.table("probes") if row.probe == "P01")
    moved = {"installed": np.datetime64("2031-09-20T12:00").item(), "needle_length_mm": 20.0}
    old = first.model_copy(
        update={"depth_from_mm": (0.0, 20.0), "depth_to_mm": (20.0, 40.0),
                "removed": moved["installed"]}
    )  # fmt: skip
    new = first.model_copy(update=moved)
    others = tuple(row for row in SITE.table("probes") if row.probe != "P01")
    channel = SITE.table("channels")[0]
    assert channel.id == "P01"
    until = channel.model_copy(update={"to": moved["installed"]})
    since = channel.model_copy(update={"from_": moved["installed"], "column": "new"})
    inner = until.model_copy(update={"point": 2, "column": "inner"})
    site = with_tables(SITE, probes=(new, old, *others),
                       channels=(until, since, inner, *SITE.table("channels")[1:]))  # fmt: skip
    truth, plan = grow_copy(site, seed=1, days=2)
    assert [row.column for row in plan.channels if row.id == "P01"] == ["new"]
    assert plan.channels[0].from_ is None
    assert truth.point_flux("P01").shape[0] == 1
    assert [text for text in truth.left_out if text.startswith("channel")] == [
        "channel dT_P01 of log upper: heated_emf from an earlier time",
        "channel inner of log upper: heated_emf of an earlier installation",
    ]


def test_nested_plots_outside_trees_and_names_that_recur_count_as_the_pipeline_counts(tmp_path):
    """Thin stems are measured on 100 m2 inside a plot of 400 m2: each stands for four."""
    plots = (
        Plot(plot="A", stand="upper", plan_area_m2=400, smallest_diameter_cm=20),
        Plot(plot="B", stand="upper", plan_area_m2=100, smallest_diameter_cm=5, within="A"),
        Plot(plot="C", stand="lower", plan_area_m2=500),
    )
    stems = [("A", "T1", "spruce", 30), ("A", "2", "spruce", 40), ("B", "2", "spruce", 10),
             ("B", "T2", "spruce", 12), ("C", "2", "spruce", 25),
             ("C", "T3", "spruce", 28)]  # fmt: skip
    surveys = tuple(
        Survey(plot=plot, stem=stem, species=species, date="2031-08-11", diameter_cm=diameter)
        for plot, stem, species, diameter in stems
    )
    trees = (
        *(Tree(tree=f"T{n}", stand=s, species="spruce")
          for n, s in ((1, "upper"), (2, "upper"), (3, "lower"))),
        Tree(tree="T4", stand="lower", species="spruce", diameter_cm=33),
    )  # fmt: skip
    probes = tuple(probe(f"P{n}", f"T{n}", "heat_dissipation", "0", "20") for n in range(1, 5))
    species = tuple(row for row in SITE.table("species") if row.species == "spruce")
    empty = dict.fromkeys(("cores", "wounds", "wood", "profiles", "calibrations"), ())
    site = with_tables(PLAN, plots=plots, surveys=surveys, trees=trees, probes=probes,
                       species=species, **empty)  # fmt: skip
    truth = write_copy(site, tmp_path / "copy", seed=1, days=2, knowledge="exact")
    counts = {one.stem.name: one.count for one in truth.known.values()}
    assert counts == {"T1": 1, "A-2": 1, "B-2": 4, "T2": 4, "C-2": 1, "T3": 1, "T4": 0}
    copy = load_site(tmp_path / "copy")
    per_ground = inventory.sapwood_per_ground(copy)
    for stand, by_species in truth.strata.items():
        stratum = by_species["spruce"]
        expected = stratum.counted_area / stratum.ground
        assert per_ground[stand, "spruce"] == pytest.approx(expected, rel=1e-8)
    assert truth.strata["upper"]["spruce"].ground == 400.0
    assert truth.strata["lower"]["spruce"].sampled.sum() == 2
    assert copy.table("calibrations")[0].factor_g_m2_s == pytest.approx(118.99)


def test_the_copy_says_that_it_is_one(tmp_path):
    folder = written(PLAN, tmp_path)
    text = (folder / "site.toml").read_text(encoding="utf-8")
    assert text.startswith("# A virtual copy of Orvelin")
    assert tomllib.loads(text)["logs"]["virtual_heat_ratio"]["interval_min"] == 30.0
    assert {row["source"] for row in rows(folder / "wounds.csv")} == {"virtual"}
