"""A recipe that cannot run on a site is refused before a data file is opened."""

import tomllib
from dataclasses import replace
from pathlib import Path

import pytest

from sapflux.errors import RecipeError
from sapflux.pipeline.plan import check_plan, plan_faults
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
        f"{RECIPE}, [[heat_dissipation]] step 3: stage 'zero_flow_difference', method "
        "'quiet_nights', needs vapour_pressure_deficit, which neither the site nor an earlier "
        "stage gives. The site would give it by channels of kind site: vapour_pressure_deficit, "
        "or air_temperature and relative_humidity. Methods that do without: nightly_maximum, "
        "moving_window; change it in a copy of the recipe (`sapflux stages --recipe NAME` prints "
        "one).",
        f"{RECIPE}, [[heat_ratio]] step 5: stage 'zero_offset', method 'quiet_nights', needs "
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
        f"{RECIPE}, [[heat_ratio]] step 6: stage 'wound' needs wound_width, which neither the "
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
        for step, name in [(3, "sapwood_contact"), (4, "flow_index")]
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
