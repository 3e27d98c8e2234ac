"""Civil time: the repeated hour by file order, the hour that does not exist."""

from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from log_by_hand import HEAD, column, ends, read, reasons, same_bytes

from sapflux.ingest.clock import read_civil

BERLIN = {"clock": "civil:Europe/Berlin"}
US = "M8[us]"


def local(text):
    return np.array([text], US).astype(np.int64)


def test_repeated_hour_both_ways():
    # Source: IANA time zone table, Europe/Berlin; CEST is UTC+2 until 01:00 UTC, then UTC+1.
    both = read_civil(local("2024-10-27T02:30"), "Europe/Berlin")
    assert str(both.early.view(US)[0])[:16] == "2024-10-27T00:30"
    assert str(both.late.view(US)[0])[:16] == "2024-10-27T01:30"
    assert both.repeated.all() and not both.absent.any()


def test_the_hour_that_does_not_exist():
    # Source: IANA time zone table, Europe/Berlin: clocks go from 02:00 to 03:00.
    text = HEAD + "2024-03-31 01:50:00,1,2\n2024-03-31 02:30:00,3,4\n2024-03-31 03:00:00,5,6\n"
    series = read(text, **BERLIN)
    assert ends(series) == ["2024-03-31T00:50", "2024-03-31T01:00"]
    assert reasons(series) == [
        (
            3,
            "2024-03-31 02:30:00 does not exist in Europe/Berlin: clocks skip from 02:00 to 03:00. "
            "If the logger does not follow daylight saving, set a fixed clock such as "
            '"utc+1" for this log.',
        )
    ]


def test_hours_of_new_york_agree_with_a_published_table():
    # Source: nycflights13, weather of station JFK, 2013 (see the head of the file).
    path = Path(__file__).parent / "data" / "new_york_hours_2013.csv"
    rows = [row.split(",") for row in path.read_text().splitlines() if row[0].isdigit()]
    text = HEAD + "".join(f"{local_hour}:00,1,2\n" for local_hour, _ in rows)
    series = read(text, clock="civil:America/New_York", interval_min=60.0)
    assert reasons(series) == []
    assert ends(series) == [utc.replace(" ", "T") for _, utc in rows]


@pytest.mark.parametrize(
    "zone",
    [
        "Europe/Berlin",
        "America/New_York",
        "Australia/Lord_Howe",
        "Asia/Kolkata",
        "Africa/Casablanca",
        "America/Sao_Paulo",
    ],
)
def test_twenty_years_agree_with_the_datetime_library(zone):
    # Source: Python's zoneinfo, forwards: UTC to wall clock.
    from datetime import UTC, datetime
    from zoneinfo import ZoneInfo

    place = ZoneInfo(zone)
    utc = np.arange("2005-01-01", "2025-01-01", 1800 * 7, dtype="M8[s]").astype(np.int64)
    moments = [datetime.fromtimestamp(int(s), UTC).astimezone(place) for s in utc]
    wall = np.array([m.replace(tzinfo=None) for m in moments], dtype=US).astype(np.int64)
    both = read_civil(wall, zone)
    fold = np.array([m.fold for m in moments])
    assert (np.where(fold, both.late, both.early) == utc * 1_000_000).all()
    assert not both.absent.any()


