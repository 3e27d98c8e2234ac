"""Global attributes of the netCDF files of a run, by CF and ACDD-1.3."""

from datetime import timedelta

import numpy as np
import pandas as pd

import sapflux
from sapflux import schema
from sapflux.pipeline.identity import canonical_json

NEEDED = ("date_created", "history", "identity", "inputs", "recipe")
CAUTION = (
    "Estimates of transpiration, not of evapotranspiration: interception and soil evaporation are "
    "separate. The spread between probes is no interval of the total. NaN means absent; the reason "
    "is in the flags. Negative flow is measured and kept."
)
# level -> title, summary, keywords
LEVELS = {
    "probes": (
        "Sap flux density of the probes",
        "Sap flux density per sapwood area at every measuring point of every probe, on the common "
        "step of the site, with its quality flags and its origin.",
        "sap flow, sap flux density, transpiration, thermal probe",
    ),
    "trees": (
        "Sap flow of the trees",
        "Sap flow of every instrumented tree, on the common step of the site, with the share that "
        "rests on filled values.",
        "sap flow, tree water use, transpiration, thermal probe",
    ),
    "stand": (
        "Transpiration of the stands",
        "Transpiration per ground area of every species of every stand, on the common step of the "
        "site, with the trees that carry it and the share that rests on filled values.",
        "transpiration, stand water use, sap flow, forest hydrology",
    ),
    "native": (
        "Signals of the probes at their native interval",
        "Measured signals of the probes as logged, what every step of the treatment made of them, "
        "and their quality flags, at the native interval of the logger.",
        "sap flow, thermal probe, logger, signal",
    ),
    "origin": (
        "Origin of every sample",
        "File and line of every sample that was kept, log by log.",
        "sap flow, logger, provenance",
    ),
}


def global_attributes(level, site, span, attributes):
    """Global attributes of a file.

    level : a key of `LEVELS`; site : the `Site`; span : (start, end, step in seconds), both
    datetime64[s] UTC; attributes : what the run says of itself, needed `date_created` (ISO time),
    `history` (lines, in order), `identity`, `inputs` (file -> SHA-256), `recipe` (resolved), and
    any global attribute of the conventions, which goes before the one made here.

    ValueError where one of the needed is missing. The only time in it is `date_created`.
    """
    missing = [name for name in NEEDED if name not in attributes]
    if missing:
        raise ValueError(f"attributes of the run are missing: {', '.join(missing)}")
    title, summary, keywords = LEVELS[level]
    created, version = attributes["date_created"], sapflux.__version__
    made = {
        "Conventions": schema.CONVENTIONS,
        "title": f"{title} at {site.position.name}",
        "summary": summary,
        "keywords": keywords,
        "comment": CAUTION,
        "id": f"{site.key}.{level}.{attributes['identity']}",
        "source": f"sapflux {version}",
        "processing_level": "physical quantities with quality flags",
        "standard_name_vocabulary": "CF Standard Name Table v93",
        "date_created": created,
        "date_modified": created,
        "date_metadata_modified": created,
        "instrument": "thermal sap flow probes",
        "product_version": attributes["identity"],
        "history": "\n".join([f"{created} sapflux {version}: {site.key}", *attributes["history"]]),
        **_extent(site.position),
        **_coverage(*span),
        "sapflux_version": version,
        "sapflux_identity": attributes["identity"],
        "sapflux_recipe": canonical_json(attributes["recipe"]),
        "sapflux_inputs_sha256": canonical_json(attributes["inputs"]),
    }
    given = {name: value for name, value in attributes.items() if name not in NEEDED and value}
    return made | given


def _extent(position):
    latitude, longitude = position.latitude_deg, position.longitude_deg
    return {
        "geospatial_bounds": f"POINT ({latitude} {longitude})",
        "geospatial_bounds_crs": "EPSG:4326",
        "geospatial_bounds_vertical_crs": "EPSG:5714",  # height above mean sea level; from memory
        "geospatial_lat_min": latitude,
        "geospatial_lat_max": latitude,
        "geospatial_lat_units": "degrees_north",
        "geospatial_lat_resolution": "one point for the site",
        "geospatial_lon_min": longitude,
        "geospatial_lon_max": longitude,
        "geospatial_lon_units": "degrees_east",
        "geospatial_lon_resolution": "one point for the site",
        "geospatial_vertical_min": position.elevation_m,
        "geospatial_vertical_max": position.elevation_m,
        "geospatial_vertical_units": "m",
        "geospatial_vertical_positive": "up",
        "geospatial_vertical_resolution": "one point for the site",
    }


def _coverage(start, end, step_s):
    length = timedelta(seconds=int((end - start) / np.timedelta64(1, "s")))
    return {
        "time_coverage_start": f"{start}Z",
        "time_coverage_end": f"{end}Z",
        "time_coverage_duration": pd.Timedelta(length).isoformat(),
        "time_coverage_resolution": f"PT{int(step_s)}S",
    }
