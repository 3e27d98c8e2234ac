"""Records laid on the days of the site's fixed standard time, and what each day amounts to."""

from dataclasses import dataclass

import numpy as np

from sapflux import quality
from sapflux.physics import sun
from sapflux.scaling.completeness import ROUNDING, Completeness, day_totals

DAY = np.timedelta64(86400, "s")


@dataclass(frozen=True)
class Calendar:
    """Where and how a site counts its days.

    interval_s : length of a record [s], a divisor of the hour; utc_offset_h : fixed standard time
    minus UTC [h]; latitude_deg, longitude_deg : north and east; water_year_start : "MM-DD".
    """

    interval_s: int
    utc_offset_h: float
    latitude_deg: float
    longitude_deg: float
    water_year_start: str = "10-01"


@dataclass(frozen=True)
class DayGrid:
    """Days cut into records. The record that ends at 0 h is the last of the day before."""

    dates: np.ndarray  # (day) datetime64[D] of fixed standard time
    sunlight: np.ndarray  # (day, record) potential radiation [J m-2]
    recorded: np.ndarray  # (day, record) whether the record of the site spans it
    day: np.ndarray  # (time) number of the day of each record of the site
    slot: np.ndarray  # (time) its place in the day
    midnights: np.ndarray  # (day) datetime64[s], ends of the days [UTC]


