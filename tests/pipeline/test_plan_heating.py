"""Probes heated in cycles are never read as if they were heated without a break."""

import tomllib
from dataclasses import replace
from pathlib import Path

import sapflux.correction  # noqa: F401
from sapflux.pipeline.plan import plan_faults
from sapflux.pipeline.recipe import find_recipe, load_recipe, read_recipe
from sapflux.site.load import load_site

FOLDER = Path(__file__).parents[2] / "configs" / "orvelin"
SITE = load_site(FOLDER)


def heated_in_cycles(site, *names):
    """The site with cycles of 15 min heated and 15 min not, for some probes."""
    change = {"heating_on_min": 15.0, "heating_off_min": 15.0}
    rows = tuple(
        row.model_copy(update=change) if row.probe in names else row for row in site.table("probes")
    )
    return replace(site, tables={**site.tables, "probes": rows})


def with_calibration(site, species, **change):
    """The site with the register's first calibration made one of the species, heated in cycles."""
    first = site.table("calibrations")[0]
    row = first.model_copy(
        update={"calibration": "own", "species": species, "heating": "intermittent", **change}
    )
    return replace(
        site,
        tables={**site.tables, "calibrations": (*site.table("calibrations"), row)},
        rows_at={**site.rows_at, "calibrations": (*site.rows_at["calibrations"], 99)},
    )


def faults(site, edit=lambda raw: None):
    raw = tomllib.loads(find_recipe("stand_water_use").read_text(encoding="utf-8"))
    edit(raw)
    recipe = read_recipe(raw, "recipe.toml", "stand_water_use")
    return [str(fault) for fault in plan_faults(site, recipe)]


def test_cycles_want_coefficients_of_such_heating():
    site = heated_in_cycles(SITE, "P01", "P11")  # in a spruce, and in an oak that has its own
    assert faults(site) == [
        f"{FOLDER}/probes.csv, row {row}: probe {probe!r} is heated in cycles and species "
        f"{species!r} has no calibration of such heating: coefficients of continuous heating do "
        "not hold. Add one to calibrations.csv with 'intermittent' in the column heating."
        for row, probe, species in [(2, "P01", "spruce"), (12, "P11", "oak")]
    ]
    assert faults(with_calibration(with_calibration(site, "oak"), "spruce")) == []


def test_the_general_calibration_is_of_continuous_heating():
    site = with_calibration(heated_in_cycles(SITE, "P01"), "spruce")

    def general(raw):
        for step in raw["heat_dissipation"]:
            if step["stage"] == "flux_density":
                step["method"] = "general"

    assert (
        f"{FOLDER}/probes.csv, row 2: probe 'P01' is heated in cycles and the recipe takes the "
        "general calibration, which is of continuous heating. Take method species_else_general in "
        "a copy of the recipe."
    ) in faults(site, general)


def test_a_recipe_without_the_stage_is_refused():
    site = with_calibration(heated_in_cycles(SITE, "P01"), "spruce")

    def drop(raw):
        raw["heat_dissipation"] = [
            step for step in raw["heat_dissipation"] if step["stage"] != "heating_cycle"
        ]

    assert faults(site, drop) == [
        f"{FOLDER}/probes.csv, row 2: probe 'P01' is heated in cycles and the recipe takes no "
        "heating_cycle. List the stage 'heating_cycle' after 'heated_difference'."
    ]


def test_coefficients_of_cycles_are_none_of_continuous_heating():
    # The oaks' only calibration is of cycles now: under the general one they need a word.
    site = with_calibration(SITE, "oak")
    only = tuple(row for row in site.table("calibrations") if row.heating == "intermittent")
    site = replace(
        site,
        tables={**site.tables, "calibrations": only},
        rows_at={**site.rows_at, "calibrations": (99,)},
    )
    (fault,) = faults(site)
    assert "species 'oak' is ring-porous and would go under the general calibration" in fault


def test_a_pair_gives_its_method_what_it_needs():
    def pair(raw):
        for step in raw["heat_dissipation"]:
            if step["stage"] == "natural_gradient":
                step["method"] = "pair"

    (fault,) = faults(SITE, pair)
    assert "stage 'natural_gradient', method 'pair', needs paired" in fault
    assert "The site would give it in pairs.csv (heated)." in fault


def test_the_default_recipe_runs_on_a_site_without_pairs_or_cycles():
    assert [str(fault) for fault in plan_faults(SITE, load_recipe())] == []
