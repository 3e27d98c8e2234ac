"""Every line of a file gets one class, whatever is in it."""

import numpy as np
import pytest
from log_by_hand import HEAD, column, counts, ends, read, reasons

from sapflux.ingest.text import as_utf8, line_bounds, split_line
from sapflux.site.config import Layout

GOOD = "2031-06-01 00:10:00,1.5,2\n"
LATER = "2031-06-01 00:20:00,3,4\n"


@pytest.mark.parametrize("line_end", ["\n", "\r\n", "\r"])
def test_line_ends_of_every_kind(line_end):
    series = read((HEAD + GOOD + LATER).replace("\n", line_end))
    assert column(series) == [1.5, 3]
    assert counts(series) == {"header": 1, "kept": 2}


def test_mixed_line_ends_bound_the_same_lines():
    start, stop, open_end = line_bounds(b"a\n\rb\r\r\nc")
    assert [(int(a), int(b)) for a, b in zip(start, stop, strict=True)] == [
        (0, 1), (2, 2), (3, 4), (5, 5), (7, 8),
    ]  # fmt: skip
    assert open_end


def test_no_line_end_at_the_end():
    series = read(HEAD + GOOD + LATER.rstrip("\n"))
    assert column(series, "B") == [2, 4]


def test_a_file_that_ends_inside_its_last_number():
    rows = "2031-06-01 00:10:00,1.50,2.25\n2031-06-01 00:20:00,1.50,2.2"
    series = read(HEAD + rows)
    assert reasons(series) == [(3, "the file ends inside this line: '2.2' has lost decimals")]
    assert len(read(HEAD + rows + "\n").end) == 2


def test_a_torn_last_line_costs_itself():
    series = read(HEAD + GOOD + "2031-06-01 00:2")
    assert reasons(series) == [(3, "has 1 fields; its names line 1 has 3")]
    assert column(series) == [1.5]


def test_a_torn_line_joined_to_the_next_costs_both():
    series = read(HEAD + "2031-06-01 00:10:00,1." + LATER + "2031-06-01 00:30:00,5,6\n")
    assert reasons(series) == [(2, "has 4 fields; its names line 1 has 3")]
    assert column(series) == [5]


def test_an_open_quote_costs_that_line_and_no_other():
    broken = '"2031-06-01 00:20:00,3,4\n'
    series = read(HEAD + GOOD + broken + '"2031-06-01 00:30:00","5",6\n')
    assert reasons(series) == [(3, "a quote is opened and not closed")]
    assert column(series) == [1.5, 5]


def test_nul_bytes_cost_their_line():
    series = read((HEAD + GOOD).encode() + b"\0\0\0" + (LATER + GOOD[:14] + "30:00,5,6\n").encode())
    assert reasons(series) == [(3, "holds a NUL byte")]
    assert series.rejected[0][3] == r"\x00\x00\x002031-06-01 00:20:00,3,4"
    assert column(series) == [1.5, 5]


def test_bytes_not_valid_in_the_encoding_cost_their_line():
    series = read(HEAD.encode() + GOOD.encode() + b"2031-06-01 00:20:00,3\xff,4\n")
    assert reasons(series) == [(3, "bytes that are not valid utf-8")]
    series = read(
        HEAD.encode() + b"2031-06-01 00:20:00,3\x81,4\n" + GOOD.encode(), {"encoding": "cp1252"}
    )
    assert reasons(series) == [(2, "bytes that are not valid cp1252")]
    assert column(series) == [1.5]


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "cp1252"])
def test_encodings_and_byte_order_marks(encoding):
    text = "TIMESTAMP,Wärme\n2031-06-01 00:10:00,1.5\n"
    series = read(text.encode(encoding), {"encoding": encoding})
    assert column(series, "Wärme") == [1.5]
    assert series.files[0].bytes == len(text.encode(encoding))


def test_a_byte_order_mark_is_no_part_of_the_first_name():
    assert column(read(b"\xef\xbb\xbf" + (HEAD + GOOD).encode())) == [1.5]
    assert as_utf8("\ufeffa".encode("utf-16-le"), "utf-16-le") == b"a"


def test_blank_lines_and_comments():
    text = "# from the ridge\n" + HEAD + GOOD + "\n  \n,,\n# battery changed, 12.1 V\n"
    series = read(text, {"comment": "#", "names_line": 2})
    assert counts(series) == {"header": 3, "kept": 1, "blank": 3}


def test_a_names_line_may_be_a_comment():
    assert column(read("#" + HEAD + GOOD, {"comment": "#"})) == [1.5]


