"""Facts laid on records, against values worked by hand."""

import numpy as np
import pytest
import xarray as xr
from site_by_hand import site_by_hand

from sapflux import schema
from sapflux.errors import SiteError
from sapflux.site import facts

HEAD = "probe,tree,method,height_m,depth_from_mm,depth_to_mm,installed,removed"
TABLES = {
    "probes": f"""
        {HEAD},contact_fraction,spacing_downstream_mm,spacing_upstream_mm,window_from_s,window_to_s,\
pulse_length_s,embedded_diffusivity_cm2_s,embedded_spacing_mm
        A,T1,heat_dissipation,1.3,0,20,2031-05-01,2031-05-06,,,,,,,,
        A,T1,heat_dissipation,1.3,5,25,2031-05-06,,0.9,,,,,,,
        H,T2,heat_ratio,1.3,10 25,15 30,2031-05-01,,,6,5.5,60,100,6,0.0025,6
    """,
    "trees": "tree,stand,species\nT1,upper,oak\nT2,upper,fir",
    "plots": "plot,stand,plan_area_m2\nP1,upper,400",
    "surveys": """
        plot,stem,species,date,diameter_cm
        P1,T1,oak,2030-04-01,30
        P1,T2,fir,2030-04-01,20
    """,
    "cores": "tree,date,sapwood_depth_cm\nT1,2030-04-01,1.5",
    "species": """
        species,anatomy,sapwood_area_a_cm2,sapwood_area_b,leaf_on,leaf_off,stand_in
        oak,ring_porous,,,05-03,10-15,fir
        fir,conifer,0.5,2,,,
    """,
    "wood": """
        tree,species,date,dry_density_kg_m3,water_content,diffusivity_cm2_s
        ,fir,2031-05-01,400,1.2,0.0026
        ,fir,2031-05-11,420,1.4,
        ,oak,2031-05-01,600,,
        T1,,2031-05-01,,0.7,
    """,
    "wounds": """
        probe,tree,species,date,width_mm,source
        ,,fir,2031-05-01,2.0,assumed
        ,T2,,2031-05-01,1.8,measured
    """,
    "calibrations": """
        calibration,species,method,factor_g_m2_s,exponent,lowest_index,highest_index,source,date
        old,oak,heat_dissipation,119,1.231,,,a thesis,2020-01-01
        new,oak,heat_dissipation,200,1.1,0.05,0.8,a trial,2030-01-01
    """,
    "profiles": """
        species,tree,relative_depth,ratio,source,from,to
        fir,,0.2,1.0,a trial,,
        fir,,1,0,a trial,,
        oak,,0,1.0,a trial,,2031-05-05
        oak,,0.5,0.6,a trial,,2031-05-05
        oak,,0,1.0,a trial,2031-05-05,
        oak,,1,0.2,a trial,2031-05-05,
    """,
}
PROBES = ["A", "H"]
HALF_HOUR = 1800


def ends(first, last, step="30m"):
    minutes = np.timedelta64(int(step[:-1]), "m")
    return np.arange(np.datetime64(first, "s"), np.datetime64(last, "s") + minutes, minutes)


@pytest.fixture(scope="module")
def site():
    return site_by_hand(**TABLES)


@pytest.fixture(scope="module")
def early(site):
    """Facts of 2 and 3 May, when nothing changes but the wood."""
    return facts.lay_facts(site, PROBES, 2, ends("2031-05-02T00:30", "2031-05-04T00:00"), HALF_HOUR)


def test_every_fact_of_probes_is_laid_with_its_name_and_units(early):
    of_probes = {
        row.name for row in schema.ROWS if row.dims[:1] == ("probe",)
        and row.dims in (("probe",), ("probe", "point"), ("probe", "relative_depth"))
    }  # fmt: skip
    assert set(early) == of_probes | {
        "installation", "installed_age", "paired", "power_off", "visited", "at_rest",
        "heater_state_given",
    }  # fmt: skip
    for name, array in early.items():
        assert array.name == name
        assert array.attrs["units"] == schema.VARIABLES[name].units
        assert array.dims[: len(schema.VARIABLES[name].dims)] == schema.VARIABLES[name].dims


