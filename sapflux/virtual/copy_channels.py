"""Logs and channels of a virtual copy: the site's own as far as they are supported, else new."""

import re
from dataclasses import dataclass
from math import gcd

from sapflux.schema import SIGNALS, TRACES
from sapflux.site import inventory
from sapflux.site.config import Layout, Log
from sapflux.site.installations import heating
from sapflux.site.tables import Channel
from sapflux.virtual import assumptions
from sapflux.virtual.copy_needs import SAP_FLOW
from sapflux.virtual.copy_probes import installations

WEATHER = (
    "air_temperature", "relative_humidity", "vapour_pressure_deficit", "shortwave_radiation",
    "net_radiation", "precipitation", "wind_speed",
)  # fmt: skip
SUPPORTED = {
    *(signal for signals in SIGNALS.values() for signal in signals), *WEATHER, "heater_voltage",
    "heater_current", "heater_state", "battery_voltage", "panel_temperature", "stem_temperature",
    "stem_diameter_change",
} - {*TRACES}  # fmt: skip
# What the log of a plan keeps of a probe, in the order of its columns: quantity, unit.
NEW_SIGNALS = {
    "heat_dissipation": (("heated_emf", "mV"),),
    "unheated_pair": (("unheated_emf", "mV"),),
    "heat_ratio": (("rise_downstream", "K"), ("rise_upstream", "K")),
}
NEW_WEATHER = (("air_temperature", "degC"), ("relative_humidity", "%"),
               ("shortwave_radiation", "W m-2"))  # fmt: skip
NEW_LAYOUT = "virtual_plain"


@dataclass(frozen=True)
class LogPlan:
    """Layouts and logs by name, rows of `channels.csv`, and what is left out, in words."""

    layouts: dict
    logs: dict
    channels: tuple
    left_out: tuple


def plan_logs(site):
    """The `LogPlan` of a site.

    A quantity logged by several columns after one another is kept with the latest. Probes without
    a channel get new ones in a new log, and so does weather where the site has none.
    """
    kept, left_out = _kept(site)
    logged = {(row.kind, row.id) for row in kept if row.quantity in _signals()}
    new = []
    for row in installations(site):
        if heating(row) == "intermittent":
            left_out.append(f"heating cycle of probe {row.probe}: it is heated without a break")
        if ("probe", row.probe) in logged:
            continue
        log = f"virtual_{'heat_ratio' if row.method == 'heat_ratio' else 'heat_dissipation'}"
        for point in range(1, len(row.depth_from_mm) + 1):
            for quantity, unit in NEW_SIGNALS[row.method]:
                column = f"{row.probe}_{point}_{quantity}"
                new.append(_channel(log, column, "probe", row.probe, point, quantity, unit))
    if not any(row.kind == "site" and row.quantity in WEATHER for row in kept):
        new += [_channel("virtual_weather", name, "site", "", 1, name, unit)
                for name, unit in NEW_WEATHER]  # fmt: skip
    channels = (*kept, *new)
    used = {row.log for row in channels}
    for name in site.logs:
        if name not in used:
            left_out.append(f"log {name}: none of its columns is supported")
    logs = {name: log for name, log in site.logs.items() if name in used}
    layouts = {log.layout: site.layouts[log.layout] for log in logs.values()}
    for name in sorted({row.log for row in new}):
        layouts[NEW_LAYOUT] = Layout(quote="", time_columns=("time",), time_format="%Y-%m-%dT%H:%M")
        minutes = _interval(site, name)
        logs[name] = Log(
            files=("raw/x",), layout=NEW_LAYOUT, interval_min=minutes, stamp="end",
            clock=_clock(site.position.utc_offset_h, minutes),
        )  # fmt: skip
    return LogPlan(layouts, _with_folders(logs), channels, tuple(left_out))


