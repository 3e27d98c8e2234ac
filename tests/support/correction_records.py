"""Made-up records for the tests of the corrections, and a small driver of summarising stages."""

import numpy as np
import pandas as pd
import xarray as xr

from sapflux.physics import sun
from sapflux.stage import bind

RECORD = ("probe", "point", "time")
CM_H = 0.01 / 3600.0


def stamps(start, days, step_min=30):
    """Ends of the records of some days, datetime64[ns] UTC."""
    count = round(days * 1440 / step_min)
    steps = (np.arange(count) + 1) * np.timedelta64(step_min, "m")
    return (np.datetime64(start, "m") + steps).astype("datetime64[ns]")


def record(values, time=None, probes=None):
    """(probe, point, time) array of a series, or of an array of that shape."""
    values = np.asarray(values, float)
    values = values.reshape((1,) * (3 - values.ndim) + values.shape)
    time = stamps("2031-06-01", values.shape[2] / 48) if time is None else time
    probes = probes or [f"P{number}" for number in range(1, values.shape[0] + 1)]
    coords = {"probe": probes, "point": np.arange(values.shape[1]) + 1, "time": time}
    return xr.DataArray(values, coords, RECORD)


def fact(values, like):
    """(probe) array."""
    values = np.atleast_1d(np.asarray(values, float))
    return xr.DataArray(values, {"probe": like["probe"].values}, ("probe",))


def beside(like, deficit_Pa=20.0, latitude=48.0, longitude=0.0, installation=0):
    """Sun, air and installation on the records of `like`."""
    time = like["time"].values
    step = np.diff(time[:2])[0]
    elevation, solar_time = sun.position(time - step // 2, latitude, longitude)
    along = {"time": time}
    numbers = np.broadcast_to(installation, (like.sizes["probe"], len(time))).astype(np.int64)
    return {
        "solar_elevation": xr.DataArray(elevation, along, "time"),
        "solar_time": xr.DataArray(solar_time, along, "time"),
        "vapour_pressure_deficit": xr.DataArray(
            np.broadcast_to(np.asarray(deficit_Pa, float), len(time)), along, "time"
        ),
        "installation": xr.DataArray(
            numbers.copy(), {"probe": like["probe"].values, **along}, ("probe", "time")
        ),
    }


def table_of(stage, arrays, *, block_days=None, **changed):
    """The fitted table of a summarising stage, made block by block as the stage contract says."""
    settings = stage.defaults() | changed
    time = next(iter(arrays.values()))["time"].values
    rows = []
    for (first, last), block in _blocks(time, stage.reach_s(settings), block_days):
        part = bind(stage.summarise, _cut(arrays, block), settings)
        start = part["start"].to_numpy().astype("datetime64[ns]")
        rows.append(part[(start >= first) & (start < last)])
    rows = pd.concat([part for part in rows if len(part)] or rows[:1], ignore_index=True)
    rows = rows.sort_values(["probe", "point", "start"], kind="stable", ignore_index=True)
    return bind(stage.fit, {"rows": rows}, settings) if stage.fit else rows


def evaluated(stage, arrays, table, *, block_days=None, **changed):
    """What the stage makes of a fitted table: name -> values, joined from the blocks' cores."""
    settings = stage.defaults() | changed
    time = next(iter(arrays.values()))["time"].values
    parts = {}
    for (first, last), block in _blocks(time, stage.reach_s(settings), block_days):
        made = bind(stage.function, _cut(arrays, block) | {stage.table: table}, settings)
        core = (time[block] > first) & (time[block] <= last)
        for name, array in made.items():
            parts.setdefault(name, []).append(array.values[..., core])
    return {name: np.concatenate(values, axis=-1) for name, values in parts.items()}


def _blocks(time, reach_s, days):
    step = np.diff(time[:2])[0]
    begin, end = time[0] - step, time[-1]
    length = end - begin if days is None else np.timedelta64(round(days * 86400), "s")
    reach = np.timedelta64(round(reach_s), "s")
    first = begin
    while first < end:
        last = min(first + length, end)
        block = np.flatnonzero((time > first - reach) & (time <= last + reach))
        owner_first = np.datetime64("1970-01-01") if first == begin else first
        owner_last = np.datetime64("2200-01-01") if last == end else last
        yield (owner_first, owner_last), slice(block[0], block[-1] + 1)
        first = last


def _cut(arrays, block):
    return {n: a.isel(time=block) if "time" in a.dims else a for n, a in arrays.items()}
