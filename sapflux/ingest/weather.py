"""Weather: a small set of series on their own clock."""

import numpy as np

from sapflux.ingest.channels import single_series
from sapflux.ingest.series import Series
from sapflux.physics import atmosphere
from sapflux.schema import QUANTITIES

DERIVED_FROM = {"vapour_pressure_deficit": ("air_temperature", "relative_humidity")}


def weather_names(site):
    """Names of the weather that the site's channels give, derived ones included."""
    logged = {
        channel.quantity
        for channel in site.table("channels")
        if channel.kind == "site" and "site" in QUANTITIES[channel.quantity].columns
    }
    derived = {name for name, parts in DERIVED_FROM.items() if set(parts) <= logged}
    return logged | derived


def weather_series(site, logs):
    """name -> `Series` of the site's weather, SI.

    The vapour pressure deficit is taken as logged, else from air temperature and relative
    humidity at their own interval (FAO-56, equation 11).
    """
    names = weather_names(site)
    found = {name: single_series(site, logs, "site", name) for name in sorted(names)}
    found = {name: series for name, series in found.items() if series is not None}
    parts = DERIVED_FROM["vapour_pressure_deficit"]
    if "vapour_pressure_deficit" not in found and set(parts) <= found.keys():
        temperature, humidity = (found[name] for name in parts)
        common, left, right = np.intersect1d(
            temperature.end, humidity.end, assume_unique=True, return_indices=True
        )
        found["vapour_pressure_deficit"] = Series(
            common,
            max(temperature.interval_s, humidity.interval_s),
            atmosphere.vapour_pressure_deficit(temperature.values[left], humidity.values[right]),
        )
    return found
