"""The CSV tables: the columns that were agreed, the same bytes, safe to open in a spreadsheet."""

import csv
from datetime import date

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sapflux.pipeline.tables import COLUMNS, write_csv


def daily(**changed):
    row = {
        "stand": "upper", "species": "beech", "start": np.datetime64("2031-06-01"),
        "end": np.datetime64("2031-06-02"), "transpiration_mm": 2.34567, "lower_mm": np.nan,
        "upper_mm": np.nan, "measured_fraction": 2 / 3, "filled_fraction": 1 / 3,
        "modelled_fraction": 0.0, "assumed_zero_fraction": 0.0, "trees": 4, "valid": True,
        "reason": "",
    } | changed  # fmt: skip
    return pd.DataFrame([row])


def written(tmp_path, frame, kind):
    write_csv(frame, tmp_path / "table.csv", kind)
    return (tmp_path / "table.csv").read_bytes().decode("utf-8")


def cells(tmp_path, frame, kind):
    """The first row as a reader of CSV finds it."""
    text = written(tmp_path, frame, kind)
    return next(csv.DictReader(text.split("\n")))


HEADER = (
    "stand,species,start,end,transpiration_mm,lower_mm,upper_mm,measured_fraction,"
    "filled_fraction,modelled_fraction,assumed_zero_fraction,trees,valid,reason"
)


def test_a_day_is_written_so(tmp_path):
    assert written(tmp_path, daily(), "daily") == (
        f"{HEADER}\nupper,beech,2031-06-01,2031-06-02,2.3457,,,0.6667,0.3333,0.0000,0.0000,4,1,\n"
    )


@pytest.mark.parametrize(
    ("kind", "header"),
    [
        ("daily", HEADER),
        ("monthly", HEADER),
        ("water_year", HEADER),
        ("season", f"{HEADER},days,days_refused"),
        ("ledger", "file,sha256,lines,header,kept,duplicate,conflicting,rejected,blank,outside"),
        ("rejected", "file,line,reason,text"),
        ("conflicts",
         "stamp,log,column,value,file,line,other_value,other_file,other_line"),
    ],
)  # fmt: skip
def test_columns_stand_in_the_order_agreed(tmp_path, kind, header):
    turned = pd.DataFrame(columns=header.split(",")[::-1])
    assert written(tmp_path, turned, kind) == f"{header}\n"


@pytest.mark.parametrize("kind", COLUMNS)
def test_missing_and_unknown_columns_are_refused(tmp_path, kind):
    columns = list(COLUMNS[kind])
    with pytest.raises(ValueError, match=rf"table {kind}: columns missing \['{columns[-1]}'\]"):
        written(tmp_path, pd.DataFrame(columns=columns[:-1]), kind)
    with pytest.raises(ValueError, match=rf"table {kind}: .*not known \['more'\]"):
        written(tmp_path, pd.DataFrame(columns=[*columns, "more"]), kind)
    with pytest.raises(ValueError, match=f"table {kind}"):
        written(tmp_path, pd.DataFrame(columns=[*columns, columns[0]]), kind)
    assert not (tmp_path / "table.csv").exists()


def test_a_period_that_may_not_be_totalled_is_blank_not_zero(tmp_path):
    found = cells(tmp_path, daily(transpiration_mm=np.nan, valid=0, reason="no record"), "daily")
    assert (found["transpiration_mm"], found["valid"], found["reason"]) == ("", "0", "no record")


def test_nothing_at_all_is_blank(tmp_path):
    for nothing in (None, np.nan, pd.NA, pd.NaT, np.datetime64("NaT")):
        assert cells(tmp_path, daily(lower_mm=nothing, start=nothing), "daily")["start"] == ""


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0, "0.0000"), (-0.0, "0.0000"), (-0.00004, "0.0000"), (-0.00006, "-0.0001"),
        (0.03125, "0.0312"), (np.float32(0.5), "0.5000"), (3, "3.0000"),
        (1e-30, "0.0000"), (-2.5, "-2.5000"),
    ],
)  # fmt: skip
def test_millimetres_have_four_decimals(tmp_path, value, text):
    assert cells(tmp_path, daily(transpiration_mm=value), "daily")["transpiration_mm"] == text


def test_kilograms_have_three_decimals(tmp_path):
    row = dict.fromkeys(COLUMNS["tree_daily"], "") | {
        "tree": "T1", "start": date(2031, 6, 1), "end": pd.Timestamp(2031, 6, 2),
        "water_use_kg": 41.98765, "measured_fraction": 1.0, "filled_fraction": 0.0, "valid": 1,
    }  # fmt: skip
    found = cells(tmp_path, pd.DataFrame([row]), "tree_daily")
    assert found["water_use_kg"] == "41.988"
    assert (found["start"], found["end"]) == ("2031-06-01", "2031-06-02")


def test_whole_numbers_stay_whole_beside_missing_ones(tmp_path):
    frame = pd.concat([daily(trees=4), daily(trees=np.nan)])  # a float column now
    lines = written(tmp_path, frame, "daily").splitlines()
    assert [line.split(",")[11] for line in lines[1:]] == ["4", ""]


