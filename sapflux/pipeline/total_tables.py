"""From the scaled cube to the tables of days, months, season and water years."""

import xarray as xr

from sapflux.scaling import totals
from sapflux.scaling.completeness import Completeness
from sapflux.scaling.days import Calendar, stand_days
from sapflux.site import facts


def total_tables(site, recipe, found, weather):
    """Tables of totals by name; empty where the recipe scales to neither trees nor stands."""
    place = site.position
    calendar = Calendar(
        interval_s=place.common_step_min * 60,
        utc_offset_h=place.utc_offset_h,
        latitude_deg=place.latitude_deg,
        longitude_deg=place.longitude_deg,
        water_year_start=place.water_year_start,
    )
    rules = Completeness(**recipe.totals)
    tables = {}
    if found.trees is not None:
        tables["tree_daily"] = totals.tree_daily(found.trees, calendar, rules)
    if found.stand is not None:
        days = _days(site, found, weather, calendar, rules)
        tables["daily"] = totals.daily(days)
        tables["monthly"] = totals.monthly(days)
        tables["season"] = totals.season(days)
        tables["water_year"] = totals.water_year(days)
    return tables


def _days(site, found, weather, calendar, rules):
    def in_leaf(ends):
        laid = facts.stand_facts(site, ends)["in_leaf"]
        return laid.transpose("stand_species", "time").values

    ground = facts.stand_facts(site, found.stand["time"].values[:1])["sapwood_per_ground"]
    return stand_days(
        found.stand,
        ground.values,
        calendar,
        rules,
        in_leaf=in_leaf,
        vapour_pressure_deficit=_deficit(weather),
    )


def _deficit(weather):
    series = weather.get("vapour_pressure_deficit")
    if series is None:
        return None
    return xr.DataArray(series.values, {"time": series.end.astype("datetime64[ns]")}, ["time"])
