"""Which installation a record belongs to."""

import numpy as np
from site_by_hand import site_by_hand

from sapflux.site.installations import episodes, installation_numbers, latest_begun

PROBES = """
    probe,tree,method,height_m,depth_from_mm,depth_to_mm,installed,removed
    A,T1,heat_dissipation,1.3,0,20,2031-05-01 12:00,
    B,T2,heat_dissipation,1.3,0,20,2031-05-03 00:00,2031-05-04 00:00
    B,T2,heat_dissipation,1.3,0,30,2031-05-01 12:00,2031-05-02 12:00
"""


def ends(*texts):
    return np.array(texts, dtype="datetime64[s]")


def test_episodes_are_sorted_by_their_start():
    site = site_by_hand(probes=PROBES)
    assert [row.depth_to_mm for row in episodes(site, "B")] == [(30.0,), (20.0,)]
    assert episodes(site, "C") == []


def test_a_record_belongs_where_its_whole_interval_lies():
    site = site_by_hand(probes=PROBES)
    times = ends(
        "2031-05-01T12:00",  # before
        "2031-05-01T12:05",  # begins 5 min too early
        "2031-05-01T12:10",  # begins with the installation
        "2031-05-02T12:00",  # ends with the first of B
        "2031-05-02T12:10",
        "2031-05-03T00:10",  # first of the second of B
        "2031-05-04T00:00",
        "2031-05-04T00:10",
    )
    numbers = installation_numbers(site, ["A", "B", "C"], times, 600)
    assert numbers.dtype == np.int16
    assert numbers.tolist() == [
        [-1, -1, 0, 0, 0, 0, 0, 0],
        [-1, -1, 0, 0, -1, 1, 1, -1],
        [-1] * 8,
    ]
    # stamps of another resolution
    fine = installation_numbers(site, ["A", "B", "C"], times.astype("datetime64[ns]"), 600)
    assert fine.tolist() == numbers.tolist()
    begun = latest_begun(site, ["A", "B"], times, 600)
    assert begun.tolist() == [[0] * 8, [0, 0, 0, 0, 0, 1, 1, 1]]


def test_table_times_are_fixed_standard_time():
    site = site_by_hand(utc_offset_h=10.0, probes=PROBES)
    # 12:00 at UTC+10 is 02:00 UTC.
    times = ends("2031-05-01T02:00", "2031-05-01T02:10")
    assert installation_numbers(site, ["A"], times, 600).tolist() == [[-1, 0]]


def test_a_record_over_a_change_of_probe_belongs_to_neither():
    probes = """
        probe,tree,method,height_m,depth_from_mm,depth_to_mm,installed,removed
        A,T1,heat_dissipation,1.3,0,20,2031-05-01 00:00,2031-05-02 00:05
        A,T1,heat_dissipation,1.3,0,20,2031-05-02 00:05,
    """
    times = ends("2031-05-02T00:00", "2031-05-02T00:10", "2031-05-02T00:20")
    numbers = installation_numbers(site_by_hand(probes=probes), ["A"], times, 600)
    assert numbers.tolist() == [[0, -1, 1]]