def test_only_what_is_wanted_is_laid(site):
    some = facts.lay_facts(
        site, PROBES, 2, ends("2031-05-02", "2031-05-03"), HALF_HOUR, ("wound_width", "sap")
    )
    assert list(some) == ["wound_width"]


@pytest.mark.parametrize(
    ("name", "of_a", "of_h"),
    [
        ("spacing_downstream", np.nan, 0.006),
        ("spacing_upstream", np.nan, 0.0055),
        ("window_from", np.nan, 60.0),
        ("window_to", np.nan, 100.0),
        ("pulse_length", np.nan, 6.0),
        ("embedded_diffusivity", np.nan, 2.5e-7),
        ("embedded_spacing", np.nan, 0.006),
        ("given_diffusivity", np.nan, 2.6e-7),
        ("wound_width", np.nan, 0.0018),  # the tree's own before its species'
        ("calibration_factor", 0.2, np.nan),  # the latest of the register
        ("calibration_exponent", 1.1, np.nan),
        ("calibration_lowest", 0.05, np.nan),
        ("calibration_highest", 0.8, np.nan),
        ("xylem_radius", 0.15, 0.10),
        # the core of T1; the ring of 0.5 * 20^2 cm2 in T2
        ("sapwood_depth", 0.015, 0.1 - np.sqrt(0.01 - 0.02 / np.pi)),
    ],
)
def test_constant_facts_in_si(early, name, of_a, of_h):
    assert early[name].dims == ("probe",)
    np.testing.assert_allclose(early[name].values, [of_a, of_h], rtol=1e-14)


def test_points_that_a_needle_has_not_are_nan(early):
    assert early["radial_from"].dims == ("probe", "point")
    np.testing.assert_allclose(early["radial_from"], [[0, np.nan], [0.010, 0.025]])
    np.testing.assert_allclose(early["radial_to"], [[0.020, np.nan], [0.015, 0.030]])


def test_contact_is_the_share_of_the_needle_in_sapwood(early):
    # 20 mm needle in 15 mm of sapwood; T2 has 39.7 mm.
    np.testing.assert_allclose(early["contact_fraction"], [[0.75, np.nan], [1.0, 1.0]])


def test_contact_beyond_the_sapwood_and_at_a_single_depth():
    tables = TABLES | {
        "probes": f"""
            {HEAD}
            A,T1,heat_dissipation,1.3,0 20 15 15.1,20 40 15 15.1,2031-05-01,
            B,T3,heat_dissipation,1.3,0 10 20 30,10 10 30 40,2031-05-01,
        """
    }
    laid = facts.lay_facts(
        site_by_hand(**tables), ["A", "B"], 4, ends("2031-05-02", "2031-05-03"), HALF_HOUR
    )
    np.testing.assert_allclose(laid["contact_fraction"], [[0.75, 0, 1, 0], [np.nan] * 4])


def test_two_installations_have_their_own_depths_and_contact(site):
    times = ends("2031-05-05T23:30", "2031-05-06T00:30")
    laid = facts.lay_facts(site, PROBES, 2, times, HALF_HOUR)
    assert laid["radial_from"].dims == ("probe", "point", "time")
    np.testing.assert_allclose(laid["radial_from"][0, 0], [0, 0, 0.005])
    np.testing.assert_allclose(laid["radial_to"][0, 0], [0.020, 0.020, 0.025])
    np.testing.assert_allclose(laid["radial_to"][1, 1], [0.030] * 3)
    np.testing.assert_allclose(laid["contact_fraction"][0, 0], [0.75, 0.75, 0.9])  # given: 0.9
    assert laid["installation"].values.tolist() == [[0, 0, 1], [0, 0, 0]]
    assert laid["spacing_downstream"].dims == ("probe",)


