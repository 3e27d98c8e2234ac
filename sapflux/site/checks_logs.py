"""Logs and layouts of `site.toml`: what must fit together."""

from datetime import datetime, timedelta, timezone

from sapflux.errors import Fault
from sapflux.schema import SIGNALS
from sapflux.site.config import YEAR_DAY_HHMM

SOME_TIME = datetime(2026, 11, 23, 14, 35)  # no two parts alike, and no part of the day is zero
OWN_OFFSET = timezone(timedelta(hours=1))  # what %z is tried with


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


CHECKS = (log_faults, layout_faults, step_faults)
