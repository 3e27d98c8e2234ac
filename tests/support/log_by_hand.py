"""A site with one log whose files are given as text or bytes, and its reading."""

from datetime import datetime
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np

from sapflux.ingest.logs import read_log
from sapflux.site.config import Layout, Log, Position
from sapflux.site.model import Site
from sapflux.site.tables import Channel

CLASSES = ("header", "kept", "duplicate", "conflicting", "rejected", "blank", "outside")
HEAD = "TIMESTAMP,A,B\n"


def make_site(folder, contents, layout=None, channels=(), **log):
    """A site folder with raw files. channels: (column, from, to) of the log, times as ISO text."""
    for name, content in contents.items():
        path = Path(folder) / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content.encode() if isinstance(content, str) else content)
    settings = {"files": ("raw/*",), "layout": "plain", "interval_min": 10.0}
    settings |= {"stamp": "end", "clock": "utc"} | log
    rows = tuple(
        Channel.model_validate(
            {"log": "L", "column": column, "kind": "site", "quantity": "air_temperature"}
            | {"unit": "degC", "from": _time(start), "to": _time(stop)}
        )
        for column, start, stop in channels
    )
    position = Position(
        name="Invented", latitude_deg=47.0, longitude_deg=8.0, elevation_m=500.0,
        utc_offset_h=1.0, water_year_start="10-01", common_step_min=30,
    )  # fmt: skip
    return Site(
        folder=Path(folder),
        key="invented",
        position=position,
        layouts={"plain": Layout(**(layout or {}))},
        logs={"L": Log(**settings)},
        tables={"channels": rows},
        rows_at={},
    )


def _time(text):
    return datetime.fromisoformat(text) if text else None


def read(files, layout=None, channels=(), **log):
    """The series of a log with these files, checked for its account of every line.

    files: one text, a list of texts (named 0.dat, 1.dat ...), or a dict by name.
    """
    if isinstance(files, str | bytes):
        files = [files]
    if isinstance(files, list):
        files = {f"{number}.dat": content for number, content in enumerate(files)}
    with TemporaryDirectory() as folder:
        inside = {f"raw/{name}": content for name, content in files.items()}
        series = read_log(make_site(folder, inside, layout, channels, **log), "L")
    check_account(series)
    return series


def check_account(series):
    """Every line is in one class, and the arrays fit together."""
    for record in series.files:
        assert sum(getattr(record, name) for name in CLASSES) == record.lines
    assert len(series.rejected) == sum(record.rejected for record in series.files)
    assert (np.diff(series.end) > np.timedelta64(0, "s")).all()
    assert (np.diff(series.end).astype(int) % series.interval_s == 0).all()
    for column, values in series.values.items():
        assert values.shape == series.end.shape and values.dtype == np.float64
        assert np.isnan(values[series.withheld[column]]).all()
    shapes = {(len(series.end),), (len(series.end), len(series.values))}
    assert series.file.shape in shapes and series.line.shape == series.file.shape
    assert series.file.dtype == series.line.dtype == np.int32


def ends(series):
    """Ends as text to the minute."""
    return [str(end)[:16] for end in series.end]


def column(series, name="A"):
    """Values of a column; None where missing."""
    return [None if np.isnan(value) else value for value in series.values[name].tolist()]


def counts(series, number=0):
    """The classes of one file that are not zero."""
    record = series.files[number]
    return {name: getattr(record, name) for name in CLASSES if getattr(record, name)}


def reasons(series):
    """(line, reason) of every rejected line."""
    return [(line, reason) for _, line, reason, _ in series.rejected]


def same_bytes(one, other):
    """Whether two series are the same to the byte, origin apart."""
    return (
        one.end.tobytes() == other.end.tobytes()
        and list(one.values) == list(other.values)
        and all(one.values[c].tobytes() == other.values[c].tobytes() for c in one.values)
        and all(one.withheld[c].tobytes() == other.withheld[c].tobytes() for c in one.values)
    )
