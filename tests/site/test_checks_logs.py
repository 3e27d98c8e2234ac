"""Logs and layouts of `site.toml`: each fault in full, and alone."""

import pytest
from folder_by_hand import faults_of, write_folder

from sapflux.ingest.logs import read_log
from sapflux.site.load import load_site

# what is wrong -> (changes of the folder, its faults)
CASES = {
    "standard time of elsewhere": (
        [("site.toml", "utc_offset_h = 1.0", "utc_offset_h = 8.0")],
        [
            (
                "ridge/site.toml, [site]: utc_offset_h is 8, and by longitude_deg 15 the sun is "
                "+1.0 h from UTC. They lie within 3 h of each other: mend the one that is wrong; "
                "east is positive in both."
            )
        ],
    ),
    "longitude of the other hemisphere": (
        [
            ("site.toml", "longitude_deg = 15.0", "longitude_deg = 122.7"),
            ("site.toml", "utc_offset_h = 1.0", "utc_offset_h = -8.0"),
        ],
        [
            (
                "ridge/site.toml, [site]: utc_offset_h is -8, and by longitude_deg 122.7 the sun "
                "is +8.2 h from UTC. They lie within 3 h of each other: mend the one that is "
                "wrong; east is positive in both."
            )
        ],
    ),
    "fixed clock of elsewhere": (
        [("site.toml", 'clock = "utc+1"', 'clock = "utc-5.5"')],
        [
            (
                "ridge/site.toml, [logs.T1]: clock 'utc-5.5' has the standard offset -5.5 h, and "
                "utc_offset_h of the site is 1. They lie within 3 h of each other, unless the "
                "clock keeps 'utc': mend the one that is wrong."
            )
        ],
    ),
    "civil clock of elsewhere": (
        [("site.toml", "civil:Europe/Vienna", "civil:America/Santiago")],
        [
            (
                "ridge/site.toml, [logs.H1]: clock 'civil:America/Santiago' has the standard "
                "offset -4 h, and utc_offset_h of the site is 1. They lie within 3 h of each "
                "other, unless the clock keeps 'utc': mend the one that is wrong."
            )
        ],
    ),
    "time column without a name": (
        [("site.toml", "units_line = 3", 'units_line = 3\ntime_columns = ["date", " "]')],
        [
            (
                "ridge/site.toml, [layouts.wide]: time_columns is ['date', ' '], and a name is "
                "blank. Columns are found by name: see that names_line is the line of the names, "
                "or name the column in a copy of the file."
            )
        ],
    ),
    "layout of a log that is not there": (
        [("site.toml", 'layout = "wide"', 'layout = "wyde"')],
        [
            (
                "ridge/site.toml, [logs.T1]: layout 'wyde' is not in site.toml. Did you mean "
                "'wide'? Known: long, wide."
            )
        ],
    ),
    "two header lines in one": (
        [("site.toml", "units_line = 3", "units_line = 2")],
        [
            (
                "ridge/site.toml, [layouts.wide]: names_line and units_line are both 2. Give "
                "each its own line of the file, or 0 where there is none."
            )
        ],
    ),
    "header lines that end above the units": (
        [("site.toml", "units_line = 3", "units_line = 3\nheader_lines = 1")],
        [
            (
                "ridge/site.toml, [layouts.wide]: header_lines is 1, and a header line stands "
                "in line 3. Count all lines above the first record, or leave header_lines out."
            )
        ],
    ),
    "time format without an hour": (
        [("site.toml", "units_line = 3", 'units_line = 3\ntime_format = "%Y-%m-%d"')],
        [
            (
                "ridge/site.toml, [layouts.wide]: time_format '%Y-%m-%d' does not say date, "
                "hour and minute. Use strptime codes such as '%Y-%m-%d %H:%M:%S', with %z where "
                "a stamp carries its own offset from UTC, or 'year_day_hhmm'."
            )
        ],
    ),
    "time format with an offset and no hour": (
        [("site.toml", "units_line = 3", 'units_line = 3\ntime_format = "%Y-%m-%d %z"')],
        [
            (
                "ridge/site.toml, [layouts.wide]: time_format '%Y-%m-%d %z' does not say date, "
                "hour and minute. Use strptime codes such as '%Y-%m-%d %H:%M:%S', with %z where "
                "a stamp carries its own offset from UTC, or 'year_day_hhmm'."
            )
        ],
    ),
    "time format with the name of a zone": (
        [("site.toml", "units_line = 3", 'units_line = 3\ntime_format = "%Y-%m-%d %H:%M %Z"')],
        [
            (
                "ridge/site.toml, [layouts.wide]: time_format '%Y-%m-%d %H:%M %Z' does not say "
                "date, hour and minute. Use strptime codes such as '%Y-%m-%d %H:%M:%S', with %z "
                "where a stamp carries its own offset from UTC, or 'year_day_hhmm'."
            )
        ],
    ),
    "day of year in one column": (
        [("site.toml", "units_line = 3", 'units_line = 3\ntime_format = "year_day_hhmm"')],
        [
            (
                "ridge/site.toml, [layouts.wide]: time_format 'year_day_hhmm' takes three "
                "columns and time_columns names 1. Name year, day of year and hhmm."
            )
        ],
    ),
    "common step shorter than an interval": (
        [("site.toml", "common_step_min = 60", "common_step_min = 20")],
        [
            (
                "ridge/site.toml, [site]: common_step_min is 20, no multiple of the 30 min of "
                "log 'H1'. Give minutes that hold whole intervals of every log of sap-flow "
                "signals."
            )
        ],
    ),
    "patterns that match the tables": (
        [("site.toml", "raw/T1*.dat", "*.csv")],
        [
            (
                "ridge/site.toml, [logs.T1]: files matches the site's own calibrations.csv, "
                "channels.csv, cores.csv, decisions.csv, events.csv, exclusions.csv, pairs.csv, "
                "plots.csv, potentials.csv, probes.csv, profiles.csv, references.csv, "
                "species.csv, stands.csv, surveys.csv, trees.csv, visits.csv, wood.csv, "
                "wounds.csv. Keep downloads in a folder of their own and name it, like "
                "'raw/*.csv'."
            )
        ],
    ),
}


