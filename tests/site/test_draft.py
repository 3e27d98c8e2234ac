"""`init`: the starter is valid, and drafts say what the files tell and ask for the rest."""

import csv
import tomllib
from datetime import datetime, timedelta
from pathlib import Path

import pytest

from sapflux.cli import main
from sapflux.errors import SiteError
from sapflux.schema import QUANTITIES
from sapflux.site.config import Layout
from sapflux.site.draft import draft_from_files, write_starter
from sapflux.site.load import load_site
from sapflux.site.tables import TABLES, columns_of

START = datetime(2026, 5, 1)
ANSWERS = {
    '# name = ""': 'name = "Ridge"',
    "# latitude_deg =": "latitude_deg = 47.0",
    "# longitude_deg =": "longitude_deg = 15.0",
    "# elevation_m =": "elevation_m = 900",
    "# utc_offset_h =": "utc_offset_h = 1",
    "# water_year_start =": "water_year_start =",
    "# stamp =": "stamp =",
    "# clock =": "clock =",
}


@pytest.fixture(autouse=True)
def in_a_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)


def times(count, minutes, form):
    return [f"{START + timedelta(minutes=minutes * i):{form}}" for i in range(count)]


def wide(count=40):
    """Four header lines, quoted text, NAN; ten minutes."""
    head = ['"TABLE","T1","x","17"', '"TIMESTAMP","RECORD","Batt","AirTC_Avg","dT_1","x5"',
            '"TS","RN","Volts","Deg C","mV",""', '"","","Min","Avg","Avg","Smp"']  # fmt: skip
    rows = [f'"{t}",{i},12.{i % 10},"NAN",0.41{i % 9},{i % 5}'
            for i, t in enumerate(times(count, 10, "%Y-%m-%d %H:%M:%S"))]  # fmt: skip
    return "\r\n".join(head + rows) + "\r\n"


def european(count=700):
    """Semicolons, decimal commas, date and time apart, latin-1, a comment; thirty minutes."""
    rows = [f"{t};{i % 9},5;{-9999 if i % 5 == 0 else 66}"
            for i, t in enumerate(times(count, 30, "%d.%m.%Y;%H:%M"))]  # fmt: skip
    return "\n".join(["# hut", "Datum;Zeit;Temperatur (°C);RH [%]", *rows]).encode("cp1252")


def day_of_year():
    """Year, day of year and hhmm with 2400, behind a table number; thirty minutes."""
    rows = []
    for i in range(1, 100):
        days, minutes = divmod(i * 30, 1440)
        days, minutes = (days - 1, 1440) if minutes == 0 else (days, minutes)
        rows.append(f"101,2026,{121 + days},{minutes // 60 * 100 + minutes % 60},1.{i % 10}")
    return "\n".join(["id,year,doy,hhmm,ratio1", *rows])


def long_table():
    """Tabs, a byte order mark, two probes and two quantities a stamp; a quarter of an hour."""
    rows = [f"{t}\t{probe}\t{what}\t{i % 7}.5"
            for i, t in enumerate(times(60, 15, "%Y-%m-%d %H:%M"))
            for probe in ("A", "B") for what in ("dT", "Vh")]  # fmt: skip
    return "\ufeff" + "\n".join(["time\tprobe\twhat\tvalue", *rows])


def drafted(*files):
    """Sections of `site.toml` and the commented rows of `channels.csv` of a draft."""
    draft_from_files("site", files)
    text = Path("site/channels.csv").read_text(encoding="utf-8").splitlines()
    columns = list(columns_of(TABLES["channels"]))
    proposed = [line[1:] for line in text if line.startswith("#") and not line.startswith("# ")]
    rows = [dict(zip(columns, row, strict=True)) for row in csv.reader(proposed)]
    return tomllib.loads(Path("site/site.toml").read_text(encoding="utf-8")), rows


def write(name, content):
    raw = content if isinstance(content, bytes) else content.encode()
    Path(name).write_bytes(raw)
    return name


