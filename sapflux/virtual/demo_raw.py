"""Downloads of the demo site, as they came back from the field: the site's `raw` folder."""

from dataclasses import dataclass

import numpy as np

from sapflux.site.config import Layout, Log
from sapflux.virtual import demo_columns, demo_signals, loggers, mess
from sapflux.virtual import demo_plan as plan
from sapflux.virtual.seeds import generator

LAYOUTS = {
    "quoted": Layout(names_line=2, units_line=3, aggregation_line=4),
    "semicolon": Layout(
        delimiter=";", decimal=",", quote="", comment="#", names_line=2, time_columns=("Datum",),
        time_format="%d.%m.%Y %H:%M", missing_numbers=(-6999.0,),
    ),
    "plain": Layout(quote="", time_columns=("time",), time_format="%Y-%m-%dT%H:%M"),
    "tab": Layout(
        delimiter="tab", quote="", units_line=2, time_columns=("date", "clock"),
        time_format="%Y/%m/%d %H:%M:%S",
    ),
    "day_of_year": Layout(
        quote="", time_columns=("year", "day", "hhmm"), time_format="year_day_hhmm",
        missing_numbers=(-6999.0,),
    ),
}  # fmt: skip
LOGS = {
    "upper": Log(files=("raw/upper*.dat",), layout="quoted", interval_min=10, stamp="end",
                 clock="utc+1"),
    "lower": Log(files=("raw/lower*.csv",), layout="semicolon", interval_min=10, stamp="end",
                 clock="civil:Europe/Vienna"),
    "pulse_a": Log(files=("raw/pulse_a*.txt",), layout="plain", interval_min=30, stamp="end",
                   clock="utc"),
    "pulse_b": Log(files=("raw/pulse_b*.tsv",), layout="tab", interval_min=30, stamp="start",
                   clock="utc+1"),
    "weather": Log(files=("raw/weather*.csv",), layout="day_of_year", interval_min=30,
                   stamp="end", clock="utc+1"),
}  # fmt: skip
MISSING = {"upper": '"NAN"', "lower": "-6999", "weather": "-6999"}
MISSING_SHARE = {"upper": 0.0008, "lower": 0.0008, "weather": 0.0003}
# Day of each download -> (first, last moment in it), standard time; logger memories overlap.
DOWNLOADS = {
    "2031-09-03": ("2031-08-18 00:00", "2031-09-03 09:20"),
    "2031-09-18": ("2031-09-02 09:20", "2031-09-18 13:10"),
    "2031-10-07": ("2031-09-18 01:10", "2031-10-07 10:40"),
    "2031-10-27": ("2031-10-07 04:40", "2031-10-27 00:00"),
}
WEATHER_DOWNLOADS = {
    "2031-09-18": ("2031-08-18 00:00", "2031-09-18 13:00"),
    "2031-10-27": ("2031-09-17 12:00", "2031-10-27 00:00"),
}
SUFFIX = {log: settings.files[0].rpartition(".")[2] for log, settings in LOGS.items()}


@dataclass(frozen=True)
class Printed:
    """All records of a log, before they are cut into downloads; `values` (record, column)."""

    log: str
    end: np.ndarray
    stamps: list
    values: np.ndarray
    meta: list

    @property
    def layout(self):
        """The `Layout` of the log."""
        return LAYOUTS[LOGS[self.log].layout]

    def header(self, order):
        """Header lines with the columns in that order."""
        by_name = {column.name: column for column in self.meta}
        units = [by_name[name].unit for name in order]
        aggregations = [by_name[name].aggregation for name in order]
        note = f"# logger {self.log}" if self.layout.comment else f"logger {self.log}"
        return loggers.header_lines(self.layout, order, units, aggregations, note)

    def between(self, first, last, order):
        """Data lines of the records that end after `first` and up to `last` (standard time)."""
        inside = (self.end > demo_signals.standard(first)) & (
            self.end <= demo_signals.standard(last)
        )
        names = [column.name for column in self.meta]
        columns = [names.index(name) for name in order]
        return loggers.record_lines(
            self.values[np.ix_(inside, columns)],
            [self.stamps[row] for row in np.flatnonzero(inside)],
            [self.meta[column].decimals for column in columns],
            self.layout,
            MISSING.get(self.log, "NAN"),
        )


def raw_files(truth):
    """(name -> bytes of each file, rows of the truth table of the mess: file, line, what)."""
    files, told = {}, []
    for log in LOGS:
        printed = _printed(truth, log)
        order = [column.name for column in printed.meta]
        spoil = {"upper": _upper, "lower": _lower, "pulse_a": _pulse_a}.get(log, _as_is)
        spoil(printed, order, files, told)
    return files, told


