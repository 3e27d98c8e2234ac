"""Text stamps become UTC ends of intervals."""

from datetime import datetime, timedelta

import numpy as np
import pytest
from log_by_hand import HEAD, column, ends, read, reasons

from sapflux.site.config import Layout


def one(text, style, *columns, **log):
    """The end of a record whose time columns hold the parts of `text` (parted by '|')."""
    parts = text.split("|")
    names = columns or ("T",)
    body = ";".join([*names, "A"]) + "\n" + ";".join([*parts, "1"]) + "\n"
    layout = {"delimiter": ";", "time_columns": names, "time_format": style}
    return read(body, layout, **log)


@pytest.mark.parametrize(
    ("text", "style"),
    [
        ("2031-06-01 13:10:00", "%Y-%m-%d %H:%M:%S"),
        ('"2031-06-01 13:10:00"', "%Y-%m-%d %H:%M:%S"),
        (" 2031-06-01 13:10:00 ", "%Y-%m-%d %H:%M:%S"),
        ("2031-06-01T13:10", "%Y-%m-%dT%H:%M"),
        ("01.06.31 13:10", "%d.%m.%y %H:%M"),
        ("1/6/2031 13:10", "%d/%m/%Y %H:%M"),
        ("6/1/2031 1:10 PM", "%m/%d/%Y %I:%M %p"),
        ("01 Jun 2031 13:10", "%d %b %Y %H:%M"),
        ("2031-06-01 13:10:00.25", "%Y-%m-%d %H:%M:%S.%f"),
        ("2031-06-01 13:10:00", "%Y-%m-%d %H:%M:%S.%f"),
        ("2031-152 1310", "%Y-%j %H%M"),
        ("2031-06-01 15:10 +0200", "%Y-%m-%d %H:%M %z"),
    ],
)
def test_formats(text, style):
    assert ends(one(text, style)) == ["2031-06-01T13:10"]


def test_many_stamps_of_a_format_without_fixed_width():
    rows = "".join(f"{d}/6/2031 {h}:10,{d},{h}\n" for d in range(1, 4) for h in range(24))
    series = read(HEAD + rows + "now,1,1\n", {"time_format": "%d/%m/%Y %H:%M"})
    assert len(series.end) == 72
    assert ends(series)[23:25] == ["2031-06-01T23:10", "2031-06-02T00:10"]
    assert reasons(series) == [(74, "time 'now' does not read as '%d/%m/%Y %H:%M'")]


@pytest.mark.parametrize("clock", ["utc-3.5", "civil:Europe/Berlin"])
def test_a_stamps_own_offset_goes_before_the_logs_clock(clock):
    rows = "2031-06-01T15:10+02:00,1,2\n2031-06-01 15:20,3,4\n2031-06-01T24:00+02:00,5,6\n"
    series = read(HEAD + rows, {"time_format": "%Y-%m-%dT%H:%M%z"}, clock=clock)
    # Hour 24 of UTC+2 is 22 h UTC.
    assert ends(series)[0] == "2031-06-01T13:10" and ends(series)[-1] == "2031-06-01T22:00"
    assert reasons(series) == [
        (3, "time '2031-06-01 15:20' does not read as '%Y-%m-%dT%H:%M%z'"),
    ]


def test_date_and_time_in_two_columns():
    series = one("01.06.2031|13:10", "%d.%m.%Y %H:%M", "Date", "Time")
    assert ends(series) == ["2031-06-01T13:10"]


@pytest.mark.parametrize(
    ("text", "end"),
    [
        ("2031|152|1310", "2031-06-01T13:10"),
        ("2031|152|10", "2031-06-01T00:10"),
        ("2031|152|2400", "2031-06-02T00:00"),
        ("2031|365|2400", "2032-01-01T00:00"),
        ("2032|366|0", "2032-12-31T00:00"),
        ("2031.0|152.0|1310", "2031-06-01T13:10"),
    ],
)
def test_year_day_and_hhmm(text, end):
    assert ends(one(text, "year_day_hhmm", "year", "day", "hhmm")) == [end]