def faults_of(act, *arguments):
    with pytest.raises(SiteError) as caught:
        act(*arguments)
    return [str(fault) for fault in caught.value.faults]


def test_the_starter_loads_and_has_every_table_and_column():
    written = write_starter("start")
    site = load_site("start")
    assert sorted(written) == sorted(p for p in Path("start").iterdir() if p.is_file())
    for table, row_class in TABLES.items():
        lines = Path(f"start/{table}.csv").read_text(encoding="utf-8").splitlines()
        assert ",".join(columns_of(row_class)) in lines
    assert site.logs["T1"].files == ("raw/T1*.dat",) and site.table("probes")


def test_the_starter_explains_every_key_of_the_site_file():
    write_starter("start")
    text = Path("start/site.toml").read_text(encoding="utf-8")
    from sapflux.site.config import Log, LongTable, Position

    for model in (Position, Layout, Log, LongTable):
        for key in model.model_fields:
            assert f"{key} = " in text, key


def test_examples_that_are_only_shown_would_be_right():
    write_starter("start")
    shown = 0
    for path in Path("start").glob("*.csv"):
        text = path.read_text(encoding="utf-8")
        shown += text.count("# For example: ")
        path.write_text(text.replace("# For example: ", ""), encoding="utf-8")
    probes = Path("start/probes.csv")
    first = probes.read_text(encoding="utf-8").splitlines()[-1]
    more = [first.replace("P01", "P02"),
            first.replace("P01", "P03").replace("heat_dissipation", "unheated_pair")]  # fmt: skip
    probes.write_text(probes.read_text(encoding="utf-8") + "\n".join(more), encoding="utf-8")
    site = load_site("start")
    assert shown == sum(len(site.table(t)) for t in ("wounds", "calibrations", "pairs",
                        "references", "potentials", "events", "exclusions"))  # fmt: skip


def test_neither_overwrites_a_folder_with_files():
    log = write("T1.dat", wide())
    folder = Path("full")
    folder.mkdir()
    (folder / "note.txt").write_text("mine")
    fault = "full: the folder holds files already. Name a folder that is new or empty."
    assert faults_of(write_starter, "full") == [fault]
    assert faults_of(draft_from_files, "full", [log]) == [fault]
    assert faults_of(write_starter, "T1.dat") == [
        "T1.dat: there is a file of that name. Name a folder that is new or empty."
    ]
    assert [p.name for p in folder.iterdir()] == ["note.txt"]


def test_an_empty_folder_is_taken():
    Path("empty").mkdir()
    assert write_starter("empty")


def test_a_wide_table_with_four_header_lines():
    toml, rows = drafted(write("T1.dat", wide()))
    layout = Layout(**toml["layouts"]["layout1"])
    assert (layout.delimiter, layout.decimal, layout.encoding) == (",", ".", "utf-8")
    assert (layout.names_line, layout.units_line, layout.aggregation_line) == (2, 3, 4)
    assert layout.first_data_line == 4
    assert (layout.time_columns, layout.time_format) == (("TIMESTAMP",), "%Y-%m-%d %H:%M:%S")
    assert toml["logs"]["T1"] == {
        "files": ["raw/T1.dat"], "layout": "layout1", "interval_min": 10}  # fmt: skip
    assert [(r["column"], r["kind"], r["quantity"], r["unit"]) for r in rows] == [
        ("RECORD", "", "", ""),
        ("Batt", "log", "battery_voltage", "V"),
        ("AirTC_Avg", "site", "air_temperature", "degC"),
        ("dT_1", "probe", "heated_emf", "mV"),
        ("x5", "", "", ""),
    ]