def _printed(truth, log):
    settings = LOGS[log]
    layout = LAYOUTS[settings.layout]
    every = round(settings.interval_min * 60) // truth.weather.step_s
    end = truth.weather.end[every - 1 :: every]
    meta = [column for column in demo_columns.columns(truth) if column.log == log]
    made = demo_columns.values(truth, log, every)
    for column in meta:
        if log in MISSING:
            rng = generator(truth.seed, "missing", f"{log}/{column.name}")
            lost = rng.random(len(end)) < MISSING_SHARE[log]
            made[column.name] = np.where(lost, np.nan, made[column.name])
    values = np.array([made[column.name] for column in meta]).T
    stamps = loggers.stamp_cells(loggers.clock_times(end, settings), layout)
    return Printed(log, end, [layout.separator.join(row) for row in stamps], values, meta)


def _name(log, day, more=""):
    return f"{log}_{day}{more}.{SUFFIX[log]}"


def _as_is(printed, order, files, told):
    downloads = WEATHER_DOWNLOADS if printed.log == "weather" else DOWNLOADS
    for day, span in downloads.items():
        lines = [*printed.header(order), *printed.between(*span, order)]
        files[_name(printed.log, day)] = loggers.as_bytes(lines)


def _upper(printed, order, files, told):
    """A header-only file, a file saved twice, a torn end, conflicts, a new order, an open quote."""
    header = printed.header(order)
    top = len(header)
    name = _name("upper", "2031-08-17")
    files[name] = loggers.as_bytes(header)
    told.append([name, "", "header only"])
    day, *days = DOWNLOADS
    name, copy = _name("upper", day), _name("upper", day, "_copy")
    files[name] = files[copy] = loggers.as_bytes(
        [*header, *printed.between(*DOWNLOADS[day], order)]
    )
    told.append([copy, "", f"the same file as {name}"])
    name = _name("upper", days[0])
    lines = mess.torn([*header, *printed.between(*DOWNLOADS[days[0]], order)], 0.55)
    files[name] = loggers.as_bytes(lines, last_end="")
    told.append([name, len(lines), "torn last line"])
    name = _name("upper", days[1])
    first, last = DOWNLOADS[days[1]]
    new_order = [*order[5:10], *order[:5], *order[10:][::-1]]
    before = [*header, *printed.between(first, plan.REPROGRAMMED, order)]
    for at in _with_number(before, (top + 20, top + 21, top + 40), 5):
        cell = before[at - 1].split(",")[5]
        before = mess.changed_cell(before, at, ",", 5, f"{float(cell) + 0.0123:.4f}")
        told.append([name, at, f"conflicts with the download before: {order[4]}"])
    after = printed.between(plan.REPROGRAMMED, last, new_order)
    files[name] = loggers.as_bytes([*before, *printed.header(new_order), *after])
    told.append([name, len(before) + 1, f"header again, new column order, {top} lines"])
    name = _name("upper", days[2])
    lines = [*printed.header(new_order), *printed.between(*DOWNLOADS[days[2]], new_order)]
    at = top + 700
    files[name] = loggers.as_bytes(mess.open_quote(lines, at, ",", 4))
    told.append([name, at, "torn line with an open quote"])


def _with_number(lines, numbers, column):
    """Of the given lines those whose cell is not missing."""
    return [at for at in numbers if '"' not in lines[at - 1].split(",")[column]]


def _lower(printed, order, files, told):
    """Ends of lines as CR LF, an empty file, NUL bytes, trailing delimiters, civil time."""
    name = _name("lower", "2031-08-17")
    files[name] = b""
    told.append([name, "", "empty file"])
    for number, (day, span) in enumerate(DOWNLOADS.items()):
        name = _name("lower", day)
        lines = [*printed.header(order), *printed.between(*span, order)]
        if number == 1:
            at = 2 + 1500
            lines = mess.nul_bytes(lines, at, 24)
            told.append([name, at, "NUL bytes in place of the rest of the line"])
        if number == 2:
            lines = mess.trailing_delimiters(lines, ";")
            told.append([name, "", "one delimiter too many at the end of every line"])
        files[name] = loggers.as_bytes(lines, "\r\n")
        told.append([name, "", "CR LF"])
    told.append([name, "", "repeated hour at the end of daylight saving"])


def _pulse_a(printed, order, files, told):
    """A header written again in the middle of a file, in the same order."""
    _as_is(printed, order, files, told)
    day = "2031-09-18"
    name, at = _name("pulse_a", day), 400
    lines = [*printed.header(order), *printed.between(*DOWNLOADS[day], order)]
    files[name] = loggers.as_bytes(mess.with_block(lines, at, printed.header(order)))
    told.append([name, at, "header again, same order"])