@pytest.mark.parametrize(
    "text", ["2031|366|10", "2031|0|10", "2031|1|2410", "2031|1|1260", "2031||9"]
)
def test_year_day_and_hhmm_that_do_not_exist(text):
    series = one(text, "year_day_hhmm", "year", "day", "hhmm")
    shown = text.replace("|", " ")
    assert reasons(series) == [(2, f"time '{shown}' does not read as 'year_day_hhmm'")]


@pytest.mark.parametrize(
    ("text", "style"),
    [
        ("2031-12-31 24:00:00", "%Y-%m-%d %H:%M:%S"),
        ("31/12/2031 24:00", "%d/%m/%Y %H:%M"),
        ("31/12/31 2400", "%d/%m/%y %H%M"),
        ("31 Dec 2031 24:00", "%d %b %Y %H:%M"),
    ],
)
def test_hour_24_is_midnight_at_the_end_of_the_day(text, style):
    assert ends(one(text, style)) == ["2032-01-01T00:00"]


@pytest.mark.parametrize(
    "text", ["2031-06-31 00:10:00", "2031-13-01 00:10:00", "2031-06-01 24:10:00", "soon", ""]
)
def test_a_stamp_that_does_not_read(text):
    series = read(HEAD + f"{text},1,2\n2031-06-01 00:10:00,3,4\n")
    reason = f"time '{text}' does not read as '%Y-%m-%d %H:%M:%S'"
    assert reasons(series) == [(2, reason)]
    assert column(series) == [3]


@pytest.mark.parametrize("year", [1989, 2101])
def test_years_no_logger_has_written(year):
    series = read(HEAD + f"{year}-06-01 00:10:00,1,2\n")
    reason = f"time '{year}-06-01 00:10:00' lies outside the years 1990 to 2100"
    assert reasons(series) == [(2, reason)]


def test_a_stamp_at_the_start_of_its_interval_moves_to_the_end():
    row = HEAD + "2031-06-01 00:10:00,1,2\n"
    assert ends(read(row, stamp="start")) == ["2031-06-01T00:20"]


@pytest.mark.parametrize(
    ("clock", "end"),
    [("utc", "2031-06-01T06:00"), ("utc+1", "2031-06-01T05:00"), ("utc-3.5", "2031-06-01T09:30")],
)
def test_fixed_clocks(clock, end):
    assert ends(read(HEAD + "2031-06-01 06:00:00,1,2\n", clock=clock)) == [end]


def test_records_snap_to_the_nearest_step_and_the_nearest_is_kept():
    rows = "00:09:58,1,1\n00:11:00,2,2\n00:15:00,3,3\n00:29:00,4,4\n00:31:00,5,5\n"
    text = HEAD + "".join(f"2031-06-01 {row}\n" for row in rows.split())
    series = read(text)
    assert ends(series) == ["2031-06-01T00:10", "2031-06-01T00:20", "2031-06-01T00:30"]
    assert column(series) == [1, 3, 4]
    assert series.files[0].duplicate == 2
    assert series.displaced == (
        ("raw/0.dat", 3, "raw/0.dat, line 2 is nearer to the same step", "2031-06-01 00:11:00,2,2"),
        ("raw/0.dat", 6, "raw/0.dat, line 5 is nearer to the same step", "2031-06-01 00:31:00,5,5"),
    )


def test_steps_count_from_midnight_of_a_clock_between_the_hours():
    text = HEAD + "2031-06-01 06:00:00,1,2\n2031-06-01 07:01:00,3,4\n"
    series = read(text, clock="utc+5.5", interval_min=60.0)
    assert ends(series) == ["2031-06-01T00:30", "2031-06-01T01:30"]


def test_fixed_width_stamps_agree_with_the_datetime_library():
    # Source: Python's own strptime, for every directive that is read from the bytes.
    style = "%Y-%m-%d %H:%M:%S"
    moments = np.arange("1990-01-01", "2101-01-01", 100_003, dtype="M8[s]")
    texts = [str(moment).replace("T", " ") for moment in moments]
    since, microsecond = datetime(1970, 1, 1), timedelta(microseconds=1)
    expected = [(datetime.strptime(text, style) - since) // microsecond for text in texts]
    sheet_text = "\n".join(["TIMESTAMP,A", *(f"{text},1" for text in texts)])
    from sapflux.ingest.parse import parse

    assert parse(sheet_text.encode(), Layout()).local.tolist() == expected
