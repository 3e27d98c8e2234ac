"""Weather of a virtual site from given series, such as those of a station or a typical year."""

from dataclasses import fields, replace

import numpy as np

from sapflux.physics import atmosphere
from sapflux.virtual.resample import by_sun, finer
from sapflux.virtual.weather import DAY_S, Climate, Weather

# Name of a given series -> what it must keep to, in words, and the bounds.
BOUNDS = {
    "air_temperature": ("kelvin between 200 and 340", 200.0, 340.0),
    "relative_humidity": ("shares between 0 and 1", 0.0, 1.0),
    "shortwave_radiation": ("W m-2 between 0 and 1500", 0.0, 1500.0),
    "precipitation": ("kg m-2 in the interval, not below 0", 0.0, np.inf),
    "wind_speed": ("m s-1 between 0 and 100", 0.0, 100.0),
}


def given_weather(
    end, air_temperature, relative_humidity, shortwave_radiation, precipitation=None,
    wind_speed=None, *, step_s, position=None,
):  # fmt: skip
    """Given series on a clock of `step_s` seconds, as `Weather`.

    Every given interval keeps its mean, and so does every day: temperature and humidity follow
    straight lines between the middles of intervals (`resample.finer`), radiation the sun above
    the atmosphere (`resample.by_sun`), rain and wind are even within an interval.

    end : (interval) UTC ends, datetime64, regular; air_temperature [K], relative_humidity [1] and
    shortwave_radiation [W m-2] : means; precipitation [kg m-2] : sums, None for no rain;
    wind_speed [m s-1] : means, None for that of the default climate. step_s : whole steps make an
    interval. position : latitude_deg, longitude_deg, for the sun; None spreads radiation evenly.

    ValueError tells all that is wrong with the series at once.
    """
    end = np.asarray(end).astype("datetime64[s]")
    count = len(end)
    given = {
        "air_temperature": air_temperature,
        "relative_humidity": relative_humidity,
        "shortwave_radiation": shortwave_radiation,
        "precipitation": np.zeros(count) if precipitation is None else precipitation,
        "wind_speed": np.full(count, Climate.wind_mean) if wind_speed is None else wind_speed,
    }
    given = {name: np.asarray(values, float) for name, values in given.items()}
    interval_s, faults = _interval(end, step_s)
    for name, values in given.items():
        words, low, high = BOUNDS[name]
        if values.shape != (count,):
            faults.append(f"{name} has shape {values.shape}; end has {count} intervals")
        elif not ((values >= low) & (values <= high)).all():
            wrong = values[~((values >= low) & (values <= high))]
            faults.append(f"{name} holds {wrong[0]:g} ({len(wrong)} such); it is in {words}")
    if faults:
        raise ValueError("; ".join(faults))
    parts = interval_s // step_s
    temperature = finer(given["air_temperature"], parts)
    humidity = finer(given["relative_humidity"], parts, 0.0, 1.0)
    light = given["shortwave_radiation"]
    begin = end[0] - np.timedelta64(interval_s, "s")
    return Weather(
        begin + (np.arange(count * parts) + 1) * np.timedelta64(step_s, "s"),
        step_s,
        temperature,
        humidity,
        atmosphere.vapour_pressure_deficit(temperature, humidity),
        by_sun(light, end, interval_s, parts, position) if position else np.repeat(light, parts),
        np.repeat(given["precipitation"] / parts, parts),
        np.repeat(given["wind_speed"], parts),
    )


def whole_days(weather, offset_h):
    """(`Weather` of the whole days of standard time, their first date, how many).

    Parts of days at either end are left out. ValueError for less than 2 whole days, and where no
    step begins at midnight.
    """
    shift = round(offset_h * 3600) - weather.step_s
    begin = weather.end + np.timedelta64(shift, "s")
    midnights = np.flatnonzero(begin == begin.astype("datetime64[D]"))
    per_day = DAY_S // weather.step_s
    days = (len(begin) - midnights[0]) // per_day if len(midnights) else 0
    if DAY_S % weather.step_s or days < 2:
        raise ValueError(
            f"the weather has {days} whole days of standard time (UTC{offset_h:+g} h) that begin "
            "with a step at midnight; a copy has at least 2"
        )
    kept = slice(midnights[0], midnights[0] + days * per_day)
    series = {
        one.name: getattr(weather, one.name)[kept] for one in fields(weather)
        if one.name != "step_s"
    }  # fmt: skip
    return replace(weather, **series), begin[midnights[0]].astype("datetime64[D]"), int(days)


def _interval(end, step_s):
    """(seconds of the given interval, faults of the clock)."""
    gaps = np.unique(np.diff(end).astype(int))
    if len(gaps) != 1 or gaps[0] <= 0:
        return step_s, [
            f"end has steps of {', '.join(map(str, gaps[:5])) or 'no'} s; it is a regular clock "
            "of at least 2 intervals"
        ]
    interval_s = int(gaps[0])
    if step_s <= 0 or interval_s % step_s:
        return step_s, [f"step_s is {step_s}; whole steps make an interval of {interval_s} s"]
    return interval_s, []
