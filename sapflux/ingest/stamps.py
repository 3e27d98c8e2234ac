"""Text stamps to time as the logger's clock counts it, microseconds since 1970-01-01.

Formats of fixed width are read for all lines at once from the bytes. Others go through pandas, and
what pandas cannot read is tried alone. Hour 24 with no minutes is midnight at the end of the day.
"""

import re
from datetime import datetime, timedelta

import numpy as np
import pandas as pd

from sapflux.ingest.clock import DAY, SECOND
from sapflux.site.config import YEAR_DAY_HHMM, YEARS

UNREAD = np.iinfo(np.int64).min
WIDTHS = {"Y": 4, "m": 2, "d": 2, "H": 2, "M": 2, "S": 2, "j": 3, "y": 2}


def has_offset(layout):
    """Whether stamps carry their own offset from UTC, which then goes before the log's clock."""
    return "%z" in layout.time_format


def sane(stamps):
    """Where stamps lie in the years a logger can have written."""
    low = np.datetime64(f"{YEARS[0]}-01-01", "us").astype(np.int64)
    high = np.datetime64(f"{YEARS[1] + 1}-01-01", "us").astype(np.int64)
    return (stamps >= low) & (stamps < high)


def stamps_of(sheet, lines, positions, layout):
    """Stamps of regular lines, (n) int64 microseconds; UNREAD where the text does not read.

    lines : indices of lines with the same columns; positions : fields of the time columns.
    """
    cells = [_bounds(sheet, lines, position, layout) for position in positions]
    array = np.frombuffer(sheet.data, dtype=np.uint8)
    if layout.time_format == YEAR_DAY_HHMM:
        stamps = _day_of_year([_integers(array, *cell) for cell in cells])
    else:
        stamps = _fixed_width(array, cells, layout.time_format)
    left = np.flatnonzero(stamps == UNREAD)
    if len(left):
        parts = [
            [sheet.data[a:b].decode().strip() for a, b in zip(s[left], e[left], strict=True)]
            for s, e in cells
        ]
        stamps[left] = from_texts([" ".join(row) for row in zip(*parts, strict=True)], layout)
    return stamps


def from_texts(texts, layout):
    """Stamps of texts (the time columns joined by one blank), UNREAD where they do not read."""
    codes, unique = pd.factorize(np.array(texts, dtype=object))
    known = np.full(len(unique), UNREAD, dtype=np.int64)
    style = layout.time_format
    if style != YEAR_DAY_HHMM and not style.startswith("%Y") and len(unique) > 20:
        known = _by_pandas(unique, style)
    for at in np.flatnonzero(known == UNREAD).tolist():
        known[at] = from_text(unique[at], layout)
    return known[codes]


def _by_pandas(texts, style):
    # pandas reads "now" as the time of reading, whatever the format: only text with digits goes in
    digits = np.array([bool(re.search(r"\d", text)) for text in texts])
    try:
        read = pd.to_datetime(
            pd.Series(np.where(digits, texts, "")), format=style, errors="coerce", utc=True
        )
    except (ValueError, OverflowError):
        return np.full(len(texts), UNREAD, dtype=np.int64)
    return read.dt.tz_localize(None).to_numpy().astype("M8[us]").astype(np.int64)


def from_text(text, layout):
    """Stamp of one text (the time columns joined by one blank), UNREAD if it does not read."""
    style = layout.time_format
    if style == YEAR_DAY_HHMM:
        try:
            numbers = [float(part) for part in text.split()]
        except ValueError:
            return UNREAD
        if len(numbers) != 3 or not all(n.is_integer() and 0 <= n < 10000 for n in numbers):
            return UNREAD
        return int(_day_of_year([np.array([int(n)]) for n in numbers])[0])
    styles = [style]
    if style.endswith(".%f"):
        styles.append(style.removesuffix(".%f"))  # loggers leave out a fraction of zero
    for one in styles:
        read = _strptime(text, one)
        if read is not None:
            return read[0] - read[1]
        midnight = re.sub(r"(?<!\d)24(?=:?00)", "00", text, count=1)
        if midnight != text and "%H" in one:
            read = _strptime(midnight, one)
            if read is not None and read[0] % DAY == 0:
                return read[0] + DAY - read[1]
    return UNREAD


def _strptime(text, style):
    """(time as written, its own offset from UTC or 0 without one) in microseconds, or None."""
    try:
        moment = datetime.strptime(text, style)
    except (ValueError, re.error):
        return None
    microsecond, offset = timedelta(microseconds=1), moment.utcoffset() or timedelta()
    since = moment.replace(tzinfo=None) - datetime(1970, 1, 1)
    return since // microsecond, offset // microsecond


def _bounds(sheet, lines, position, layout):
    """Start and stop in the data of one field of each line, quotes apart."""
    array = np.frombuffer(sheet.data, dtype=np.uint8)
    first, last = sheet.first[lines], sheet.fields[lines] - 1
    marks = sheet.separators
    start = marks[first + position - 1] + 1 if position else sheet.start[lines]
    stop = sheet.stop[lines].copy()
    inner = last > position
    stop[inner] = marks[first[inner] + position]
    if layout.quote:
        mark = ord(layout.quote)
        begin = array[np.minimum(start, len(array) - 1)]
        quoted = (stop - start >= 2) & (begin == mark) & (array[stop - 1] == mark)
        start, stop = start + quoted, stop - quoted
    return start, stop


