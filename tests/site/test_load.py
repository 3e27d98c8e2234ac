"""`load_site`: what spreadsheets save is read, and every fault of a file is told in full."""

from datetime import datetime
from pathlib import Path

import pytest
from folder_by_hand import TEXTS, faults_of, write_folder

from sapflux.errors import SiteError
from sapflux.site.load import load_site

TREES = "tree,stand,species,bark_mm\nA,slope,spruce,10\nB,slope,beech,\n"


@pytest.fixture(autouse=True)
def in_a_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)


def with_bytes(file, raw):
    folder = write_folder()
    (folder / file).write_bytes(raw)
    return folder


def test_the_site_holds_rows_lines_and_its_key():
    site = load_site(write_folder())
    assert (site.key, site.position.name, site.folder) == ("ridge", "Ridge", Path("ridge"))
    assert site.rows_at["trees"] == (2, 3)
    probe = site.table("probes")[2]
    assert probe.depth_from_mm == (5.0, 20.0) and probe.removed is None
    assert site.table("channels")[0].to == datetime(2026, 6, 1)
    assert site.table("visits")[1].clock_offset_s is None


def test_the_key_is_the_name_of_the_folder_from_within(monkeypatch):
    monkeypatch.chdir(write_folder())
    assert load_site(".").key == "ridge"


@pytest.mark.parametrize(
    "raw",
    [
        b"\xef\xbb\xbf" + TREES.encode(),
        TREES.replace("\n", "\r\n").encode(),
        TREES.replace("\n", "\r").encode(),
        TREES.replace(",", ";").encode(),
        TREES.replace(",", "\t").encode(),
        TREES.replace("A,slope", ' A ,"slope"').replace("beech,", " beech , ").encode(),
        ("# trees, \"of the 'plot\n" + TREES.replace("B,", "\n#X,slope,fir,\n;\nB,")).replace(
            ";\n", ",,,\n").encode(),
        ('"# a comment, in quotes",,,\n' + TREES).encode(),
        TREES.replace("bark_mm", "bark_mm,,").replace("10\n", "10,,\n").replace(
            "beech,\n", "beech,,,\n").encode(),
        TREES.rstrip("\n").encode(),
    ],
    ids=["byte order mark", "cr lf", "cr", "semicolons", "tabs", "blanks",
         "comments and blank rows", "comment in quotes", "trailing delimiters", "no last line end"],
)  # fmt: skip
def test_tables_are_read_as_spreadsheets_save_them(raw):
    rows = load_site(with_bytes("trees.csv", raw)).table("trees")
    assert [(r.tree, r.stand, r.species, r.bark_mm) for r in rows] == [
        ("A", "slope", "spruce", 10.0),
        ("B", "slope", "beech", None),
    ]


def test_rows_are_counted_as_lines_of_the_file():
    raw = b"# one\n\ntree;stand;species\n\n# five\nA;slope;spruce\nB;slope;beech\n"
    assert load_site(with_bytes("trees.csv", raw)).rows_at["trees"] == (6, 7)


FILES = {
    "latin-1": (
        TREES.replace("beech", "büche").encode("latin-1"),
        "ridge/trees.csv, row 3: byte 0xfc is not UTF-8. Save the file in UTF-8.",
    ),
    "utf-16": (
        TREES.encode("utf-16"),
        "ridge/trees.csv: the file is UTF-16. Save it as CSV in UTF-8.",
    ),
    "nul byte": (
        TREES.replace("beech", "bee\0ch").encode(),
        "ridge/trees.csv, row 3: the line holds a NUL byte: the file is damaged. Save it again "
        "from the spreadsheet.",
    ),
    "empty": (
        b"\n# only a comment\n",
        "ridge/trees.csv: the file has no header line. Begin it with a line of column names: tree, "
        "stand, species, height_m, bark_mm, diameter_cm.",
    ),
    "unknown column": (
        TREES.replace("bark_mm", "bark_cm").encode(),
        "ridge/trees.csv, row 1: unknown column 'bark_cm'. Did you mean 'bark_mm'? Known: bark_mm, "
        "diameter_cm, height_m, species, stand, tree.",
    ),
    "column twice": (
        TREES.replace("species,bark_mm", "species,stand").replace(",10", ",").encode(),
        "ridge/trees.csv, row 1: the column 'stand' stands 2 times. Keep one of them.",
    ),
    "missing column": (
        b"tree,stand\nA,slope\nB,slope\n",
        "ridge/trees.csv, row 1: the column 'species' is missing. Add it. Columns that every row "
        "needs: tree, stand, species.",
    ),
    "open quote": (
        TREES.replace("beech", '"beech').encode(),
        "ridge/trees.csv, row 3: the quotes do not match in 'B,slope,\"beech,'. Close every quote "
        "on its own line, and double a quote inside a cell.",
    ),
    "too many cells": (
        TREES.replace("spruce,10", "spruce,10,5").encode(),
        "ridge/trees.csv, row 2: the cell '5' has no column name above it. Name its column in the "
        "header, or put a cell that holds the delimiter in quotes.",
    ),
    "too few cells": (
        TREES.replace("spruce,10", "spruce").encode(),
        "ridge/trees.csv, row 2: the row has 3 cells and the header names 4. Give every column a "
        "cell, blank where nothing is known.",
    ),
}


