"""The table of all kinds of fault, and what the faults of a virtual copy do to its records."""

from sapflux.virtual import (
    faults_clock,
    faults_electrical,
    faults_files,
    faults_logger,
    faults_power,
    faults_pulse,
    faults_tree,
    faults_weather,
    faults_wood,
)
from sapflux.virtual.faults_kinds import Injected, Kind
from sapflux.virtual.faults_records import Records
from sapflux.virtual.seeds import generator

__all__ = ["KINDS", "LEVELS", "Injected", "Kind", "fault_table", "spoiled_values"]

LEVELS = ("none", "few", "many")
# In the order in which they act on a record: tree, wood, heat, wires, sensors, logger, clock, file.
KINDS = {
    kind.name: kind
    for module in (
        faults_tree, faults_wood, faults_power, faults_pulse, faults_electrical, faults_weather,
        faults_logger, faults_clock, faults_files,
    )
    for kind in module.KINDS
}  # fmt: skip
COLUMNS = ["kind", "log", "name", "columns", "begin", "end", "size", "unit", "third"]


def fault_table(truth):
    """(columns, rows of text) of all faults in a virtual copy; times are UTC."""
    rows = [
        [f.kind, f.log, f.name, " ".join(f.columns), str(f.begin), str(f.end), f"{f.size:.6g}",
         f.unit, str(f.third)]
        for f in truth.faults
    ]  # fmt: skip
    return COLUMNS, rows


def of_log(truth, log):
    """Faults of one log, in the order in which they act."""
    order = list(KINDS)
    own = [fault for fault in truth.faults if fault.log == log]
    return sorted(own, key=lambda fault: (order.index(fault.kind), fault.begin))


def spoiled_values(truth, site, plan, log, every, values):
    """(record, channel) values of a log as written, with its faults; `values` without faults.

    Clocks that drift are in it; stamps of clocks that are wrong in another way are not.
    """
    faults = of_log(truth, log)
    if not faults:
        return values
    channels = [row for row in plan.channels if row.log == log]
    end = truth.weather.end[every - 1 :: every]
    declared = plan.layouts[plan.logs[log].layout].missing_numbers
    records = Records(truth, site, channels, every, end, values.copy(), values, declared)
    for fault in faults:
        kind = KINDS[fault.kind]
        if kind.act is not None:
            rng = generator(truth.seed, f"fault/{kind.name}", f"{fault.name}/{fault.begin}")
            kind.act(records, fault, rng)
    return faults_clock.drifted(records.values, end, faults)
