"""Radii, sapwood and ground area against hand calculations and a published stem list."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from site_by_hand import site_by_hand

from sapflux.errors import SiteError
from sapflux.site import inventory

# Diameters in inches of 31 felled black cherry trees (named "Girth" there).
# Source: Ryan, Joiner & Ryan (1976), The Minitab Student Handbook; R's datasets::trees.
BLACK_CHERRY_INCHES = [
    8.3, 8.6, 8.8, 10.5, 10.7, 10.8, 11.0, 11.0, 11.1, 11.2, 11.3, 11.4, 11.4, 11.7, 12.0, 12.9,
    12.9, 13.3, 13.7, 13.8, 14.0, 14.2, 14.5, 16.0, 16.3, 17.3, 17.5, 17.9, 18.0, 18.0, 20.6,
]  # fmt: skip

ONE_PLOT = "plot,stand,plan_area_m2\nP1,upper,400"
OAK = "tree,stand,species,bark_mm\nT1,upper,oak,"
OAK_AREA = "species,anatomy,sapwood_area_a_cm2,sapwood_area_b\noak,ring_porous,0.5,2"


def surveys(*lines):
    return "plot,stem,species,date,diameter_cm,under_bark,status\n" + "\n".join(lines)


def stem_of(diameter_cm=30, **tables):
    line = f"P1,T1,oak,2030-04-01,{diameter_cm},,"
    return site_by_hand(**{"plots": ONE_PLOT, "trees": OAK, "surveys": surveys(line)} | tables)


@pytest.mark.parametrize(
    ("begin", "end", "area_cm2"), [(0, 2, 175.9), (2, 4, 150.8), (4, 6, 125.7)]
)
def test_annuli_of_the_worked_example(begin, end, area_cm2):
    # Radius 15 cm, sapwood 6 cm: calculated from the geometry of conducting annuli.
    outer = inventory.annulus_area(0.15 - begin / 100, (end - begin) / 100)
    assert outer * 1e4 == pytest.approx(area_cm2, abs=0.05)


@given(radius=st.floats(0.01, 2.0), share=st.floats(0.01, 1.0))
def test_depth_of_an_annulus_gives_back_its_area(radius, share):
    area = math.pi * radius**2 * share
    depth = inventory.annulus_depth(radius, area)
    # At the pith the ring has no wood: a rounding of 1e-16 in the area is one of 1e-8 in depth.
    assert depth is None or inventory.annulus_area(radius, depth) == pytest.approx(area, rel=1e-12)
    assert depth is not None or share > 1 - 1e-12


def test_basal_area_and_mean_diameter_of_the_black_cherry_trees():
    # Basal area sum 2.906753 m2 and quadratic mean diameter 13.603308 in, by R from this list.
    lines = [
        f"P1,{number},cherry,2030-04-01,{inches * 2.54},,"
        for number, inches in enumerate(BLACK_CHERRY_INCHES)
    ]
    site = site_by_hand(
        plots="plot,stand,plan_area_m2\nP1,upper,1000",
        surveys=surveys(*lines),
        species="species,anatomy\ncherry,diffuse_porous",
    )
    stand = inventory.composition(site)["upper", "cherry"]
    basal = stand.basal_area_per_ground * 1000
    assert stand.stems == 31
    assert stand.stems_per_ha == pytest.approx(310)
    assert basal == pytest.approx(2.906753, abs=5e-7)
    assert stand.basal_area_m2_ha == pytest.approx(29.06753, abs=5e-6)
    mean_m = math.sqrt(4 * basal / (math.pi * 31))
    assert mean_m / 0.0254 == pytest.approx(13.603308, abs=5e-7)


def test_bark_of_the_tree_goes_before_bark_of_its_cores():
    cores = "tree,face,date,bark_mm,sapwood_depth_cm\nT1,N,2030-04-01,8,4\nT1,S,2030-04-01,12,6"
    by_cores = stem_of(cores=cores)
    by_tree = stem_of(cores=cores, trees="tree,stand,species,bark_mm\nT1,upper,oak,20")
    assert inventory.xylem_radius(by_cores, "T1") == pytest.approx(0.14)  # 15 cm less 10 mm
    assert inventory.xylem_radius(by_tree, "T1") == pytest.approx(0.13)
    assert inventory.bark_known(by_cores, "T1")


def test_without_bark_the_radius_is_over_bark_and_said_to_be_so():
    site = stem_of()
    assert inventory.xylem_radius(site, "T1") == pytest.approx(0.15)
    assert not inventory.bark_known(site, "T1")


def test_a_diameter_under_bark_is_the_xylem_and_bark_is_added_for_the_allometry():
    site = stem_of(
        surveys=surveys("P1,T1,oak,2030-04-01,18,true,"),
        trees="tree,stand,species,bark_mm\nT1,upper,oak,10",
        species=OAK_AREA,
    )
    assert inventory.xylem_radius(site, "T1") == pytest.approx(0.09)
    assert inventory.bark_known(site, "T1")
    assert inventory.tree_sapwood_area(site, "T1") == pytest.approx(0.02)  # 0.5 * 20^2 cm2


def test_the_latest_survey_gives_the_radius():
    lines = ["P1,T1,oak,2034-04-01,34,,", "P1,T1,oak,2030-04-01,30,,"]
    assert inventory.xylem_radius(stem_of(surveys=surveys(*lines)), "T1") == pytest.approx(0.17)


def test_stem_names_may_recur_in_another_stand():
    site = stem_of(
        plots="plot,stand,plan_area_m2\nP1,upper,400\nP2,lower,400",
        surveys=surveys("P1,T1,oak,2030-04-01,30,,", "P2,T1,oak,2033-04-01,50,,"),
        cores="tree,date,sapwood_depth_cm\nT1,2030-04-01,6",
        species=OAK_AREA,
    )
    assert inventory.xylem_radius(site, "T1") == pytest.approx(0.15)
    lower = inventory.sapwood_per_ground(site)["lower", "oak"]
    assert lower == pytest.approx(0.5 * 50**2 * 1e-4 / 400)  # the core is not of this stem


def test_two_faces_are_averaged():
    cores = "tree,face,date,sapwood_depth_cm\nT1,N,2030-04-01,4\nT1,S,2030-04-01,6"
    site = stem_of(cores=cores, species=OAK_AREA)
    assert inventory.sapwood_depth(site, "T1") == pytest.approx(0.05)
    area_cm2 = inventory.tree_sapwood_area(site, "T1") * 1e4
    assert area_cm2 == pytest.approx(392.699, abs=5e-4)  # pi (15^2 - 10^2), not the allometry


def test_a_later_core_replaces_the_same_face_only():
    cores = (
        "tree,face,date,sapwood_depth_cm\nT1,N,2030-04-01,4\nT1,S,2030-04-01,6\nT1,N,2034-04-01,5\n"
    )
    assert inventory.sapwood_depth(stem_of(cores=cores), "T1") == pytest.approx(0.055)


def test_allometry_gives_area_and_depth():
    site = stem_of(20, species=OAK_AREA)
    assert inventory.tree_sapwood_area(site, "T1") == pytest.approx(0.02)  # 0.5 * 20^2 cm2
    # 10 - sqrt(10^2 - 200 / pi) = 10 - sqrt(36.3380) = 10 - 6.0281 cm
    assert inventory.sapwood_depth(site, "T1") == pytest.approx(0.039719, abs=5e-7)


def test_more_sapwood_than_wood_has_no_depth_and_is_counted():
    # 1 * 20^2 = 400 cm2 in a stem of 314 cm2
    species = "species,anatomy,sapwood_area_a_cm2,sapwood_area_b\noak,ring_porous,1,2"
    site = stem_of(20, species=species)
    assert inventory.sapwood_depth(site, "T1") is None
    stand = inventory.composition(site)["upper", "oak"]
    assert stand.beyond_disc == 1
    assert stand.sapwood_per_ground == pytest.approx(0.04 / 400)


def test_a_core_deeper_than_the_stem_gives_no_area():
    site = stem_of(20, cores="tree,date,sapwood_depth_cm\nT1,2030-04-01,12")
    assert inventory.tree_sapwood_area(site, "T1") is None


def test_nothing_known_is_none_or_nan():
    site = stem_of()
    assert inventory.sapwood_depth(site, "T1") is None
    assert inventory.tree_sapwood_area(site, "T1") is None
    assert inventory.xylem_radius(site, "T9") is None
    assert math.isnan(inventory.sapwood_per_ground(site)["upper", "oak"])


NESTED = """
    plot,stand,plan_area_m2,smallest_diameter_cm,within
    P1,upper,400,15,
    P1s,upper,100,0,P1
