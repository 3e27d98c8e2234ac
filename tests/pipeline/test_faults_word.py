"""Faults from a screen to the files of a run: the second word of the flags, bits 31 to 61.

The screens here exist only while these tests run.
"""

from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from flags_by_hand import flags_defined

import sapflux.stage
from sapflux import quality, run_site
from sapflux.pipeline.execute import Chain, run_blocks
from sapflux.pipeline.recipe import Step, find_recipe
from sapflux.pipeline.scale import _along_time
from sapflux.quality import Flag
from sapflux.scaling.whole_stands import with_whole_stands
from sapflux.schema import RECORD
from sapflux.stage import Stage

SITE = Path(__file__).parents[2] / "configs" / "orvelin"
NOTING = Flag("noting_fault", 31, False, "a fault that only tells")
MASKING = Flag("masking_fault", 61, True, "a fault that masks")
OF_STAND = Flag("stand_fault", 45, False, "a fault of what is scaled")
FIRST, LAST = np.datetime64("2031-09-20T12:00"), np.datetime64("2031-09-20T15:00")  # UTC
SINGLE = np.datetime64("2031-09-21T10:50")  # one record of 10 min in a step of 30 min
SINGLE_STEP = np.datetime64("2031-09-21T11:00")
PROBE, TREE = "P01", "U2-05"


def screen_temporary(heated_difference, /):
    """Flags (probe, time) of one probe: three hours that mask, one record that is noted."""
    time, own = heated_difference["time"], heated_difference["probe"] == PROBE
    return {
        "masking_fault": own & (time > FIRST) & (time <= LAST),
        "noting_fault": own & (time == SINGLE),
    }


def screen_stands(stand_transpiration, /):
    """Flags (stand_species, time) of one stratum."""
    name = stand_transpiration["stand_species"].values[0]
    own = stand_transpiration["stand_species"] == name
    return {"stand_fault": own & (stand_transpiration["time"] <= FIRST)}


def recipe_with_screens(folder):
    """The default recipe as a file, with both screens."""
    text = find_recipe("stand_water_use").read_text(encoding="utf-8")
    places = [
        ('[[heat_dissipation]]\nstage = "zero_flow_difference"', "heat_dissipation", "temporary"),
        ('[[scaling]]\nstage = "dormancy"', "scaling", "stands"),
    ]
    for before, chain, screen in places:
        assert text.count(before) == 1
        text = text.replace(before, f'[[{chain}]]\nstage = "screen_{screen}"\n\n{before}')
    path = folder / "screened.toml"
    path.write_text(text, encoding="utf-8")
    return path


def placed(order, name, before):
    place = order.index(before)
    return (*order[:place], name, *order[place:])


@pytest.fixture(scope="module")
def runs(tmp_path_factory):
    """The demo site with both screens, whole and in blocks of 5 days."""
    folder = tmp_path_factory.mktemp("faults")
    stage, order, known = sapflux.stage.stage, sapflux.stage.ORDER, dict(sapflux.stage.REGISTRY)
    faults = flags_defined(NOTING, MASKING, OF_STAND, scaled=("stand_fault",))
    with pytest.MonkeyPatch.context() as own, faults:
        for chain, name, before in [
            ("heat_dissipation", "screen_temporary", "zero_flow_difference"),
            ("scaling", "screen_stands", "dormancy"),
        ]:
            own.setitem(order, chain, placed(order[chain], name, before))
        stage(chain="heat_dissipation", flags=("noting_fault", "masking_fault"))(screen_temporary)
        stage(chain="scaling", flags="stand_fault")(screen_stands)
        try:
            recipe = str(recipe_with_screens(folder))
            yield [
                run_site(SITE, recipe=recipe, out=folder / str(days), native=True, block_days=days)
                for days in (60, 5)
            ]
        finally:
            sapflux.stage.REGISTRY.clear()
            sapflux.stage.REGISTRY.update(known)


def words(file):
    return quality.joined(file["quality"], file["faults"])


@pytest.mark.parametrize("level", ["probes", "trees"])
def test_a_step_tells_every_fault_of_its_records_and_no_other_step_does(runs, level):
    file = runs[0].dataset(level)
    where = {"probe": PROBE, "point": 1} if level == "probes" else {"tree": TREE}
    step = np.timedelta64(30, "m")
    spans = [("masking_fault", FIRST, LAST), ("noting_fault", SINGLE_STEP - step, SINGLE_STEP)]
    for name, start, last in spans:
        told = quality.has(words(file), name)
        own = told.sel(**where)
        ends = np.arange(start, last, step) + step
        np.testing.assert_array_equal(file["time"].values[own.values], ends)
        assert told.sum() == own.sum()  # no other probe or tree


def test_a_masking_fault_takes_the_record_and_a_noting_one_does_not(runs):
    native = runs[0].dataset("heat_dissipation").sel(probe=PROBE, point=1)
    lost = quality.has(words(native), "masking_fault")
    assert lost.sum() == 18  # of 10 min in 3 h
    assert np.isnan(native["flux_density"].values[lost]).all()
    assert np.isfinite(native["heated_emf"].values[lost]).all()  # as it was measured
    assert np.isfinite(native["flux_density"].sel(time=SINGLE))
    assert quality.has(words(native.sel(time=SINGLE)), "noting_fault")