@pytest.mark.parametrize(
    ("changed", "message"),
    [
        ({"trees": 3.5}, "column trees: 3.5 is not a whole number"),
        ({"transpiration_mm": np.inf}, "column transpiration_mm: inf is not finite"),
        ({"species": 3.0}, "column species: holds text, not 3.0"),
        ({"start": pd.Timestamp("2031-06-01T00:30")}, "column start: .* is not the start of a day"),
        ({"reason": ["a"]}, "column reason: .* cannot be written"),
    ],
)
def test_what_a_column_cannot_hold_is_refused(tmp_path, changed, message):
    with pytest.raises(ValueError, match=message):
        written(tmp_path, daily(**changed), "daily")


def rejected(text):
    return pd.DataFrame([{"file": "a.dat", "line": 7, "reason": "torn", "text": text}])


@pytest.mark.parametrize(
    "text",
    ["=1+1", "+1+1", "-1+1", "@SUM(A1)", "=HYPERLINK(\"x\")", "\t=1", "-2+3+cmd|' /C calc'!A0",
     "+x", "-", "--5", "-1;2"],
)  # fmt: skip
def test_no_text_is_run_as_a_formula(tmp_path, text):
    """The beginnings that spreadsheets take for a formula: common practice."""
    assert cells(tmp_path, rejected(text), "rejected")["text"] == f"'{text}"


def test_carriage_return_at_the_start_is_no_formula_either(tmp_path):
    assert cells(tmp_path, rejected("\r=1"), "rejected")["text"] == "'\\x0d=1"


@pytest.mark.parametrize("text", ["-1.5", "+2", "-6999", "-1,25", "-1.2e-05", "plain", "a=b", ""])
def test_numbers_and_plain_text_stay_as_they_are(tmp_path, text):
    assert cells(tmp_path, rejected(text), "rejected")["text"] == text


def test_a_torn_line_stays_one_row(tmp_path):
    for text in ('2031-06-01,"0.31', 'a,b;c "d"', "nul\0nul", "esc\x1b"):
        frame = pd.concat([rejected(text), rejected("next")])
        rows = written(tmp_path, frame, "rejected")
        assert rows.count("\n") == 3
        assert rows.endswith("\na.dat,7,torn,next\n")
    assert "nul\\x00nul" in written(tmp_path, rejected("nul\0nul"), "rejected")


def test_bytes_that_are_no_text_are_shown(tmp_path):
    text = b"caf\xe9".decode("utf-8", "surrogateescape")
    assert cells(tmp_path, rejected(text), "rejected")["text"] == "caf\\udce9"


def test_values_in_conflict_stay_as_written(tmp_path):
    row = {"stamp": np.datetime64("2031-06-01T00:10:00"), "log": "upper", "column": "dT_1",
           "value": "-0.310", "file": "a.dat", "line": 5, "other_value": "0.3100000001",
           "other_file": "Bäume.dat", "other_line": 9}  # fmt: skip
    assert written(tmp_path, pd.DataFrame([row]), "conflicts").splitlines()[1] == (
        "2031-06-01 00:10:00,upper,dT_1,-0.310,a.dat,5,0.3100000001,Bäume.dat,9"
    )


def test_night_tables_keep_their_moments(tmp_path):
    row = dict.fromkeys(COLUMNS["zero_flow_nights"], "") | {
        "probe": "T1-N", "point": 1, "installation": 0, "accepted": np.True_, "records": 13.0,
        "noon_before_utc": np.datetime64("2031-06-01T11:12:13"), "time_utc": pd.NaT,
        "difference_K": 9.87654, "mean_deficit_kPa": 0.04321, "variation": 0.0012345,
        "baseline_K": np.nan, "baseline_error_K": 0.01234, "admissible": np.False_,
        "accepted_if_drier": False, "accepted_if_wetter": True, "noise_K": 0.00456,
        "lowest_temperature_degC": -0.126, "power_change": 0.0201, "visited": False, "rained": True,
        "swelling_um_h": np.nan, "below_highest_um": 3.26,
    }  # fmt: skip
    assert written(tmp_path, pd.DataFrame([row]), "zero_flow_nights").splitlines()[1] == (
        "T1-N,1,0,2031-06-01 11:12:13,,9.8765,0.0432,0.001234,13,1,,,"
        "0.0123,0,0,1,0.0046,-0.13,0.020100,0,1,,3.3"
    )


@given(st.floats(allow_nan=False, allow_infinity=False, min_value=-1e9, max_value=1e9))
def test_what_is_read_back_is_within_half_a_last_digit(tmp_path_factory, value):
    path = tmp_path_factory.getbasetemp() / "read_back.csv"
    write_csv(daily(transpiration_mm=value), path, "daily")
    read = pd.read_csv(path)["transpiration_mm"][0]
    # half of the fourth decimal, and what binary numbers near the value allow
    assert abs(read - value) <= 0.5e-4 + 2 * np.spacing(abs(value))


def test_the_index_and_the_order_of_columns_change_no_byte(tmp_path):
    frame = pd.concat([daily(), daily(species="oak")])
    other = frame.set_axis([9, 4])[list(frame.columns)[::-1]]
    assert written(tmp_path, frame, "daily") == written(tmp_path, other, "daily")
