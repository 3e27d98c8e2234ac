"""Text of logger files: clocks, stamps, headers, cells."""

from datetime import datetime

import numpy as np
import pytest

from sapflux.site.config import Layout, Log
from sapflux.virtual import loggers


def log(clock="utc", stamp="end", interval=30):
    return Log(files=("a",), layout="x", interval_min=interval, stamp=stamp, clock=clock)


def utc(*texts):
    return np.array(texts, dtype="datetime64[s]")


def test_both_passes_of_the_repeated_hour_show_the_same_time():
    """Berlin 2024-10-27: 02:30 is 00:30Z and again 01:30Z (IANA table, checks 14)."""
    shown = loggers.clock_times(
        utc("2024-10-27T00:30", "2024-10-27T01:30", "2024-10-27T02:30"), log("civil:Europe/Berlin")
    )
    assert [t.hour for t in shown] == [2, 2, 3]
    assert {t.minute for t in shown} == {30}


@pytest.mark.parametrize(
    ("clock", "shown"),
    [("utc", (23, 0)), ("utc+1", (0, 0)), ("utc-3.5", (19, 30)), ("civil:Europe/Vienna", (1, 0))],
)
def test_clocks(clock, shown):
    time = loggers.clock_times(utc("2031-08-17T23:00"), log(clock))[0]
    assert (time.hour, time.minute) == shown


def test_a_stamp_may_mark_the_start():
    assert loggers.clock_times(utc("2031-08-17T23:00"), log(stamp="start"))[0].hour == 22


def test_midnight_is_2400_of_the_day_before():
    layout = Layout(time_columns=("y", "d", "t"), time_format="year_day_hhmm")
    cells = loggers.stamp_cells([datetime(2032, 1, 1), datetime(2032, 1, 1, 1, 30)], layout)
    assert cells == [("2031", "365", "2400"), ("2032", "1", "130")]


def test_date_and_time_in_two_columns():
    layout = Layout(delimiter="tab", time_columns=("d", "t"), time_format="%Y/%m/%d %H:%M")
    assert loggers.stamp_cells([datetime(2031, 9, 1, 5, 0)], layout) == [("2031/09/01", "05:00")]


def test_header_with_units_and_aggregation():
    layout = Layout(names_line=2, units_line=3, aggregation_line=4)
    lines = loggers.header_lines(layout, ["a", "b"], ["mV", "K"], ["Avg", "Smp"], "my logger")
    assert lines == ['"my logger"', '"TIMESTAMP","a","b"', '"","mV","K"', '"","Avg","Smp"']


def test_records_are_lines_with_numbers_codes_and_words():
    """12.345 in binary lies above the tie; a rounded zero has no minus."""
    layout = Layout(delimiter=";", decimal=",", quote="", time_columns=("t",))
    values = np.array([[-0.001, 1.0], [12.345, np.nan], [np.inf, -np.inf]])
    lines = loggers.record_lines(values, ["t1", "t2", "t3"], [2, 1], layout, "-6999")
    assert lines == ["t1;0,00;1,0", "t2;12,35;-6999", "t3;INF;ERROR"]


def test_last_line_may_lack_its_end():
    assert loggers.as_bytes(["a", "b"], "\r\n", last_end="") == b"a\r\nb"
    assert loggers.as_bytes([]) == b""
