"""Fallbacks that were taken are told, each in a sentence."""

from dataclasses import replace
from pathlib import Path

from sapflux.pipeline.notes import notes_of
from sapflux.pipeline.recipe import load_recipe
from sapflux.site.load import load_site

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
        "wound width of P16 is assumed, not measured: 0.1 mm changes its flux by 2 to 4 %"
    ) in notes_of(assumed, RECIPE)


def test_allometries_that_give_more_sapwood_than_wood_are_told():
    wide = with_rows("species", lambda row: row.model_copy(update={"sapwood_area_a_cm2": 50.0}))
    assert any("have more sapwood by the allometry" in note for note in notes_of(wide, RECIPE))
