"""Logs and layouts of `site.toml`: each fault in full, and alone."""

import pytest
from folder_by_hand import faults_of, write_folder

from sapflux.ingest.logs import read_log
from sapflux.site.load import load_site

# what is wrong -> (changes of the folder, its faults)
CASES = {
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


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults
