"""Heating cycles of `probes.csv`: what must fit together, and with the logs and the clock."""

from sapflux.constants import LONGEST_CYCLE_S
from sapflux.errors import Fault
from sapflux.schema import SIGNALS
from sapflux.site.reading import overlap

HOUR_MIN = 60.0
LONGEST_MIN = LONGEST_CYCLE_S / 60.0


def cycle_faults(reading):
    """Heating cycles that cannot be, or that cannot be told from the records."""
    for where, row in reading.rows("probes"):
        on, off = row.heating_on_min, row.heating_off_min
        if on is None and off is None:
            continue
        if row.method != "heat_dissipation":
            yield Fault(
                where,
                f"probe {row.probe!r} has a heating cycle and is of the method {row.method}",
                "Leave heating_on_min and heating_off_min blank: cycles are of heat dissipation.",
            )
        elif on is None or off is None:
            given, missing = ("heating_on_min", "heating_off_min")[:: 1 if off is None else -1]
            yield Fault(
                where,
                f"probe {row.probe!r} has {given} and no {missing}",
                "Give both, or neither for a needle heated without a break.",
            )
        elif on + off > LONGEST_MIN:
            yield Fault(
                where,
                f"the heating cycle of probe {row.probe!r} lasts {on + off:g} min",
                f"Give minutes, at most {LONGEST_MIN:g} together: cycles in use last 20 to 60.",
            )
        else:
            yield from _record_faults(reading, where, row)
            yield from _clock_faults(reading, where, row)


def _record_faults(reading, where, row):
    told = set()
    for channel in reading.site.table("channels"):
        log = reading.site.logs.get(channel.log)
        own = channel.kind == "probe" and channel.id == row.probe
        if not own or log is None or channel.quantity not in SIGNALS[row.method]:
            continue
        if channel.log in told or not overlap(_span(channel), (row.installed, row.removed)):
            continue
        told.add(channel.log)
        times = (row.heating_on_min, row.heating_off_min)
        if any(time % log.interval_min for time in times):
            yield Fault(
                where,
                f"probe {row.probe!r} is heated {times[0]:g} min and not heated {times[1]:g} min, "
                f"and log {channel.log!r} has a record every {log.interval_min:g} min",
                "Both times are a whole number of records: the readings are taken at their ends.",
            )


def _clock_faults(reading, where, row):
    if not reading.are_whole("channels", "site") or _state_is_logged(reading.site, row):
        return
    cycle = row.heating_on_min + row.heating_off_min
    offset_h = reading.site.position.utc_offset_h
    if HOUR_MIN % cycle:
        yield Fault(
            where,
            f"the heating cycle of probe {row.probe!r} lasts {cycle:g} min, which cannot be "
            "counted from the full hour",
            "Log heater_state, or give a cycle of 20, 30 or 60 min.",
        )
    elif offset_h * HOUR_MIN % cycle:
        yield Fault(
            where,
            f"the heating cycle of probe {row.probe!r} lasts {cycle:g} min, and the site's full "
            f"hours (utc_offset_h {offset_h:g}) are not those of UTC, from which it is counted",
            "Log heater_state of the probe or of its log.",
        )


def _state_is_logged(site, row):
    """Whether heater_state is logged of the probe, or of a log that its signal is on."""
    channels = site.table("channels")
    logs = {c.log for c in channels if c.kind == "probe" and c.id == row.probe}
    return any(
        c.quantity == "heater_state"
        and ((c.kind == "probe" and c.id == row.probe) or (c.kind == "log" and c.id in logs))
        for c in channels
    )


def _span(row):
    return (row.from_, row.to)


CHECKS = (cycle_faults,)