def test_semicolons_decimal_commas_and_date_and_time_apart():
    toml, rows = drafted(write("met.csv", european()))
    layout = Layout(**toml["layouts"]["layout1"])
    assert (layout.delimiter, layout.decimal, layout.encoding) == (";", ",", "cp1252")
    assert (layout.comment, layout.names_line, layout.first_data_line) == ("#", 2, 2)
    assert (layout.time_columns, layout.time_format) == (("Datum", "Zeit"), "%d.%m.%Y %H:%M")
    assert layout.missing_numbers == (-9999.0,)
    assert toml["logs"]["met"]["interval_min"] == 30
    assert [(r["column"], r["unit"]) for r in rows] == [
        ("Temperatur (°C)", "degC"),
        ("RH [%]", "%"),
    ]


def test_year_day_and_hhmm_behind_a_table_number():
    toml, rows = drafted(write("old.txt", day_of_year()))
    layout = Layout(**toml["layouts"]["layout1"])
    assert layout.time_format == "year_day_hhmm"
    assert layout.time_columns == ("year", "doy", "hhmm")
    assert toml["logs"]["old"]["interval_min"] == 30
    assert [r["column"] for r in rows] == ["id", "ratio1"]


def test_a_long_table_gives_a_channel_for_every_name():
    toml, rows = drafted(write("long.txt", long_table()))
    layout = Layout(**toml["layouts"]["layout1"])
    assert (layout.delimiter, layout.encoding) == ("tab", "utf-8-sig")
    assert layout.long.name_columns == ("probe", "what")
    assert layout.long.value_column == "value"
    assert toml["logs"]["long"]["interval_min"] == 15
    assert [r["column"] for r in rows] == ["A/dT", "A/Vh", "B/dT", "B/Vh"]


def test_files_laid_out_alike_become_one_log_and_are_asked_about():
    toml, _ = drafted(write("T1_20260501.dat", wide()), write("T1_20260620.dat", wide(60)),
                      write("met.csv", european()))  # fmt: skip
    assert sorted(toml["logs"]) == ["T1", "met"]
    assert toml["logs"]["T1"]["files"] == ["raw/T1_20260501.dat", "raw/T1_20260620.dat"]
    text = Path("site/site.toml").read_text(encoding="utf-8")
    assert text.count("are all these downloads of one logger?") == 1


def test_day_and_month_that_cannot_be_told_apart_are_asked_for():
    rows = [f"{t},1.5" for t in times(30, 10, "%d/%m/%Y %H:%M")]
    toml, _ = drafted(write("T1.csv", "\n".join(["time,dT", *rows])))
    assert toml["layouts"]["layout1"]["time_format"] == ""
    question = "# QUESTION: is time_format '%d/%m/%Y %H:%M' or '%m/%d/%Y %H:%M'?"
    assert question in Path("site/site.toml").read_text(encoding="utf-8")


def test_a_day_above_twelve_tells_day_from_month():
    rows = [f"{t},1.5" for t in times(30, 1440, "%m/%d/%Y %H:%M")]
    toml, _ = drafted(write("T1.csv", "\n".join(["time,dT", *rows])))
    assert toml["layouts"]["layout1"]["time_format"] == "%m/%d/%Y %H:%M"


def test_a_draft_asks_for_what_files_do_not_tell_and_is_valid_once_answered():
    draft_from_files("site", [write("T1.dat", wide()), write("long.txt", long_table())])
    missing = [fault.split("the key ")[1] for fault in faults_of(load_site, "site")]
    keys = ("name", "latitude_deg", "longitude_deg", "elevation_m", "utc_offset_h",
            "water_year_start", "stamp", "clock", "stamp", "clock")  # fmt: skip
    assert missing == [f"'{key}' is missing. Add it." for key in keys]
    path = Path("site/site.toml")
    text = path.read_text(encoding="utf-8")
    for asked, answer in ANSWERS.items():
        assert asked in text
        text = text.replace(asked, answer)
    path.write_text(text, encoding="utf-8")
    site = load_site("site")
    assert set(site.logs) == {"T1", "long"} and site.table("channels") == ()


