"""Fallbacks that were taken are told, each in a sentence."""

from dataclasses import replace
from datetime import datetime
from pathlib import Path

from sapflux.pipeline.notes import notes_of
from sapflux.pipeline.notes_corrections import notes_of_corrections
from sapflux.pipeline.recipe import load_recipe, read_recipe
from sapflux.site.load import load_site
from sapflux.site.tables import Pair

SITE = load_site(Path(__file__).parents[2] / "configs" / "orvelin")
RECIPE = load_recipe()


def with_rows(table, change):
    rows = tuple(change(row) for row in SITE.table(table))
    return replace(SITE, tables={**SITE.tables, table: tuple(r for r in rows if r is not None)})


def test_species_under_the_general_calibration_are_for_relative_use_only():
    assert notes_of(SITE, RECIPE) == [
        "general calibration of heat dissipation for beech, spruce: published comparisons find it "
        "low by 35 to 40 % on average (value from memory); relative use only until the species is "
        "calibrated"
    ]


def test_an_accepted_ring_porous_species_is_told():
    notes = notes_of(with_rows("calibrations", lambda row: None), RECIPE)
    assert (
        "ring-porous oak under the general calibration, as species.csv accepts: it reads such wood "
        "low by a factor of 2 to 5; relative use only"
    ) in notes


def test_trees_without_known_bark_are_told():
    no_bark = with_rows("trees", lambda row: row.model_copy(update={"bark_mm": None}))
    cores = tuple(c.model_copy(update={"bark_mm": None}) for c in no_bark.table("cores"))
    notes = notes_of(replace(no_bark, tables={**no_bark.tables, "cores": cores}), RECIPE)
    assert any(
        note.startswith("no bark known for trees L1-07, ")
        and note.endswith(": its radius over bark is used, so its sapwood is too large")
        for note in notes
    )


def test_assumed_wound_widths_are_told():
    assumed = with_rows(
        "wounds",
        lambda row: row.model_copy(update={"source": "Assumed"}) if row.probe == "P16" else row,
    )
    assert (
        "wound width of P16 is provisional, assumed and not measured: 0.1 mm changes its flux by 2 "
        "to 4 %"
    ) in notes_of_corrections(assumed, RECIPE)


def test_stages_that_a_recipe_leaves_out_are_told():
    raw = RECIPE.alone().resolved()
    raw.pop("name")
    raw["heat_ratio"] = [step for step in raw["heat_ratio"] if step["stage"] != "wound"]
    assert "the recipe leaves out, of the order of work of heat ratio: wound" in (
        notes_of_corrections(SITE, read_recipe(raw, "own.toml", "own"))
    )
    assert not any("leaves out" in note for note in notes_of_corrections(SITE, RECIPE))


def test_the_natural_gradient_that_is_not_taken_off_is_told():
    assert any(
        note.startswith("the natural temperature gradient of the stem is not taken off 15 of 15 ")
        for note in notes_of_corrections(SITE, RECIPE)
    )
    pair = Pair(unheated="N01", heated="P01")
    paired = replace(SITE, tables={**SITE.tables, "pairs": (pair,)})
    assert any("14 of 15" in note for note in notes_of_corrections(paired, RECIPE))
    ended = pair.model_copy(update={"to": datetime(2031, 9, 20)})
    short = replace(SITE, tables={**SITE.tables, "pairs": (ended,)})
    told = "the unheated pair of P01 does not cover its whole installation"
    assert any(note.startswith(told) for note in notes_of_corrections(short, RECIPE))
    assert not any(note.startswith(told) for note in notes_of_corrections(paired, RECIPE))


def test_what_bars_no_night_for_want_of_a_log_is_told():
    told = "not logged, so that it keeps no night from setting a zero-flow baseline: "
    assert not any(note.startswith(told) for note in notes_of_corrections(SITE, RECIPE))
    dry = with_rows("channels", lambda row: None if row.quantity == "precipitation" else row)
    assert f"{told}a wet connector (precipitation)" in notes_of_corrections(dry, RECIPE)


def test_a_site_without_a_temperature_finds_no_frost():
    told = "neither stem nor air temperature is logged: frozen wood is not found and not left out"
    assert told not in notes_of_corrections(SITE, RECIPE)
    blind = with_rows("channels", lambda row: None if row.quantity == "air_temperature" else row)
    assert told in notes_of_corrections(blind, RECIPE)


def test_an_additive_offset_says_that_the_gain_stays_wrong():
    additive = RECIPE.with_method("heat_ratio", "heat_pulse_velocity", "additive_offset")
    (note,) = [n for n in notes_of_corrections(SITE, additive) if "additive_offset" in n]
    assert "its gain stays wrong" in note


def test_allometries_that_give_more_sapwood_than_wood_are_told():
    wide = with_rows("species", lambda row: row.model_copy(update={"sapwood_area_a_cm2": 50.0}))
    assert any("have more sapwood by the allometry" in note for note in notes_of(wide, RECIPE))
