"""Numbers of a line: read, missing, or the line is rejected."""

import numpy as np
import pytest
from log_by_hand import HEAD, column, counts, read, reasons


def rows(*cells):
    """A file whose column A holds these texts, ten minutes apart."""
    return HEAD + "".join(f"2031-06-01 {n:02}:00:00,{c},2\n" for n, c in enumerate(cells))


def test_numbers_are_kept_in_the_unit_as_written():
    series = read(rows("1.5", "-0.25", "+3", "1e-3", ".5", "2."))
    assert column(series) == [1.5, -0.25, 3, 0.001, 0.5, 2]


def test_missing_tokens_and_codes():
    layout = {"missing_text": ("NAN", "---"), "missing_numbers": (-9999.0, 7999.0)}
    series = read(rows("NAN", '"NAN"', "", "---", "-9999", "-9999.00", "7999"), layout)
    assert column(series) == [None] * 7
    assert counts(series) == {"header": 1, "kept": 7}
    assert reasons(read(rows("NA"), layout)) == [(2, "column 'A': 'NA' is not a number")]


def test_over_range_is_missing():
    assert column(read(rows("INF", "-INF", "+inf", "Infinity", "1"))) == [None] * 4 + [1]


@pytest.mark.parametrize(
    "text", ["abc", "1.2.3", "1e", "0x1F", "1_000", "12 3", "--1", "True", "-"]
)
def test_an_unreadable_number_rejects_its_line_with_column_and_text(text):
    series = read(rows("1", text, "3"))
    assert reasons(series) == [(3, f"column 'A': '{text}' is not a number")]
    assert column(series) == [1, 3]


def test_a_number_beyond_float64_is_missing_like_inf():
    series = read(rows("1e999", "INF", "3"))
    assert reasons(series) == []
    assert column(series) == [None, None, 3]


def test_control_characters_in_a_reason_are_escaped_and_long_text_is_cut():
    series = read(rows("\x07" + "x" * 300))
    text = r"\x07" + "x" * 33 + "..."
    assert reasons(series) == [(2, f"column 'A': '{text}' is not a number")]
    assert len(series.rejected[0][3]) == 200 and series.rejected[0][3].endswith("xxx...")


def test_one_bad_number_among_many_lines_costs_one_line():
    minutes = np.arange("2031-06-01", "2031-06-08", 600, dtype="M8[s]")
    lines = [f"{str(m).replace('T', ' ')},{n},2\n" for n, m in enumerate(minutes)]
    lines[500] = lines[500].replace(",2", ",2x")
    series = read(HEAD + "".join(lines))
    assert reasons(series) == [(502, "column 'B': '2x' is not a number")]
    assert column(series) == [n for n in range(len(minutes)) if n != 500]
    assert series.line.tolist() == [n + 2 for n in range(len(minutes)) if n != 500]


def test_only_the_columns_of_the_channels_must_be_numbers():
    text = "TIMESTAMP,Note,A\n2031-06-01 00:10:00,dry,1.5\n"
    assert column(read(text, channels=[("A", "", "")])) == [1.5]
    assert list(read(text, channels=[("A", "", "")]).values) == ["A"]
    assert reasons(read(text)) == [(2, "column 'Note': 'dry' is not a number")]


def test_decimal_comma():
    text = "T;A;B\n2031-06-01 00:10:00;1,5;-0,25\n2031-06-01 00:20:00;1.5;2\n"
    series = read(text, {"delimiter": ";", "decimal": ",", "time_columns": ("T",)})
    assert (column(series), column(series, "B")) == ([1.5], [-0.25])
    assert reasons(series) == [(3, "column 'A': '1.5' is not a number")]


def test_wrong_field_counts():
    text = HEAD + "2031-06-01 00:10:00,1\n2031-06-01 00:20:00,1,2,3\n"
    assert reasons(read(text)) == [
        (2, "has 2 fields; its names line 1 has 3"),
        (3, "has 4 fields; its names line 1 has 3"),
    ]


def test_a_line_read_alone_gives_the_same_number_as_one_read_with_others():
    digits = "0.1234567890123456789"
    text = HEAD + f"2031-06-01 00:10:00,{digits},2\n2031-06-01 00:20:00,{digits},2,,\n"
    series = read(text + f'2031-06-01 00:30:00, "{digits}" ,2\n')
    assert len(set(series.values["A"].tolist())) == 1


LONG = {
    "long": {"name_columns": ("probe", "quantity"), "value_column": "value"},
    "time_columns": ("time",),
    "time_format": "%Y-%m-%d %H:%M",
}
LONG_HEAD = "time,probe,quantity,value\n"


def test_a_long_table():
    text = LONG_HEAD + (
        "2031-06-01 00:10,T1,dT,8.1\n2031-06-01 00:10,T2,dT,9.1\n"
        '2031-06-01 00:20,"T1",dT,NAN\n2031-06-01 00:20,NA,dT,7\n'
    )
    series = read(text, LONG)
    assert list(series.values) == ["NA/dT", "T1/dT", "T2/dT"]
    assert column(series, "T1/dT") == [8.1, None]
    assert column(series, "T2/dT") == [9.1, None]
    assert series.line.tolist() == [[0, 2, 3], [5, 4, 0]]
    assert series.file.tolist() == [[-1, 0, 0], [0, 0, -1]]


def test_faults_of_a_long_table():
    text = LONG_HEAD + "2031-06-01 00:10,,dT,8\n2031-06-01 00:10,T1,dT,x\n2031-06-01 00:10,T1,dT\n"
    assert reasons(read(text, LONG)) == [
        (2, "column 'probe' is empty"),
        (3, "column 'value': 'x' is not a number"),
        (4, "has 3 fields; its names line 1 has 4"),
    ]


def test_a_long_table_without_a_readable_line():
    assert counts(read(LONG_HEAD + "x\n", LONG)) == {"header": 1, "rejected": 1}


def test_repeats_and_conflicts_of_a_long_table():
    first = LONG_HEAD + "2031-06-01 00:10,T1,dT,8.1\n2031-06-01 00:10,T2,dT,9.1\n"
    second = LONG_HEAD + "2031-06-01 00:10,T2,dT,9.4\n2031-06-01 00:10,T1,dT,8.10\n"
    series = read([first, second], LONG)
    assert column(series, "T1/dT") == [8.1] and column(series, "T2/dT") == [None]
    assert series.withheld["T2/dT"].tolist() == [True]
    # the owner is the file with the smaller hash: both begin at the same time
    assert sorted(r.kept for r in series.files) == [0, 2]
    assert sum(r.conflicting for r in series.files) == 1
    assert sum(r.duplicate for r in series.files) == 1
