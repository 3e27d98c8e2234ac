"""A recipe that cannot run on a site is refused before a data file is opened."""

import tomllib
from dataclasses import replace
from pathlib import Path

import pytest

from sapflux.errors import RecipeError
from sapflux.pipeline.plan import check_plan, methods_beside, plan_faults
from sapflux.pipeline.recipe import find_recipe, load_recipe, read_recipe
from sapflux.site.load import load_site

FOLDER = Path(__file__).parents[2] / "configs" / "orvelin"
SITE = load_site(FOLDER)
RECIPE = "pipelines/stand_water_use.toml"


def without(site, table, keep=lambda row: False):
    """The site with only those rows of a table that are kept."""
    pairs = zip(site.tables[table], site.rows_at[table], strict=True)
    kept = [pair for pair in pairs if keep(pair[0])]
    return replace(
        site,
        tables={**site.tables, table: tuple(row for row, _ in kept)},
        rows_at={**site.rows_at, table: tuple(line for _, line in kept)},
    )


def faults(site, recipe=None):
    return [str(fault) for fault in plan_faults(site, recipe or load_recipe())]


def changed(edit):
    raw = tomllib.loads(find_recipe("stand_water_use").read_text(encoding="utf-8"))
    edit(raw)
    return read_recipe(raw, RECIPE, "stand_water_use")


def test_the_default_recipe_runs_on_the_demo_site():
    assert faults(SITE) == []
    check_plan(SITE, load_recipe())


def test_missing_weather_names_the_methods_that_do_without():
    dry = without(SITE, "channels", lambda row: row.quantity != "relative_humidity")
    found = faults(dry)
    assert found == [
        f"{RECIPE}, [[heat_dissipation]] step 6: stage 'zero_flow_difference', method "
        "'quiet_nights', needs vapour_pressure_deficit, which neither the site nor an earlier "
        "stage gives. The site would give it by channels of kind site: vapour_pressure_deficit, "
        "or air_temperature and relative_humidity. Methods that do without: nightly_maximum, "
        "moving_window, double_regression; change it in a copy of the recipe (`sapflux stages "
        "--recipe NAME` prints one).",
        f"{RECIPE}, [[heat_ratio]] step 5: stage 'zero_flow_ratio', method 'quiet_nights', needs "
        "vapour_pressure_deficit, which neither the site nor an earlier stage gives. The site "
        "would give it by channels of kind site: vapour_pressure_deficit, or air_temperature and "
        "relative_humidity. Methods that do without: all_nights; change it in a copy of the recipe "
        "(`sapflux stages --recipe NAME` prints one).",
    ]
    with pytest.raises(RecipeError) as caught:
        check_plan(dry, load_recipe())
    assert len(caught.value.faults) == 2


def test_a_missing_table_is_named():
    assert faults(without(SITE, "wounds")) == [
        f"{RECIPE}, [[heat_ratio]] step 7: stage 'wound' needs wound_width, which neither the "
        "site nor an earlier stage gives. The site would give it in wounds.csv (width_mm)."
    ]


def test_a_missing_survey_is_named():
    found = faults(without(SITE, "surveys"))
    assert any(
        "needs sapwood_per_ground" in fault and "surveys.csv and plots.csv" in fault
        for fault in found
    )


def test_a_missing_stage_is_named():
    def drop(raw):
        raw["heat_dissipation"] = [
            step for step in raw["heat_dissipation"] if step["stage"] != "zero_flow_difference"
        ]

    assert faults(SITE, changed(drop)) == [
        f"{RECIPE}, [[heat_dissipation]] step {step}: stage {name!r} needs zero_flow_difference, "
        "which neither the site nor an earlier stage gives. Add a stage that makes it before "
        "this one."
        for step, name in [(6, "sapwood_contact"), (7, "flow_index")]
    ]


def test_a_chain_that_ends_without_flux_density():
    def drop(raw):
        raw["heat_ratio"].pop()

    assert faults(SITE, changed(drop)) == [
        f"{RECIPE}, [[heat_ratio]]: no stage makes flux_density. Add the stage 'flux_density' at "
        "the end."
    ]


def test_a_method_without_stages():
    def drop(raw):
        del raw["heat_ratio"]

    assert faults(SITE, changed(drop)) == [
        f"{RECIPE}: site 'orvelin' has heat_ratio probes and the recipe lists no stage for them. "
        "List their stages under [[heat_ratio]]."
    ]