"""


def test_stems_of_nested_plots_stand_for_the_plots_that_measure_them():
    # 20 cm: measured on 400 m2 (the small plot lies inside), 10 cm: on 100 m2.
    lines = [
        "P1,a,oak,2030-04-01,20,,",
        "P1s,b,oak,2030-04-01,20,,",
        "P1s,c,oak,2030-04-01,10,,",
        "P1,d,oak,2030-04-01,10,,",  # thinner than its plot measures: no part of the sample
    ]
    site = site_by_hand(plots=NESTED, surveys=surveys(*lines), species=OAK_AREA)
    stand = inventory.composition(site)["upper", "oak"]
    assert stand.stems == 3
    assert stand.stems_per_ha == pytest.approx(2 / 400 * 1e4 + 1 / 100 * 1e4)  # 150
    assert stand.sapwood_per_ground == pytest.approx(2 * 0.02 / 400 + 0.005 / 100)


def test_plots_of_a_stand_are_pooled_and_stands_kept_apart():
    site = site_by_hand(
        plots="plot,stand,plan_area_m2\nP1,upper,400\nP2,upper,600\nP3,lower,100",
        surveys=surveys("P1,1,oak,2030-04-01,20,,", "P2,1,oak,2031-04-01,20,,",
                        "P3,1,oak,2030-04-01,20,,", "P3,2,fir,2030-04-01,20,,"),
        species=OAK_AREA,
    )  # fmt: skip
    assert list(inventory.composition(site)) == [
        ("lower", "fir"),
        ("lower", "oak"),
        ("upper", "oak"),
    ]
    factors = inventory.sapwood_per_ground(site)
    assert factors["upper", "oak"] == pytest.approx(2 * 0.02 / 1000)
    assert factors["lower", "oak"] == pytest.approx(0.02 / 100)


def test_area_along_the_slope_is_laid_flat():
    (plot,) = site_by_hand(
        plots="plot,stand,slope_area_m2,slope_deg\nP1,upper,1000,25"
    ).table("plots")  # fmt: skip
    assert inventory.plan_area(plot) / 1000 == pytest.approx(0.906, abs=5e-4)  # cos 25 degrees


def test_dead_and_removed_stems_and_earlier_surveys_carry_nothing():
    lines = [
        "P1,1,oak,2030-04-01,20,,",
        "P1,2,oak,2030-04-01,20,,",
        "P1,9,fir,2030-04-01,20,,",
        "P1,1,oak,2034-04-01,20,,alive",
        "P1,2,oak,2034-04-02,20,,removed",
        "P1,3,oak,2034-04-02,20,,dead",
        "P1,4,oak,2034-04-03,20,,alive",  # a survey may take days
    ]
    site = site_by_hand(plots=ONE_PLOT, surveys=surveys(*lines), species=OAK_AREA)
    assert list(inventory.composition(site)) == [("upper", "oak")]
    assert inventory.composition(site)["upper", "oak"].stems == 2


def test_row_order_changes_nothing():
    lines = [f"P1,{n},oak,2030-04-01,{15.3 + n * 0.7},," for n in range(20)]
    forth, back = (
        site_by_hand(plots=ONE_PLOT, surveys=surveys(*order), species=OAK_AREA)
        for order in (lines, lines[::-1])
    )
    assert inventory.composition(forth) == inventory.composition(back)


def test_a_plot_without_area_is_refused():
    plots = "plot,stand,slope_area_m2\nP1,upper,\nP2,upper,500"
    site = site_by_hand(plots=plots, surveys=surveys("P1,1,oak,2030-04-01,20,,"))
    with pytest.raises(SiteError) as refused:
        inventory.sapwood_per_ground(site)
    assert str(refused.value) == (
        "configs/ridge/plots.csv: plot 'P1' has no ground area. "
        "Give plan_area_m2, or slope_area_m2 and slope_deg.\n"
        "configs/ridge/plots.csv: plot 'P2' has no ground area. "
        "Give plan_area_m2, or slope_area_m2 and slope_deg."
    )


def test_a_tree_outside_all_plots_has_its_own_diameter():
    trees = "tree,stand,species,bark_mm,diameter_cm\nT1,upper,oak,10,30"
    site = site_by_hand(trees=trees, species=OAK_AREA)
    assert inventory.xylem_radius(site, "T1") == pytest.approx(0.14)
    # 0.5 * 30^2 = 450 cm2
    assert inventory.tree_sapwood_area(site, "T1") == pytest.approx(0.045)


def test_the_survey_goes_before_the_trees_own_diameter():
    trees = "tree,stand,species,bark_mm,diameter_cm\nT1,upper,oak,10,40"
    assert inventory.xylem_radius(stem_of(trees=trees), "T1") == pytest.approx(0.14)
