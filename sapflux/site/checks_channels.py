"""`channels.csv`: what must fit together."""

from sapflux.errors import Fault, nearest
from sapflux.schema import QUANTITIES, SIGNALS, TRACES
from sapflux.site.reading import backwards, clashes, day, overlap
from sapflux.units import accepted

# Where the id of a channel of each kind is listed.
LISTED = {
    "probe": ("probes", "probe"),
    "tree": ("trees", "tree"),
    "log": ("logs", "name"),
    "stand": ("stands", "stand"),
}
# Signals that give a heat ratio by themselves, and those that do with others, by needle.
ALONE = {"heat_ratio", "log_heat_ratio", "logged_velocity"}
RISES = ("rise_downstream", "rise_upstream")
TEMPERATURES = tuple(
    s for s in SIGNALS["heat_ratio"] if s.startswith("temperature") and s not in TRACES
)
METHODS = {signal: method for method, signals in SIGNALS.items() for signal in signals}


def row_faults(reading):
    """Channels that name what is not there, or a quantity or unit that cannot be."""
    for where, row in reading.rows("channels"):
        yield from backwards(where, row)
        yield from reading.unknown(where, "log", "logs", "name", row.log)
        yield from _id_faults(reading, where, row)
        yield from _quantity_faults(where, row)
        yield from _long_faults(reading, where, row)


def _id_faults(reading, where, row):
    if row.kind == "site":
        if row.id:
            yield Fault(
                where,
                f"id is {row.id!r} in a channel of the site",
                "Leave it blank, or give the kind of thing it names.",
            )
    elif not row.id:
        yield Fault(where, f"id is blank in a channel of a {row.kind}", f"Name the {row.kind}.")
    else:
        yield from reading.unknown(where, row.kind, *LISTED[row.kind], row.id)


def _quantity_faults(where, row):
    quantity = QUANTITIES[row.quantity]
    if row.kind not in quantity.columns:
        yield Fault(
            where,
            f"{row.quantity} is no quantity of a {row.kind}",
            f"It belongs to a {' or a '.join(quantity.columns)}.",
        )
    units = accepted(row.quantity)
    if row.unit not in units:
        yield Fault(
            where, f"unit {row.unit!r} does not fit {row.quantity}", nearest(row.unit, units)
        )
    if row.point > 1 and (row.kind != "probe" or "point" not in quantity.dims):
        yield Fault(
            where,
            f"point is {row.point}, and {row.quantity} of a {row.kind} has no points",
            "Leave it blank.",
        )


def _long_faults(reading, where, row):
    log = reading.site.logs.get(row.log)
    layout = reading.site.layouts.get(log.layout) if log else None
    if layout is None or layout.long is None:
        return
    names = layout.long.name_columns
    if row.column.count("/") < len(names) - 1:
        yield Fault(
            where,
            f"column {row.column!r} names too little of the long table of log {row.log!r}",
            f"Join the cells of {', '.join(names)} by '/'.",
        )


def probe_faults(reading):
    """Channels of a probe that its installations do not have."""
    probes = {}
    for row in reading.site.table("probes"):
        probes.setdefault(row.probe, []).append(row)
    for where, row in reading.rows("channels"):
        if row.kind != "probe" or row.id not in probes:
            continue
        span = (row.from_, row.to)
        rows = [p for p in probes[row.id] if overlap(span, (p.installed, p.removed))]
        rows = rows or probes[row.id]
        yield from _signal_faults(where, row, rows[0].method)
        if "point" in QUANTITIES[row.quantity].dims:
            yield from _point_faults(where, row, max(len(p.depth_from_mm) for p in rows))
        if row.quantity == "logged_velocity" and not all(
            p.embedded_diffusivity_cm2_s and p.embedded_spacing_mm for p in rows
        ):
            yield Fault(
                where,
                f"logged_velocity of probe {row.id!r} cannot be undone: the "
                "constants inside it are not known",
                "Give embedded_diffusivity_cm2_s and embedded_spacing_mm in probes.csv.",
            )