def test_a_proposed_channel_is_valid_once_its_mark_is_taken_away():
    draft_from_files("site", [write("T1.dat", wide())])
    for name in ("site.toml", "channels.csv"):
        path = Path("site") / name
        text = path.read_text(encoding="utf-8")
        for asked, answer in ANSWERS.items():
            text = text.replace(asked, answer)
        path.write_text(text.replace("#T1,AirTC_Avg", "T1,AirTC_Avg"), encoding="utf-8")
    (row,) = load_site("site").table("channels")
    assert (row.column, row.quantity, row.unit) == ("AirTC_Avg", "air_temperature", "degC")


def test_every_file_that_cannot_be_made_out_is_told_and_nothing_written():
    files = [
        write("empty.dat", ""),
        write("prose.txt", "Dear\ndiary\n"),
        write("headless.csv", "\n".join(f"{t},1.5" for t in times(9, 10, "%Y-%m-%d %H:%M"))),
        write("timeless.csv", "a,b\n1,2\n3,4\n"),
        write("T1.dat", wide()),
        "absent.dat",
    ]
    assert faults_of(draft_from_files, "site", files) == [
        "empty.dat: the file is empty. Name a file with records.",
        "prose.txt: no delimiter parts its lines into columns. Name delimited text, as a logger "
        "writes it.",
        "headless.csv, line 1: no line above the first record names the columns. Columns are found "
        "by name: put a line of names at the top of a copy of the file.",
        "timeless.csv: no line begins with a time that is known. Write the layout by hand: "
        "time_columns and time_format.",
        "absent.dat: the file cannot be read (No such file or directory). Name a logger file.",
    ]
    assert not Path("site").exists()


def test_a_line_of_units_is_not_taken_for_the_names():
    rows = [f"{t}\t1.5\t0.02" for t in times(30, 30, "%Y/%m/%d\t%H:%M:%S")]
    head = ["date\tclock\tP1_v\tP2_lnr", "\t\tcm h-1\t1"]
    toml, channels = drafted(write("pulse.tsv", "\n".join([*head, *rows])))
    layout = Layout(**toml["layouts"]["layout1"])
    assert (layout.names_line, layout.units_line, layout.header_lines) == (1, 2, 2)
    assert layout.time_columns == ("date", "clock")
    assert [(r["column"], r["unit"]) for r in channels] == [("P1_v", "cm h-1"), ("P2_lnr", "1")]


def test_a_line_with_blank_cells_and_unknown_units_is_not_taken_for_the_names():
    rows = [f"{t},1.5,0.02,3" for t in times(30, 30, "%Y-%m-%d %H:%M")]
    toml, channels = drafted(write("odd.csv", "\n".join(["when,a,b,c", ",furlong,mV,ell", *rows])))
    layout = Layout(**toml["layouts"]["layout1"])
    assert (layout.names_line, layout.units_line, layout.time_columns) == (1, 2, ("when",))
    assert [(r["column"], r["unit"]) for r in channels] == [("a", ""), ("b", "mV"), ("c", "")]


@pytest.mark.parametrize(
    ("files", "log"),
    [
        (("pulse_b_2031-09-03.tsv",), "pulse_b"),
        (("T1_2031-09-03_1200.tsv",), "T1"),
        (("2031-09-03_ridge.tsv",), "ridge"),
        (("ridge.20310903.tsv",), "ridge"),
        (("met 03.09.2031.tsv",), "met"),
        (("T1_2031-09.tsv", "T1_2031-10.tsv"), "T1"),
        (("2031-09-03.tsv",), "log"),
        (("CR7_17345.tsv",), "CR7_17345"),
    ],
)
def test_logs_are_named_without_the_dates_of_their_files(files, log):
    toml, _ = drafted(*(write(name, long_table()) for name in files))
    assert list(toml["logs"]) == [log]


def test_files_whose_columns_stand_in_another_order_are_one_log():
    moments = times(30, 30, "%Y-%m-%d %H:%M")
    one = write("T1_a.csv", "\n".join(["time,a,b", *(f"{t},1.5,2" for t in moments)]))
    two = write("T1_b.csv", "\n".join(["time,b,a", *(f"{t},2,1.5" for t in moments)]))
    toml, rows = drafted(one, two)
    assert toml["logs"]["T1"]["files"] == ["raw/T1_a.csv", "raw/T1_b.csv"]
    assert [r["column"] for r in rows] == ["a", "b"]


