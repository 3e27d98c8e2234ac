"""References, potentials, events, visits, exclusions and decisions: what must fit together."""

from sapflux.errors import Fault
from sapflux.site.checks_channels import LISTED
from sapflux.site.reading import backwards, clashes, day, repeats


def reference_faults(reading):
    """Zero-flow references of nothing known."""
    for where, row in reading.rows("references"):
        yield from backwards(where, row)
        if row.probe and row.species:
            yield Fault(
                where,
                f"the row names probe {row.probe!r} and species {row.species!r}",
                "Name one of them, or neither where it holds for all probes.",
            )
        if row.probe:
            yield from reading.unknown(where, "probe", "probes", "probe", row.probe)
        if row.species:
            yield from reading.unknown(where, "species", "species", "species", row.species)


def potential_faults(reading):
    """Water potentials of nothing known."""
    for where, row in reading.rows("potentials"):
        wanted = {"soil": "stand", "leaf": "tree"}[row.kind]
        if not getattr(row, wanted):
            yield Fault(
                where, f"{wanted} is blank in a potential of kind {row.kind}", f"Name the {wanted}."
            )
        for kind in ("stand", "tree"):
            if getattr(row, kind):
                yield from reading.unknown(where, kind, *LISTED[kind], getattr(row, kind))


def event_faults(reading):
    """Events in unknown stands."""
    for where, row in reading.rows("events"):
        yield from backwards(where, row)
        yield from reading.unknown(where, "stand", "stands", "stand", row.stand)


def visit_faults(reading):
    """Visits to unknown logs, two at once, or that end before they begin."""
    rows = list(reading.rows("visits"))
    for where, row in rows:
        if row.arrival > row.departure:
            yield Fault(
                where,
                f"arrival {day(row.arrival)} is after departure {day(row.departure)}",
                "Give both in the site's standard time.",
            )
        yield from reading.unknown(where, "log", "logs", "name", row.log)
    for where, row, former, _ in clashes(rows, lambda r: r.log, lambda r: (r.arrival, r.departure)):
        yield Fault(
            where,
            f"log {row.log!r} was visited at that time in {former} already",
            "Write one row for a visit.",
        )


def exclusion_faults(reading):
    """Exclusions of nothing known."""
    for where, row in reading.rows("exclusions"):
        yield from backwards(where, row)
        yield from reading.unknown(where, row.kind, *LISTED[row.kind], row.id)


def decision_faults(reading):
    """Decisions on unknown logs, or two on one proposal."""
    rows = list(reading.rows("decisions"))
    for where, row in rows:
        yield from reading.unknown(where, "log", "logs", "name", row.log)
    for where, row, former in repeats(rows, lambda r: (r.log, r.kind, r.first_record)):
        yield Fault(
            where,
            f"this proposal on log {row.log!r} is answered in {former} already",
            "Keep the answer that holds.",
        )


CHECKS = (
    reference_faults,
    potential_faults,
    event_faults,
    visit_faults,
    exclusion_faults,
    decision_faults,
)
