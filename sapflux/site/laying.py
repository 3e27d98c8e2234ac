"""How values are laid on records: by installation, by date, as named arrays."""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import xarray as xr

from sapflux import schema
from sapflux.site import dated

RELATIVE_DEPTHS = np.linspace(0.0, 1.0, 101)


@dataclass(frozen=True)
class Records:
    """The probes and times that facts are laid on.

    `installations` are the rows of each probe; `number` (probe, time) the one begun last.
    """

    begins: np.ndarray
    middles: np.ndarray
    probes: tuple
    trees: list
    species: list
    installations: list
    number: np.ndarray


def by_installation(records, value_of, dims):
    """(dims, values) of a value of each row of `probes.csv`, with time only where it changes."""
    tables = [[value_of(row) for row in rows] for rows in records.installations]
    number = records.number if records.number.shape[1] else np.zeros((len(tables), 1), dtype=int)
    first, last = number.min(axis=1), number.max(axis=1)
    changes = any(
        not np.array_equal(table[one], table[first[place]], equal_nan=True)
        for place, table in enumerate(tables)
        for one in range(first[place] + 1, last[place] + 1)
    )
    if not changes:
        return dims, np.array([table[one] for table, one in zip(tables, first, strict=True)])
    laid = [np.array(table)[own] for table, own in zip(tables, number, strict=True)]
    return (*dims, "time"), np.moveaxis(np.array(laid), 1, -1)


def by_date(records, nodes_of, unit, value_at=dated.line_at):
    """(dims, values) of dated nodes (place of probe, installation) -> nodes, in `unit` of SI.

    value_at : nodes, moments -> values.
    """
    lines = {}  # probes of a species share their nodes

    def line(place, number):
        nodes = nodes_of(place, number)
        if nodes not in lines:
            lines[nodes] = value_at(nodes, records.middles) * unit
        return lines[nodes]

    values = np.empty(records.number.shape)
    for place, own in enumerate(records.number):
        for number in np.unique(own):
            met = own == number
            values[place, met] = line(place, int(number))[met]
    if values.shape[1] and np.array_equal(
        values, np.broadcast_to(values[:, :1], values.shape), equal_nan=True
    ):
        return ("probe",), values[:, 0].copy()
    return ("probe", "time"), values


def as_number(value):
    """A number or None as float, NaN for None."""
    return np.nan if value is None else float(value)


def padded(values, count):
    """Values of the needle's points, NaN for points it does not have."""
    whole = np.full(count, np.nan)
    whole[: len(values)] = values[:count]
    return whole


def named(name, dims, values):
    """The values as an array of the schema's name and attributes."""
    array = xr.DataArray(values, dims=dims, name=name, attrs=schema.VARIABLES[name].attributes())
    if "relative_depth" in dims:
        array = array.assign_coords(relative_depth=RELATIVE_DEPTHS)
    return array


def as_rows(fact, sizes):
    """A laid fact as an array (probe, anything, time or 1), for stages that go probe by probe.

    fact : DataArray (probe,), (probe, point) or (probe, relative_depth), or with time; None stays
    None. sizes : sizes of the records' dims.
    """
    if fact is None:
        return None
    last = [dim for dim in ("point", "relative_depth") if dim in fact.dims]
    ordered = fact.transpose("probe", *last, ..., missing_dims="ignore")
    values = np.asarray(ordered.values, dtype=float)
    if "time" not in ordered.dims:
        values = values[..., np.newaxis]
    if not last:
        values = values[:, np.newaxis, :]
    return np.ascontiguousarray(np.broadcast_to(values, (sizes["probe"], *values.shape[1:])))


def unchanged_spans(own, length):
    """[first, last) of the records over which no fact changes.

    own : arrays (..., time or 1) of one probe; length : number of records.
    """
    changes = np.zeros(length, dtype=bool)
    for part in own:
        if part.shape[-1] > 1:
            old, new = part[:, :-1], part[:, 1:]
            same = (old == new) | (np.isnan(old) & np.isnan(new))
            changes[1:] |= ~same.all(axis=0)
    cuts = [0, *np.flatnonzero(changes).tolist(), length]
    return list(pairwise(cuts))
