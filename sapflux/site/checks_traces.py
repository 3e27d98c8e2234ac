"""Temperature traces around heat pulses: what must fit together."""

from sapflux.errors import Fault
from sapflux.schema import TRACES
from sapflux.site.config import TRACE_AFTER_S, TRACE_BEFORE_S

WINDOW = ("pulse_length_s", "window_from_s", "window_to_s")


def log_faults(reading):
    """Logs of traces that carry something else, and traces in logs that are not of traces."""
    if not reading.are_whole("logs"):
        return
    for where, row in reading.rows("channels"):
        log = reading.site.logs.get(row.log)
        if log is None or (row.quantity in TRACES) == (log.trace_step_s is not None):
            continue
        if log.trace_step_s is None:
            yield Fault(
                where,
                f"{row.quantity} stands in log {row.log!r}, which has no trace_step_s",
                "Give it in site.toml: the seconds from one row to the next around a pulse.",
            )
        else:
            yield Fault(
                where,
                f"{row.quantity} stands in log {row.log!r}, whose trace_step_s says that it holds "
                "temperature traces",
                f"Its rows stand around pulses only: it can hold {' and '.join(TRACES)}.",
            )


def probe_faults(reading):
    """Traces of probes whose pulse and reading window are not known, or not within the trace."""
    if not reading.are_whole("logs", "channels"):
        return
    logs = {}
    for _, row in reading.rows("channels"):
        log = reading.site.logs.get(row.log)
        if row.quantity in TRACES and log is not None and log.trace_step_s is not None:
            logs.setdefault(row.id, {})[row.log] = log
    for where, row in reading.rows("probes"):
        for name, log in logs.get(row.probe, {}).items():
            blank = [column for column in WINDOW if getattr(row, column) is None]
            if blank:
                yield Fault(
                    where,
                    f"{', '.join(blank)} is blank, and log {name!r} has temperature traces of "
                    f"probe {row.probe!r}",
                    "Give the length of heating, and the reading window from the end of heating.",
                )
                break
            longest = min(TRACE_AFTER_S, log.interval_min * 60 - TRACE_BEFORE_S - log.row_s)
            end = row.pulse_length_s + row.window_to_s
            if end > longest:
                yield Fault(
                    where,
                    f"the reading window ends {end:g} s after the start of heating, and traces of "
                    f"log {name!r} are read to {longest:g} s",
                    "Give a shorter window; see interval_min of the log, too.",
                )


def pair_faults(reading):
    """Points whose two traces stand in different logs."""
    if not reading.are_whole("channels"):
        return
    logs = {}
    for where, row in reading.rows("channels"):
        if row.quantity in TRACES:
            sides = logs.setdefault((row.id, row.point), {})
            sides.setdefault(row.quantity, set()).add(row.log)
            sides.setdefault("where", where)
    for (probe, point), sides in logs.items():
        where = sides.pop("where")
        if len({frozenset(names) for names in sides.values()}) > 1:
            yield Fault(
                where,
                f"the temperature traces of point {point} of probe {probe!r} stand in different "
                "logs",
                "Both needles of a point are read by one logger, in one table.",
            )


CHECKS = (log_faults, probe_faults, pair_faults)
