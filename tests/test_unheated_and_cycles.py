"""The demo site with an unheated pair and a needle heated in cycles, from files to flux."""

import shutil
import tomllib
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import sapflux.correction  # noqa: F401
from sapflux import quality
from sapflux.pipeline.compute import compute
from sapflux.pipeline.plan import plan_faults
from sapflux.pipeline.recipe import find_recipe, load_recipe, read_recipe
from sapflux.site.load import load_site
from sapflux.virtual.copy import write_copy

DEMO = Path(__file__).parents[1] / "configs" / "orvelin"
FIRST, LAST = "2031-08-17T12:00", "2031-10-27T00:00"
ADDED = """
[layouts.added]
quote = ""
time_columns = ["time"]
time_format = "%Y-%m-%dT%H:%M"
[logs.pair]
files = ["raw/added_pair.csv"]
layout = "added"
interval_min = 60.0
stamp = "end"
clock = "utc+1"
[logs.cycles]
files = ["raw/added_cycles.csv"]
layout = "added"
interval_min = 5.0
stamp = "end"
clock = "utc+1"
"""
WARM, COLD = 7.0, 2.5  # K, at the end of heating without flow and of the pause
IN_FLOW = 6.1  # K, by day: (7 - 2.5) / (6.1 - 2.5) = 1.25


def stamps(step_min):
    return np.arange(FIRST, LAST, step_min, dtype="datetime64[m]")[1:]


def write(folder, name, column, times, values):
    lines = [f"time,{column}", *(f"{t},{v:.3f}" for t, v in zip(times, values, strict=True))]
    (folder / "raw" / name).write_text("\n".join(lines) + "\n", encoding="utf-8")


def replaced(folder, file, *changes):
    path = folder / file
    text = path.read_text(encoding="utf-8") if path.exists() else ""
    for old, new in changes:
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    path.write_text(text, encoding="utf-8")


def in_columns(text, *more):
    """A table with more columns, blank in every row."""
    head, *rows = text.splitlines()
    return "\n".join([f"{head},{','.join(more)}", *(row + "," * len(more) for row in rows)]) + "\n"


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """P02 has an unheated pair until October, P01 is heated for 15 min in each half-hour."""
    folder = tmp_path_factory.mktemp("site") / "orvelin"
    shutil.copytree(DEMO, folder)
    (folder / "site.toml").write_text(
        (folder / "site.toml").read_text(encoding="utf-8") + ADDED, encoding="utf-8"
    )
    replaced(
        folder, "channels.csv",
        ("upper,dT_P01,probe,P01,1,heated_emf,mV",
         "cycles,dT,probe,P01,1,heated_difference,K\npair,dT,probe,N02,1,unheated_difference,K"),
    )  # fmt: skip
    path = folder / "probes.csv"
    text = in_columns(path.read_text(encoding="utf-8"), "heating_on_min", "heating_off_min")
    (p01,) = (row for row in text.splitlines() if row.startswith("P01,"))
    (p02,) = (row for row in text.splitlines() if row.startswith("P02,"))
    n02 = p02.replace("P02,", "N02,").replace("heat_dissipation", "unheated_pair")
    text = text.replace(p01, p01.removesuffix(",,") + ",15,15") + n02 + "\n"
    path.write_text(text, encoding="utf-8")
    (folder / "pairs.csv").write_text("unheated,heated\nN02,P02\n", encoding="utf-8")
    path = folder / "calibrations.csv"
    text = in_columns(path.read_text(encoding="utf-8"), "heating")
    own = "spruce-cycles,spruce,heat_dissipation,359.7,1,,,,,,invented,2030-05-01,intermittent\n"
    path.write_text(text + own, encoding="utf-8")
    times = stamps(60)
    times = times[times <= np.datetime64("2031-10-01T00:00")]
    write(folder, "added_pair.csv", "dT", times, np.full(len(times), 0.3))
    times = stamps(5)
    minute = (times - times.astype("datetime64[h]")).astype(int)
    hour = (times - times.astype("datetime64[D]")).astype(int) / 60
    warm = np.where((hour > 8) & (hour <= 18), IN_FLOW, WARM)
    values = np.select(
        [minute % 30 == m for m in (5, 10, 15, 20, 25)], [4.0, 5.5, warm, 4.0, 3.0], COLD
    )
    write(folder, "added_cycles.csv", "dT", times, values)
    return folder


