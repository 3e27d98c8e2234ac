"""Small invented stands whose totals can be worked out by hand."""

import numpy as np
import xarray as xr

from sapflux import quality
from sapflux.scaling.days import Calendar

CALENDAR = Calendar(3600, 1.0, 47.0, 8.0, "10-01")
HOUR = np.timedelta64(1, "h")
MM_PER_H = 1.0 / 3600.0  # kg m-2 s-1


def hours(first, last):
    """UTC ends of the hours of the days first to last (included) of fixed standard time UTC+1."""
    begin = np.datetime64(first, "h") - HOUR
    count = int((np.datetime64(last, "D") - np.datetime64(first, "D")).astype(int) + 1) * 24
    return (begin + np.arange(1, count + 1) * HOUR).astype("datetime64[ns]")


def stand_of(ends, rates, *, filled=0.0, leaf=None, live=4, stands=None, species=None):
    """A stand Dataset of `rates` (stratum, time) [mm h-1]."""
    rates = np.atleast_2d(np.asarray(rates, dtype=float))
    count = len(rates)
    names = species or ["pine", "oak", "beech"][:count]
    stands = stands or ["north"] * count
    dims = ("stand_species", "time")
    shape = (count, len(ends))
    there = np.isfinite(rates)
    made = {
        "stand_transpiration": (dims, rates * MM_PER_H),
        "stand_filled_share": (dims, np.where(there, filled, np.nan)),
        "live_trees": (dims, np.broadcast_to(np.asarray(live), shape).astype(np.int32)),
        "stand_origin": (dims, np.where(there, quality.ORIGINS["measured"], 0).astype(np.int8)),
    }
    if leaf is not None:
        made["in_leaf"] = (dims, np.broadcast_to(leaf, shape).astype(np.int8))
    coords = {
        "stand_species": [f"{a}/{b}" for a, b in zip(stands, names, strict=True)],
        "stand": ("stand_species", stands),
        "species": ("stand_species", names),
        "time": ends,
    }
    return xr.Dataset(made, coords)


def at(ends, first, last):
    """Which records lie in [first, last) of fixed standard time, by their own interval."""
    # The end of an hour in UTC reads like its beginning in fixed standard time, UTC+1.
    begin = ends.astype("datetime64[h]")
    return (begin >= np.datetime64(first, "h")) & (begin < np.datetime64(last, "h"))


def deficit_of(ends, values):
    """Hourly deficit [Pa], one value a day."""
    return xr.DataArray(np.repeat(np.asarray(values, float), 24), {"time": ends}, ("time",))
