"""Which columns of a logger file tell the time, and in which format."""

from collections import Counter
from dataclasses import dataclass
from datetime import datetime, timedelta
from itertools import pairwise, product

from sapflux.site.config import YEAR_DAY_HHMM, YEARS

DATES = ("%Y-%m-%d", "%Y/%m/%d", "%d.%m.%Y", "%d/%m/%Y", "%m/%d/%Y", "%d-%m-%Y", "%m-%d-%Y",
         "%d.%m.%y", "%d/%m/%y", "%m/%d/%y", "%Y%m%d")  # fmt: skip
CLOCKS = ("%H:%M:%S", "%H:%M", "%H:%M:%S.%f", "%I:%M:%S %p", "%I:%M %p")
FORMATS = [
    *(f"{day} {clock}" for day, clock in product(DATES, CLOCKS)),
    "%Y-%m-%dT%H:%M:%S",
    "%Y-%m-%dT%H:%M",
    "%Y%m%d%H%M%S",
    "%Y%m%d%H%M",
]
LOOKED_AT = 200  # records; a day-first date shows itself within them or is asked about
FIRST_COLUMNS = 3  # a record number or the like may stand before the time
READABLE = 0.9  # of the records; torn ones may not read


@dataclass(frozen=True)
class Times:
    """Indices of the time columns, and the format of a layout."""

    columns: tuple
    format: str


def find_times(data):
    """(`Times` or None, questions) of rows of cells."""
    data = data[:LOOKED_AT]
    width = min((len(row) for row in data), default=0)
    candidates = []
    for start in range(min(FIRST_COLUMNS, width)):
        for count in (1, 2):
            if start + count <= width:
                columns = tuple(range(start, start + count))
                candidates += [Times(columns, f) for f in FORMATS if (count == 1 or " " in f)]
        if start + 3 <= width:
            candidates.append(Times((start, start + 1, start + 2), YEAR_DAY_HHMM))
        fitting = [times for times in candidates if _fits(data, times)]
        if fitting:
            return _best(data, fitting)
    return None, ()


def _fits(data, times):
    if not written_moment(data[0], times) and not (
        len(data) > 1 and written_moment(data[1], times)
    ):
        return False
    read = sum(written_moment(row, times) is not None for row in data)
    return read >= READABLE * len(data)


def _best(data, fitting):
    """The reading with the steadiest steps; a question where two are as steady."""
    scored = sorted(((_steadiness(data, t), -i) for i, t in enumerate(fitting)), reverse=True)
    best = fitting[-scored[0][1]]
    same = [fitting[-i] for score, i in scored if score == scored[0][0]]
    unlike = {tuple(written_moment(row, times) for row in data) for times in same}
    if len(unlike) > 1:
        others = " or ".join(repr(t.format) for t in same)
        return best, (f"is time_format {others}? The first records can be read as each.",)
    return best, ()


def _steadiness(data, times):
    moments = [m for m in (written_moment(row, times) for row in data) if m]
    steps = Counter(b - a for a, b in pairwise(moments) if b > a)
    return steps.most_common(1)[0][1] / len(moments) if steps else 0.0


def written_moment(cells, times):
    """The time of a record as its stamp says; None where it cannot be read."""
    parts = [cells[i].strip() for i in times.columns]
    try:
        if times.format == YEAR_DAY_HHMM:
            return _year_day_hhmm(*map(int, parts))
        return datetime.strptime(" ".join(parts), times.format)
    except ValueError:
        return None


def _year_day_hhmm(year, day, hhmm):
    hours, minutes = divmod(hhmm, 100)
    if not (YEARS[0] <= year <= YEARS[1] and 1 <= day <= 366 and 0 <= hours <= 24 and minutes < 60):
        return None
    return datetime(year, 1, 1) + timedelta(days=day - 1, hours=hours, minutes=minutes)
