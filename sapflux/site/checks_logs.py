"""Logs and layouts of `site.toml`: what must fit together."""

from datetime import datetime, timedelta, timezone
from zoneinfo import ZoneInfo

from sapflux.errors import Fault
from sapflux.schema import SIGNALS
from sapflux.site.config import YEAR_DAY_HHMM

SOME_TIME = datetime(2026, 11, 23, 14, 35)  # no two parts alike, and no part of the day is zero
# Standard time lies this close to mean solar time, and clocks of loggers to standard time, h. The
# widest in use is about 3 h, at the western end of countries with one time. Source: own judgement.
FARTHEST_H = 3.0
DEG_PER_H = 15.0  # the earth's turn
SEASONS = (datetime(2026, 1, 1), datetime(2026, 7, 1))  # standard time is the lesser offset
OWN_OFFSET = timezone(timedelta(hours=1))  # what %z is tried with


def offset_faults(reading):
    """A standard time that is not the site's by its longitude, or logs on clocks of elsewhere."""
    if not reading.are_whole("site"):
        return
    position, path = reading.site.position, f"{reading.site.folder}/site.toml"
    offset, solar = position.utc_offset_h, position.longitude_deg / DEG_PER_H
    # The date line is bent: offsets that differ by a day keep the same time of day.
    if abs((offset - solar + 12.0) % 24.0 - 12.0) > FARTHEST_H:
        yield Fault(
            f"{path}, [site]",
            f"utc_offset_h is {offset:g}, and by longitude_deg {position.longitude_deg:g} the sun "
            f"is {solar:+.1f} h from UTC",
            f"They lie within {FARTHEST_H:g} h of each other: mend the one that is wrong; east is "
            "positive in both.",
        )
        return
    for name, log in reading.site.logs.items():
        clock = _standard_offset(log.clock)
        if clock is not None and abs(clock - offset) > FARTHEST_H:
            yield Fault(
                f"{path}, [logs.{name}]",
                f"clock {log.clock!r} has the standard offset {clock:g} h, and utc_offset_h of the "
                f"site is {offset:g}",
                f"They lie within {FARTHEST_H:g} h of each other, unless the clock keeps 'utc': "
                "mend the one that is wrong.",
            )


def _standard_offset(clock):
    """Standard time of a log's clock minus UTC [h]; None where the clock keeps UTC itself."""
    kind, _, zone = clock.partition(":")
    if kind != "civil":
        return float(clock[3:] or 0) or None
    hours = {moment.replace(tzinfo=ZoneInfo(zone)).utcoffset() for moment in SEASONS}
    hours = {one / timedelta(hours=1) for one in hours}
    return None if hours == {0.0} else min(hours)


def log_faults(reading):
    """Logs whose layout is not there."""
    for name, log in reading.site.logs.items():
        where = f"{reading.site.folder}/site.toml, [logs.{name}]"
        yield from reading.unknown(where, "layout", "layouts", "name", log.layout)


def layout_faults(reading):
    """Layouts whose lines or times contradict themselves."""
    for name, layout in reading.site.layouts.items():
        where = f"{reading.site.folder}/site.toml, [layouts.{name}]"
        yield from _line_faults(where, layout)
        yield from _time_faults(where, layout)


def _line_faults(where, layout):
    lines = {"names_line": layout.names_line, "units_line": layout.units_line,
             "aggregation_line": layout.aggregation_line}  # fmt: skip
    seen = {}
    for key, line in lines.items():
        if line and line in seen:
            yield Fault(
                where,
                f"{seen[line]} and {key} are both {line}",
                "Give each its own line of the file, or 0 where there is none.",
            )
        seen.setdefault(line, key)
    if 0 < layout.header_lines < max(lines.values()):
        yield Fault(
            where,
            f"header_lines is {layout.header_lines}, and a header line stands in "
            f"line {max(lines.values())}",
            "Count all lines above the first record, or leave header_lines out.",
        )


def _time_faults(where, layout):
    columns = len(layout.time_columns)
    if not all(name.strip() for name in layout.time_columns):
        yield Fault(
            where,
            f"time_columns is {list(layout.time_columns)}, and a name is blank",
            "Columns are found by name: see that names_line is the line of the names, or name the "
            "column in a copy of the file.",
        )
    if layout.time_format == YEAR_DAY_HHMM:
        if columns != 3:
            yield Fault(
                where,
                f"time_format '{YEAR_DAY_HHMM}' takes three columns and "
                f"time_columns names {columns}",
                "Name year, day of year and hhmm.",
            )
        return
    some = SOME_TIME.replace(tzinfo=OWN_OFFSET) if "%z" in layout.time_format else SOME_TIME
    try:
        back = datetime.strptime(some.strftime(layout.time_format), layout.time_format)
    except ValueError:
        back = None
    if back != some:
        yield Fault(
            where,
            f"time_format {layout.time_format!r} does not say date, hour and minute",
            "Use strptime codes such as '%Y-%m-%d %H:%M:%S', with %z where a stamp carries its "
            f"own offset from UTC, or '{YEAR_DAY_HHMM}'.",
        )


def step_faults(reading):
    """Logs of sap-flow signals that do not fit into the common step."""
    if not reading.are_whole("site", "logs"):
        return
    signals = {*SIGNALS["heat_dissipation"], *SIGNALS["heat_ratio"]}
    logs = {row.log for row in reading.site.table("channels") if row.quantity in signals}
    step = reading.site.position.common_step_min
    for name in sorted(logs & reading.site.logs.keys()):
        interval = reading.site.logs[name].interval_min
        if step % interval:
            yield Fault(
                f"{reading.site.folder}/site.toml, [site]",
                f"common_step_min is {step}, no multiple of the {interval:g} min of log {name!r}",
                "Give minutes that hold whole intervals of every log of sap-flow signals.",
            )


CHECKS = (offset_faults, log_faults, layout_faults, step_faults)
