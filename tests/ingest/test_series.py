"""A series read on another clock: no value is invented, none is stretched over a gap."""

import numpy as np
import pytest

from sapflux.ingest.series import Series, grid, on_records, place

START = np.datetime64("2031-06-01T00:00", "s")


def minutes(*values):
    return START + np.array(values) * np.timedelta64(60, "s")


def test_a_short_record_takes_the_interval_that_holds_its_midpoint():
    half_hours = Series(minutes(30, 60), 1800, np.array([1.0, 2.0]))
    read = on_records(half_hours, minutes(10, 20, 30, 40, 60), 600)
    assert read.tolist() == [1, 1, 1, 2, 2]


def test_a_long_record_takes_the_mean_of_what_it_covers():
    ten_minutes = Series(minutes(10, 20, 30, 40, 50, 60), 600, np.array([1.0, 2, 3, 4, 5, 9]))
    assert on_records(ten_minutes, minutes(30, 60), 1800).tolist() == [2, 6]


def test_a_long_record_with_less_than_half_its_values_is_absent():
    ten_minutes = Series(minutes(10, 40, 50), 600, np.array([1.0, 4, 6]))
    assert np.isnan(on_records(ten_minutes, minutes(30), 1800))[0]
    assert on_records(ten_minutes, minutes(60), 1800)[0] == 5


def test_nothing_is_read_across_a_gap_or_beyond_the_ends():
    sparse = Series(minutes(30, 120), 1800, np.array([1.0, 4.0]))
    read = on_records(sparse, minutes(0, 60, 90, 150), 1800)
    assert np.isnan(read).all()


def test_an_empty_series_is_absent_everywhere():
    nothing = Series(minutes()[:0], 600, np.empty(0))
    assert np.isnan(on_records(nothing, minutes(10), 600)).all()


@pytest.mark.parametrize("interval_s", [600, 1800])
def test_places_on_a_grid_are_the_inverse_of_the_grid(interval_s):
    ends = grid(START, START + np.timedelta64(86400, "s"), interval_s)
    assert place(ends, START, interval_s).tolist() == list(range(len(ends)))