def plain():
    """The default recipe without what changes the difference for the needle's place in the wood."""
    raw = tomllib.loads(find_recipe("stand_water_use").read_text(encoding="utf-8"))
    chain = raw["heat_dissipation"]
    raw["heat_dissipation"] = [step for step in chain if step["stage"] != "sapwood_contact"]
    for step in [step for name in ("heat_dissipation", "heat_ratio") for step in raw[name]]:
        step.pop("beside", None)
    return read_recipe(raw, "plain.toml", "plain")


@pytest.fixture(scope="module")
def found(folder):
    return compute(load_site(folder), plain(), native=True)


def test_the_recipe_runs_on_it(folder):
    assert [str(fault) for fault in plan_faults(load_site(folder), load_recipe())] == []


def test_the_pair_is_subtracted_from_its_probe_alone(found):
    native = found.native["heat_dissipation", 600]
    gradient, bits = native["natural_gradient"], native["quality"]
    early = slice("2031-09-01", "2031-09-30T22:00")
    ours = gradient.sel(probe="P02", point=1, time=early)
    assert ours.notnull().any()
    np.testing.assert_allclose(ours.dropna("time"), 0.3, rtol=1e-12)
    others = gradient.drop_sel(probe="P02").values
    assert (others[np.isfinite(others)] == 0.0).all()
    # Its log ends in October, and without a reading there is no difference.
    late = bits.sel(probe="P02", point=1, time=slice("2031-10-01T00:00", "2031-10-20")).values
    expected = ~quality.masked(late & ~np.int64(quality.FLAGS["no_gradient"].mask))
    assert quality.has(late, "no_gradient")[expected].all() and quality.masked(late).all()
    assert quality.has(bits.sel(probe="P02", time=early).values, "steep_gradient").any()


def test_cycles_become_one_difference_and_zero_by_night(found):
    native = found.native["heat_dissipation", 300]
    heated = native["heated_difference"].sel(probe="P01", point=1)
    by_day = heated.sel(time=slice("2031-09-10T08:00", "2031-09-10T16:00"))  # UTC+1 less an hour
    np.testing.assert_allclose(by_day, IN_FLOW - COLD, rtol=1e-9)
    by_night = heated.sel(time=slice("2031-09-10T18:00", "2031-09-11T06:00"))
    np.testing.assert_allclose(by_night, WARM - COLD, rtol=1e-9)
    assert not quality.has(native["quality"].values, "heater_failure").any()
    index = native["flow_index"].sel(probe="P01", point=1)
    noon = index.sel(time=slice("2031-09-10T10:00", "2031-09-10T14:00"))
    np.testing.assert_allclose(noon, 0.25, rtol=1e-6)
    flux = found.probes["flux_density"].sel(probe="P01", point=1)
    noon = flux.sel(time=slice("2031-09-10T10:00", "2031-09-10T14:00"))
    assert noon.notnull().all() and (noon > 0.2 * 0.3597).all()


def test_a_copy_of_ring_porous_wood_that_is_calibrated_for_cycles_alone(folder, tmp_path):
    site = load_site(folder)
    probes = tuple(
        row.model_copy(update={"heating_on_min": 15.0, "heating_off_min": 15.0})
        if row.probe in ("P11", "P12", "P13", "P14", "P15")
        else row
        for row in site.table("probes")
    )
    calibrations = tuple(
        row.model_copy(update={"heating": "intermittent"}) for row in site.table("calibrations")
    )
    site = replace(site, tables=site.tables | {"probes": probes, "calibrations": calibrations})
    write_copy(site, tmp_path / "copy", seed=1, first_day="2032-06-01", days=2)
    assert [str(fault) for fault in plan_faults(load_site(tmp_path / "copy"), load_recipe())] == []


def test_a_virtual_copy_keeps_the_pair_and_heats_without_a_break(folder, tmp_path):
    site = load_site(folder)
    truth = write_copy(site, tmp_path / "copy", seed=1, first_day="2032-06-01", days=3)
    copy = load_site(tmp_path / "copy")
    assert [(row.unheated, row.heated) for row in copy.table("pairs")] == [("N02", "P02")]
    assert all(row.heating_on_min is None for row in copy.table("probes"))
    assert "heating cycle of probe P01: it is heated without a break" in truth.left_out
    assert [str(fault) for fault in plan_faults(copy, load_recipe())] == []
    run = compute(copy, plain(), native=True)
    gradient = [
        part["natural_gradient"] for part in run.native.values() if "natural_gradient" in part
    ]
    (ours,) = (part.sel(probe="P02") for part in gradient if "P02" in part["probe"])
    # What the stem shows in full sun is in the copy's truth [K].
    tree = next(row.tree for row in site.table("probes") if row.probe == "P02")
    assert float(abs(ours).max()) == pytest.approx(abs(truth.gradients[tree]), abs=0.03)
