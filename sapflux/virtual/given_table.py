"""The weather of a virtual copy from a table: a CSV file with the unit in each column's name."""

from math import gcd
from pathlib import Path
from typing import Annotated

import numpy as np
from pydantic import BeforeValidator, Field

from sapflux.constants import ZERO_CELSIUS
from sapflux.errors import Fault, SiteError
from sapflux.site.cells import ZONE, Moment
from sapflux.site.csvfile import read_table
from sapflux.site.tables import Row
from sapflux.virtual.copy_channels import common_step, plan_logs
from sapflux.virtual.given import BOUNDS, given_weather, whole_days

# From these on a table cannot tell day from night. Source: own judgement.
LONGEST_INTERVAL_S = 3 * 3600
SHORTEST_STEP_S = 60  # of the copy's clock; a year of shorter steps would fill the memory
OPTIONAL = ("precipitation_mm", "wind_speed_m_s")


def _utc(cell):
    """A moment as written, a final Z or zero offset dropped."""
    text = cell.strip()
    zone = ZONE.search(text)
    if zone is None:
        return text
    if zone[1] not in ("Z", "UTC", "+00:00", "+0000"):
        raise ValueError(f"{text!r} is of another zone", "Write UTC, like 2026-05-01 06:30.")
    return text[: zone.start(1)].strip()


def _between(name, per_si, zero=0.0):
    """The field of a column by the bounds of `given.BOUNDS`, in the column's unit."""
    _, low, high = BOUNDS[name]
    bounds = {"ge": low * per_si + zero} | ({} if high == np.inf else {"le": high * per_si + zero})
    return Field(**bounds)


class WeatherRow(Row):
    """One interval. Means, but for precipitation, which is the sum of the interval.

    A table without precipitation has no rain, one without wind that of the default climate.
    """

    end_utc: Annotated[Moment, BeforeValidator(_utc)]  # of the interval
    air_temperature_degC: Annotated[float, _between("air_temperature", 1.0, -ZERO_CELSIUS)]
    relative_humidity_percent: Annotated[float, _between("relative_humidity", 100.0)]
    shortwave_radiation_W_m2: Annotated[float, _between("shortwave_radiation", 1.0)]
    precipitation_mm: Annotated[float, _between("precipitation", 1.0)] | None = None
    wind_speed_m_s: Annotated[float, _between("wind_speed", 1.0)] | None = None


def read_weather(path, site):
    """A table as `Weather` on a clock that suits the table and the logs of a copy of the site.

    Columns are the fields of `WeatherRow`; delimiter, comments and encoding as of the site's own
    tables. Rows are of one regular clock, in order, and make two whole days at least.

    SiteError tells all that is wrong with the table at once, with the number of each row.
    """
    path = Path(path)
    table = read_table(path, WeatherRow)
    faults = [*table.faults, *_blanks(path, table), *_clock_faults(path, table)]
    if faults:
        raise SiteError(faults)
    end = np.array([row.end_utc for row in table.rows], "datetime64[s]")
    interval_s = int((end[1] - end[0]) / np.timedelta64(1, "s"))
    step_s = gcd(common_step(plan_logs(site).logs), interval_s)
    if step_s < SHORTEST_STEP_S:
        raise SiteError(Fault(
            str(path),
            f"rows are {interval_s} s apart, which shares no step of a minute with the logs",
            "Give rows that are whole minutes apart, like 10, 30 or 60.",
        ))  # fmt: skip
    column = {name: [getattr(row, name) for row in table.rows] for name in WeatherRow.model_fields}
    weather = given_weather(
        end,
        np.array(column["air_temperature_degC"]) + ZERO_CELSIUS,
        np.array(column["relative_humidity_percent"]) / 100.0,
        column["shortwave_radiation_W_m2"],
        *(None if column[name][0] is None else column[name] for name in OPTIONAL),
        step_s=step_s,
        position=site.position,
    )
    try:
        whole_days(weather, site.position.utc_offset_h)
    except ValueError as error:
        remedy = "Give more days, or rows that begin at midnight."
        raise SiteError(Fault(str(path), str(error), remedy)) from None
    return weather


def _blanks(path, table):
    """Faults of rows that lack what other rows have."""
    for name in OPTIONAL:
        given = [getattr(row, name) is not None for row in table.rows]
        if any(given):
            for line, there in zip(table.lines, given, strict=True):
                if not there:
                    yield Fault(f"{path}, row {line}", f"{name} is blank",
                                "Give it in every row, or take the column away.")  # fmt: skip


def _clock_faults(path, table):
    """Faults of rows that do not follow each other by the commonest step."""
    if len(table.rows) < 2:
        if not table.faults:
            yield Fault(str(path), f"there are {len(table.rows)} rows",
                        "Give two whole days at least.")  # fmt: skip
        return
    end = np.array([row.end_utc for row in table.rows], "datetime64[s]")
    gaps = np.diff(end).astype(int)
    known, counts = np.unique(gaps, return_counts=True)
    usual = int(known[np.argmax(counts)])
    if not 0 < usual <= LONGEST_INTERVAL_S:
        remedy = "Give rows in order, at most 3 h apart: longer ones hide the night."
        yield Fault(str(path), f"most rows are {_spoken(usual)} apart", remedy)
        return
    for before, line, gap in zip(table.lines, table.lines[1:], gaps.tolist(), strict=False):
        told = table.faults and line - before > 1  # a row between them has a fault of its own
        if gap != usual and not told:
            yield Fault(
                f"{path}, row {line}",
                f"end_utc is {_spoken(gap)} after the row before; most rows are {_spoken(usual)} "
                "apart",
                "Give a row for every interval, in order, each once.",
            )


def _spoken(seconds):
    """Seconds as messages write them.

    >>> _spoken(3600), _spoken(90)
    ('60 min', '1.5 min')
    """
    return f"{seconds / 60:g} min"