def test_the_share_of_each_fault_stands_beside_the_installation(runs):
    row = runs[0].table("installations").set_index("probe").loc[PROBE]
    # the table is printed to 4 decimals
    assert row["masking_fault_fraction"] == pytest.approx(18 / row["records"], abs=5e-5)
    assert row["masking_fault_fraction"] > 0.001
    assert "stand_fault_fraction" not in row


def test_the_first_word_names_the_flags_of_the_steps_alone(runs):
    file = runs[0].dataset("heat_ratio")
    assert file["quality"].dtype == file["faults"].dtype == np.int32
    assert not file["faults"].any()
    steps = [row.name for row in quality.ROWS if not row.is_fault]
    assert file["quality"].attrs["flag_meanings"].split() == steps


def test_a_stand_has_only_the_faults_of_what_is_scaled(runs):
    stand = runs[0].stand
    word = words(stand)
    first = str(stand["stand_species"].values[0])
    whole = f"{first.split('/')[0]}/all"
    early = stand["time"].values <= FIRST
    for name in stand["stand_species"].values.astype(str):
        told = quality.has(word.sel(stand_species=name), "stand_fault").values
        np.testing.assert_array_equal(told, early & (name in (first, whole)))
    assert not quality.has(word, "masking_fault").any()


def test_the_length_of_blocks_changes_no_flag(runs):
    for name in ("probes", "trees", "stand", "heat_dissipation", "heat_ratio"):
        np.testing.assert_array_equal(*(words(run.dataset(name)) for run in runs))
    for path in runs[0].folder.glob("*.csv"):
        assert path.read_bytes() == (runs[1].folder / path.name).read_bytes(), path.name


def test_the_convention_checker_has_no_complaint(runs, tmp_path):
    # compliance-checker, CF-1.11, with the standard name table it carries
    from compliance_checker.runner import CheckSuite, ComplianceChecker

    CheckSuite.load_all_available_checkers()
    files = sorted(runs[0].folder.glob("*.nc"))
    assert len(files) == 6
    for path in files:
        with xr.open_dataset(path) as file:
            assert ("faults" in file) == (path.stem != "origin")
            if path.stem == "probes":
                beside = file["flux_density"].attrs["ancillary_variables"]
                assert beside == "quality faults origin"
                real = [2 ** (row.bit - 31) for row in quality.ROWS if row.is_fault]
                assert file["faults"].attrs["flag_masks"].tolist() == [*real, 1, 2**30, 2**14]
        report = tmp_path / "report.txt"
        passed, errors = ComplianceChecker.run_checker(
            str(path), ["cf:1.11"], 0, "strict", output_filename=str(report)
        )
        assert passed and not errors, report.read_text()


@pytest.mark.parametrize("days", [1, 2, None])
def test_a_whole_word_survives_the_cutting_and_joining_of_blocks(days):
    """A word with its highest and lowest bit is no number that a float could hold."""
    time = np.datetime64("2031-06-01T01", "ns") + np.arange(24 * 5) * np.timedelta64(1, "h")
    given = np.where(np.arange(120) % 7 == 0, 1 << 61 | 1 << 31 | 1, 1 << 30)[None, None]
    cube = xr.Dataset(
        {"heated_difference": (RECORD, np.ones((1, 1, 120))), "quality": (RECORD, given)},
        {"probe": ["T01"], "point": [1], "time": time},
        attrs={"interval_s": 3600},
    )

    def by_hour(heated_difference, /):
        return {"noting_fault": (heated_difference["time"].dt.hour == 5) & (heated_difference > 0)}

    stage = Stage("by_hour", by_hour, "heat_dissipation", makes=(), flags=("noting_fault",))
    with flags_defined(NOTING, MASKING):
        chain = Chain(cube, (Step(stage, {}, 1),), lambda ends, wanted: {})
        parts = [
            working.quality[RECORD].isel(time=block.core)
            for block, working in run_blocks(chain, {}, days)
        ]
    whole = _along_time(parts, cube["time"])
    hour = np.array([int(str(t)[11:13]) for t in time])
    # records that the lowest bit masks get no further flag from a comparison with NaN
    further = np.where((hour == 5) & (given[0, 0] == 1 << 30), 1 << 31, 0)
    assert whole.dtype == np.int64
    np.testing.assert_array_equal(whole.values, given | further)


def test_a_whole_word_survives_the_sum_of_species():
    word, dims = 1 << 61 | 1, ("stand_species", "time")
    strata = xr.Dataset(
        {"stand_transpiration": (dims, np.ones((2, 1))), "quality": (dims, [[word], [1 << 31]])},
        {
            "stand_species": ["a/fir", "a/oak"], "time": [FIRST.astype("M8[ns]")],
            "stand": ("stand_species", ["a", "a"]), "species": ("stand_species", ["fir", "oak"]),
            "stand_in": ("stand_species", ["", ""]),
        },
    )  # fmt: skip
    made = with_whole_stands(strata, [1e-3, 1e-3])["quality"]
    assert made.dtype == np.int64
    assert made.values.ravel().tolist() == [word, 1 << 31, word | 1 << 31]
