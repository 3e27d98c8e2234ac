"""Text of logger files: the layouts of a site, written."""

from datetime import UTC, datetime, timedelta, timezone
from zoneinfo import ZoneInfo

import numpy as np

ROWS_AT_ONCE = 4000  # bounds the memory of numbers on their way to text
WORDS = {"-inf": "ERROR", "inf": "INF"}  # what a logger may write where it has no number


def clock_times(end, log, zoned=False):
    """What the logger's clock showed at each record, as `datetime`s.

    end : (record) datetime64[s], end of the interval in UTC; log : clock, stamp, interval_min as
    in `site.toml`; zoned : keep the clock's offset from UTC, for stamps that print it.
    """
    if log.stamp == "start":
        end = end - np.timedelta64(round(log.interval_min * 60), "s")
    zone = _zone(log.clock)
    moments = (datetime.fromtimestamp(int(s), UTC) for s in end.astype("datetime64[s]").astype(int))
    shown = (moment.astimezone(zone) for moment in moments)
    return list(shown) if zoned else [moment.replace(tzinfo=None) for moment in shown]


def stamp_cells(times, layout):
    """The time columns of each record: a list of tuples of text.

    >>> from sapflux.site.config import Layout
    >>> layout = Layout(time_columns=("y", "d", "hm"), time_format="year_day_hhmm")
    >>> stamp_cells([datetime(2031, 9, 2, 0, 0), datetime(2031, 9, 2, 0, 30)], layout)
    [('2031', '244', '2400'), ('2031', '245', '30')]
    """
    if layout.time_format == "year_day_hhmm":
        return [_year_day_hhmm(time) for time in times]
    parts = layout.time_format.split(" ")
    columns = len(layout.time_columns)
    forms = parts if columns == len(parts) else [layout.time_format]
    cells = [tuple(time.strftime(form) for form in forms) for time in times]
    mark = layout.quote if layout.quote and columns == 1 and layout.delimiter == "," else ""
    return [tuple(f"{mark}{cell}{mark}" for cell in row) for row in cells]


def header_lines(layout, names, units, aggregations, note):
    """The lines at the top of a file: names, units and aggregation where the layout has them.

    names, units, aggregations : of the value columns in file order; note : text for lines that
    carry none of the three.
    """
    quoted = layout.quote and layout.delimiter == ","

    def line(cells):
        marked = [f"{layout.quote}{cell}{layout.quote}" for cell in cells] if quoted else cells
        return layout.separator.join(marked if quoted else [in_quotes(c, layout) for c in cells])

    empty = "-" if layout.delimiter == "space" else ""  # blanks in a row are one delimiter
    blank = [empty] * (len(layout.time_columns) - 1)
    units = [cell or empty for cell in units]
    aggregations = [cell or empty for cell in aggregations]
    lines = {
        layout.names_line: line([*layout.time_columns, *names]),
        layout.units_line: line([empty, *blank, *units]),
        layout.aggregation_line: line([empty, *blank, *aggregations]),
    }
    return [lines.get(number, line([note])) for number in range(1, layout.first_data_line + 1)]


def in_quotes(cell, layout):
    """A cell that holds the delimiter in quotes, any other as it is.

    >>> from sapflux.site.config import Layout
    >>> in_quotes("2031-05-01 10:00", Layout(delimiter="space")), in_quotes("1.5", Layout())
    ('"2031-05-01 10:00"', '1.5')
    """
    marked = layout.quote and layout.separator in cell and not cell.startswith(layout.quote)
    return f"{layout.quote}{cell}{layout.quote}" if marked else cell


def record_lines(values, stamps, decimals, layout, missing, labels=()):
    """Data lines: one a record, or of a long table one a record and column.

    values : (record, column), NaN where there is `missing`, infinite where there is one of `WORDS`;
    stamps : (record) time cells, joined; decimals : (column); labels : (column) name cells of a
    long table, joined.

    >>> from sapflux.site.config import Layout
    >>> layout = Layout(delimiter=";", decimal=",", quote="")
    >>> record_lines(np.array([[1.25, np.nan], [-0.01, 7.0]]), ["a", "b"], [1, 0], layout, "-6999")
    ['a;1,2;-6999', 'b;0,0;7']
    """
    steps = 0.5 * 10.0 ** -np.array(decimals, float)
    values = np.where(np.abs(values) <= steps, 0.0, values)  # no minus before a rounded zero
    # Cells are joined by blanks first, which no number holds, so that a decimal comma can be set.
    form, separator, lines = " ".join(f"%.{count}f" for count in decimals), layout.separator, []
    for first in range(0, len(values), ROWS_AT_ONCE):
        block, here = values[first : first + ROWS_AT_ONCE], stamps[first : first + ROWS_AT_ONCE]
        texts = "\n".join([form % tuple(row) for row in block.tolist()])
        if layout.decimal != ".":
            texts = texts.replace(".", layout.decimal)
        if np.isnan(block).any():
            texts = texts.replace("nan", missing)
        if np.isinf(block).any():
            for number, word in WORDS.items():
                texts = texts.replace(number, word)
        if not layout.long:
            texts = texts.replace(" ", separator).split("\n")
            lines += [f"{s}{separator}{text}" for s, text in zip(here, texts, strict=True)]
            continue
        for stamp, text in zip(here, texts.split("\n"), strict=True):
            cells = zip(labels, text.split(" "), strict=True)
            lines += [f"{stamp}{separator}{label}{separator}{cell}" for label, cell in cells]
    return lines


def as_bytes(lines, line_end="\n", last_end=None):
    """Lines as the bytes of a file; `last_end` ends the last line in place of `line_end`."""
    if not lines:
        return b""
    text = line_end.join(lines) + (line_end if last_end is None else last_end)
    return text.encode("utf-8")


def _year_day_hhmm(time):
    day, hhmm = time, time.hour * 100 + time.minute
    if hhmm == 0:
        day, hhmm = time - timedelta(days=1), 2400
    return str(day.year), str(day.timetuple().tm_yday), str(hhmm)


def _zone(clock):
    if clock.startswith("civil:"):
        return ZoneInfo(clock.removeprefix("civil:"))
    return timezone(timedelta(hours=float(clock.removeprefix("utc") or 0)))