def test_age_counts_from_the_installation_to_the_middle_of_a_record(site):
    times = ends("2031-05-05T23:30", "2031-05-06T00:30")
    laid = facts.lay_facts(site, PROBES, 2, times, HALF_HOUR)
    # 4 days and 23.25 h and 23.75 h after 1 May; then a quarter of an hour after 6 May.
    hours = [[4 * 24 + 23.25, 4 * 24 + 23.75, 0.25], [119.25, 119.75, 120.25]]
    np.testing.assert_allclose(laid["installed_age"].values / 3600, hours, rtol=1e-14)


def test_probes_are_grouped_by_tree_and_by_stand_and_species(early):
    assert early["probe_tree"].values.tolist() == ["T1", "T2"]
    assert early["probe_stratum"].values.tolist() == ["upper/oak", "upper/fir"]


def test_wood_is_a_line_between_samples_and_constant_outside(site):
    # 400 to 420 kg m-3 and 1.2 to 1.4 over ten days; the middle of the record that ends at
    # 0:15 on 6 May is 0 h, halfway.
    halfway = np.array(
        ["2031-04-01T00:15", "2031-05-06T00:15", "2031-09-01T00:15"], "datetime64[s]"
    )
    laid = facts.lay_facts(site, PROBES, 2, halfway, HALF_HOUR)
    np.testing.assert_allclose(laid["dry_density"].sel(probe=1), [400, 410, 420], rtol=1e-14)
    np.testing.assert_allclose(laid["water_content"].sel(probe=1), [1.2, 1.3, 1.4], rtol=1e-14)


def test_wood_of_a_tree_goes_before_its_species_by_column(early):
    np.testing.assert_array_equal(early["dry_density"][0], np.full(96, 600.0))
    np.testing.assert_array_equal(early["water_content"][0], np.full(96, 0.7))


def test_wounds_do_not_reach_across_installations():
    tables = TABLES | {
        "wounds": """
            probe,tree,species,date,width_mm,source
            A,,,2031-05-01,1.6,assumed
            A,,,2031-05-05,2.0,measured
            A,,,2031-05-06,1.5,assumed
            ,,oak,2031-05-01,9,assumed
        """
    }
    times = ends("2031-05-03T00:15", "2031-05-06T00:15", "4320m")
    times = np.append(times, ends("2031-05-06T00:30", "2031-05-06T00:30"))
    laid = facts.lay_facts(site_by_hand(**tables), PROBES, 2, times, HALF_HOUR)
    # Halfway 1.8 mm; then the old hole's last width up to the change, and the new hole's own.
    np.testing.assert_allclose(laid["wound_width"][0], [1.8e-3, 2.0e-3, 1.5e-3], rtol=1e-12)


def test_profile_is_a_line_between_nodes_and_holds_by_its_dates(early, site):
    profile = early["relative_profile"]
    assert profile.dims == ("probe", "relative_depth")
    of_fir = profile.isel(probe=1)
    # 1 out to the outermost node at 0.2, then down to 0 at the heartwood.
    np.testing.assert_allclose(
        of_fir.sel(relative_depth=[0, 0.1, 0.2, 0.6, 1], method="nearest"), [1, 1, 1, 0.5, 0],
        atol=1e-15,
    )  # fmt: skip
    # Not forced to 0 where the table stops at 0.6 halfway in.
    of_oak = profile.isel(probe=0)
    np.testing.assert_allclose(
        of_oak.sel(relative_depth=[0, 0.25, 1], method="nearest"), [1, 0.8, 0.6]
    )
    times = ends("2031-05-05T00:00", "2031-05-05T00:30")
    laid = facts.lay_facts(site, PROBES, 2, times, HALF_HOUR)["relative_profile"]
    assert laid.dims == ("probe", "relative_depth", "time")
    np.testing.assert_allclose(laid[0, -1], [0.6, 0.2])
    np.testing.assert_allclose(laid[1, -1], [0, 0])


