"""Which facts a site gives, by what its tables hold."""

import numpy as np
import pytest
from site_by_hand import site_by_hand

from sapflux.site import facts
from sapflux.site.sources import SOURCES, given_facts, source_in_words
from sapflux.site.tables import TABLES, columns_of

PROBES = """
    probe,tree,method,height_m,depth_from_mm,depth_to_mm,installed,spacing_downstream_mm
    A,T1,heat_ratio,1.3,0,20,2031-05-01,6
"""
OF_PROBES = {
    "installation", "installed_age", "probe_tree", "radial_from", "radial_to", "spacing_downstream",
}  # fmt: skip


def test_every_fact_that_is_laid_has_a_source_of_columns_that_exist():
    site, ends = site_by_hand(probes=PROBES), np.array(["2031-05-02T00:30"], "datetime64[s]")
    laid = set(facts.lay_facts(site, ["A"], 1, ends, 1800))
    laid |= set(facts.tree_facts(site, ["T1"])) | set(facts.stand_facts(site, ends))
    assert set(SOURCES) == laid
    for alternatives in SOURCES.values():
        for table, column in (part for parts in alternatives for part in parts):
            assert not column or column in columns_of(TABLES[table])


def test_a_site_without_tables_gives_no_fact():
    assert given_facts(site_by_hand()) == set()


def test_a_column_counts_where_a_row_has_it_set():
    assert given_facts(site_by_hand(probes=PROBES)) == OF_PROBES


@pytest.mark.parametrize(
    ("tables", "more"),
    [
        (
            {"cores": "tree,date,sapwood_depth_cm\nT1,2030-04-01,1.5"},
            {"sapwood_depth", "sapwood_area", "contact_fraction"},
        ),
        (
            {"species": "species,anatomy,sapwood_area_a_cm2,sapwood_area_b\nfir,conifer,0.5,2"},
            {"sapwood_depth", "sapwood_area", "contact_fraction", "in_leaf"},
        ),
        ({"species": "species,anatomy\nfir,conifer"}, {"in_leaf"}),
        ({"surveys": "plot,stem,species,date,diameter_cm\nP,T,fir,2030-04-01,9"}, {"xylem_radius"}),
        (
            {"trees": "tree,stand,species,diameter_cm\nT1,upper,fir,20"},
            {"xylem_radius", "probe_stratum"},
        ),
        ({"trees": "tree,stand,species\nT1,upper,fir"}, {"probe_stratum"}),
        ({"plots": "plot,stand,plan_area_m2\nP1,upper,400"}, set()),
        (
            {
                "plots": "plot,stand,plan_area_m2\nP1,upper,400",
                "surveys": "plot,stem,species,date,diameter_cm\nP1,T,fir,2030-04-01,9",
            },
            {"xylem_radius", "sapwood_per_ground"},
        ),
        (
            {"wood": "species,date,dry_density_kg_m3\nfir,2031-05-01,400"},
            {"dry_density"},
        ),
    ],
)
def test_either_alternative_is_enough_and_all_of_its_tables_are_needed(tables, more):
    assert given_facts(site_by_hand(probes=PROBES, **tables)) == OF_PROBES | more


def test_sources_in_words():
    assert source_in_words("xylem_radius") == "surveys.csv (diameter_cm) or trees.csv (diameter_cm)"
    assert source_in_words("wound_width") == "wounds.csv (width_mm)"
    assert source_in_words("in_leaf") == "species.csv"