def common_step(logs):
    """Seconds of the longest clock, up to ten minutes, that all intervals are whole steps of."""
    step = gcd(*(round(log.interval_min * 60) for log in logs.values()))
    if step <= assumptions.LONGEST_STEP_S:
        return step
    return max(n for n in range(1, assumptions.LONGEST_STEP_S + 1) if step % n == 0)


def _signals():
    return {signal for signals in SIGNALS.values() for signal in signals}


def grown_stems(site):
    """Names of the stems that a copy grows and that the site's tables know."""
    trees = [row.tree for row in site.table("trees")]
    return {tree for tree in trees if inventory.latest_survey(site, tree) is not None}


def _kept(site):
    """(rows, left out): the site's channels that are supported, without dates."""
    rows, left_out = {}, []
    ordered = sorted(
        site.table("channels"),
        key=lambda r: (r.to is not None, r.from_ is None, -(r.from_.timestamp() if r.from_ else 0)),
    )
    columns, targets = set(), set()
    grown = grown_stems(site)
    latest = {row.probe: row for row in installations(site)}
    for row in ordered:
        target = (row.kind, row.id, row.point, row.quantity)
        told = f"channel {row.column} of log {row.log}"
        if row.quantity in TRACES:
            left_out.append(f"{told}: the copy has no traces of pulses and logs their mean rises")
        elif row.quantity not in SUPPORTED:
            left_out.append(f"{told}: {row.quantity} is not supported")
        elif row.quantity == "stem_diameter_change" and row.id not in grown:
            left_out.append(f"{told}: nothing tells the diameter of tree {row.id}")
        elif row.kind == "probe" and not _shows(latest[row.id], row):
            left_out.append(f"{told}: {row.quantity} of an earlier installation")
        elif target in targets or (row.log, row.column) in columns:
            left_out.append(f"{told}: {row.quantity} from an earlier time")
        else:
            targets.add(target)
            columns.add((row.log, row.column))
            rows[id(row)] = row.model_copy(update={"from_": None, "to": None})
    return [rows[id(row)] for row in site.table("channels") if id(row) in rows], left_out


def _shows(installation, row):
    """Whether an installation of a probe has what a channel of the probe keeps."""
    embedded = installation.embedded_diffusivity_cm2_s and installation.embedded_spacing_mm
    return row.point <= len(installation.depth_from_mm) and (
        row.quantity != "logged_velocity" or bool(embedded)
    )


def _channel(log, column, kind, name, point, quantity, unit):
    return Channel(
        log=log, column=column, kind=kind, id=name, point=point, quantity=quantity, unit=unit
    )


def _interval(site, log):
    """Minutes of a new log: as assumed, or the longest below that fits into the common step."""
    wanted = assumptions.INTERVALS[log.removeprefix("virtual_")]
    if log.removeprefix("virtual_") not in SAP_FLOW:
        return float(wanted)
    step = site.position.common_step_min
    return float(max(n for n in range(1, wanted + 1) if step % n == 0))


def _clock(utc_offset_h, minutes):
    """UTC, or the site's standard time where the two are not whole intervals apart.

    >>> _clock(1.0, 30.0), _clock(5.75, 30.0)
    ('utc', 'utc+5.75')
    """
    return "utc" if utc_offset_h * 60.0 % minutes == 0.0 else f"utc{utc_offset_h:+g}"


def _with_folders(logs):
    """Each log with a folder of downloads of its own, so that no pattern takes another's."""
    folders, made = set(), {}
    for name, log in logs.items():
        folder = re.sub(r"[^A-Za-z0-9_-]+", "_", name) or "log"
        while folder.lower() in folders:
            folder += "_"
        folders.add(folder.lower())
        suffix = re.search(r"\.([A-Za-z0-9]{1,5})$", log.files[0])
        pattern = f"raw/{folder}/*.{suffix[1] if suffix else 'csv'}"
        # A log that held traces has a line a pulse instead.
        plain = {"files": (pattern,), "trace_step_s": None, "pulse_starts_s": 0.0}
        made[name] = log.model_copy(update=plain)
    return made