def test_a_trees_own_profile_goes_before_its_species_while_it_holds():
    profiles = TABLES["profiles"] + "\n,T2,0,0.7,cores of T2,2031-05-03,2031-05-04"
    times = ends("2031-05-02T12:00", "2031-05-04T12:00", "1440m")
    laid = facts.lay_facts(
        site_by_hand(**TABLES | {"profiles": profiles}), PROBES, 2, times, HALF_HOUR
    )["relative_profile"]
    np.testing.assert_allclose(laid[1, 60], [0.5, 0.7, 0.5])


def test_facts_do_not_hang_on_the_block(site):
    times = ends("2031-04-30T00:30", "2031-05-13T00:00")
    whole = facts.lay_facts(site, PROBES, 2, times, HALF_HOUR)
    for cut in (1, 100, 336, 500):
        blocks = [facts.lay_facts(site, PROBES, 2, t, HALF_HOUR) for t in np.split(times, [cut])]
        for name, array in whole.items():
            full = (
                array.expand_dims(time=len(times), axis=-1) if "time" not in array.dims else array
            )
            parts = [
                part if "time" in part.dims else part.expand_dims(time=length, axis=-1)
                for part, length in zip(
                    (b[name] for b in blocks), (cut, len(times) - cut), strict=True
                )
            ]
            joined = np.concatenate([part.values for part in parts], axis=-1)
            np.testing.assert_array_equal(joined, full.values, err_msg=name)


def test_labels(site):
    assert facts.labels(site, PROBES) == {
        "tree": ["T1", "T2"],
        "species": ["oak", "fir"],
        "stand": ["upper", "upper"],
    }


def test_a_probe_in_two_trees_is_refused():
    probes = f"""
        {HEAD}
        A,T1,heat_dissipation,1.3,0,20,2031-05-01,2031-05-06
        A,T2,heat_dissipation,1.3,0,20,2031-05-06,
    """
    with pytest.raises(SiteError) as refused:
        facts.labels(site_by_hand(**TABLES | {"probes": probes}), ["A"])
    assert str(refused.value) == (
        "configs/ridge/probes.csv: probe 'A' sits in trees T1, T2. "
        "Give the probe another name where it moves to another tree."
    )


def test_facts_of_trees(site):
    area = facts.tree_facts(site, ["T2", "T1", "T9"])["sapwood_area"]
    assert area.dims == ("tree",)
    # 0.5 * 20^2 cm2; pi (15^2 - 13.5^2) = 134.303 cm2
    np.testing.assert_allclose(area, [0.02, 134.303e-4, np.nan], atol=5e-8)
    assert area["species"].values.tolist() == ["fir", "oak", ""]
    assert area["stand"].values.tolist() == ["upper", "upper", ""]


def test_facts_of_stands(site):
    laid = facts.stand_facts(site, ends("2031-05-03T00:00", "2031-05-03T00:30"))
    per_ground = laid["sapwood_per_ground"]
    assert per_ground["stand_species"].values.tolist() == ["upper/fir", "upper/oak"]
    assert per_ground["stand"].values.tolist() == ["upper", "upper"]
    assert per_ground["species"].values.tolist() == ["fir", "oak"]
    assert per_ground["stand_in"].values.tolist() == ["", "fir"]
    np.testing.assert_allclose(per_ground, [0.02 / 400, 134.303e-4 / 400], atol=5e-11)
    # Oak is in leaf from 0 h on 3 May; the record that ends then is of 2 May.
    assert laid["in_leaf"].values.tolist() == [[1, 1], [0, 1]]


def test_a_record_that_ends_at_0_h_is_of_the_day_before():
    # UTC-5: 0 h on 20 April is 05:00 UTC.
    site = site_by_hand(-5.0)
    days = site.day_of(np.array(["2032-04-20T05:00:00", "2032-04-20T05:00:01"], "datetime64[ns]"))
    assert days.dtype == "datetime64[D]"
    assert days.astype(str).tolist() == ["2032-04-19", "2032-04-20"]


