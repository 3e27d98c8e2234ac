"""Logger clocks: time as written to UTC, for fixed offsets and for civil time of a zone.

Times are int64 microseconds since 1970-01-01, of the clock or of UTC.
"""

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from functools import lru_cache
from zoneinfo import ZoneInfo

import numpy as np

SECOND = 1_000_000
DAY = 86400 * SECOND


@dataclass(frozen=True)
class Readings:
    """Civil times read both ways, (n) each.

    late : UTC if the time belongs to the second pass of a repeated hour, or is unique.
    early : UTC if it belongs to the first pass (daylight time); equal to `late` where unique.
    absent : the time does not exist: clocks skip it.
    """

    late: np.ndarray
    early: np.ndarray
    absent: np.ndarray

    @property
    def repeated(self):
        """Where a time occurs twice."""
        return self.early != self.late


def fixed_offset(clock):
    """Offset of a fixed clock from UTC in microseconds; None for civil time.

    >>> fixed_offset("utc-3.5") / SECOND
    -12600.0
    """
    if clock.startswith("civil:"):
        return None
    return round(float(clock[3:] or 0) * 3600) * SECOND


def standard_offset(clock):
    """Offset from UTC in microseconds that the clock's native steps are counted from.

    For civil time that of standard time in January and July 2000, whichever is smaller.
    """
    offset = fixed_offset(clock)
    if offset is None:
        zone = ZoneInfo(clock.removeprefix("civil:"))
        offset = min(
            _offset(zone, datetime(2000, month, 1, tzinfo=UTC)) * SECOND for month in (1, 7)
        )
    return offset


def read_civil(local, zone_name):
    """Civil times as `Readings`.

    >>> local = np.array(["2024-10-27T02:30"], "M8[us]").astype(np.int64)
    >>> both = read_civil(local, "Europe/Berlin")
    >>> both.early.view("M8[us]").astype("M8[m]"), both.late.view("M8[us]").astype("M8[m]")
    (array(['2024-10-27T00:30'], dtype='datetime64[m]'), array(['2024-10-27T01:30'], dtype='datetime64[m]'))

    Source: IANA time zone data base, of the system or of the package `tzdata`.
    """  # noqa: E501
    if not len(local):
        return Readings(local, local, np.zeros(0, dtype=bool))
    years = local[[local.argmin(), local.argmax()]].view("M8[us]").astype("M8[Y]").astype(int)
    moments, offsets = _changes(zone_name, int(years[0]) + 1970, int(years[1]) + 1970)
    after = moments + offsets[1:]  # wall clock right after each change
    before = moments + offsets[:-1]  # wall clock it would have been
    index = np.searchsorted(after, local, side="right")
    late = local - offsets[index]
    last = np.maximum(index - 1, 0)
    early, absent = late, np.zeros(len(local), dtype=bool)
    if len(moments):
        repeated = (index > 0) & (local < before[last])
        early = np.where(repeated, local - offsets[last], late)
        upcoming = np.minimum(index, len(moments) - 1)
        absent = (index < len(moments)) & (local >= before[upcoming])
    return Readings(late, early, absent)


def skipped_hour(local, zone_name):
    """Wall clock times, as text, that clocks skip from and to around a time that is absent."""
    year = int(np.datetime64(int(local), "us").astype("M8[Y]").astype(int)) + 1970
    moments, offsets = _changes(zone_name, year, year)
    at = int(np.searchsorted(moments + offsets[1:], local, side="right"))
    pair = (moments[at] + offsets[at], moments[at] + offsets[at + 1])
    return tuple(str(np.datetime64(int(t), "us").astype("M8[m]"))[11:] for t in pair)


@lru_cache(maxsize=64)
def _changes(zone_name, first_year, last_year):
    """Changes of a zone's offset: UTC moments, and the offsets before the first and after each."""
    zone = ZoneInfo(zone_name)
    day = datetime(first_year - 1, 12, 1, tzinfo=UTC)
    end = datetime(last_year + 1, 2, 1, tzinfo=UTC)
    moments, offsets = [], [_offset(zone, day)]
    while day < end:
        following = day + timedelta(days=1)
        if _offset(zone, following) != offsets[-1]:
            low, high = 0, 86400
            while high - low > 1:
                middle = (low + high) // 2
                same = _offset(zone, day + timedelta(seconds=middle)) == offsets[-1]
                low, high = (middle, high) if same else (low, middle)
            moments.append(int((day + timedelta(seconds=high)).timestamp()))
            offsets.append(_offset(zone, following))
        day = following
    return np.array(moments, dtype=np.int64) * SECOND, np.array(offsets, dtype=np.int64) * SECOND


def _offset(zone, moment):
    return int(moment.astimezone(zone).utcoffset().total_seconds())
