"""Finding and opening the files of a log; nothing in them is ever lost."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from log_by_hand import CLASSES, HEAD, make_site, read

from sapflux.errors import DataError
from sapflux.ingest.files import match_files
from sapflux.ingest.heads import read_head
from sapflux.ingest.logs import read_log
from sapflux.site.config import Layout

ROWS = "2031-06-01 00:10:00,1.5,2\n2031-06-01 00:20:00,3,4\n"


def test_files_are_found_by_patterns_each_once(tmp_path):
    files = {"raw/b.dat": ROWS, "raw/a.dat": ROWS, "raw/deep/c.dat": ROWS, "raw/a.txt": ROWS}
    site = make_site(tmp_path, files, files=("raw/*.dat", "raw/**/*.dat"))
    paths = [path.relative_to(tmp_path).as_posix() for path in match_files(site, "L")]
    assert paths == ["raw/a.dat", "raw/b.dat", "raw/deep/c.dat"]


def test_no_file_matches(tmp_path):
    site = make_site(tmp_path, {}, files=("raw/*.dat", "more/*.csv"))
    with pytest.raises(DataError) as caught:
        read_log(site, "L")
    assert str(caught.value) == (
        f"{tmp_path}/site.toml, [logs.L]: no file matches 'raw/*.dat', 'more/*.csv'. Patterns "
        "count from the site folder; put the downloads there or correct 'files'."
    )


def header(tmp_path, content, **layout):
    path = tmp_path / "T07.dat"
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return read_head(path, Layout(**layout), path.name).columns


def test_the_header_of_a_file(tmp_path):
    assert header(tmp_path, HEAD + ROWS) == ("TIMESTAMP", "A", "B")
    quoted = '"TABLE"\n"TIMESTAMP", "A b" ,C,\n'
    assert header(tmp_path, quoted, names_line=2) == ("TIMESTAMP", "A b", "C")


def test_no_more_than_64_kb_of_a_file_are_read_for_its_header(tmp_path, monkeypatch):
    path, opened = tmp_path / "T07.dat", Path.open
    with path.open("wb") as file:
        file.write((HEAD + ROWS).encode())
        file.truncate(2**30)  # sparse: takes no room on disk
    taken = []

    class Counted:
        def __init__(self, file):
            self.file = file

        def __enter__(self):
            return self

        def __exit__(self, *_):
            self.file.close()

        def read(self, size=-1):
            taken.append(self.file.read(size))
            return taken[-1]

    monkeypatch.setattr(Path, "open", lambda self, *mode: Counted(opened(self, *mode)))
    assert read_head(path, Layout(), path.name).columns == ("TIMESTAMP", "A", "B")
    assert [len(part) for part in taken] == [65536]


def test_a_line_that_the_first_64_kb_cut_is_no_header(tmp_path):
    rows = "1\n" * 32760  # 16 bytes short of 64 kB
    whole = "TIMESTAMP,A,B,C,D,E,F\n"
    with pytest.raises(DataError) as caught:
        header(tmp_path, rows + whole)
    assert str(caught.value) == (
        "T07.dat: no line of its first 64 kB holds the column names TIMESTAMP; line 1 is '1'. "
        "Correct 'time_columns', 'delimiter' or 'encoding' of its layout."
    )
    assert header(tmp_path, rows[: -2 * 3] + whole)[-1] == "F"


def test_a_header_that_cannot_be_read(tmp_path):
    def message(content, **layout):
        with pytest.raises(DataError) as caught:
            header(tmp_path, content, **layout)
        return str(caught.value)

    assert message("\r\n") == (
        "T07.dat: the file is empty: it holds nothing to read."
    )  # fmt: skip
    assert message("Time;A;B\n") == (
        "T07.dat: no line holds the column names TIMESTAMP; line 1 is 'Time;A;B'. Correct "
        "'time_columns', 'delimiter' or 'encoding' of its layout."
    )
    assert message("TIMESTAMP,A,A\n") == (
        "T07.dat: line 1: column 'A' stands twice. Give each column its own name."
    )
    assert message(HEAD, encoding="rot13") == (
        "T07.dat: encoding 'rot13' is not known. Use for example utf-8, cp1252 or utf-16."
    )


def test_a_file_that_is_not_there(tmp_path):
    with pytest.raises(DataError) as caught:
        read_head(tmp_path / "gone.dat", Layout(), "gone.dat")
    assert str(caught.value) == (
        "gone.dat: the file cannot be read (No such file or directory). "
        "Check that it is there, and that no other program holds it open."
    )


LAYOUTS = [
    {},
    {"delimiter": ";", "decimal": ",", "quote": "'", "comment": "#"},
    {"delimiter": "space", "time_columns": ("day", "time")},
    {"names_line": 2, "units_line": 3, "encoding": "utf-16"},
    {"time_columns": ("y", "d", "t"), "time_format": "year_day_hhmm"},
    {
        "time_columns": ("T",),
        "time_format": "%d/%m/%Y %H:%M",
        "long": {"name_columns": ("probe",), "value_column": "value"},
    },
]
TEXTS = [
    HEAD + ROWS + HEAD + ROWS.replace("1.5", '"1.4"'),
    "TIMESTAMP;A;B\n'2031-06-01 00:10:00';1,5;\n2031-06-01 00:20:00;3;-2\n# end\n",
    "day time A\n2031-06-01 00:10:00 1.5\n2031-06-01 00:20:00 NAN\n",
    "TABLE\nTIMESTAMP,A,B\nTS,mV,mV\n" + ROWS,
    "y,d,t,A\n2031,152,2400,1.5\n2031,153,10,3\n",
    "T,probe,value\n1/6/2031 00:10,P,1.5\n1/6/2031 00:20,P,7\n1/6/2031 00:20,Q,INF\n",
]
PIECES = [b"\0", b'"', b"\r", b"\n", b",", b";", b" ", b"\xff", b"\xef\xbb\xbf", b"1e999", b"2400"]
PIECES += [b"TIMESTAMP", b"T,probe,value\n", b"", b"-", b"\x1a", b"2031-06-01 00:10:00,1,2\n", b"'"]


@settings(max_examples=150, deadline=None)
@given(
    st.integers(0, len(TEXTS) - 1),
    st.lists(st.tuples(st.floats(0, 1), st.integers(0, 12), st.sampled_from(PIECES)), max_size=4),
    st.sampled_from(["utc", "civil:Europe/Berlin"]),
)
def test_whatever_the_bytes_every_line_is_counted_once(number, damage, clock):
    layout = LAYOUTS[number]
    data = TEXTS[number].encode(layout.get("encoding", "utf-8"))
    for share, length, piece in damage:
        at = round(share * len(data))
        data = data[:at] + piece + data[at + length :]
    try:
        series = read(
            [data, TEXTS[number].encode(layout.get("encoding", "utf-8"))], layout, clock=clock
        )
    except DataError:
        pytest.fail("the second file is whole: the log must be readable")
    assert series.files[1].lines == TEXTS[number].count("\n")
    listed = [record for record in series.files for name in CLASSES if getattr(record, name)]
    assert listed


@settings(max_examples=60, deadline=None)
@given(st.binary(max_size=80))
def test_any_bytes_are_read_or_refused_with_a_message(data):
    try:
        series = read(data)
    except DataError as error:
        assert "no line holds the column names TIMESTAMP" in str(error)
    else:
        assert series.files[0].bytes == len(data)