def leaf(on, off, offset=0.0, *moments):
    tables = TABLES | {"species": f"species,anatomy,leaf_on,leaf_off\noak,other,{on},{off}"}
    site = site_by_hand(offset, **tables)
    found = facts.stand_facts(site, np.array(moments, "datetime64[s]"))["in_leaf"]
    return found.sel(stand_species="upper/oak").values.tolist()


def test_leaf_season_of_the_south_runs_over_the_turn_of_the_year():
    moments = ["2031-09-30T12", "2031-10-01T12", "2032-01-01T12", "2032-04-30T12", "2032-05-01T12"]
    assert leaf("10-01", "05-01", 0.0, *moments) == [0, 1, 1, 1, 0]


def test_leaf_season_counts_days_of_fixed_standard_time():
    # UTC-5: 0 h on 20 April is 05:00 UTC; leap day before it makes no difference.
    assert leaf("04-20", "10-15", -5.0, "2032-04-20T05:00", "2032-04-20T05:30") == [0, 1]
    assert leaf("04-20", "10-15", -5.0, "2032-10-15T05:00", "2032-10-15T05:30") == [1, 0]


def test_a_site_without_surveys_has_no_stands():
    laid = facts.stand_facts(site_by_hand(), ends("2031-05-03", "2031-05-04"))
    assert laid["sapwood_per_ground"].sizes == {"stand_species": 0}
    assert isinstance(laid["in_leaf"], xr.DataArray)
    assert laid["in_leaf"].shape == (0, 49)


def test_wounds_grow_by_their_time_course_until_the_next_date():
    tables = TABLES | {
        "wounds": """
            probe,tree,species,date,width_mm,final_width_mm,time_constant_d,source
            H,,,2031-05-01,1.8,2.4,4,section at removal
            A,,,2031-05-01,1.6,,,assumed
            A,,,2031-05-03,1.8,2.8,10,time course of a sister probe
            A,,,2031-05-05,2.0,,,measured
        """
    }
    middles = ["2031-04-20T00:15", "2031-05-02T00:15", "2031-05-04T00:15", "2031-05-05T12:15"]
    laid = facts.lay_facts(
        site_by_hand(**tables), PROBES, 2, np.array(middles, "datetime64[s]"), HALF_HOUR
    )["wound_width"]
    assert laid.dims == ("probe", "time")
    # H: at its date at most; 1 and 3 and 4.5 days of 4 by w(t) = 2.4 - 0.6 exp(-t / 4).
    course = 2.4 - 0.6 * np.exp(-np.array([0.0, 1.0, 3.0, 4.5]) / 4.0)
    np.testing.assert_allclose(laid[1] * 1e3, course, rtol=1e-12)
    # A: halfway from 1.6 to 1.8 by a line; one day of growth by exp(-1 / 10); then the next row.
    grown = 2.8 - 1.0 * np.exp(-0.1)
    np.testing.assert_allclose(laid[0] * 1e3, [1.6, 1.7, grown, 2.0], rtol=1e-12)


def test_a_growing_wound_of_a_record_does_not_hang_on_its_block():
    tables = TABLES | {
        "wounds": """
            probe,tree,species,date,width_mm,final_width_mm,time_constant_d,source
            ,T2,,2031-05-01,1.8,2.4,20,assumed
        """
    }
    site, times = site_by_hand(**tables), ends("2031-05-02T00:30", "2031-05-04T00:00")
    lay = lambda part: facts.lay_facts(site, ["H"], 2, part, HALF_HOUR)["wound_width"].values  # noqa: E731
    parts = [lay(times[:17]), lay(times[17:40]), lay(times[40:])]
    assert np.concatenate(parts, axis=1).tobytes() == lay(times).tobytes()
