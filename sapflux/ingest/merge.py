"""Records of several downloads as one series on the native steps.

The rows of all files stand in the order of their owners: the file with the earliest stamp, then the
smaller hash, then line order. A stamp that comes again is compared with the first cell by cell (see
`repeats`). Equal copies are duplicates; copies that differ are withheld. Nothing is averaged and
nothing is interpolated.
"""

from dataclasses import dataclass
from itertools import groupby
from operator import itemgetter

import numpy as np

from sapflux.ingest.parse import Parsed
from sapflux.ingest.repeats import cells_of, judge

KEPT, DUPLICATE, CONFLICTING = range(3)


@dataclass(frozen=True)
class Source:
    """The rows of one file that go into the series: row numbers of `parsed`, and their UTC ends."""

    parsed: Parsed
    rows: np.ndarray
    end: np.ndarray


@dataclass(frozen=True)
class Merged:
    """A merged log. `classes`: one array a source, one class a row.

    end : (n) microseconds; values, withheld : (columns, n).
    source, line : (n), or (columns, n) where the cells of one stamp come from several lines; -1 and
    0 for a cell that no line has. Lines count from 1.
    displaced : (source, line, source of the line that is kept, that line) for each line whose step
    another stamp is nearer to. lost : number of records among them, repeats and copies of the
    record that is kept in another file apart.
    conflicts : (end, column, (source, line, text), (source, line, text)).
    """

    end: np.ndarray
    values: np.ndarray
    withheld: np.ndarray
    source: np.ndarray
    line: np.ndarray
    classes: list
    displaced: list
    lost: int
    conflicts: list


@dataclass(frozen=True)
class _Rows:
    """All rows one below the other, in the order of ownership, and their groups.

    A group is what has one stamp (and, in a long table, one cell name); its first row leads.
    source, at : number of the source, and row of its `parsed`; line : from 1; cell : column of a
    long table's value, else 0.
    order : rows sorted by group; starts : where a group begins in it; group : of each row.
    place : (groups) index in `end`, -1 where another stamp is nearer to the step.
    """

    source: np.ndarray
    at: np.ndarray
    line: np.ndarray
    cell: np.ndarray
    order: np.ndarray
    starts: np.ndarray
    group: np.ndarray
    place: np.ndarray
    nearest: np.ndarray
    end: np.ndarray

    @property
    def leaders(self):
        """The first row of each group."""
        return self.order[self.starts[:-1]]

    def of(self, group):
        """The rows of a group in the order of ownership."""
        return self.order[self.starts[group] : self.starts[group + 1]].tolist()


def merge(sources, columns, interval, anchor, layout):
    """Merge sources, given in the order of ownership, on steps `anchor + k * interval` [us].

    columns : names of the values, in order. A stamp between two steps goes to the nearest, the
    later one if both are equally near; of two stamps on one step the nearest is kept, the earlier
    if both are equally near.
    """
    rows = _rows(sources, columns, interval, anchor, layout)
    leads = np.zeros(len(rows.at), dtype=bool)
    leads[rows.leaders] = rows.place >= 0
    classes = np.where(leads, KEPT, DUPLICATE).astype(np.uint8)

    values = np.full((len(columns), len(rows.end)), np.nan)
    alike = layout.long is None and all(
        s.parsed.present is None and s.parsed.columns == columns for s in sources
    )
    shape = values.shape[1:] if alike else values.shape
    source, line = np.full(shape, -1, dtype=np.int32), np.zeros(shape, dtype=np.int32)
    for number, part in reversed(list(enumerate(sources))):
        mine = np.flatnonzero(rows.source == number)
        if alike:
            mine = mine[leads[mine]]
            _put(values, rows.place[rows.group[mine]], part.parsed.values[rows.at[mine]].T)
            source[rows.place[rows.group[mine]]] = number
            line[rows.place[rows.group[mine]]] = rows.line[mine]
        else:
            for layer in _layers(rows, mine):
                _put_cells(rows, part, layer, columns, values, source, line)
    if not alike:
        giving = _giving(rows, source, line)
        classes[giving] = KEPT

    withheld = np.zeros(values.shape, dtype=bool)
    conflicts = []
    for group, column, copies in _copies(rows, sources, columns, leads, values, layout):
        place = rows.place[group]
        chosen, pairs = judge([copy[1:] for copy in copies], layout)
        named = [(int(rows.source[r]), int(rows.line[r]), text) for r, _, text in copies]
        for one, other in pairs:
            classes[copies[other][0]] = CONFLICTING
            conflicts.append((int(rows.end[place]), columns[column], named[one], named[other]))
        if pairs:
            withheld[column, place], values[column, place] = True, np.nan
        else:
            values[column, place] = copies[chosen][1]
            if chosen and source.ndim == 1:
                source, line = (np.repeat(a[None], len(columns), 0) for a in (source, line))
            if chosen:
                source[column, place], line[column, place] = named[chosen][:2]
    return Merged(
        rows.end,
        values,
        withheld,
        source,
        line,
        [classes[rows.source == number] for number in range(len(sources))],
        _displaced(rows),
        _lost(rows, sources),
        conflicts,
    )


