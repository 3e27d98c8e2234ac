import numpy as np
import pytest
from correction_records import stamps

from sapflux.correction.nights import (
    in_nights,
    installations_in,
    last_window,
    nights_of,
    window_means,
    window_middle,
    window_records,
)
from sapflux.physics import sun


def nights_at(longitude, latitude=48.0, start="2031-02-01", days=6):
    time = stamps(start, days)
    return time, nights_of(time, *sun.position(time, latitude, longitude))


@pytest.mark.parametrize("longitude", [-170.0, -75.0, 0.0, 15.0, 170.0])
def test_each_night_has_one_key_and_starts_at_the_solar_noon_before(longitude):
    _, nights = nights_at(longitude)
    assert len(nights.start) in (6, 7)  # six whole nights, or five and two parts
    apart = np.diff(nights.start) / np.timedelta64(1, "s")
    # Solar days differ from 24 h by half a minute at most. Source: any almanac, from memory.
    assert np.all(np.abs(apart - 86400) < 60)
    elevation, solar_time = sun.position(nights.start, 48.0, longitude)
    assert np.all(np.abs(solar_time - 12) < 0.02)
    assert np.all(elevation > 0)
    # After midnight, before the sun is up, and within 12 to 24 h of that noon.
    since = (nights.begins - nights.start) / np.timedelta64(1, "h")
    assert np.all((since[1:] >= 12) & (since[1:] < 12.5))
    assert np.all(nights.length[1:-1] * 0.5 < 8)


@pytest.mark.parametrize("longitude", [-170.0, 0.0, 170.0])
def test_key_of_a_night_does_not_depend_on_where_the_block_begins(longitude):
    time, whole = nights_at(longitude)
    for cut in (1, 17, 31, 48, 50):
        part = nights_of(time[cut:], *sun.position(time[cut:], 48.0, longitude))
        shared = part.start[1:]  # the first may be cut short
        assert np.isin(shared, whole.start).all()


def test_no_night_under_a_midnight_sun_and_half_a_day_of_it_in_a_polar_night():
    _, summer = nights_at(20.0, latitude=70.0, start="2031-06-20")
    assert not len(summer.start)
    _, winter = nights_at(20.0, latitude=72.0, start="2031-12-20")
    assert np.all(winter.length[1:-1] == 24)  # midnight to noon, half-hourly


def test_irregular_records_are_refused():
    time = np.delete(stamps("2031-02-01", 1), 7)
    with pytest.raises(ValueError, match="regular interval"):
        nights_of(time, *sun.position(time, 48.0, 0.0))


def test_window_means_by_hand():
    time, nights = nights_at(0.0, days=2)
    values = np.full(len(time), np.nan)
    first = nights.first[0]
    # 10, 12, -, 14: the only window of four records with three of them: mean 12, deviation 2.
    values[first : first + 4] = [10.0, 12.0, np.nan, 14.0]
    means = window_means(in_nights(values, nights, np.nan), nights, 4, 0.75)
    assert means.mean[0, 0] == 12.0
    assert means.deviation[0, 0] == 2.0
    assert means.count[0, 0] == 3
    assert np.isnan(means.mean[0, 1:]).all()
    stricter = window_means(in_nights(values, nights, np.nan), nights, 4, 0.8)
    assert np.isnan(stricter.mean).all()


def test_windows_stay_within_the_night():
    time, nights = nights_at(0.0)
    values = np.zeros(len(time))
    records = window_records(nights, 2.0)
    assert records == 4
    means = window_means(in_nights(values, nights, np.nan), nights, records, 0.5)
    for night, length in enumerate(nights.length):
        whole = max(0, length - records + 1)
        assert np.isfinite(means.mean[night]).sum() == whole
    last = last_window(nights, records)
    end = window_middle(nights, last, records) + 3 * np.timedelta64(15, "m")
    assert np.array_equal(end[1:-1], time[nights.first + nights.length - 1][1:-1])


def test_a_night_shorter_than_the_window_has_no_mean():
    time = stamps("2031-06-20", 2)
    nights = nights_of(time, *sun.position(time, 62.0, 0.0))  # sunrise before 3 h
    means = window_means(in_nights(np.ones(len(time)), nights, np.nan), nights, 12, 0.5)
    assert len(nights.start)
    assert np.isnan(means.mean).all()


def test_deviation_keeps_its_digits_under_a_large_mean():
    time, nights = nights_at(0.0, days=3)
    generator = np.random.default_rng(5)
    values = 1e4 + generator.normal(0, 1e-3, len(time))
    means = window_means(in_nights(values, nights, np.nan), nights, 6, 1.0)
    at = nights.first[1] + 2
    expected = np.std(values[at : at + 6], ddof=1)  # numpy
    assert means.deviation[1, 2] == pytest.approx(expected, rel=1e-6)


def test_installations_of_a_night_are_met_one_after_another():
    numbers = np.array([[[0, 0, 1], [-1, -1, -1], [2, 2, 2]]])
    met = [current.tolist() for current in installations_in(numbers)]
    assert met == [[[0, -1, 2]], [[1, -1, -1]]]
