"""Weather of a virtual site: a stochastic season for a latitude and a climate, SI units."""

from dataclasses import dataclass, replace

import numpy as np
from scipy.signal import lfilter

from sapflux.physics import atmosphere, sun
from sapflux.virtual.seeds import generator

DAY_S = 86400


@dataclass(frozen=True)
class Sky:
    """One kind of day. Shares are of the clear sky; temperatures in K.

    `depression` is the night's lowest temperature minus the dew point: negative means that air
    reaches saturation before dawn.
    """

    clearness: float
    clearness_spread: float
    half_range: float
    depression: float
    depression_spread: float
    rain_chance: float


@dataclass(frozen=True)
class Climate:
    """A climate as a Markov chain of skies, one a day.

    `chances[i][j]` is the chance that sky j follows sky i. All values are invented; they are
    plausible for a mountain forest of the middle latitudes in late summer and autumn.
    """

    yearly_mean: float = 281.0  # K
    yearly_swing: float = 9.0  # K, half of warmest minus coldest month
    warmest_day: float = 205.0  # day of year
    anomaly_spread: float = 1.8  # K, of daily means about the season
    anomaly_memory: float = 0.7  # 1, of one day on the next
    skies: tuple = (
        Sky(0.25, 0.10, 2.5, -0.8, 0.8, 0.85),  # wet
        Sky(0.60, 0.12, 4.5, 0.7, 1.0, 0.15),  # changeable
        Sky(0.90, 0.05, 6.0, 3.0, 1.0, 0.0),  # dry
    )
    chances: tuple = ((0.50, 0.40, 0.10), (0.25, 0.50, 0.25), (0.03, 0.12, 0.85))
    rain_mean: float = 11.0  # mm of a rainy day
    wind_mean: float = 1.6  # m s-1


def climate_at(latitude_deg, elevation_m):
    """The default climate moved to another latitude and elevation.

    The yearly mean at sea level falls from 300 K at the equator with the square of the sine of
    latitude, through the default climate at 46 degrees and 880 m; 5.5 K less per km of elevation.
    The yearly swing grows with the sine of latitude, its warmest day is half a year later in the
    south. Skies and rain stay as they are. Source: own judgement, rough and plausible.

    >>> round(climate_at(46.12, 880.0).yearly_mean, 2), round(climate_at(0.0, 0.0).yearly_mean)
    (281.0, 300)
    """
    home, sine = Climate(), abs(np.sin(np.radians(latitude_deg)))
    sine_home = np.sin(np.radians(46.12))
    fall = (300.0 - home.yearly_mean - 0.0055 * 880.0) / sine_home**2
    mean = 300.0 - fall * sine**2 - 0.0055 * elevation_m
    swing = home.yearly_swing * sine / sine_home
    later = 182.6 if latitude_deg < 0.0 else 0.0
    return replace(home, yearly_mean=float(mean), yearly_swing=float(swing),
                   warmest_day=home.warmest_day - later)  # fmt: skip


@dataclass(frozen=True)
class Weather:
    """Series on one regular clock. Each value holds for the interval that ends at `end` (UTC)."""

    end: np.ndarray  # datetime64[s]
    step_s: int
    air_temperature: np.ndarray  # K
    relative_humidity: np.ndarray  # 1
    vapour_pressure_deficit: np.ndarray  # Pa
    shortwave_radiation: np.ndarray  # W m-2
    precipitation: np.ndarray  # kg m-2 in the interval
    wind_speed: np.ndarray  # m s-1


def stochastic_weather(climate, position, first_day, days, step_s, seed):
    """Weather of `days` days from `first_day` (site's standard time), as `Weather`.

    position : latitude_deg, longitude_deg, elevation_m, utc_offset_h. step_s must divide a day.
    Daily values are drawn, then joined smoothly: temperature has its minimum at 06:00 and its
    maximum at 15:00; the vapour pressure follows the dew point but never exceeds saturation.
    """
    count = days * DAY_S // step_s
    offset = np.timedelta64(round(position.utc_offset_h * 3600), "s")
    start = np.datetime64(first_day, "s") - offset
    end = start + (np.arange(count) + 1) * np.timedelta64(step_s, "s")
    middle = (np.arange(count) + 0.5) * (step_s / DAY_S)  # days since first_day, standard time
    daily = _daily(climate, np.datetime64(first_day, "D"), days, seed)
    temperature = _temperature(daily, middle)
    dew_point = np.interp(middle, np.arange(days + 1) + 0.25, daily["dew_point"])
    saturated = atmosphere.saturation_vapour_pressure(temperature)
    humidity = atmosphere.saturation_vapour_pressure(dew_point) / saturated
    rain = _rain(climate, daily, days, step_s, seed)
    raining = rain > 0.0
    humidity = np.where(raining, np.maximum(humidity, 0.93), humidity)
    humidity = np.minimum(humidity, 0.998)
    clearness = _clearness(daily, middle, seed)
    above = sun.horizontal_irradiance_above_atmosphere(
        end - np.timedelta64(step_s, "s") // 2, position.latitude_deg, position.longitude_deg
    )
    # Clear sky: Allen et al. (1998), FAO-56, equation 37.
    clear_sky = (0.75 + 2e-5 * position.elevation_m) * above
    gusts = _memory(generator(seed, "wind").normal(0.0, 0.35, count), 0.98)
    bright = 0.6 + 0.6 * clear_sky / 1000.0
    return Weather(
        end,
        step_s,
        temperature,
        humidity,
        saturated * (1.0 - humidity),
        clear_sky * np.where(raining, np.minimum(clearness, 0.2), clearness),
        rain,
        climate.wind_mean * bright * np.exp(gusts),
    )


