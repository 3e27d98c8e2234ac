"""From the scaled cube to the tables of days, months, season and water years."""

import xarray as xr

from sapflux.scaling import totals
from sapflux.scaling.completeness import Completeness
from sapflux.scaling.days import Calendar, stand_days
from sapflux.site import facts


def total_tables(site, recipe, trees, days):
    """Tables of totals by name; empty where the recipe scales to neither trees nor stands.

    trees : the scaled trees, or None; days : as `days_of` gives them, or None.
    """
    tables = {}
    if trees is not None:
        rules = Completeness(**recipe.totals)
        tables["tree_daily"] = totals.tree_daily(trees, calendar_of(site), rules)
    if days is not None:
        tables["daily"] = totals.daily(days)
        tables["monthly"] = totals.monthly(days)
        tables["season"] = totals.season(days)
        tables["water_year"] = totals.water_year(days)
    return tables


def calendar_of(site):
    """How the site counts its days."""
    place = site.position
    return Calendar(
        interval_s=place.common_step_min * 60,
        utc_offset_h=place.utc_offset_h,
        latitude_deg=place.latitude_deg,
        longitude_deg=place.longitude_deg,
        water_year_start=place.water_year_start,
    )


def days_of(site, recipe, stand, weather):
    """Every day of a scaled stand, judged by the recipe's rules of completeness: `Days`."""

    def in_leaf(ends):
        laid = facts.stand_facts(site, ends)["in_leaf"]
        return laid.transpose("stand_species", "time").values

    ground = facts.stand_facts(site, stand["time"].values[:1])["sapwood_per_ground"]
    return stand_days(
        stand,
        ground.values,
        calendar_of(site),
        Completeness(**recipe.totals),
        in_leaf=in_leaf,
        vapour_pressure_deficit=_deficit(weather),
    )


def _deficit(weather):
    series = weather.get("vapour_pressure_deficit")
    if series is None:
        return None
    return xr.DataArray(series.values, {"time": series.end.astype("datetime64[ns]")}, ["time"])