def test_stamps_with_their_own_offset_are_read_from_a_checked_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    style = 'units_line = 3\ntime_format = "%Y-%m-%d %H:%M %z"'
    folder = write_folder([("site.toml", "units_line = 3", style)])
    (folder / "raw").mkdir()
    (folder / "raw" / "T1_a.dat").write_text(
        "TABLE\nTIMESTAMP,dT_a\nTS,mV\n2026-05-01 12:00 +0200,0.5\n2026-05-01 12:10,0.6\n"
    )
    series = read_log(load_site(folder), "T1")
    assert [str(end) for end in series.end] == ["2026-05-01T10:00:00"]
    assert [row[1:3] for row in series.rejected] == [
        (5, "time '2026-05-01 12:10' does not read as '%Y-%m-%d %H:%M %z'")
    ]


# Source: the IANA time zone table, and longitudes of the places from memory.
@pytest.mark.parametrize(
    ("longitude", "offset", "zone"),
    [
        (76.0, 8.0, "Asia/Shanghai"),  # Kashgar: 2.9 h
        (-157.4, 14.0, "Pacific/Kiritimati"),  # behind the date line
        (-8.5, -0.0, "Europe/Dublin"),
        (150.0, 10.0, "Australia/Sydney"),  # summer time in January
        (-9.5, 1.0, "Africa/Casablanca"),
    ],
)
def test_standard_times_in_use_are_right(longitude, offset, zone, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes = [
        ("site.toml", "longitude_deg = 15.0", f"longitude_deg = {longitude}"),
        ("site.toml", "utc_offset_h = 1.0", f"utc_offset_h = {offset}"),
        ("site.toml", "civil:Europe/Vienna", f"civil:{zone}"),
        ("site.toml", 'clock = "utc+1"', 'clock = "utc"'),
    ]
    assert load_site(write_folder(changes)).position.utc_offset_h == offset


@pytest.mark.parametrize("clock", ["utc", "utc+0", "civil:UTC", "civil:Etc/UTC"])
def test_a_logger_anywhere_may_keep_utc(clock, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes = [
        ("site.toml", "longitude_deg = 15.0", "longitude_deg = 175.0"),
        ("site.toml", "utc_offset_h = 1.0", "utc_offset_h = 12.0"),
        ("site.toml", 'clock = "utc+1"', f'clock = "{clock}"'),
        ("site.toml", "civil:Europe/Vienna", "civil:Pacific/Auckland"),
    ]
    assert load_site(write_folder(changes)).logs["T1"].clock == clock


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults
