"""The CSV tables of a run: fixed columns, fixed digits, the same bytes for the same values."""

import csv
import numbers
import re
from collections.abc import Hashable
from datetime import date, datetime
from pathlib import Path

import numpy as np
import pandas as pd

from sapflux import quality
from sapflux.pipeline.night_columns import NIGHTS, NIGHTS_BESIDE
from sapflux.pipeline.side_by_side import PROBE_COLUMNS, STAND_COLUMNS

TOTALS = (
    "stand", "species", "start", "end", "transpiration_mm", "lower_mm", "upper_mm",
    "measured_fraction", "filled_fraction", "modelled_fraction", "assumed_zero_fraction",
    "trees", "valid", "reason",
)  # fmt: skip
COLUMNS = {
    "season": (*TOTALS, "days", "days_refused"),
    "daily": TOTALS,
    "monthly": TOTALS,
    "water_year": TOTALS,
    "tree_daily": (
        "tree", "stand", "species", "start", "end", "water_use_kg",
        "measured_fraction", "filled_fraction", "valid", "reason",
    ),
    "installations": (
        "probe", "installation", "tree", "method", "installed", "removed",
        "records", "usable_fraction",
        "zero_flow_nights", "zero_flow_nights_accepted", "zero_flow_difference_K",
        "zero_flow_nights_added", "zero_flow_nights_lost", "zero_flow_admissible",
        "baseline_amplification",
        "zero_ratio_nights", "zero_ratio_nights_accepted", "zero_ratio_velocity_cm_h",
        "window_drift",
        *(f"{name}_fraction" for name in quality.NATIVE),
        "ended",
    ),
    "methods_beside": STAND_COLUMNS,
    "probe_methods_beside": PROBE_COLUMNS,
    "ledger": (
        "file", "sha256", "lines", "header", "kept", "duplicate", "conflicting", "rejected",
        "blank", "outside",
    ),
    "rejected": ("file", "line", "reason", "text"),
    "conflicts": (
        "stamp", "log", "column", "value", "file", "line", "other_value", "other_file",
        "other_line",
    ),
    **NIGHTS,
    **NIGHTS_BESIDE,
}  # fmt: skip
DAYS = {"start", "end"}
WHOLE = {
    "zero_flow_nights_added", "zero_flow_nights_lost", "zero_flow_admissible",
    "accepted_if_drier", "accepted_if_wetter", "visited", "rained",
    "trees", "valid", "days", "days_refused", "installation", "records", "zero_flow_nights",
    "zero_flow_nights_accepted", "zero_ratio_nights", "zero_ratio_nights_accepted", "lines",
    "header", "kept", "duplicate", "conflicting", "rejected", "blank", "outside", "line",
    "other_line", "reference_days", "control_installation", "common_days", "pairs", "applied",
    "point", "nights", "accepted", "usable", "admissible",
}  # fmt: skip
DIGITS = {
    "mm": 4,
    "kg": 3,
    "fraction": 4,
    "K": 4,
    "h": 4,
    "kPa": 4,
    "s": 7,
    "degC": 2,
    "um": 1,
    "change": 6,
    "variation": 6,
    "drift": 4,
    "amplification": 2,
    "d": 1,
    "ratio": 5,
    "year": 4,
    "probability": 6,
}  # by the last part of the name
AS_WRITTEN = {"value", "other_value"}
# A spreadsheet runs a cell that begins so as a formula, unless it is a number.
FORMULA = re.compile(r"[=+\-@\t\r\n]")
NUMBER = re.compile(r"[+-]?(\d+[.,]?\d*|[.,]\d+)([eE][+-]?\d+)?")
CONTROL = re.compile(r"[\x00-\x08\x0b-\x1f\x7f]")


def write_csv(frame, path, kind):
    """Write a table of a run.

    frame : DataFrame with exactly the columns of `COLUMNS[kind]`, in any order; path : the file;
    kind : name of the table. UTF-8, lines end in LF, decimal point. Millimetres have 4 decimals,
    kilograms 3, fractions, kelvin, kilopascals and cm h-1 4; an exact half goes to the even digit.
    NaN and None are blank; `start` and `end` are days. Text that a spreadsheet would run as a
    formula gets an apostrophe in front; control characters are written as \\x and two hex digits.

    ValueError for another set of columns, a fraction in a column of whole numbers, an infinite
    number, or a `start` or `end` that is not a midnight.
    """
    columns = COLUMNS[kind]
    missing = [name for name in columns if name not in frame.columns]
    unknown = [str(name) for name in frame.columns if name not in columns]
    if missing or unknown or len(frame.columns) != len(columns):
        raise ValueError(f"table {kind}: columns missing {missing}, not known {unknown}")
    cells = [_cells(frame[name], name) for name in columns]
    # A lone surrogate stands for a byte that is no text in the log's encoding.
    with Path(path).open("w", encoding="utf-8", errors="backslashreplace", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(columns)
        writer.writerows(zip(*cells, strict=True))


def _cells(values, column):
    """The cells of a column. Names, days and reasons recur, so each is made once."""
    made = {}
    cells = []
    for value in values.tolist() if values.dtype.kind in "fiub" else values:
        if not isinstance(value, Hashable):
            raise ValueError(f"column {column}: {value!r} cannot be written")
        if value not in made:
            made[value] = _cell(value, column)
        cells.append(made[value])
    return cells


def _cell(value, column):
    if value is None or value is pd.NaT or value is pd.NA:
        return ""
    if isinstance(value, np.generic):
        value = pd.Timestamp(value) if value.dtype.kind == "M" else value.item()
        if value is pd.NaT:
            return ""
    if isinstance(value, float) and np.isnan(value):
        return ""
    if isinstance(value, str):
        return guarded(value)
    if isinstance(value, date):
        return _moment(value, column)
    if isinstance(value, numbers.Real):
        return _number(value, column)
    raise ValueError(f"column {column}: {value!r} cannot be written")


def _number(value, column):
    if np.isinf(value):
        raise ValueError(f"column {column}: {value!r} is not finite")
    if column in WHOLE:
        if value != int(value):
            raise ValueError(f"column {column}: {value!r} is not a whole number")
        return str(int(value))
    if column in AS_WRITTEN:
        return repr(value)
    digits = DIGITS.get(column.rpartition("_")[2])
    if digits is None:
        raise ValueError(f"column {column}: holds text, not {value!r}")
    text = f"{value:.{digits}f}"
    return text.removeprefix("-") if float(text) == 0 else text  # no minus zero


def _moment(value, column):
    if not isinstance(value, datetime):
        return value.isoformat()
    if column not in DAYS:
        return value.strftime("%Y-%m-%d %H:%M:%S")
    if (value.hour, value.minute, value.second, value.microsecond) != (0, 0, 0, 0):
        raise ValueError(f"column {column}: {value} is not the start of a day")
    return value.strftime("%Y-%m-%d")


def guarded(value):
    """Text that no spreadsheet runs as a formula, its control characters spelled out."""
    guarded = FORMULA.match(value) and not NUMBER.fullmatch(value)
    shown = CONTROL.sub(lambda found: f"\\x{ord(found[0]):02x}", value)
    return f"'{shown}" if guarded else shown