def test_an_empty_file_and_one_with_only_a_header():
    series = read(["", HEAD, HEAD + GOOD, "\n\n"])
    assert [record.lines for record in series.files] == [0, 1, 2, 2]
    assert counts(series, 1) == {"header": 1}
    assert counts(series, 3) == {"blank": 2}
    assert column(series) == [1.5]


def test_nothing_but_empty_files_is_an_empty_series():
    series = read(["", "\n"])
    assert series.values == {} and len(series.end) == 0


def test_trailing_delimiters_are_no_fields():
    text = "TIMESTAMP,A,B,\n2031-06-01 00:10:00,1.5,2,\n2031-06-01 00:20:00,3,4\n"
    series = read(text + "2031-06-01 00:30:00,5,6,,,\n2031-06-01 00:40:00,5,6,7\n")
    assert column(series, "B") == [2, 4, 6]
    assert reasons(series) == [(5, "has 4 fields; its names line 1 has 3")]


def test_a_data_line_before_the_header():
    series = read(GOOD + HEAD + LATER)
    assert reasons(series) == [(1, "stands before any line of column names (expected: TIMESTAMP)")]
    assert column(series) == [3]


TOA = {"names_line": 2, "units_line": 3, "aggregation_line": 4}
BLOCK = (
    '"TABLE","ridge","2201"\n"TIMESTAMP","A","B"\n"TS","mV","degC"\n"","Avg","Smp"\n'
    '"2031-06-01 00:10:00",1.5,"NAN"\n'
)


def test_four_header_lines_and_quotes():
    series = read(BLOCK, TOA)
    assert counts(series) == {"header": 4, "kept": 1}
    assert (column(series), column(series, "B")) == ([1.5], [None])


def test_a_header_repeated_mid_file_with_all_its_lines():
    series = read(BLOCK + BLOCK.replace("00:10", "00:20"), TOA)
    assert counts(series) == {"header": 8, "kept": 2}


def test_a_names_line_repeated_alone_takes_no_data_with_it():
    again = '"TIMESTAMP","A","B"\n"2031-06-01 00:20:00",3,4\n'
    series = read(BLOCK + again, TOA)
    assert counts(series) == {"header": 5, "kept": 2}


def test_changed_columns_hold_from_their_names_line_on():
    changed = "TIMESTAMP,B,C,A\n2031-06-01 00:20:00,4,7,3\n"
    series = read(HEAD + GOOD + changed)
    assert column(series, "A") == [1.5, 3]
    assert column(series, "B") == [2, 4]
    assert column(series, "C") == [None, 7]
    names = list(series.values)
    assert series.line[:, names.index("C")].tolist() == [0, 4]
    assert series.file[:, names.index("C")].tolist() == [-1, 0]


def test_a_name_that_stands_twice_is_not_read_by_position():
    series = read([HEAD + GOOD, "TIMESTAMP,A,A\n" + LATER])
    assert reasons(series) == [(2, "column 'A' stands twice in the names line 1")]


def test_fields_of_a_line_with_unusual_quotes():
    assert split_line(b'a ,"b ""c"" ","d,e"', Layout()) == ["a", 'b "c"', "d,e"]
    assert split_line(b'1"2"3,4', Layout()) == ['1"2"3', "4"]
    assert split_line(b"'a;b';2", Layout(delimiter=";", quote="'")) == ["a;b", "2"]
    assert split_line(b'"a,2', Layout(quote="")) == ['"a', "2"]
    assert split_line(b'"a,2', Layout()) is None


def test_a_delimiter_inside_quotes_is_text():
    text = 'TIMESTAMP,A,Note\n2031-06-01 00:10:00,1.5,"wet, cold"\n2031-06-01 00:20:00,3,x\n'
    series = read(text, channels=[("A", "", "")])
    assert column(series) == [1.5, 3]


@pytest.mark.parametrize("delimiter", [",", ";", "tab", "|", "space"])
def test_delimiters(delimiter):
    mark = Layout(delimiter=delimiter).separator
    text = "day time A\n2031-06-01 00:10:00 1.5\n  2031-06-01   00:20:00 \t 3  \n".replace(
        "\t ", ""
    )
    if delimiter != "space":
        text = "\n".join(mark.join(line.split()) for line in text.splitlines()) + "\n"
    series = read(text, {"delimiter": delimiter, "time_columns": ("day", "time")})
    assert column(series) == [1.5, 3]
    assert ends(series) == ["2031-06-01T00:10", "2031-06-01T00:20"]


def test_kept_samples_remember_file_and_line():
    series = read({"b.dat": HEAD + GOOD, "a.dat": HEAD + "\n" + LATER})
    assert [record.path for record in series.files] == ["raw/a.dat", "raw/b.dat"]
    assert series.file.tolist() == [1, 0]
    assert series.line.tolist() == [2, 3]
    assert np.isfinite(series.values["A"]).all()
