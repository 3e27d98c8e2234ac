"""What stages may ask for beside the measured variables: facts, weather and the sun, on a block."""

import numpy as np
import xarray as xr

from sapflux.ingest.series import on_records
from sapflux.physics import sun
from sapflux.site import facts


def probe_chain_beside(site, cube, weather):
    """A function (ends, wanted) -> name -> DataArray for the chain of one method, or for scaling.

    ends : (time) datetime64[s], ends of the block's records [UTC].
    """
    probes = [str(name) for name in cube["probe"].values]
    points, interval_s = cube.sizes["point"], int(cube.attrs["interval_s"])

    def beside(ends, wanted):
        found = facts.lay_facts(site, probes, points, ends, interval_s, wanted)
        found |= _weather(weather, ends, interval_s, wanted)
        found |= _sun(site, ends, interval_s, wanted)
        return found

    return beside


def scaling_beside(site, cube, weather):
    """As `probe_chain_beside`, with the facts of trees and stands."""
    of_probes = probe_chain_beside(site, cube, weather)
    trees = list(dict.fromkeys(facts.labels(site, list(cube["probe"].values))["tree"]))
    of_trees = facts.tree_facts(site, trees)

    def beside(ends, wanted):
        found = of_probes(ends, wanted)
        if "sapwood_area" in wanted:
            found |= of_trees
        if {"sapwood_per_ground", "in_leaf"} & set(wanted):
            found |= facts.stand_facts(site, ends)
        return found

    return beside


def _weather(weather, ends, interval_s, wanted):
    return {
        name: xr.DataArray(on_records(series, ends, interval_s), dims="time")
        for name, series in weather.items()
        if name in wanted
    }


def _sun(site, ends, interval_s, wanted):
    if not {"solar_elevation", "solar_time"} & set(wanted):
        return {}
    middle = ends - np.timedelta64(interval_s, "s") // 2
    place = site.position
    elevation, solar_time = sun.position(middle, place.latitude_deg, place.longitude_deg)
    return {
        "solar_elevation": xr.DataArray(elevation, dims="time"),
        "solar_time": xr.DataArray(solar_time, dims="time"),
    }
