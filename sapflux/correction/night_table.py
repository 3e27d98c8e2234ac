"""Tables of nights: one row a probe, point, installation and night, with evidence and a reason."""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import pandas as pd

from sapflux.correction.nights import (
    Nights,
    in_nights,
    installations_in,
    last_window,
    nights_of,
    window_means,
    window_middle,
    window_records,
)
from sapflux.physics.atmosphere import PA_PER_KPA

# Columns that every table of nights has, around its own; their types hold for no rows too.
KEYS = {
    "probe": object,
    "point": np.int64,
    "installation": np.int64,
    "start": "datetime64[ns]",
    "time": "datetime64[ns]",
}
VERDICT = {"records": np.int64, "accepted": bool, "reason": object}


@dataclass(frozen=True)
class Looked:
    """The nights of a block as one installation of each probe saw them.

    current : (probe, night) its number, -1 for none. seen : (probe, point, night, slot) records.
    mean, variation : (probe, point, night, window) means, and standard deviation over mean [1];
    mean_deficit : (night, window) [kPa]; NaN where too few records, as `count` of them tells.
    size : records of a window.
    """

    nights: Nights
    current: np.ndarray
    seen: np.ndarray
    mean: np.ndarray
    variation: np.ndarray
    count: np.ndarray
    mean_deficit: np.ndarray
    size: int


def no_rows(*own, **typed):
    """A table of nights without rows; `own` names its columns of numbers, `typed` others."""
    types = KEYS | dict.fromkeys(own, np.float64) | typed | VERDICT
    return pd.DataFrame({name: pd.Series(dtype=kind) for name, kind in types.items()})


def candidates(
    record,
    installation,
    solar_elevation,
    solar_time,
    vapour_pressure_deficit,
    choose,
    own,
    *,
    averaging_h,
    least_records_share,
    highest_deficit_kPa,
    highest_variation=np.inf,
):
    """One row a probe, point, installation and night of a block: a mean of its record.

    record : DataArray (probe, point, time), in the unit of the first of the columns `own`; `own`
    may also name mean_deficit_kPa [kPa] and variation, standard deviation over mean [1];
    vapour_pressure_deficit : (time) [Pa] or None;
    choose : function (mean, variation, mean_deficit, last) -> (window, accepted), with the first
    two (probe, point, night, window) and the third (night, window), NaN where too few records;
    last : (night) window before sunrise; both results (probe, point, night).
    """
    parts = []
    for look in looked_at(
        record,
        installation,
        nights_of(record["time"].values, solar_elevation.values, solar_time.values),
        vapour_pressure_deficit,
        averaging_h=averaging_h,
        least_records_share=least_records_share,
    ):
        last = last_window(look.nights, look.size)
        window, accepted = choose(look.mean, look.variation, look.mean_deficit, last)
        rows = looked_rows(record, look, window, own[0], accepted=accepted)
        rows["reason"] = reasons(rows, own[0], averaging_h, highest_deficit_kPa, highest_variation)
        parts.append(rows[[*KEYS, *own, *VERDICT]])
    return pd.concat(parts, ignore_index=True) if parts else no_rows(*own)


def looked_at(
    record,
    installation,
    nights,
    vapour_pressure_deficit,
    *,
    averaging_h,
    least_records_share,
):
    """Yield `Looked` for each installation met in turn in the nights of a block.

    Arguments as of `candidates`; nights : of the block, as `nights_of` gives them.
    """
    values = in_nights(record.values, nights, np.nan)
    numbers = in_nights(laid_on(record, installation), nights, -1)
    if vapour_pressure_deficit is None:
        deficit = np.full(record.sizes["time"], np.nan)
    else:
        deficit = vapour_pressure_deficit.values / PA_PER_KPA
    size = window_records(nights, averaging_h)
    air = window_means(in_nights(deficit, nights, np.nan), nights, size, least_records_share)
    for current in installations_in(numbers):
        seen = np.where((numbers == current[..., None])[:, None], values, np.nan)
        signal = window_means(seen, nights, size, least_records_share)
        with np.errstate(divide="ignore", invalid="ignore"):
            variation = signal.deviation / np.abs(signal.mean)
        means = (signal.mean, variation, signal.count, air.mean)
        yield Looked(nights, current, seen, *means, size)


def looked_rows(record, look, window, value, **more):
    """Rows of a table of nights: the window numbered for each night, as far as it tells.

    window : (probe, point, night); value : name of the column for its mean; more : further
    columns, (probe, point, night). Beside these, records in the window and in the night, and
    whether the night is long enough for one.
    """
    mean = chosen(look.mean, window)
    middle = window_middle(look.nights, window, look.size)
    columns = {
        "time": np.where(np.isfinite(mean), middle, np.datetime64("NaT", "ns")),
        value: mean,
        "mean_deficit_kPa": chosen(look.mean_deficit, window),
        "variation": chosen(look.variation, window),
        "records": chosen(look.count, window),
        "night_records": np.isfinite(look.seen).sum(axis=-1),
        "long_enough": look.nights.length >= look.size,
    }
    return night_rows(record, look.current, look.nights, columns | more)


