"""Logs of temperature traces: keys and tables that do not fit together."""

import pytest
from folder_by_hand import faults_of, write_folder

from sapflux.site.load import load_site

TRACES = (
    "channels.csv",
    "H1,b1/ratio2,probe,b1,2,heat_ratio,1,,\n",
    "H1,b1/down,probe,b1,2,temperature_trace_downstream,degC,,\n"
    "H1,b1/up,probe,b1,2,temperature_trace_upstream,degC,,\n",
)
ONLY = ("channels.csv", "H1,b1/ratio1,probe,b1,1,heat_ratio,1,,\n", "")
STEP = ("site.toml", 'interval_min = 30\nstamp = "start"\n',
        'interval_min = 30\nstamp = "end"\ntrace_step_s = 1\n')  # fmt: skip
PULSE = ("probes.csv", "embedded_diffusivity_cm2_s,installed", "pulse_length_s,installed")
LENGTH = ("probes.csv", "6,6,60,100,0.0025,2026-04-01,", "6,6,60,100,8,2026-04-01,")
RIGHT = [TRACES, ONLY, STEP, PULSE, LENGTH]


def test_a_log_of_traces_is_right(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    log = load_site(write_folder(RIGHT)).logs["H1"]
    assert (log.row_s, log.interval_min, log.pulse_starts_s) == (1, 30, 0)


def test_an_ordinary_log_has_a_row_an_interval(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    log = load_site(write_folder()).logs["H1"]
    assert log.trace_step_s is None and log.row_s == 1800


CASES = {
    "a ratio in a log of traces": (
        [TRACES, STEP, PULSE, LENGTH],
        "ridge/channels.csv, row 4: heat_ratio stands in log 'H1', whose trace_step_s says that it "
        "holds temperature traces. Its rows stand around pulses only: it can hold "
        "temperature_trace_downstream and temperature_trace_upstream.",
    ),
    "traces of a probe without a pulse": (
        [TRACES, ONLY, STEP],
        "ridge/probes.csv, row 4: pulse_length_s is blank, and log 'H1' has temperature traces of "
        "probe 'b1'. Give the length of heating, and the reading window from the end of heating.",
    ),
    "a window beyond the trace": (
        [TRACES, ONLY, STEP, PULSE, (*LENGTH[:2], "6,6,60,295,8,2026-04-01,")],
        "ridge/probes.csv, row 4: the reading window ends 303 s after the start of heating, and "
        "traces of log 'H1' are read to 300 s. Give a shorter window; see interval_min of the log, "
        "too.",
    ),
    "a trace step that does not divide the minute": (
        [*RIGHT[:2], (*STEP[:2], STEP[2].replace("= 1\n", "= 7\n")), *RIGHT[3:]],
        "ridge/site.toml, [logs.H1]: trace_step_s: 7 does not divide the minute into whole "
        "seconds. Give the seconds from one row to the next around a pulse, like 1.",
    ),
    "traces with stamps of a start": (
        [*RIGHT[:2], (*STEP[:2], STEP[2].replace("end", "start")), *RIGHT[3:]],
        "ridge/site.toml, [logs.H1]: the rows of a log with trace_step_s are moments and have no "
        'start. Set stamp = "end".',
    ),
    "a pulse that starts in the next interval": (
        [*RIGHT[:2], (*STEP[:2], STEP[2] + "pulse_starts_s = 1800\n"), *RIGHT[3:]],
        "ridge/site.toml, [logs.H1]: pulse_starts_s is 1800, and the next interval begins after "
        "1800 s. Count from the whole interval before the pulse.",
    ),
    "a pulse in a log without traces": (
        [(*STEP[:2], STEP[1] + "pulse_starts_s = 20\n")],
        "ridge/site.toml, [logs.H1]: pulse_starts_s is given without trace_step_s. Give "
        "trace_step_s if the log has temperature traces, else neither.",
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, fault = CASES[case]
    assert faults_of(write_folder(changes)) == [fault]


def test_traces_in_an_ordinary_log_are_told(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    told = faults_of(write_folder([TRACES, PULSE, LENGTH]))
    assert told == [
        f"ridge/channels.csv, row {row}: {name} stands in log 'H1', which has no trace_step_s. "
        "Give it in site.toml: the seconds from one row to the next around a pulse."
        for row, name in ((5, "temperature_trace_downstream"), (6, "temperature_trace_upstream"))
    ]


def test_traces_of_one_point_in_two_logs_are_told(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    other = (
        "site.toml",
        "[logs.H1]\n",
        '[logs.H2]\nfiles = ["raw/H2*.dat"]\nlayout = "long"\ninterval_min = 30\nstamp = "end"\n'
        'clock = "civil:Europe/Vienna"\ntrace_step_s = 1\n[logs.H1]\n',
    )
    split = (*TRACES[:2], TRACES[2].replace("H1,b1/up", "H2,b1/up"))
    assert faults_of(write_folder([split, ONLY, STEP, PULSE, LENGTH, other])) == [
        "ridge/channels.csv, row 4: the temperature traces of point 2 of probe 'b1' stand in "
        "different logs. Both needles of a point are read by one logger, in one table."
    ]