def _fixed_width(array, cells, style):
    """Stamps of a format of fixed width; UNREAD for other widths, other text, other formats."""
    count = len(cells[0][0])
    stamps = np.full(count, UNREAD, dtype=np.int64)
    plan = _plan(style)
    widths = _cell_widths(plan, len(cells)) if plan else None
    if not widths or not count:
        return stamps
    fits = np.ones(count, dtype=bool)
    for (start, stop), width in zip(cells, widths, strict=True):
        fits &= stop - start == width
    rows = np.flatnonzero(fits)
    parts = []
    for (start, _), width in zip(cells, widths, strict=True):
        parts.append(array[start[rows, None] + np.arange(width)])
        parts.append(np.full((len(rows), 1), 32, dtype=np.uint8))
    text = np.concatenate(parts[:-1], axis=1)
    good, found, at = np.ones(len(rows), dtype=bool), {}, 0
    for token, width in plan:
        piece = text[:, at : at + width]
        if token in WIDTHS and width == WIDTHS[token]:
            digits = piece - np.uint8(48)
            good &= (digits <= 9).all(axis=1)
            found[token] = digits.astype(np.int64) @ (10 ** np.arange(width)[::-1])
        else:
            good &= (piece == np.frombuffer(token[1:].encode(), dtype=np.uint8)).all(axis=1)
        at += width
    values, valid = _moment(found, len(rows))
    stamps[rows] = np.where(good & valid, values, UNREAD)
    return stamps


def _plan(style):
    """A format as (directive or "=" and literal text, width) pairs; None if not of fixed width."""
    plan = []
    for match in re.finditer(r"%(.)|([^%]+)", style):
        directive, literal = match.groups()
        if literal is not None and literal.isascii():
            plan.append(("=" + literal, len(literal)))
        elif directive in WIDTHS:
            plan.append((directive, WIDTHS[directive]))
        else:
            return None
    given = [token for token, _ in plan if not token.startswith("=")]
    dated = {"m", "d"} <= set(given) or "j" in given
    years = len({"Y", "y"} & set(given))
    return plan if years == 1 and dated and len(given) == len(set(given)) else None


def _cell_widths(plan, columns):
    """Width of each time column's text, if the format has one blank between columns."""
    if columns == 1:
        return [sum(width for _, width in plan)]
    sample = "".join(t[1:] if t.startswith("=") else "0" * width for t, width in plan)
    parts = sample.split(" ")
    return [len(part) for part in parts] if len(parts) == columns else None


def _moment(found, count):
    """Microseconds since 1970 from the numbers of a format, and where they make a date."""
    zero, one = np.zeros(count, dtype=np.int64), np.ones(count, dtype=np.int64)
    year = found.get("Y")
    if year is None:  # POSIX: 69 to 99 are the twentieth century
        year = found["y"] + np.where(found["y"] >= 69, 1900, 2000)
    if "j" in found:
        month, day = one, found["j"]
        length = np.where((year % 4 == 0) & ((year % 100 != 0) | (year % 400 == 0)), 366, 365)
    else:
        month, day = found["m"], found["d"]
        since = ((year - 1970) * 12 + month - 1).astype("M8[M]")
        length = ((since + 1).astype("M8[D]") - since.astype("M8[D]")).astype(np.int64)
    valid = (month >= 1) & (month <= 12) & (day >= 1) & (day <= length)
    hour, minute, second = (found.get(token, zero) for token in "HMS")
    valid &= (minute < 60) & (second < 60)
    valid &= (hour < 24) | ((hour == 24) & (minute == 0) & (second == 0))
    months = ((year - 1970) * 12 + month - 1).astype("M8[M]").astype("M8[D]").astype(np.int64)
    return (months + day - 1) * DAY + (hour * 3600 + minute * 60 + second) * SECOND, valid


def _integers(array, start, stop):
    """Numbers of fields that hold one to four digits, -1 for any other."""
    width = stop - start
    good = (width >= 1) & (width <= 4)
    total = np.zeros(len(start), dtype=np.int64)
    for offset in range(4):
        here = good & (offset < width)
        digits = array[np.where(here, start + offset, 0)] - np.uint8(48)
        good &= ~here | (digits <= 9)
        total = np.where(here, total * 10 + digits, total)
    return np.where(good, total, -1)


def _day_of_year(numbers):
    """Stamps from year, day of year and hhmm; hhmm 2400 is midnight at the end of the day."""
    year, day, clock = numbers
    found = {"Y": year, "j": day, "H": clock // 100, "M": clock % 100}
    stamps, valid = _moment(found, len(year))
    known = (np.minimum(np.minimum(year, day), clock) >= 0) & valid
    return np.where(known, stamps, UNREAD)
