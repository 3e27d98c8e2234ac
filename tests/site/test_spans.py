"""Spans of time that tables give, on the records, by hand."""

import numpy as np
from site_by_hand import site_by_hand

from sapflux.site import facts

PROBES = """
    probe,tree,method,height_m,depth_from_mm,depth_to_mm,installed,removed,heating_on_min,heating_off_min
    A,T1,heat_dissipation,1.3,0,20,2031-05-01,2031-05-03,,
    A,T1,heat_dissipation,1.3,0,20,2031-05-03,,15,15
    B,T2,heat_dissipation,1.3,0,20,2031-05-01,,,
"""
TREES = "tree,stand,species\nT1,s,oak\nT2,s,fir"
HALF_HOUR = 1800


def laid(name, times, **tables):
    site = site_by_hand(1.0, probes=PROBES, trees=TREES, **tables)  # standard time is UTC+1
    ends = np.array(times, "datetime64[s]")
    return facts.lay_facts(site, ["A", "B"], 1, ends, HALF_HOUR, (name,))[name]


MAY_2 = [f"2031-05-02T{clock}" for clock in ("10:30", "11:00", "11:30", "12:00", "12:30")]


def test_power_is_off_in_every_record_that_is_touched():
    # 11:45 to 13:00 of standard time is 10:45 to 12:00 UTC.
    row = "kind,probe,species,from,to\npower_off,{},2031-05-02 11:45,2031-05-02 13:00"
    off = [0, 1, 1, 1, 0]
    for who, expected in [("A,", [off, [0] * 5]), (",fir", [[0] * 5, off]), (",", [off, off])]:
        assert laid("power_off", MAY_2, references=row.format(who)).values.tolist() == expected


def test_other_references_are_no_power_off():
    rows = "kind,probe,species,from,to\ndormant,,,2031-05-01,2031-06-01"
    assert not laid("power_off", MAY_2, references=rows).any()


def test_a_pair_is_given_by_the_middle_of_a_record():
    rows = "unheated,heated,from,to\nN,A,2031-05-02 11:45,2031-05-02 13:20"
    # 10:45 to 12:20 UTC; middles 10:15, 10:45, 11:15, 11:45, 12:15.
    assert laid("paired", MAY_2, pairs=rows).values.tolist() == [[0, 1, 1, 1, 1], [0] * 5]
    open_ended = laid("paired", MAY_2, pairs="unheated,heated\nN,B")
    assert open_ended.values.tolist() == [[0] * 5, [1] * 5]


def test_the_state_of_a_heater_is_given_by_its_own_channel_or_by_that_of_its_logger():
    head = "log,column,kind,id,point,quantity,unit,from,to\n"
    signals = "north,a,probe,A,1,heated_emf,mV,,2031-05-02 12:00\nsouth,b,probe,B,1,heated_emf,mV,,"
    own = "south,s,probe,B,,heater_state,1,2031-05-02 12:30,"
    found = laid("heater_state_given", MAY_2, channels=f"{head}{signals}\n{own}")
    # 12:30 of standard time is 11:30 UTC; middles 10:15, 10:45, 11:15, 11:45, 12:15.
    assert found.values.tolist() == [[0] * 5, [0, 0, 0, 1, 1]]
    loggers = "north,s,log,north,,heater_state,1,,"
    found = laid("heater_state_given", MAY_2, channels=f"{head}{signals}\n{loggers}")
    # The signal of A is on that logger until 11:00 UTC.
    assert found.values.tolist() == [[1, 1, 0, 0, 0], [0] * 5]


def test_heating_cycles_change_with_the_installation():
    times = ["2031-05-02T23:00", "2031-05-02T23:30"]  # the second begins at 0 h standard time
    found = laid("heating_on", times)
    np.testing.assert_array_equal(found, [[np.nan, 900.0], [np.nan] * 2])


def test_a_calibration_counts_for_needles_heated_as_its_own_were():
    rows = """
        calibration,species,heating,factor_g_m2_s,exponent,source,date
        one,oak,continuous,119,1.231,own,2030-01-01
        two,oak,intermittent,360,1,own,2029-01-01
        three,fir,intermittent,300,1,own,2030-01-01
    """
    times = ["2031-05-02T23:00", "2031-05-02T23:30"]
    found = laid("calibration_factor", times, calibrations=rows)
    np.testing.assert_allclose(found, [[0.119, 0.36], [np.nan] * 2])
    exponent = laid("calibration_exponent", times, calibrations=rows)
    np.testing.assert_allclose(exponent, [[1.231, 1.0], [np.nan] * 2])