def day_grid(ends, calendar, *, whole_years=False):
    """The days that records touch, or those of all their months and water years.

    ends : (time) datetime64, regular ends of the records [UTC].
    ValueError for no records.
    """
    if not len(ends):
        raise ValueError("no records to lay on days")
    interval = np.timedelta64(int(calendar.interval_s), "s")
    offset = np.timedelta64(round(calendar.utc_offset_h * 3600), "s")
    last_second = np.asarray(ends).astype("datetime64[s]") + offset - np.timedelta64(1, "s")
    date = last_second.astype("datetime64[D]")
    slot = ((last_second - date) // interval).astype(np.int64)
    first, last = date[0], date[-1]
    if whole_years:
        first = min(
            water_year_begin(first, calendar), first.astype("datetime64[M]").astype(date.dtype)
        )
        last = max(
            water_year_begin(last, calendar, 1),
            (last.astype("datetime64[M]") + 1).astype(date.dtype),
        ) - np.timedelta64(1, "D")
    dates = np.arange(first, last + np.timedelta64(1, "D"))
    day = (date - first).astype(np.int64)
    # Where a record reaches over midnight, all do by the same time.
    late = (last_second[0] - date[0]) % interval + np.timedelta64(1, "s")
    begins = dates.astype("datetime64[s]") - offset
    starts = late - interval + np.arange(DAY // interval) * interval
    middles = begins[:, np.newaxis] + starts + interval // 2
    power = sun.horizontal_irradiance_above_atmosphere(
        middles, calendar.latitude_deg, calendar.longitude_deg
    )
    recorded = np.zeros(middles.shape, dtype=bool)
    recorded[day, slot] = True
    return DayGrid(dates, power * calendar.interval_s, recorded, day, slot, begins + DAY)


def water_year_begin(date, calendar, later=0):
    """First day of the water year that holds `date`, or of one `later` years on.

    >>> str(water_year_begin(np.datetime64("2031-09-30"), Calendar(1800, 1.0, 47.0, 8.0)))
    '2030-10-01'
    """
    year = int(str(date)[:4])
    begins = np.datetime64(f"{year:04d}-{calendar.water_year_start}")
    year += later - int(date < begins)
    return np.datetime64(f"{year:04d}-{calendar.water_year_start}")


def on_days(values, grid, absent):
    """Values along time (time) as (day, record), `absent` where there is no record."""
    laid = np.full(grid.sunlight.shape, absent, dtype=np.asarray(values).dtype)
    laid[grid.day, grid.slot] = values
    return laid


@dataclass(frozen=True)
class Days:
    """What each day amounts to for each stratum: arrays (stratum, day).

    `expected` is potential radiation while in leaf; `measured`, `filled` and `modelled` are its
    parts; `assumed` is the part of all potential radiation `light` (day) with assumed zeros. All
    are in J m-2, but on days without sun `light` is 1 and `assumed` a share of the day.
    """

    stands: tuple
    species: tuple
    ground: np.ndarray  # (stratum) sapwood per ground [1]
    dates: np.ndarray
    touched: np.ndarray  # (day) whether the record of the site touches it
    total: np.ndarray  # kg m-2, which is mm; NaN where refused
    reasons: list  # of lists of str, "" where valid
    light: np.ndarray
    expected: np.ndarray
    measured: np.ndarray
    filled: np.ndarray
    modelled: np.ndarray
    assumed: np.ndarray
    trees: np.ndarray  # fewest live trees behind a value, 0 without one
    deficit: np.ndarray  # (day) mean vapour pressure deficit [Pa], NaN where not given
    calendar: Calendar
    rules: Completeness

    @property
    def valid(self):
        """(stratum, day) whether the day may be totalled."""
        return np.isfinite(self.total)


def stand_days(
    stand,
    sapwood_per_ground,
    calendar,
    rules=None,
    *,
    in_leaf=None,
    vapour_pressure_deficit=None,
):
    """Every day of the months and water years that the records touch, judged: a `Days`.

    stand : Dataset (stand_species, time) of stand_transpiration [kg m-2 s-1], stand_filled_share,
    live_trees and, where dormancy is declared, stand_origin, with the coordinates stand and
    species; sapwood_per_ground : (stand_species) [1], in the same order;
    in_leaf : function (day) ends of days [UTC] -> (stratum, day) 1 in leaf, 0 dormant, so that
    days outside the records are known too; None: by `in_leaf` of the Dataset, and in leaf on all
    days outside the records, or without such a variable;
    vapour_pressure_deficit : (time) [Pa] on its own regular ends of interval [UTC], or None.

    A dormant species has zero where there is nothing, within the records and without; its fluxes
    that were measured count as they are. Leaf-on and leaf-off fall on midnights.
    ValueError for no records, or where the numbers of strata differ.
    """
    rules = rules or Completeness()
    grid = day_grid(stand["time"].values, calendar, whole_years=True)
    leaves = _leaves(stand, grid, in_leaf)
    counts = (stand.sizes["stand_species"], len(sapwood_per_ground), len(leaves))
    if len(set(counts)) > 1:
        raise ValueError(f"strata of stand, sapwood_per_ground and in_leaf differ: {counts}")
    rows = [
        _stratum(stand.isel(stand_species=n), grid, leaf, calendar, rules)
        for n, leaf in enumerate(leaves)
    ]
    light = grid.sunlight.sum(axis=1)
    names = ("total", "expected", "measured", "filled", "modelled", "assumed", "trees")
    shape = (len(rows), len(grid.dates))
    return Days(
        stands=tuple(stand["stand"].values.astype(str)),
        species=tuple(stand["species"].values.astype(str)),
        ground=np.nan_to_num(np.asarray(sapwood_per_ground, dtype=float)),
        dates=grid.dates,
        touched=grid.recorded.any(axis=1),
        reasons=[row["reasons"] for row in rows],
        light=np.where(light > 0, light, 1.0),
        deficit=daily_deficit(vapour_pressure_deficit, grid.dates, calendar, rules),
        calendar=calendar,
        rules=rules,
        **{n: np.array([row[n] for row in rows]).reshape(shape) for n in names},
    )


def _leaves(stand, grid, in_leaf):
    """(stratum, day) bool: whether the species is in leaf."""
    if in_leaf is not None:
        return np.asarray(in_leaf(grid.midnights)) != 0
    leaves = np.ones((stand.sizes["stand_species"], len(grid.dates)), dtype=bool)
    if "in_leaf" in stand:
        known = stand["in_leaf"].transpose("stand_species", "time").values
        leaves[:, grid.day] = known != 0
    return leaves


def _stratum(stand, grid, leaf, calendar, rules):
    """The figures of one stratum, each along days."""
    rate = on_days(stand["stand_transpiration"].values.astype(float), grid, np.nan)
    share = np.nan_to_num(stand["stand_filled_share"].values.astype(float))
    share = on_days(share, grid, 0.0)
    live = on_days(stand["live_trees"].values.astype(float), grid, np.nan)
    nothing = ~np.isfinite(rate) & ~leaf[:, np.newaxis]
    if "stand_origin" in stand:
        zero = stand["stand_origin"].values == quality.ORIGINS["assumed_zero"]
        nothing |= on_days(zero, grid, False)
    rate = np.where(nothing, 0.0, rate)
    total, reasons = day_totals(rate, grid.sunlight, grid.recorded, calendar.interval_s, rules)
    reasons = _with_cause(reasons, _few(stand, grid) & ~np.isfinite(rate), live, calendar)
    there = np.isfinite(rate) & ~nothing
    light = grid.sunlight.sum(axis=1)
    expected = light * leaf
    filled = (grid.sunlight * there * share).sum(axis=1) * leaf
    # Subtracted, so that a day with all its records is measured and filled to the whole.
    measured = (grid.sunlight * np.where(leaf[:, np.newaxis], there, False)).sum(axis=1) - filled
    assumed = np.where(light > 0, (grid.sunlight * nothing).sum(axis=1), nothing.mean(axis=1))
    fewest = np.where(there & np.isfinite(live), live, np.inf).min(axis=1)
    return {
        "total": total,
        "reasons": reasons,
        "expected": expected,
        "measured": measured,
        "filled": filled,
        "modelled": np.where(
            np.isfinite(total), np.maximum(expected - measured - filled, 0.0), 0.0
        ),
        "assumed": assumed,
        "trees": np.where(np.isfinite(fewest), fewest, 0.0).astype(int),
    }


def _few(stand, grid):
    """(day, record) bool: where a stratum has no value because it has too few live trees."""
    if "quality" not in stand:
        return np.zeros(grid.sunlight.shape, dtype=bool)
    return on_days(quality.has(stand["quality"].values, "few_trees"), grid, False)


def _with_cause(reasons, few, live, calendar):
    """The reasons of refused days, with what too few live trees have to do with them."""
    hours = few.sum(axis=1) * calendar.interval_s / 3600.0
    most = np.where(few, live, 0.0).max(axis=1)
    told = list(reasons)
    for day in np.flatnonzero(hours > 0):
        if few[day].all():
            told[day] = (
                f"too few live trees: at most {most[day]:g} at a time"
                if most[day]
                else "no instrumented tree has a value"
            )
        elif reasons[day]:
            told[day] += f" (too few live trees for {hours[day]:g} h)"
    return told


def daily_deficit(deficit, dates, calendar, rules):
    """Daily mean vapour pressure deficit [Pa] on `dates`; NaN where too few records are there."""
    mean = np.full(len(dates), np.nan)
    if deficit is None or deficit.sizes["time"] < 2:
        return mean
    ends = deficit["time"].values.astype("datetime64[s]")
    offset = np.timedelta64(round(calendar.utc_offset_h * 3600), "s")
    date = (ends + offset - np.timedelta64(1, "s")).astype("datetime64[D]")
    day = (date - dates[0]).astype(np.int64)
    values = deficit.values.astype(float)
    use = np.isfinite(values) & (day >= 0) & (day < len(dates))
    count = np.bincount(day[use], minlength=len(dates))
    total = np.bincount(day[use], weights=values[use], minlength=len(dates))
    usual_s = np.median(np.diff(ends) / np.timedelta64(1, "s"))  # a gap does not change it
    enough = count >= rules.least_records * 86400.0 / usual_s - ROUNDING
    return np.divide(total, count, out=mean, where=enough & (count > 0))