def _signal_faults(where, row, method):
    wanted = METHODS.get(row.quantity)
    if wanted and wanted != method:
        yield Fault(
            where,
            f"{row.quantity} is a signal of {wanted}, and probe {row.id!r} is of "
            f"the method {method}",
            f"Signals of {method}: {', '.join(SIGNALS[method])}.",
        )


def _point_faults(where, row, points):
    if row.point > points:
        held = "1 point" if points == 1 else f"{points} points"
        yield Fault(
            where,
            f"point is {row.point}, and probe {row.id!r} has {held}",
            "Points are counted from 1, outermost first; their depths stand in probes.csv.",
        )


def set_faults(reading):
    """Points of heat-ratio probes whose signals, at some time, do not make a ratio together.

    A point without any of them is not logged then, which is no fault; nor is what a logger still
    writes of a probe that is out of the wood.
    """
    if not reading.are_whole("channels"):
        return
    methods, installed, points = {}, {}, {}
    for row in reading.site.table("probes"):
        methods[row.probe] = row.method
        installed.setdefault(row.probe, []).append((row.installed, row.removed))
    for where, row in reading.rows("channels"):
        known = row.kind == "probe" and methods.get(row.id) == "heat_ratio"
        if known and row.quantity in SIGNALS["heat_ratio"]:
            points.setdefault((row.id, row.point), []).append((where, row))
    for (probe, point), rows in points.items():
        for span in _spans([row for _, row in rows]):
            held = [(where, row) for where, row in rows if overlap(span, _span(row))]
            signals = {row.quantity for _, row in held}
            in_wood = any(overlap(span, own) for own in installed[probe])
            if not (held and in_wood) or _make_a_ratio(signals):
                continue
            given = [s for s in SIGNALS["heat_ratio"] if s in signals]
            time = "" if span == (None, None) else f" from {day(span[0])} to {day(span[1])}"
            yield Fault(
                held[0][0],
                f"point {point} of probe {probe!r} has {', '.join(given)}{time} and no "
                f"{', '.join(_missing(signals))}",
                "A point needs both rises, all four temperatures, both temperature traces, "
                "heat_ratio, log_heat_ratio or logged_velocity, for the same time.",
            )
            break  # the others have the same reason


def _spans(rows):
    """Spans of time between which no row begins or ends, earliest first; None is open."""
    edges = sorted({moment for row in rows for moment in _span(row) if moment is not None})
    return list(zip([None, *edges], [*edges, None], strict=True))


def _make_a_ratio(signals):
    """Whether signals make a ratio: one alone, or rise or two temperatures of either needle."""
    return (
        bool(signals & ALONE)
        or signals.issuperset(TRACES)
        or all(
            f"rise_{needle}" in signals
            or {f"temperature_before_{needle}", f"temperature_after_{needle}"} <= signals
            for needle in ("downstream", "upstream")
        )
    )


def _missing(signals):
    """What signals that make no ratio lack of the set that they have most of."""
    sets = (RISES, TEMPERATURES, TRACES)
    nearest_set = max(sets, key=lambda whole: len(signals.intersection(whole)))
    return [signal for signal in nearest_set if signal not in signals]


def overlap_faults(reading):
    """Columns that are two things at once, and things that come from two columns at once."""
    rows = list(reading.rows("channels"))
    for where, row, former, _ in clashes(rows, lambda r: (r.log, r.column), _span):
        yield Fault(
            where,
            f"column {row.column!r} of log {row.log!r} is taken for the same time in {former}",
            "End one channel where the other begins.",
        )
    for where, row, former, _ in clashes(rows, _target, _span):
        thing = "the site" if row.kind == "site" else f"{row.kind} {row.id!r}"
        point = f" at point {row.point}" if "point" in QUANTITIES[row.quantity].dims else ""
        yield Fault(
            where,
            f"{row.quantity} of {thing}{point} has another column for the same time in {former}",
            "End one channel where the other begins.",
        )


def _span(row):
    return (row.from_, row.to)


def _target(row):
    return (row.kind, row.id, row.point, row.quantity)


CHECKS = (row_faults, probe_faults, set_faults, overlap_faults)
