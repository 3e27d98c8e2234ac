"""A site folder as far as it could be read: what the cross checks look at."""

from dataclasses import dataclass

from sapflux.errors import Fault, nearest
from sapflux.site.model import Site


@dataclass(frozen=True)
class Reading:
    """The valid rows of a folder, and what is known of the rest.

    names : table -> column -> every value written in it, in valid rows or not: a row with a fault
    elsewhere is no reason to call its name unknown. "logs" and "layouts" hold the names in
    `site.toml` under the column "name".
    whole : the tables (and "site", "logs", "layouts") that were read without a fault.
    """

    site: Site
    names: dict
    whole: frozenset

    def rows(self, table):
        """(where, row) of every valid row of a table."""
        lines = self.site.rows_at[table]
        for row, line in zip(self.site.table(table), lines, strict=True):
            yield f"{self.file(table)}, row {line}", row

    def file(self, table):
        """Path of a table's file, for messages."""
        return f"{self.site.folder}/{table}.csv"

    def known(self, table, column):
        """Every name written in a column; None where the table could not be read that far."""
        return self.names[table].get(column, () if table in self.whole else None)

    def has(self, table, column, name):
        """Whether a name is known; True, too, where that cannot be told."""
        known = self.known(table, column)
        return known is None or name in known

    def are_whole(self, *tables):
        """Whether these were read without a fault, so that something missing is really missing."""
        return self.whole.issuperset(tables)

    def unknown(self, where, what, table, column, name):
        """Faults (none or one) of a name that another table should have."""
        if self.has(table, column, name):
            return
        source = "site.toml" if table in ("logs", "layouts") else f"{table}.csv"
        known = {one for one in self.known(table, column) if one}
        if not known and source == "site.toml":
            yield self._no_section(what, table)
            return
        hint = nearest(name, known) if known else "Add it there: the table names none."
        yield Fault(where, f"{what} {name!r} is not in {source}", hint)

    def _no_section(self, what, part):
        """The fault of a `site.toml` without any log or layout; the same for every name."""
        if part == "logs":
            tables = ("channels", "visits", "decisions")
            named = {row.log for table in tables for row in self.site.table(table)}
            named |= {row.id for row in self.site.table("exclusions") if row.kind == "log"}
        else:
            named = {log.layout for log in self.site.logs.values()}
        return Fault(
            f"{self.site.folder}/site.toml",
            f"there is no section [{part}.NAME]",
            f"Begin one for each {what} that is named: {', '.join(sorted(named))}.",
        )


def parted(where, what, name):
    """Faults (none or one) of a name with the mark that parts stand and species in outputs."""
    if "/" in name:
        yield Fault(
            where,
            f"{what} {name!r} has a '/'",
            "Name it without one: outputs write 'stand/species' and name files by it.",
        )


def day(moment):
    """A time as messages write it: without a clock time where it is midnight.

    >>> from datetime import datetime
    >>> day(datetime(2026, 5, 1)), day(datetime(2026, 5, 1, 6, 30)), day(None)
    ('2026-05-01', '2026-05-01 06:30', 'open')
    """
    if moment is None:
        return "open"
    text = f"{moment:%Y-%m-%d %H:%M:%S}"
    return text.removesuffix(":00").removesuffix(" 00:00")


def backwards(where, row, start="from", end="to"):
    """Faults (none or one) of an interval that ends before it begins, or as it begins."""
    first, last = getattr(row, f"{start}_" if start == "from" else start), getattr(row, end)
    if first is not None and last is not None and first >= last:
        yield Fault(
            where,
            f"{start} {day(first)} is not before {end} {day(last)}",
            "Intervals are half-open: the end comes after the start.",
        )


def overlap(one, other):
    """Whether two intervals (start, end) have time in common; None is open."""
    return _before(one[0], other[1]) and _before(other[0], one[1])


def _before(start, end):
    return start is None or end is None or start < end


def clashes(rows, key, span):
    """(where, row, former where, key) of rows of one key whose intervals overlap.

    rows : (where, row) in file order; key, span : functions of a row. Rows whose key is None are
    left out. Each row is told once, with the first row it overlaps.
    """
    seen = {}
    for where, row in rows:
        name = key(row)
        if name is None:
            continue
        former = seen.setdefault(name, [])
        hit = next((w for w, other in former if overlap(span(row), span(other))), None)
        former.append((where, row))
        if hit:
            yield where, row, hit.rpartition(", ")[2], name


def repeats(rows, key):
    """(where, row, former row's name) of rows whose key stands in an earlier row."""
    for where, row, former, _ in clashes(rows, key, lambda row: (None, None)):
        yield where, row, former
