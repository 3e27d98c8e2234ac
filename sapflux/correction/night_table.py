"""Tables of nights: one row a probe, point, installation and night, with evidence and a reason."""

from itertools import pairwise

import numpy as np
import pandas as pd

# Columns that every table of nights has, around its own; their types hold for no rows too.
KEYS = {
    "probe": object,
    "point": np.int64,
    "installation": np.int64,
    "start": "datetime64[ns]",
    "time": "datetime64[ns]",
}
VERDICT = {"records": np.int64, "accepted": bool, "reason": object}


def no_rows(*own):
    """A table of nights without rows; `own` names its columns of numbers."""
    types = KEYS | dict.fromkeys(own, np.float64) | VERDICT
    return pd.DataFrame({name: pd.Series(dtype=kind) for name, kind in types.items()})


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


def laid_on(record, installation):
    """`installation` as (probe, time) int array on the records of `record`."""
    flat = record.isel(point=0, drop=True)
    return installation.broadcast_like(flat).transpose("probe", "time").values


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
