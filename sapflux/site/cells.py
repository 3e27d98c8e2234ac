"""Kinds of cells in the site's tables: text in, numbers, dates and lists out.

A ValueError carries what is wrong and what would be right, as two arguments.
"""

import re
from datetime import date, datetime, time
from typing import Annotated

from pydantic import AfterValidator, BeforeValidator, Field

MOMENT = re.compile(r"(\d{4}-\d\d-\d\d)(?:[ T](\d\d:\d\d(?::\d\d)?))?")
ZONE = re.compile(r"\d\s*(Z|UTC|[+-]\d\d:?\d\d|[A-Z]{3,4})$")

STANDARD_TIME = "Write the site's standard time without a zone, like 2026-05-01 06:30."
WRITTEN_TIME = "Write it like 2026-05-01 or 2026-05-01 06:30."
WRITTEN_DAY = "Write it like 2026-05-01."


def _moment(cell):
    """A time as written: the site's standard time, so that a zone beside it is refused."""
    if isinstance(cell, datetime) and cell.tzinfo:
        raise ValueError(f"{cell} carries a time zone", STANDARD_TIME)
    if not isinstance(cell, str):
        return cell
    text = cell.strip()
    found = MOMENT.fullmatch(text)
    if not found and MOMENT.match(text) and ZONE.search(text):
        raise ValueError(f"{text!r} carries a time zone", STANDARD_TIME)
    if not found:
        raise ValueError(f"{text!r} is not a date or time", WRITTEN_TIME)
    try:
        clock = time.fromisoformat(found[2]) if found[2] else time()
        return datetime.combine(date.fromisoformat(found[1]), clock)
    except ValueError:
        raise ValueError(f"{text!r} is not in the calendar", WRITTEN_TIME) from None


def _day(cell):
    if not isinstance(cell, str):
        return cell
    text = cell.strip()
    if not re.fullmatch(r"\d{4}-\d\d-\d\d", text):
        raise ValueError(f"{text!r} is not a date", WRITTEN_DAY)
    try:
        return date.fromisoformat(text)
    except ValueError:
        raise ValueError(f"{text!r} is not in the calendar", WRITTEN_DAY) from None


def _numbers(cell):
    return tuple(cell.split()) if isinstance(cell, str) else cell


def month_day(value):
    """A month and day that every year has. ValueError (what, remedy) otherwise.

    >>> month_day("10-01")
    '10-01'
    """
    try:
        date.fromisoformat(f"2023-{value}")  # no leap year
    except ValueError:
        what = f"{value!r} is not a day of every year"
        raise ValueError(what, "Write month and day, like '10-01'.") from None
    return value


def _month_day_or_blank(cell):
    return month_day(cell) if cell else cell


Moment = Annotated[datetime, BeforeValidator(_moment)]
Day = Annotated[date, BeforeValidator(_day)]
Name = Annotated[str, Field(min_length=1)]
Positive = Annotated[float, Field(gt=0)]
NotNegative = Annotated[float, Field(ge=0)]
Share = Annotated[float, Field(gt=0, le=1)]
Numbers = Annotated[tuple[NotNegative, ...], BeforeValidator(_numbers)]  # parted by blanks
MonthDay = Annotated[
    str, Field(pattern=r"^(\d\d-\d\d)?$"), AfterValidator(_month_day_or_blank)
]  # blank: none
