"""Unheated pairs on the records of the probes that they serve."""

from types import SimpleNamespace

import numpy as np
from site_by_hand import site_by_hand

from sapflux.ingest.cube import measured_cubes
from sapflux.ingest.unheated import natural_names

NAN = np.nan
PROBES = """probe,tree,method,height_m,depth_from_mm,depth_to_mm,installed,removed
            A,t1,heat_dissipation,1.3,0 20,20 40,2031-05-01,
            B,t1,heat_dissipation,1.3,0,20,2031-05-01,
            N,t1,unheated_pair,1.3,0,20,2031-05-01,2031-06-01 00:50
            M,t1,unheated_pair,1.3,0,20,2031-05-01,"""
TREES = "tree,stand,species\nt1,s,oak"
CHANNELS = """log,column,kind,id,point,quantity,unit
              L,a1,probe,A,1,heated_difference,K
              L,a2,probe,A,2,heated_difference,K
              L,b,probe,B,1,heated_difference,K
              L,n,probe,N,1,unheated_difference,degC
              U,m,probe,M,1,unheated_emf,uV"""
PAIRS = """unheated,heated,from,to
           N,A,,2031-06-01 00:25
           M,A,2031-06-01 00:25,"""
HEATED = {"a1": [9.0] * 6, "a2": [8.0] * 6, "b": [7.0] * 6}


def log(values, interval_s=600):
    """A log whose first record begins at 0 h."""
    length = len(next(iter(values.values())))
    steps = (np.arange(length) + 1) * np.timedelta64(interval_s, "s")
    arrays = {name: np.array(column, float) for name, column in values.items()}
    return SimpleNamespace(
        end=np.datetime64("2031-06-01", "s") + steps,
        interval_s=interval_s,
        values=arrays,
        withheld={},
    )


def cube(n, m, m_interval_s=600, **tables):
    tables = {"probes": PROBES, "trees": TREES, "channels": CHANNELS, "pairs": PAIRS} | tables
    logs = {"L": log(HEATED | {"n": n}), "U": log({"m": m}, interval_s=m_interval_s)}
    (made,) = measured_cubes(site_by_hand(**tables), logs).values()
    return made


def test_a_pair_serves_by_its_dates_on_every_point_of_its_probe():
    made = cube([0.1, 0.2, 0.3, 0.4, 0.5, 0.6], [4.0, 8.0, 12.0, 16.0, 20.0, 24.0])
    kelvin, volts = made["natural_difference"], made["natural_emf"]
    # The record to 0:30 has its middle at 0:25, when the other pair begins.
    for point in (1, 2):
        np.testing.assert_allclose(
            kelvin.sel(probe="A", point=point), [0.1, 0.2, NAN, NAN, NAN, NAN]
        )
        np.testing.assert_allclose(
            volts.sel(probe="A", point=point), [NAN, NAN, 12e-6, 16e-6, 20e-6, 24e-6]
        )
    assert kelvin.sel(probe="B").isnull().all() and volts.sel(probe="B").isnull().all()
    # The heated needle's own signal is untouched by it, as is its quality.
    assert (made["heated_difference"].sel(probe="A", point=1) == 9.0).all()


def test_a_removed_pair_serves_no_longer():
    made = cube([0.1] * 6, [4.0] * 6, pairs="unheated,heated\nN,B")
    # Removed at 0:50: the record to 1:00 does not count.
    np.testing.assert_allclose(
        made["natural_difference"].sel(probe="B", point=1), [0.1] * 5 + [NAN]
    )


def test_a_pair_on_another_clock():
    # The three records of each half-hour take its value; a finer clock gives its mean.
    made = cube([0.1] * 6, [4.0, 8.0], m_interval_s=1800, pairs="unheated,heated\nM,B")
    np.testing.assert_allclose(
        made["natural_emf"].sel(probe="B", point=1), [4e-6] * 3 + [8e-6] * 3, rtol=1e-12
    )
    made = cube([0.1] * 6, range(12), m_interval_s=300, pairs="unheated,heated\nM,B")
    np.testing.assert_allclose(
        made["natural_emf"].sel(probe="B", point=1) * 1e6, [0.5, 2.5, 4.5, 6.5, 8.5, 10.5]
    )


def test_what_is_excluded_or_implausible_is_not_subtracted():
    made = cube(
        [0.1, 99.0, 0.1, 0.1, 0.1, 0.1], [4.0] * 6, pairs="unheated,heated\nN,B",
        exclusions="kind,id,from,to,reason,who\nprobe,N,2031-06-01 00:20,2031-06-01 00:30,ants,xy",
    )  # fmt: skip
    np.testing.assert_allclose(
        made["natural_difference"].sel(probe="B", point=1), [0.1, NAN, NAN, 0.1, 0.1, NAN]
    )


def test_a_site_without_pairs_has_no_natural_signal():
    made = cube([0.1] * 6, [4.0] * 6, pairs="")
    assert not {"natural_difference", "natural_emf"} & set(made.data_vars)


def test_names_that_a_site_gives():
    tables = {"probes": PROBES, "trees": TREES, "channels": CHANNELS}
    both = site_by_hand(**tables, pairs=PAIRS)
    assert natural_names(both, ["A", "B"]) == {"natural_difference", "natural_emf"}
    assert natural_names(both, ["B"]) == set()
    assert natural_names(site_by_hand(**tables), ["A"]) == set()