def chosen(values, window):
    """(..., night) of (..., night, window): the window numbered for each night."""
    values = np.broadcast_to(values, (*window.shape, values.shape[-1]))
    return np.take_along_axis(values, window[..., None], axis=-1)[..., 0]


def night_rows(record, current, nights, columns):
    """Rows of a table of nights: probe, point, installation, start, and the given columns.

    record : DataArray (probe, point, time) that the rows are about; current : (probe, night)
    installation, -1 for no row; columns : name -> (probe, point, night).
    """
    shape = (*record.shape[:2], len(nights.start))
    probe, point, night = np.nonzero(np.broadcast_to((current >= 0)[:, None, :], shape))
    rows = {
        "probe": record["probe"].values.astype(object)[probe],
        "point": record["point"].values[point],
        "installation": current[probe, night],
        "start": nights.start[night],
    }
    rows |= {
        name: np.broadcast_to(values, shape)[probe, point, night]
        for name, values in columns.items()
    }
    return pd.DataFrame(rows)


def without_silent(rows):
    """The rows without those of points that never have a night record: no needle is there."""
    keys = [rows[name] for name in ("probe", "point", "installation")]
    return rows[(rows["reason"] != "no night record").groupby(keys).transform("any")]


def laid_on(record, values):
    """`values` as (probe, time) array on the records of `record`: an installation, or a fact."""
    flat = record.isel(point=0, drop=True)
    return values.broadcast_like(flat).transpose("probe", "time").values


def in_words(size, causes):
    """(size) in words, the first of the causes that holds for each row; "" where none does.

    causes : (holds, text) or (holds, text, values, ...): a text with a place in braces for one
    value of each of the arrays.

    >>> in_words(3, [(np.array([0, 1, 1]) > 0, "{:g} K", np.array([1, 2, 3])), (True, "dry")])
    array(['dry', '2 K', '3 K'], dtype=object)
    """
    words = np.full(size, "", dtype=object)
    for holds, text, *values in causes:
        here = np.flatnonzero(np.broadcast_to(holds, size) & (words == ""))
        told = [np.asarray(array)[here] for array in values]
        words[here] = [text.format(*row) for row in zip(*told, strict=True)] if told else text
    return words


def same_key(rows):
    """Yield (probe, point, installation, slice) of each run of rows with the same key.

    rows : sorted by probe, point and start, so that installations follow one another.
    """
    if not len(rows):
        return
    keys = [rows[name].to_numpy() for name in ("probe", "point", "installation")]
    changes = np.zeros(len(rows) - 1, dtype=bool)
    for key in keys:
        changes |= key[1:] != key[:-1]
    cuts = [0, *(np.flatnonzero(changes) + 1).tolist(), len(rows)]
    for first, last in pairwise(cuts):
        yield (*(key[first] for key in keys), slice(first, last))


def lines_of(rows, record, numbers):
    """Yield ((row, column), where, slice) of each run of rows with the same key in the block.

    rows : as for `same_key`; record : DataArray (probe, point, time) of the block; numbers :
    (probe, time) installation. Row and column are the places of the key's probe and point;
    where : (time) the records of its installation, of which there is one at least.
    """
    probes = {str(name): row for row, name in enumerate(record["probe"].values)}
    points = {int(number): column for column, number in enumerate(record["point"].values)}
    for probe, point, number, own in same_key(rows):
        if probe in probes and point in points:
            where = numbers[probes[probe]] == number
            if where.any():
                yield (probes[probe], points[point]), where, own


def wanting(values, record, numbers):
    """Where `values` (probe, point, time) are NaN though a probe is installed or has a record.

    record, numbers : as for `lines_of`. DataArray of bool.
    """
    known = (numbers >= 0)[:, None, :] | np.isfinite(record.values)
    return record.copy(data=np.isnan(values) & known)


def reasons(rows, value, averaging_h, highest_deficit_kPa, highest_variation=np.inf):
    """In words, why each row is accepted or not.

    rows : with `night_records`, `long_enough`, mean_deficit_kPa, accepted, the column `value`,
    and `variation` where that is bounded.
    """
    words = np.full(len(rows), "accepted", dtype=object)
    refused = np.flatnonzero(~rows["accepted"].to_numpy())
    for place, row in zip(refused, rows.iloc[refused].to_dict("records"), strict=True):
        deficit = row["mean_deficit_kPa"]
        if not row["night_records"]:
            word = "no night record"
        elif not row["long_enough"]:
            word = f"night after midnight shorter than {averaging_h:g} h"
        elif np.isnan(row[value]):
            word = "too few records"
        elif np.isnan(deficit):
            word = "no vapour pressure deficit"
        elif deficit > highest_deficit_kPa:
            word = f"deficit {deficit:.3g} kPa above {highest_deficit_kPa:g}"
        else:
            word = f"variation {row['variation']:.3g} above {highest_variation:g}"
        words[place] = word
    return words