def test_a_ring_porous_species_under_the_general_calibration_needs_a_word():
    found = faults(without(SITE, "calibrations"))
    assert found == [
        f"{FOLDER}/species.csv, row 4: species 'oak' is ring-porous and would go under the "
        "general calibration, which reads such wood low by a factor of 2 to 5. Add its own to "
        "calibrations.csv, or set general_calibration_accepted to yes to take relative values "
        "knowingly."
    ]
    accepted = without(SITE, "calibrations")
    species = tuple(
        row.model_copy(update={"general_calibration_accepted": True})
        for row in accepted.table("species")
    )
    assert faults(replace(accepted, tables={**accepted.tables, "species": species})) == []


def test_a_species_without_its_own_calibration_where_the_recipe_wants_one():
    def own(raw):
        raw["heat_dissipation"][-1]["method"] = "species"

    found = faults(SITE, changed(own))
    assert found[0] == (
        f"{FOLDER}/species.csv, row 2: species 'spruce' has no calibration and the recipe uses the "
        "species' own. Add it to calibrations.csv."
    )


def with_probe(name, **changes):
    rows = tuple(
        row.model_copy(update=changes) if row.probe == name else row for row in SITE.table("probes")
    )
    return replace(SITE, tables={**SITE.tables, "probes": rows})


def wound_by(method, beside=()):
    def edit(raw):
        step = next(step for step in raw["heat_ratio"] if step["stage"] == "wound")
        step.pop("beside", None)
        step |= {"method": method} | ({"beside": beside} if beside else {})

    return changed(edit)


def test_the_published_wound_is_refused_for_needles_or_windows_it_was_not_made_for():
    line = next(
        line
        for row, line in zip(SITE.table("probes"), SITE.rows_at["probes"], strict=True)
        if row.probe == "P16"
    )
    early = with_probe("P16", window_from_s=30.0, window_to_s=60.0)
    end = (
        "and the published wound correction is for 6 mm and 60 to 100 s. Take method 'strip' of "
        "the stage 'wound' in a copy of the recipe (`sapflux stages --recipe NAME` prints one)."
    )
    where = f"{SITE.folder}/probes.csv, row {line}: probe 'P16' has"
    assert faults(early) == [f"{where} a window of 30 to 60 s, {end}"]
    short = with_probe("P16", spacing_downstream_mm=5.0, spacing_upstream_mm=5.0, window_from_s=30)
    assert faults(short) == [
        f"{where} needles 5 and 5 mm from the heater and a window of 30 to 100 s, {end}"
    ]
    assert faults(early, wound_by("strip")) == []
    assert faults(early, wound_by("strip", ["published"])) == faults(early)
    # As near as drilling comes, and blank, it holds.
    near = {"spacing_downstream_mm": 6.4, "window_from_s": 62.0, "window_to_s": None}
    assert faults(with_probe("P16", **near)) == []


def test_a_strip_for_another_estimator_than_the_ratio_has_is_refused():
    def edit(raw):
        steps = {step["stage"]: step for step in raw["heat_ratio"]}
        steps["log_heat_ratio"]["estimator"] = "mean_of_logs"
        steps["wound"] |= {"method": "strip"}
        steps["wound"].pop("beside", None)

    (fault,) = faults(SITE, changed(edit))
    assert fault.endswith(
        "stage 'wound' corrects a log ratio of estimator 'log_of_means', and log_heat_ratio makes "
        "one of 'mean_of_logs'. Give both stages the same estimator."
    )


def test_the_published_wound_is_left_out_beside_where_it_does_not_hold():
    early = with_probe("P16", window_from_s=30.0, window_to_s=60.0)
    published = ("heat_ratio", "wound", "published")
    assert published in methods_beside(SITE, wound_by("strip", "all"))[0]
    # It still holds for the other probes; where it holds for none it is left out.
    assert published in methods_beside(early, wound_by("strip", "all"))[0]
    names = [row.probe for row in SITE.table("probes") if row.method == "heat_ratio"]
    rows = tuple(
        row.model_copy(update={"window_from_s": 30.0}) if row.probe in names else row
        for row in SITE.table("probes")
    )
    none = replace(SITE, tables={**SITE.tables, "probes": rows})
    chosen, left_out = methods_beside(none, wound_by("strip", "all"))
    assert published in left_out and published not in chosen