def _rows(sources, columns, interval, anchor, layout):
    counts = [len(s.rows) for s in sources]
    source = np.repeat(np.arange(len(sources)), counts)
    stamp = np.concatenate([s.end for s in sources])
    at = np.concatenate([s.rows for s in sources])
    line = np.concatenate([s.parsed.line[s.rows] for s in sources]) + 1
    if layout.long:
        index = {name: number for number, name in enumerate(columns)}
        cells = [
            np.array([index[c] for c in s.parsed.columns], dtype=np.int64)[s.parsed.cell[s.rows]]
            for s in sources
        ]
        cell = np.concatenate(cells)
        order = np.lexsort((stamp, cell))
    else:
        cell = np.zeros(len(at), dtype=np.int64)
        order = np.argsort(stamp, kind="stable")
    new = np.ones(len(order), dtype=bool)
    new[1:] = (np.diff(stamp[order]) != 0) | (np.diff(cell[order]) != 0)
    starts = np.append(np.flatnonzero(new), len(order))
    group = np.empty(len(order), dtype=np.int64)
    group[order] = np.cumsum(new) - 1

    leaders = order[starts[:-1]]
    moment, owner = stamp[leaders], cell[leaders]
    step = (moment - anchor + interval // 2) // interval
    end, place = np.unique(step, return_inverse=True)
    # of the groups on one step (of one cell) the nearest; groups are sorted by cell, then stamp
    away = np.abs(moment - anchor - step * interval)
    best = np.lexsort((moment, away, step, owner))
    first = np.ones(len(best), dtype=bool)
    first[1:] = (np.diff(step[best]) != 0) | (np.diff(owner[best]) != 0)
    nearest = np.empty(len(best), dtype=np.int64)
    nearest[best] = best[first][np.cumsum(first) - 1]
    place = np.where(nearest == np.arange(len(place)), place, -1)
    return _Rows(
        source, at, line, cell, order, starts, group, place, nearest, end * interval + anchor
    )


def _put(values, place, block):
    """Write a block of columns; as one slice where the places follow each other."""
    if len(place) and (np.diff(place) == 1).all():
        values[:, place[0] : place[-1] + 1] = block
    else:
        values[:, place] = block


def _layers(rows, mine):
    """Rows of one source, repeats last first, so that each layer holds a group once."""
    order = np.lexsort((mine, rows.group[mine]))
    groups = rows.group[mine][order]
    new = np.ones(len(order), dtype=bool)
    new[1:] = np.diff(groups) != 0
    begins = np.flatnonzero(new)
    count = np.arange(len(order)) - begins[np.cumsum(new) - 1] if len(order) else order
    nth = np.empty(len(order), dtype=np.int64)
    nth[order] = count
    return [mine[nth == n] for n in range(int(nth.max(initial=-1)), -1, -1)]


def _put_cells(rows, part, layer, columns, values, source, line):
    """Write the cells that each row has, over what later owners have written."""
    layer = layer[rows.place[rows.group[layer]] >= 0]
    place, at = rows.place[rows.group[layer]], rows.at[layer]
    if part.parsed.cell is not None:
        target = (rows.cell[layer], place)
        values[target] = part.parsed.values[at, 0]
        source[target], line[target] = rows.source[layer], rows.line[layer]
        return
    for index, name in enumerate(part.parsed.columns):
        there = slice(None)
        if part.parsed.present is not None:
            there = part.parsed.present[at, index]
        target = (columns.index(name), place[there])
        values[target] = part.parsed.values[at[there], index]
        source[target], line[target] = rows.source[layer][there], rows.line[layer][there]


def _giving(rows, source, line):
    """Where a row gives at least one cell of the series."""
    lines = int(rows.line.max(initial=0)) + 1
    given = np.unique(source.astype(np.int64)[source >= 0] * lines + line[source >= 0])
    return np.isin(rows.source * lines + rows.line, given)


def _differing(rows, sources, columns, leads, values):
    """Sorted (group, column) of the cells of which not all copies are the same number."""
    found = set()
    for number, part in enumerate(sources):
        again = np.flatnonzero((rows.source == number) & ~leads)
        again = again[rows.place[rows.group[again]] >= 0]
        if not len(again):
            continue
        group, at = rows.group[again], rows.at[again]
        if part.parsed.cell is not None:
            into, held = None, values[rows.cell[again], rows.place[group]][:, None]
        else:
            into = [columns.index(name) for name in part.parsed.columns]
            held = values[:, rows.place[group]][into].T
        mine = part.parsed.values[at]
        unlike = (mine != held) & ~(np.isnan(mine) & np.isnan(held))
        if part.parsed.present is not None:
            unlike &= part.parsed.present[at]
        for row, index in zip(*(a.tolist() for a in np.nonzero(unlike)), strict=True):
            column = int(rows.cell[again[row]]) if into is None else into[index]
            found.add((int(group[row]), column))
    return sorted(found)


def _copies(rows, sources, columns, leads, values, layout):
    """(group, column, [(row, value, text)]) of the cells whose copies are not the same number."""
    found = _differing(rows, sources, columns, leads, values)
    for group, cells in groupby(found, key=itemgetter(0)):
        lines = []
        for row in rows.of(group):
            parsed, at = sources[rows.source[row]].parsed, int(rows.at[row])
            lines.append((row, cells_of(parsed, at, layout)))
        for _, column in cells:
            name = columns[column]
            yield group, column, [(row, *held[name]) for row, held in lines if name in held]


def _displaced(rows):
    """Lines whose step another stamp is nearer to."""
    leaders, out = rows.leaders, []
    for group in np.flatnonzero(rows.place < 0).tolist():
        winner = leaders[rows.nearest[group]]
        for row in rows.of(group):
            out.append(tuple(int(n) for r in (row, winner) for n in (rows.source[r], rows.line[r])))
    return sorted(out)


def _lost(rows, sources):
    """Number of records whose step another is nearer to, and that tell something else than it.

    A download that was written again with other stamps tells the same: its values are those of
    the record that is kept.
    """
    leaders, count = rows.leaders, 0
    for group in np.flatnonzero(rows.place < 0).tolist():
        one, kept = leaders[group], leaders[rows.nearest[group]]
        if rows.source[one] == rows.source[kept]:
            count += 1
            continue
        cells, others = _cells(rows, sources, one), _cells(rows, sources, kept)
        count += any(name not in others or _apart(n, others[name]) for name, n in cells.items())
    return count


def _cells(rows, sources, row):
    """Name -> value of one row; a long table's one value has the name 0."""
    parsed = sources[rows.source[row]].parsed
    names = parsed.columns if parsed.cell is None else (0,)
    return dict(zip(names, parsed.values[rows.at[row]].tolist(), strict=True))


def _apart(one, other):
    return one != other and not (np.isnan(one) and np.isnan(other))
