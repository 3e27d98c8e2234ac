"""Downloads that overlap, repeat or differ give one series, whatever their order."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from log_by_hand import HEAD, column, counts, ends, read, same_bytes

from sapflux.errors import DataError
from sapflux.ingest.repeats import judge
from sapflux.site.config import Layout


def lines(*rows):
    return HEAD + "".join(f"2031-06-01 00:{row}\n" for row in rows)


EARLY = lines("10:00,1.5,2", "20:00,3,4")
LATE = lines("20:00,3,4", "30:00,5,6")


def test_an_overlap_is_owned_by_the_file_that_begins_first():
    series = read({"b.dat": EARLY, "a.dat": LATE})
    assert column(series) == [1.5, 3, 5]
    assert counts(series, 1) == {"header": 1, "kept": 2}
    assert counts(series, 0) == {"header": 1, "kept": 1, "duplicate": 1}
    assert (series.file.tolist(), series.line.tolist()) == ([1, 1, 0], [2, 3, 3])


def test_a_file_given_twice_counts_as_duplicate_line_by_line():
    series = read([EARLY + "torn\n", EARLY + "torn\n"])
    assert counts(series, 0) == {"header": 1, "kept": 2, "rejected": 1}
    assert counts(series, 1) == {"header": 1, "duplicate": 2, "rejected": 1}
    assert len({record.sha256 for record in series.files}) == 1


def test_of_files_that_begin_together_the_smaller_hash_owns():
    series = read([EARLY, EARLY + "\n"])
    first, second = sorted(series.files, key=lambda record: record.sha256)
    assert (first.kept, second.kept) == (2, 0)


def test_a_line_repeated_inside_a_file():
    series = read(lines("10:00,1,2", "10:00,1,2", "10:00,1,9"))
    assert counts(series) == {"header": 1, "kept": 1, "duplicate": 1, "conflicting": 1}
    assert (column(series), column(series, "B")) == ([1], [None])


def test_differing_cells_are_withheld_and_the_rest_kept():
    series = read({"b.dat": EARLY, "a.dat": lines("20:00,3.6,4", "30:00,5,6")})
    assert column(series) == [1.5, None, 5]
    assert column(series, "B") == [2, 4, 6]
    assert series.withheld["A"].tolist() == [False, True, False]
    assert not series.withheld["B"].any()
    assert counts(series, 0) == {"header": 1, "kept": 1, "conflicting": 1}
    stamp = np.datetime64("2031-06-01T00:20", "s")
    assert series.conflicts == (
        (stamp, "L", "A", "3", "raw/b.dat", 3, "3.6", "raw/a.dat", 2),
    )  # fmt: skip


def test_a_missing_value_against_a_number_is_a_conflict():
    series = read([EARLY, lines("20:00,NAN,4")])
    assert column(series) == [1.5, None]
    assert series.conflicts[0][3::3] == ("3", "NAN")


def test_both_missing_is_no_conflict():
    series = read([lines("10:00,NAN,2"), lines("10:00,,2")])
    assert column(series) == [None] and not series.conflicts


def test_copies_are_compared_at_the_coarser_printed_precision():
    coarse, fine = lines("10:00,6.8,2"), lines("00:00,1,1", "10:00,6.789,2")
    series = read([coarse, fine])
    assert column(series) == [1, 6.789] and not series.conflicts
    # the value comes from the line with more digits, and so does its origin
    coarse_first = read([lines("00:00,1,1", "10:00,6.8,2"), lines("10:00,6.789,2")])
    assert column(coarse_first) == [1, 6.789]
    assert coarse_first.file.tolist() == [[0, 0], [1, 0]]


@pytest.mark.parametrize(
    ("one", "other", "same"),
    [
        ("6.8", "6.75", True),
        ("6.8", "6.85", True),
        ("6.8", "6.86", False),
        ("6.80", "6.81", False),
        ("12", "12.4", True),
        ("12", "13", False),
        ("1.2E3", "1249", True),
        ("1.2E3", "1251", False),
        ("0.5", ".500", True),
    ],
)
def test_half_a_unit_of_the_coarser_last_digit(one, other, same):
    _, pairs = judge([(float(one), one), (float(other), other)], Layout())
    assert (pairs == []) == same


def test_three_copies_do_not_depend_on_their_order():
    texts = ["6.8", "6.75", "6.84"]
    for order in ([0, 1, 2], [1, 0, 2], [2, 1, 0], [0, 2, 1]):
        copies = [(float(texts[i]), texts[i]) for i in order]
        assert judge(copies, Layout())[1]


def test_a_trailing_zero_is_a_printed_digit():
    copies = [(float(text), text) for text in ("1.5", "1.50", "1.52")]
    assert judge(copies, Layout()) == (1, [(1, 2)])


def test_columns_of_unlike_files_come_together():
    one = "TIMESTAMP,A\n2031-06-01 00:10:00,1\n2031-06-01 00:20:00,2\n"
    two = "TIMESTAMP,B\n2031-06-01 00:10:00,3\n2031-06-01 00:30:00,4\n"
    series = read([one, two])
    assert column(series, "A") == [1, 2, None]
    assert column(series, "B") == [3, None, 4]
    assert series.file.tolist() == [[0, 1], [0, -1], [-1, 1]]
    assert series.line.tolist() == [[2, 2], [3, 0], [0, 3]]
    assert [record.kept for record in series.files] == [2, 2]


def test_rows_outside_every_channel_interval():
    # The site's standard time is UTC+1: the channel lives from 00:10 to 00:30 UTC.
    channels = [("A", "2031-06-01T01:10", "2031-06-01T01:20")]
    channels += [("B", "2031-06-01T01:20", "2031-06-01T01:30")]
    rows = [f"{minute}:00,{n},0" for n, minute in enumerate(["10", "20", "30", "40"])]
    series = read(lines(*rows), channels=channels)
    assert ends(series) == ["2031-06-01T00:20", "2031-06-01T00:30"]
    assert counts(series) == {"header": 1, "kept": 2, "outside": 2}
    open_end = read(lines(*rows), channels=[("A", "2031-06-01T01:10", "")])
    assert counts(open_end) == {"header": 1, "kept": 3, "outside": 1}


def test_no_file_has_the_column_names():
    with pytest.raises(DataError) as caught:
        read(["2031-06-01 00:10:00,1,2\n"])
    assert str(caught.value).partition("raw/0.dat: ")[2] == (
        "no line holds the column names TIMESTAMP; line 1 is "
        "'2031-06-01 00:10:00,1,2'. Correct 'time_columns', 'delimiter' or 'encoding' of its "
        "layout."
    )


MESSY = [
    "2031-06-01 00:10:00,1.50,2",
    "2031-06-01 00:20:00,1.5",
    "2031-06-01 00:30:00,NAN,2.25",
    "2031-06-01 00:30:00,NAN,2.2",
    "TIMESTAMP,A,B",
    '"2031-06-01 00:40:00,1.6,2',
    "2031-06-01 00:50:00,1.6,x",
    "",
    "2031-06-01 01:00:00,1.7,2",
    "2031-06-01 01:00:00,1.9,2",
    "2031-06-01 00:20:00,1.4,2",
    "2031-06-01 01:10:00,1.8,2",
    "2031-06-01 01:11:00,1.8,3",
]


@settings(max_examples=40, deadline=None)
@given(st.lists(st.integers(0, len(MESSY)), max_size=3), st.permutations(range(5)))
def test_splitting_duplicating_and_reordering_changes_no_byte(cuts, order):
    whole = read(HEAD + "\n".join(MESSY) + "\n")
    bounds = [0, *sorted(cuts), len(MESSY)]
    parts = [HEAD + "".join(f"{line}\n" for line in MESSY[a:b]) for a, b in pairwise(bounds)]
    files = [*parts, parts[0]]
    assert same_bytes(whole, read([files[i] for i in order if i < len(files)] + files))


LONG = {
    "long": {"name_columns": ("probe",), "value_column": "value"},
    "time_columns": ("time",),
}


@settings(max_examples=60, deadline=None)
@given(st.booleans(), st.integers(4, 16), st.randoms(use_true_random=False))
def test_long_tables_and_changing_columns_do_not_depend_on_the_cut(long, count, random):
    head = current = "time,probe,value" if long else "TIMESTAMP,A,B"
    rows = []  # (names line in force, line)
    for _ in range(count):
        if not long and random.random() < 0.2:
            current = random.choice([head, "TIMESTAMP,B,C,A", "TIMESTAMP,A"])
            rows.append((current, current))
        stamp = f"2031-06-01 00:{random.randrange(0, 60, 5):02}:{random.choice(['00', '30'])}"
        width = current.count(",")
        values = [random.choice(["1.5", "1.50", "1.52", "2", "NAN", "x"]) for _ in range(width)]
        values = [random.choice("PQ"), values[0]] if long else values
        rows.append((current, ",".join([stamp, *values])))

    def text(part, names):
        return names + "\n" + "".join(f"{line}\n" for _, line in part)

    cut = random.randrange(1, len(rows))
    parts = [text(rows[:cut], head), text(rows[cut:], rows[cut - 1][0])]
    layout = LONG if long else {}
    whole = read(text(rows, head), layout)
    assert same_bytes(whole, read([parts[1], parts[0], parts[1]], layout))
