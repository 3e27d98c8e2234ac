"""When somebody was at the logger, and when a person vouches that no sap flows: by hand."""

import numpy as np
import pytest
from site_by_hand import site_by_hand

from sapflux.site import facts
from sapflux.site.sources import given_facts, source_in_words

PROBES = """
    probe,tree,method,height_m,depth_from_mm,depth_to_mm,installed
    A,T1,heat_dissipation,1.3,0,20,2031-05-01
    B,T2,heat_dissipation,1.3,0,20,2031-05-01
"""
TREES = "tree,stand,species\nT1,upper,oak\nT2,upper,fir"
CHANNELS = """
    log,column,kind,id,quantity,unit,from,to
    one,a,probe,A,heated_emf,mV,,2031-06-01 01:30
    two,a,probe,A,heated_emf,mV,2031-06-01 01:30,
    two,b,probe,B,heated_emf,mV,,
    one,t,site,,air_temperature,degC,,
"""
ENDS = np.datetime64("2031-06-01", "s") + np.arange(1, 7) * np.timedelta64(30, "m")


def laid(name, offset_h=0.0, **tables):
    site = site_by_hand(offset_h, probes=PROBES, trees=TREES, channels=CHANNELS, **tables)
    (array,) = facts.lay_facts(site, ["A", "B"], 1, ENDS, 1800, (name,)).values()
    assert array.name == name
    return np.broadcast_to(array.values.reshape(2, -1), (2, len(ENDS))).tolist()


def test_a_visit_counts_for_the_records_it_touches_on_the_probes_of_its_log():
    visits = """
        log,arrival,departure
        one,2031-06-01 00:40,2031-06-01 01:00
        one,2031-06-01 02:10,2031-06-01 02:20
        two,2031-06-01 02:30,2031-06-01 02:30
    """
    # Records end at 0:30, 1:00, ..., 3:00. A is on log one until 1:30, then on log two; the visit
    # of one moment, 2:30, lies in the record that begins then.
    assert laid("visited", visits=visits) == [[0, 1, 0, 0, 0, 1], [0, 0, 0, 0, 0, 1]]


def test_visits_stand_in_the_sites_standard_time():
    visits = "log,arrival,departure\ntwo,2031-06-01 02:40,2031-06-01 02:50"
    assert laid("visited", 1.0, visits=visits)[1] == [0, 0, 0, 1, 0, 0]


@pytest.mark.parametrize(
    ("probe", "species", "of_a", "of_b"), [("A", "", 1, 0), ("", "fir", 0, 1), ("", "", 1, 1)]
)
@pytest.mark.parametrize("kind", ["dormant", "cut", "power_off"])
def test_rest_holds_for_whole_records_of_the_probe_the_species_or_all(
    kind, probe, species, of_a, of_b
):
    references = (
        f"kind,probe,species,from,to\n{kind},{probe},{species},2031-06-01 00:20,2031-06-01 02"
    )
    # Records from 0:30 to 2:00 lie wholly within; with the heater off nothing is vouched for.
    span = np.array([0, 1, 1, 1, 0, 0]) * (kind != "power_off")
    found = laid("at_rest", references=references.replace("01 02", "01 02:00"))
    assert found == [(span * of_a).tolist(), (span * of_b).tolist()]


def test_a_site_gives_rest_by_dormant_or_cut_dates_alone():
    head = "kind,probe,from,to\n"
    span = ",A,2031-06-01,2031-06-02"
    assert "at_rest" in given_facts(site_by_hand(references=f"{head}cut{span}"))
    assert "power_off" not in given_facts(site_by_hand(references=f"{head}cut{span}"))
    assert "at_rest" not in given_facts(site_by_hand(references=f"{head}power_off{span}"))
    assert "visited" not in given_facts(site_by_hand(probes=PROBES))
    assert source_in_words("at_rest") == "references.csv (kind dormant or cut)"