@pytest.mark.parametrize("case", FILES)
def test_a_damaged_table_is_one_fault(case):
    raw, fault = FILES[case]
    assert faults_of(with_bytes("trees.csv", raw)) == [fault]


CELLS = {
    "blank that is needed": (
        ("probes.csv", "b1,B,heat_ratio", "b1,,heat_ratio"),
        "ridge/probes.csv, row 4: tree is blank. Give its value: the row has no meaning without "
        "it.",
    ),
    "decimal comma": (
        ("probes.csv", "u1,A,unheated_pair,1.3", 'u1,A,unheated_pair,"1,3"'),
        "ridge/probes.csv, row 3: height_m is '1,3'. Write the decimal mark as a point, and part "
        "several numbers by blanks where a column takes several.",
    ),
    "word for a number": (
        ("cores.csv", "A,S,2026-04-01,6", "A,S,2026-04-01,six"),
        "ridge/cores.csv, row 3: sapwood_depth_cm is 'six'. Give a number. A cell that is not "
        "known stays blank.",
    ),
    "not a number": (
        ("surveys.csv", "oak,2026-04-01,20", "oak,2026-04-01,nan"),
        "ridge/surveys.csv, row 4: diameter_cm is 'nan'. Give a finite number. A cell that is not "
        "known stays blank.",
    ),
    "number of a list": (
        ("probes.csv", "5 20,15 30", "5 x,15 30"),
        "ridge/probes.csv, row 4: depth_from_mm is 'x'. Give a number. A cell that is not "
        "known stays blank.",
    ),
    "point zero": (
        ("channels.csv", "AirT,site,,1", "AirT,site,,0"),
        "ridge/channels.csv, row 6: point is '0'. Give a number of at least 1.",
    ),
    "half a point": (
        ("channels.csv", "AirT,site,,1", "AirT,site,,1.5"),
        "ridge/channels.csv, row 6: point is '1.5'. Give a whole number. A cell that is not "
        "known stays blank.",
    ),
    "unknown quantity": (
        ("species.csv", "spruce,conifer", "spruce,conifir"),
        "ridge/species.csv, row 2: anatomy is 'conifir'. Did you mean 'conifer'? Known: conifer, "
        "diffuse_porous, other, ring_porous.",
    ),
    "month without day": (
        ("species.csv", "04-20,10-20", "April,10-20"),
        "ridge/species.csv, row 3: leaf_on is 'April'. Write month and day, like '04-20', or leave "
        "it blank.",
    ),
    "yes or no": (
        ("surveys.csv", "plot,stem,species,date,diameter_cm\nP1,A,spruce,2026-04-01,30\n"
         "P1,B,beech,2026-04-01,25\nP1,C,oak,2026-04-01,20\nP2,D,spruce,2026-04-01,10\n",
         "plot,stem,species,date,diameter_cm,under_bark\nP1,A,spruce,2026-04-01,30,no\n"
         "P1,B,beech,2026-04-01,25,TRUE\nP1,C,oak,2026-04-01,20,perhaps\n"
         "P2,D,spruce,2026-04-01,10,\n"),
        "ridge/surveys.csv, row 4: under_bark is 'perhaps'. Write yes or no.",
    ),
    "time with a zone": (
        ("visits.csv", "2026-06-01 10:00,", "2026-06-01T10:00+02:00,"),
        "ridge/visits.csv, row 3: arrival: '2026-06-01T10:00+02:00' carries a time zone. Write the "
        "site's standard time without a zone, like 2026-05-01 06:30.",
    ),
    "time with Z": (
        ("visits.csv", "2026-06-01 10:00,", "2026-06-01 10:00Z,"),
        "ridge/visits.csv, row 3: arrival: '2026-06-01 10:00Z' carries a time zone. Write the "
        "site's standard time without a zone, like 2026-05-01 06:30.",
    ),
    "date of a spreadsheet": (
        ("visits.csv", "2026-06-01 10:00,", "01/06/2026 10:00,"),
        "ridge/visits.csv, row 3: arrival: '01/06/2026 10:00' is not a date or time. Write it "
        "like 2026-05-01 or 2026-05-01 06:30.",
    ),
    "time that no day has": (
        ("visits.csv", "2026-06-01 10:00,", "2026-06-01 24:00,"),
        "ridge/visits.csv, row 3: arrival: '2026-06-01 24:00' is not in the calendar. Write it "
        "like 2026-05-01 or 2026-05-01 06:30.",
    ),
    "day with a time": (
        ("cores.csv", "A,S,2026-04-01", "A,S,2026-04-01 10:00"),
        "ridge/cores.csv, row 3: date: '2026-04-01 10:00' is not a date. Write it like 2026-05-01.",
    ),
    "day that no year has": (
        ("cores.csv", "A,S,2026-04-01", "A,S,2026-02-29"),
        "ridge/cores.csv, row 3: date: '2026-02-29' is not in the calendar. Write it like "
        "2026-05-01.",
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", CELLS)
def test_a_cell_that_cannot_be_read_is_one_fault(case):
    change, fault = CELLS[case]
    assert faults_of(write_folder([change])) == [fault]


def test_seconds_and_a_t_between_date_and_time_are_read():
    change = ("visits.csv", "T1,2026-06-01 10:00,", "T1,2026-06-01T10:00:30,")
    assert load_site(write_folder([change])).table("visits")[1].arrival == datetime(
        2026, 6, 1, 10, 0, 30
    )


DELIMITED = {
    "semicolons over commas": (
        TREES.replace("tree,stand,species,bark_mm", "tree;stand;species;bark_mm"),
        "ridge/trees.csv, rows 2 and 3: the header is delimited by ';' and the row by ','. Save "
        "the table with one delimiter throughout.",
    ),
    "commas over semicolons with decimal commas": (
        TREES.replace("A,slope,spruce,10", "A;slope;spruce;10,5").replace("B,", "#"),
        "ridge/trees.csv, row 2: the header is delimited by ',' and the row by ';'. Save the "
        "table with one delimiter throughout.",
    ),
    "commas over tabs": (
        TREES.replace("B,slope,beech,", "B\tslope\tbeech\t"),
        "ridge/trees.csv, row 3: the header is delimited by ',' and the row by a tab. Save the "
        "table with one delimiter throughout.",
    ),
}


@pytest.mark.parametrize("case", DELIMITED)
def test_rows_delimited_unlike_the_header_are_told_and_nothing_that_follows(case):
    text, fault = DELIMITED[case]
    assert faults_of(with_bytes("trees.csv", text.encode())) == [fault]


@pytest.mark.parametrize("name", ["trees.xlsx", "old.XLS", "plots.ods"])
def test_a_spreadsheet_file_is_told(name):
    folder = write_folder()
    (folder / name).write_bytes(b"PK")
    (folder / "~$trees.xlsx").write_bytes(b"")  # what an open spreadsheet leaves beside it
    assert faults_of(folder) == [
        f"ridge/{name}: the file is a spreadsheet, and tables are read as CSV. Save it as CSV in "
        "UTF-8 under the name of its table, or keep it in a folder of its own."
    ]


KEYS = {
    "toml itself": (
        ('name = "Ridge"', "name = Ridge"),
        "ridge/site.toml: it is not valid TOML: Invalid value (at line 2, column 8). Mend that "
        "line; text stands in double quotes, a key stands once.",
    ),
    "unknown group": (
        ('[site]\nname = "Ridge"', 'colour = "red"\n[site]\nname = "Ridge"'),
        "ridge/site.toml: unknown key 'colour'. Known: layouts, logs, site.",
    ),
    "unknown key": (
        ("elevation_m = 900.0", "elevation_m = 900.0\nelevaton = 1"),
        "ridge/site.toml, [site]: unknown key 'elevaton'. Did you mean 'elevation_m'? Known: "
        "common_step_min, elevation_m, latitude_deg, longitude_deg, name, utc_offset_h, "
        "water_year_start.",
    ),
    "unknown key inside": (
        ('value_column = "value"', 'value_column = "value", value_colum = 1'),
        "ridge/site.toml, [layouts.long]: unknown key 'long.value_colum'. Did you mean "
        "'value_column'? Known: name_columns, value_column.",
    ),
    "missing key": (
        ("latitude_deg = 47.0\n", ""),
        "ridge/site.toml, [site]: the key 'latitude_deg' is missing. Add it.",
    ),
    "text for a number": (
        ("latitude_deg = 47.0", 'latitude_deg = "47 N"'),
        "ridge/site.toml, [site]: latitude_deg is '47 N'. Give a number.",
    ),
    "latitude beyond the pole": (
        ("latitude_deg = 47.0", "latitude_deg = 97.0"),
        "ridge/site.toml, [site]: latitude_deg is 97.0. Give a number of at most 90.",
    ),
    "offset": (
        ("utc_offset_h = 1.0", "utc_offset_h = 1.1"),
        "ridge/site.toml, [site]: utc_offset_h: 1.1 is no whole number of quarter hours. Give "
        "standard time minus UTC in hours, like 1.0 or -3.5.",
    ),
    "water year": (
        ('water_year_start = "10-01"', 'water_year_start = "02-29"'),
        "ridge/site.toml, [site]: water_year_start: '02-29' is not a day of every year. Write "
        "month and day, like '10-01'.",
    ),
    "common step": (
        ("common_step_min = 60", "common_step_min = 25"),
        "ridge/site.toml, [site]: common_step_min: 25 does not divide the hour. Give minutes that "
        "do: 1, 2, 3, 4, 5, 6, 10, 12, 15, 20, 30 or 60.",
    ),
    "interval": (
        ("interval_min = 10", "interval_min = 7"),
        "ridge/site.toml, [logs.T1]: interval_min: 7 does not divide the day into whole seconds. "
        "Give the minutes from one record to the next, like 10 or 0.5.",
    ),
    "clock": (
        ('clock = "utc+1"', 'clock = "UTC+1"'),
        "ridge/site.toml, [logs.T1]: clock is 'UTC+1'. Write 'utc', a fixed offset like 'utc+1' or "
        "'utc-3.5', or the civil time of a zone like 'civil:Europe/Vienna'.",
    ),
    "offset of a clock": (
        ('clock = "utc+1"', 'clock = "utc+15"'),
        "ridge/site.toml, [logs.T1]: clock: 'utc+15' is no offset in use. Offsets lie from utc-12 "
        "to utc+14.",
    ),
    "zone": (
        ("civil:Europe/Vienna", "civil:Europe/Viena"),
        "ridge/site.toml, [logs.H1]: clock: no time zone is called 'Europe/Viena'. Did you mean "
        "'civil:Europe/Vienna'? Use a name of the IANA time zone table, like "
        "'civil:Europe/Vienna'.",
    ),
    "pattern out of the folder": (
        ("raw/T1*.dat", "../T1*.dat"),
        "ridge/site.toml, [logs.T1]: files: '../T1*.dat' leads out of the site folder. Give a path "
        "below the folder, like 'raw/T1*.dat'.",
    ),
    "pattern of a drive": (
        ("raw/T1*.dat", "C:/T1*.dat"),
        "ridge/site.toml, [logs.T1]: files: 'C:/T1*.dat' leads out of the site folder. Give a path "
        "below the folder, like 'raw/T1*.dat'.",
    ),
    "pattern with a backslash": (
        ("raw/T1*.dat", r"raw\\T1*.dat"),
        r"ridge/site.toml, [logs.T1]: files: 'raw\\T1*.dat' has a backslash. Part folders by '/'.",
    ),
    "patterns that are no list": (
        ('["raw/T1*.dat"]', '"raw/T1*.dat"'),
        "ridge/site.toml, [logs.T1]: files is 'raw/T1*.dat'. Give a list in square brackets.",
    ),
    "no pattern": (
        ('["raw/T1*.dat"]', "[]"),
        "ridge/site.toml, [logs.T1]: files has no entries. Give at least 1.",
    ),
    "delimiter": (
        ('delimiter = ";"', 'delimiter = "x"'),
        "ridge/site.toml, [layouts.long]: delimiter is 'x'. Known: ',' ';' 'tab' '|' 'space'.",
    ),
    "decimal mark": (
        ('delimiter = ";"', 'delimiter = ","\ndecimal = ","'),
        "ridge/site.toml, [layouts.long]: decimal mark and delimiter are both ','. One of them "
        "must differ.",
    ),
    "encoding": (
        ('delimiter = ";"', 'delimiter = ";"\nencoding = "utf8x"'),
        "ridge/site.toml, [layouts.long]: encoding: no encoding is called 'utf8x'. Use 'utf-8', "
        "'latin-1', 'cp1252' or 'utf-16'.",
    ),
}


@pytest.mark.parametrize("case", KEYS)
def test_a_key_of_the_site_is_one_fault(case):
    (old, new), fault = KEYS[case]
    assert faults_of(write_folder([("site.toml", old, new)])) == [fault]


def test_a_section_that_is_missing_or_no_section_is_told():
    texts = {"site.toml": "[layouts]\nwide = 3\n"}
    assert faults_of(write_folder(texts=texts)) == [
        "ridge/site.toml, [site]: the section is missing. Add it with the keys name, latitude_deg, "
        "longitude_deg, elevation_m, utc_offset_h, water_year_start, common_step_min.",
        "ridge/site.toml, [layouts.wide]: 3 stands where a section of keys is expected. Begin the "
        "section with its name in square brackets.",
    ]


def test_a_folder_without_site_toml_is_told():
    folder = write_folder()
    (folder / "site.toml").unlink()
    assert faults_of(folder) == [
        "ridge/site.toml: there is no such file. A site folder needs it; `sapflux init` writes a "
        "starter."
    ]


@pytest.mark.parametrize(
    ("path", "what"), [("nowhere", "there is no such folder"), ("file", "is a file")]
)
def test_a_path_that_is_no_folder_is_told(path, what):
    Path("file").touch()
    with pytest.raises(SiteError) as caught:
        load_site(path)
    assert str(caught.value) == f"{path}: {what}. Name the folder that holds site.toml."


def test_a_csv_file_that_is_no_table_is_told():
    folder = write_folder()
    (folder / "survey.csv").write_text("plot,stem\n")
    known = ", ".join(sorted(name for name in TEXTS if name.endswith(".csv")))
    assert faults_of(folder) == [
        "ridge/survey.csv: no table is called 'survey.csv'. Did you mean 'surveys.csv'? Known: "
        f"{known}. Keep other files in a folder of their own."
    ]


def test_a_csv_file_that_a_log_names_is_no_table():
    folder = write_folder([("site.toml", "raw/T1*.dat", "T1*.csv")])
    (folder / "T1_may.csv").write_text("TIMESTAMP,dT_a\n")
    assert load_site(folder).logs["T1"].files == ("T1*.csv",)


def test_faults_of_the_toml_and_of_tables_come_at_once():
    folder = write_folder([("site.toml", "latitude_deg = 47.0\n", ""),
                           ("cores.csv", "A,S,2026-04-01,6", "A,S,2026-04-01,60")])  # fmt: skip
    assert [fault.split(": ")[0] for fault in faults_of(folder)] == [
        "ridge/site.toml, [site]",
        "ridge/cores.csv, row 3",
    ]


@pytest.mark.parametrize(("written", "known"), [("log", "logs"), ("Logs", "logs")])
def test_a_misspelt_group_of_logs_is_told_once(written, known):
    text = TEXTS["site.toml"].replace("[logs.", f"[{written}.")
    assert faults_of(with_bytes("site.toml", text.encode())) == [
        f"ridge/site.toml: unknown key '{written}'. Did you mean '{known}'? Known: layouts, logs, "
        "site."
    ]


def test_a_misspelt_group_of_layouts_is_told_once():
    text = TEXTS["site.toml"].replace("[layouts.", "[layout.")
    assert faults_of(with_bytes("site.toml", text.encode())) == [
        "ridge/site.toml: unknown key 'layout'. Did you mean 'layouts'? Known: layouts, logs, site."
    ]


def test_a_site_without_logs_whose_tables_name_some_is_told_once():
    text = TEXTS["site.toml"].partition("[logs.")[0]
    assert faults_of(with_bytes("site.toml", text.encode())) == [
        "ridge/site.toml: there is no section [logs.NAME]. Begin one for each log that is named: "
        "H1, T1."
    ]


def test_a_site_without_layouts_is_told_once():
    text = TEXTS["site.toml"]
    start, end = text.index("[layouts.wide]"), text.index("[logs.T1]")
    assert faults_of(with_bytes("site.toml", (text[:start] + text[end:]).encode())) == [
        "ridge/site.toml: there is no section [layouts.NAME]. Begin one for each layout that is "
        "named: long, wide."
    ]


def test_logs_that_are_no_group_of_sections():
    text = TEXTS["site.toml"]
    folder = with_bytes("site.toml", ("logs = 1\n" + text.partition("[logs.T1]")[0]).encode())
    assert faults_of(folder)[0] == (
        "ridge/site.toml, logs: logs is not a group of sections. Begin each with a line like "
        "[logs.NAME]."
    )