def test_a_channel_of_the_log_itself_names_it():
    _, rows = drafted(write("T1.dat", wide()))
    assert [r["id"] for r in rows] == ["", "T1", "", "", ""]  # the battery


def test_two_files_of_one_name_are_told():
    Path("may").mkdir()
    files = [write("T1.dat", wide()), write("may/T1.dat", wide())]
    assert faults_of(draft_from_files, "site", files) == [
        "may/T1.dat: T1.dat has the same name. All downloads go into one folder, raw/: give each a "
        "name of its own."
    ]


def test_a_file_that_is_named_twice_is_taken_once():
    toml, _ = drafted(write("T1.dat", wide()), "T1.dat", Path("T1.dat").resolve())
    assert toml["logs"]["T1"]["files"] == ["raw/T1.dat"]


def test_a_folder_that_cannot_be_written_is_told():
    log = write("T1.dat", wide())
    fault = "T1.dat/new: it cannot be written (Not a directory). Name a folder where you may write."
    assert faults_of(write_starter, "T1.dat/new") == [fault]
    assert faults_of(draft_from_files, "T1.dat/new", [log]) == [fault]


def test_a_file_that_cannot_be_written_is_told(monkeypatch):
    def full(*_, **__):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(Path, "write_text", full)
    assert faults_of(write_starter, "start") == [
        "start/site.toml: it cannot be written (No space left on device). Name a folder where you "
        "may write."
    ]


def test_starter_and_draft_say_what_a_channel_may_be():
    write_starter("start")
    draft_from_files("site", [write("T1.dat", wide())])
    for folder in ("start", "site"):
        lines = Path(f"{folder}/channels.csv").read_text(encoding="utf-8").splitlines()
        told = [[cell.strip() for cell in line[2:].split("|")] for line in lines if "|" in line]
        assert told[0] == ["quantity", "units it may be written in", "kinds it may belong to"]
        assert [name for name, *_ in told[1:]] == list(QUANTITIES)
        assert ["wind_speed", "m s-1, km h-1", "site, stand"] in told
        assert ["precipitation", "mm, mm water, kg m-2", "site, stand"] in told


def test_starter_and_draft_say_what_a_row_of_a_message_is():
    write_starter("start")
    draft_from_files("site", [write("T1.dat", wide())])
    for folder in ("start", "site"):
        assert "'row 4'" in Path(f"{folder}/site.toml").read_text(encoding="utf-8")


def test_the_command_counts_its_questions_and_expands_patterns(capsys):
    write("T1_a.dat", wide())
    write("T1_b.dat", wide(60))
    assert main(["init", "site", "--from", "T1_?.dat"]) == 0
    last = capsys.readouterr().out.splitlines()[-2:]
    # the site, one logger or two, stamp and clock; five columns beside the time
    assert last == [
        "Next: answer the lines marked QUESTION (4 in site.toml, 5 in channels.csv), put the "
        "downloads into raw/, then run",
        "  sapflux check site",
    ]


def test_a_pattern_that_matches_nothing_is_told(capsys):
    assert main(["init", "site", "--from", "*.dat"]) == 2
    assert capsys.readouterr().err.splitlines()[0] == (
        "*.dat: the file cannot be read (No such file or directory). Name a logger file."
    )


def test_a_file_with_the_marks_of_a_pattern_in_its_name_is_itself(capsys):
    write("T1[2].dat", wide())
    write("T12.dat", "")
    assert main(["init", "site", "--from", "T1[2].dat"]) == 0
    assert 'files = ["raw/T1[[]2].dat"]' in Path("site/site.toml").read_text(encoding="utf-8")


def test_no_file_at_all():
    assert faults_of(draft_from_files, "site", []) == ["site: no logger file is given. Name some."]