def autumn(*, step=10, first=True, second=True, skip=()):
    """Lines from 01:30 to 03:20 civil time around the repeated hour; the values count records."""
    start = np.datetime64("2024-10-26T23:30", "m")
    lines = []
    for number in range(180 // step):
        utc = start + number * step
        civil = utc + (120 if utc < np.datetime64("2024-10-27T01:00") else 60)
        inside = str(civil)[11:13] == "02"
        second_pass = utc >= np.datetime64("2024-10-27T01:00")
        if (inside and not (second if second_pass else first)) or number in skip:
            continue
        lines.append(f"{str(civil).replace('T', ' ')}:00,{number},0\n")
    return lines


def count_of(series, step=10):
    """The record numbers that the ends stand for."""
    start = np.datetime64("2024-10-26T23:30", "s")
    return ((series.end - start) / np.timedelta64(step * 60, "s")).tolist()


@pytest.mark.parametrize("step", [10, 30, 60])
def test_file_order_tells_the_two_passes_apart(step):
    series = read(HEAD + "".join(autumn(step=step)), **BERLIN, interval_min=float(step))
    snapped = {10: list(range(18)), 30: list(range(6)), 60: [0.5, 1.5, 2.5]}[step]
    assert count_of(series, step) == snapped
    assert column(series) == list(range(180 // step))


def test_new_york_2013():
    # Source: table `weather` of the data package nycflights13: 2013-11-03 01 h is 05Z and 06Z.
    hours = ["2013-11-03 00:00:00", "2013-11-03 01:00:00", "2013-11-03 01:00:00"]
    text = HEAD + "".join(f"{h},{n},0\n" for n, h in enumerate([*hours, "2013-11-03 02:00:00"]))
    series = read(text, clock="civil:America/New_York", interval_min=60.0)
    assert [end[11:13] for end in ends(series)] == ["04", "05", "06", "07"]


@pytest.mark.parametrize("cut", range(1, 18))
def test_splitting_a_file_inside_the_repeated_hour_changes_no_byte(cut):
    lines = autumn()
    whole = read(HEAD + "".join(lines), **BERLIN)
    parts = [HEAD + "".join(lines[:cut]), HEAD + "".join(lines[cut:])]
    assert same_bytes(whole, read(parts, **BERLIN))
    assert same_bytes(whole, read(parts[::-1], **BERLIN))


@pytest.mark.parametrize("cut", range(1, 12))
def test_splitting_a_single_pass_changes_no_byte(cut):
    lines = autumn(second=False)
    whole = read(HEAD + "".join(lines), **BERLIN)
    assert count_of(whole) == [*range(9), *range(15, 18)]
    parts = [HEAD + "".join(lines[:cut]), HEAD + "".join(lines[cut:])]
    assert same_bytes(whole, read(parts, **BERLIN))


def test_three_parts_in_any_order():
    lines = autumn()
    whole = read(HEAD + "".join(lines), **BERLIN)
    for one in range(1, 17):
        for two in range(one + 1, 18):
            parts = [lines[:one], lines[one:two], lines[two:]]
            texts = [HEAD + "".join(part) for part in parts]
            assert same_bytes(whole, read([texts[1], texts[2], texts[0], texts[1]], **BERLIN))


def test_a_file_that_begins_in_the_hour_and_leads_on_is_the_second_pass():
    lines = autumn()
    series = read(HEAD + "".join(lines[11:]), **BERLIN)
    assert count_of(series) == list(range(11, 18))


def test_a_file_that_lies_in_the_hour_alone_is_the_first_pass():
    series = read(HEAD + "".join(autumn()[11:13]), **BERLIN)
    assert count_of(series) == [5, 6]


def test_a_long_table_in_the_repeated_hour():
    rows = [line.split(",") for line in autumn(step=30)]
    text = "time,probe,value\n" + "".join(
        f"{stamp},{probe},{n}\n" for stamp, n, _ in rows for probe in ("P", "Q")
    )
    layout = {"time_columns": ("time",)}
    layout["long"] = {"name_columns": ("probe",), "value_column": "value"}
    series = read(text, layout, **BERLIN, interval_min=30.0)
    assert column(series, "P") == column(series, "Q") == list(range(6))


@settings(max_examples=40, deadline=None)
@given(
    st.sampled_from([10, 30, 60]),
    st.sets(st.integers(0, 17), max_size=5),
    st.lists(st.integers(1, 17), min_size=1, max_size=3),
    st.randoms(use_true_random=False),
)
def test_parts_of_a_log_with_gaps_in_any_order(step, lost, cuts, random):
    # Where records are lost inside the hour and a file ends there as well, several readings are
    # equally good: those are left out.
    lines = autumn(step=step, skip=lost if step == 10 else ())
    cuts = sorted(min(cut, len(lines)) for cut in cuts)
    inside = [" 02:" in line for line in lines]
    if step == 10 and any(all(inside[cut - 1 : cut + 1]) for cut in cuts):
        assume(not lost & set(range(3, 15)))
    parts = [HEAD + "".join(lines[a:b]) for a, b in pairwise([0, *cuts, len(lines)])]
    parts.append(random.choice(parts))
    random.shuffle(parts)
    whole = read(HEAD + "".join(lines), **BERLIN, interval_min=float(step))
    assert same_bytes(whole, read(parts, **BERLIN, interval_min=float(step)))