def soil_water(weather, storage=110.0, start=0.85, draw=2.2, throughfall=0.8):
    """Relative extractable water of the root zone [1] at each record, between 0 and 1.

    A bucket: `storage` [kg m-2] takes `throughfall` [1] of the rain and loses `draw` [kg m-2 d-1]
    in a day of 200 W m-2, in proportion to radiation and slower below half full.
    """
    gain = throughfall * weather.precipitation / storage
    loss = draw * weather.shortwave_radiation / 200.0 * weather.step_s / DAY_S / storage
    level = np.empty(len(weather.end))
    now = start
    for index in range(len(level)):
        now = min(now + gain[index] - loss[index] * min(1.0, 2.0 * now), 1.0)
        level[index] = now
    return level


def quiet_nights(weather, offset_h, highest_deficit=50.0, hours=2.0):
    """Whether the air of each night had a deficit below `highest_deficit` [Pa] before sunrise.

    (day) bool, by days of standard time: mean over the last `hours` before the first light.
    """
    records = round(hours * 3600 / weather.step_s)
    days = (weather.end - np.timedelta64(1, "s") + _hours(offset_h)).astype("datetime64[D]")
    quiet = []
    for day in np.unique(days):
        of_day = np.flatnonzero(days == day)
        dawn = of_day[np.argmax(weather.shortwave_radiation[of_day] > 0.0)]
        before = weather.vapour_pressure_deficit[max(dawn - records, 0) : dawn]
        quiet.append(bool(before.mean() < highest_deficit))
    return np.array(quiet)


def _hours(hours):
    return np.timedelta64(round(hours * 3600), "s")


def _daily(climate, first_day, days, seed):
    """Values of each day, and of one day more so that the last one can be joined to a next."""
    count = days + 1
    rng = generator(seed, "sky")
    chances = np.cumsum(np.array(climate.chances), axis=1)
    kind = np.empty(count, dtype=int)
    kind[0] = 1
    for day, draw in enumerate(rng.random(count - 1), start=1):
        kind[day] = min(int(np.searchsorted(chances[kind[day - 1]], draw)), len(chances) - 1)
    skies = [climate.skies[index] for index in kind]
    rng = generator(seed, "daily weather")
    number = (first_day - first_day.astype("datetime64[Y]")).astype(int) + 1 + np.arange(count)
    season = np.cos(2.0 * np.pi * (number - climate.warmest_day) / 365.25)
    memory = climate.anomaly_memory
    shocks = rng.normal(0.0, climate.anomaly_spread * np.sqrt(1.0 - memory**2), count)
    mean = climate.yearly_mean + climate.yearly_swing * season + _memory(shocks, memory)
    half_range = np.array([s.half_range for s in skies]) * rng.uniform(0.85, 1.15, count)
    clearness = np.array([rng.normal(s.clearness, s.clearness_spread) for s in skies])
    depression = np.array([rng.normal(s.depression, s.depression_spread) for s in skies])
    return {
        "kind": kind,
        "mean": mean,
        "half_range": half_range,
        "clearness": np.clip(clearness, 0.08, 1.0),
        "dew_point": mean - half_range - depression,
        "rain_chance": np.array([s.rain_chance for s in skies]),
    }


def _temperature(daily, middle):
    """Air temperature [K]: lowest at 06:00, highest at 15:00, cosines between."""
    nodes = np.arange(len(daily["mean"])) + 0.5
    hour = (middle * 24.0 - 6.0) % 24.0
    rising = -np.cos(np.pi * hour / 9.0)
    falling = np.cos(np.pi * (hour - 9.0) / 15.0)
    wave = np.where(hour < 9.0, rising, falling)
    mean = np.interp(middle, nodes, daily["mean"])
    return mean + np.interp(middle, nodes, daily["half_range"]) * wave


def _clearness(daily, middle, seed):
    """Share of the clear-sky radiation: steady on dry days, ragged under broken cloud."""
    level = daily["clearness"][middle.astype(int)]
    ragged = _memory(generator(seed, "cloud").normal(0.0, 0.30, len(middle)), 0.80)
    return np.clip(level * (1.0 + 2.0 * level * (1.0 - level) * ragged), 0.05, 1.0)


def _rain(climate, daily, days, step_s, seed):
    """Rain of each record [kg m-2]: at most one event a day, of even intensity."""
    rng = generator(seed, "rain")
    per_day = DAY_S // step_s
    rain = np.zeros(days * per_day)
    for day in range(days):
        chance, begin, length, depth = rng.random(), rng.random(), rng.random(), rng.exponential()
        if chance < daily["rain_chance"][day]:
            first = day * per_day + int(begin * 0.8 * per_day)
            count = max(int((0.08 + 0.3 * length) * per_day), 1)
            there = rain[first : first + count]
            there += depth * climate.rain_mean / count
    return rain


def _memory(shocks, memory):
    """First-order memory: each value is `memory` times the one before plus its shock."""
    return lfilter([1.0], [1.0, -memory], shocks)
