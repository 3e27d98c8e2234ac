"""Tables of totals: days, months, season and water years of stands, days of trees.

The columns of the stand tables are `COLUMNS`: stand, species ("all" is the stand), start, end
(days of fixed standard time, end exclusive), transpiration_mm, lower_mm and upper_mm (empty until
there are intervals), the fractions, trees (fewest live trees behind a value), valid, reason.
`measured_fraction`, `filled_fraction` and `modelled_fraction` are shares of the potential
radiation while in leaf, empty where the species is in leaf on no day; `assumed_zero_fraction` is
a share of all potential radiation. A total that may not be given is NaN and says why. Nothing is
rounded.
"""

import numpy as np
import pandas as pd

from sapflux.scaling.completeness import Completeness, day_totals
from sapflux.scaling.days import day_grid, on_days, water_year_begin
from sapflux.scaling.periods import (
    month_period,
    plain_period,
    share_of,
    stand_of,
    sum_of,
    year_period,
)
from sapflux.scaling.whole_stands import ALL

ONE_DAY = np.timedelta64(1, "D")
COLUMNS = (
    "stand", "species", "start", "end", "transpiration_mm", "lower_mm", "upper_mm",
    "measured_fraction", "filled_fraction", "modelled_fraction", "assumed_zero_fraction",
    "trees", "valid", "reason",
)  # fmt: skip
TREE_COLUMNS = (
    "tree", "stand", "species", "start", "end", "water_use_kg",
    "measured_fraction", "filled_fraction", "valid", "reason",
)  # fmt: skip


def daily(days):
    """Transpiration of each day that the records touch, as a DataFrame of `COLUMNS`.

    Source: daylight, gap and record rules, common practice.
    """
    picked = np.flatnonzero(days.touched)
    return _table(days, [np.array([at]) for at in picked], plain_period)


def monthly(days):
    """Transpiration of each calendar month that the records touch, as a DataFrame of `COLUMNS`.

    A month is given where enough of its expected flux is measured, its days weighted with their
    potential radiation while in leaf. Refused days are then made up for by dividing the sum of
    the valid days by their share of the weights, if the fair-weather check on the deficit passes;
    that part counts as modelled.

    Source: common practice.
    """
    months = days.dates.astype("datetime64[M]")
    periods = [np.flatnonzero(months == month) for month in np.unique(months[days.touched])]
    return _table(days, periods, month_period)


def water_year(days):
    """Transpiration of each water year that the records touch, as a DataFrame of `COLUMNS`.

    The sum of its months, each made up for on its own; the fair-weather check is on the whole
    year. No month may have too little measured.

    Source: common practice.
    """
    touched = days.dates[days.touched]
    first = water_year_begin(touched[0], days.calendar)
    count = int(str(touched[-1])[:4]) - int(str(first)[:4]) + 1
    begins = [water_year_begin(first, days.calendar, later) for later in range(count + 1)]
    year = np.searchsorted(np.array(begins), days.dates, side="right")
    periods = [np.flatnonzero(year == one) for one in np.unique(year[days.touched])]
    return _table(days, periods, year_period)


def season(days):
    """Transpiration over the days that may be totalled, one row a stand and species.

    DataFrame of `COLUMNS` and `days`, `days_refused`. The stand's row is over the days that are
    valid for every species, so it may hold fewer days than theirs. Fractions are of those days.
    """
    picked = np.flatnonzero(days.touched)
    rows = []
    for stand, strata in _stands(days).items():
        valid = days.valid[np.ix_(strata, picked)]
        for n, stratum in enumerate(strata):
            used = picked[valid[n]]
            part = sum_of(days, stratum, used, len(picked))
            rows.append(_season_row(days, stand, days.species[stratum], part, picked, len(used)))
        used = picked[valid.all(axis=0)]
        parts = [sum_of(days, stratum, used, len(picked)) for stratum in strata]
        whole = stand_of(days, strata, parts)
        whole["reason"] = parts[0]["reason"]
        rows.append(_season_row(days, stand, ALL, whole, picked, len(used)))
    return pd.DataFrame(rows, columns=[*COLUMNS, "days", "days_refused"])


def tree_daily(trees, calendar, rules=None):
    """Water use of each instrumented tree and day, as a DataFrame of `TREE_COLUMNS`.

    trees : Dataset (tree, time) of tree_flow [kg s-1] and tree_filled_share, with the coordinates
    stand and species; calendar, rules : as for `stand_days`. Fractions are shares of all
    potential radiation of the day, empty without sun; what is left of a valid day was made up for.

    Source: as `daily`.
    """
    rules = rules or Completeness()
    grid = day_grid(trees["time"].values, calendar)
    light = grid.sunlight.sum(axis=1)
    light[light == 0] = np.nan
    start, end = grid.dates.astype(str), (grid.dates + ONE_DAY).astype(str)
    frames = []
    for n, name in enumerate(trees["tree"].values.astype(str)):
        own = trees.isel(tree=n)
        rate = on_days(own["tree_flow"].values.astype(float), grid, np.nan)
        share = np.nan_to_num(own["tree_filled_share"].values.astype(float))
        total, reasons = day_totals(rate, grid.sunlight, grid.recorded, calendar.interval_s, rules)
        there = np.isfinite(rate)
        filled = (grid.sunlight * there * on_days(share, grid, 0.0)).sum(axis=1)
        measured = (grid.sunlight * there).sum(axis=1) - filled
        columns = {
            "tree": name,
            "stand": str(own["stand"].values),
            "species": str(own["species"].values),
            "start": start,
            "end": end,
            "water_use_kg": total,
            "measured_fraction": measured / light,
            "filled_fraction": filled / light,
            "valid": np.isfinite(total).astype(int),
            "reason": reasons,
        }
        frames.append(pd.DataFrame(columns, columns=TREE_COLUMNS))
    if not frames:
        return pd.DataFrame(columns=TREE_COLUMNS)
    return pd.concat(frames, ignore_index=True)


def _stands(days):
    """Stand -> places of its strata, in order."""
    return {
        stand: [n for n, own in enumerate(days.stands) if own == stand]
        for stand in dict.fromkeys(days.stands)
    }


def _table(days, periods, period_of):
    """Rows of every stand, species by species and then the stand, for each period."""
    rows = []
    for stand, strata in _stands(days).items():
        parts = [[period_of(days, stratum, picked) for picked in periods] for stratum in strata]
        whole = [stand_of(days, strata, own) for own in zip(*parts, strict=True)]
        for name, own in zip(
            (*(days.species[n] for n in strata), ALL), (*parts, whole), strict=True
        ):
            rows += [
                _row(days, stand, name, part, picked)
                for part, picked in zip(own, periods, strict=True)
            ]
    return pd.DataFrame(rows, columns=list(COLUMNS))


def _row(days, stand, species, part, picked):
    fractions = {
        f"{name}_fraction": share_of(part[name], part["expected"])
        for name in ("measured", "filled", "modelled")
    }
    return {
        "stand": stand,
        "species": species,
        "start": str(days.dates[picked[0]]),
        "end": str(days.dates[picked[-1]] + ONE_DAY),
        "transpiration_mm": part["total"],
        "lower_mm": np.nan,
        "upper_mm": np.nan,
        **fractions,
        "assumed_zero_fraction": share_of(part["assumed"], part["light"]),
        "trees": part["trees"],
        "valid": int(np.isfinite(part["total"])),
        "reason": part["reason"],
    }


def _season_row(days, stand, species, part, picked, count):
    row = _row(days, stand, species, part, picked)
    return row | {"days": count, "days_refused": len(picked) - count}
