"""What holds at a moment: dated samples as lines in time, and profiles with their dates.

A tree's own rows go before its species' rows, and a probe's before both.
"""

import math

import numpy as np


def averaged(pairs):
    """Nodes ((place, value), ...) sorted by place, those of one place as their mean.

    >>> averaged([(2, 1.0), (1, 5.0), (2, 3.0)])
    ((1, 5.0), (2, 2.0))
    """
    groups = {}
    for place, value in pairs:
        groups.setdefault(place, []).append(value)
    return tuple(
        (place, math.fsum(values) / len(values)) for place, values in sorted(groups.items())
    )


def line_at(nodes, moments):
    """Straight line between dated nodes, constant outside the first and last; NaN without nodes.

    nodes : as of `averaged`, places datetime64 [UTC]; moments : (time) datetime64 [UTC].
    """
    if len(nodes) < 2:
        return np.full(len(moments), nodes[0][1] if nodes else np.nan)
    second = np.timedelta64(1, "s")
    start = nodes[0][0]
    places = [(place - start) / second for place, _ in nodes]
    return np.interp((moments - start) / second, places, [value for _, value in nodes])


def wood_nodes(site, tree, species, column):
    """Dated values of a column of `wood.csv` as written: the tree's own, else its species'.

    A date stands for its 0 h in fixed standard time.
    """
    given = [row for row in site.table("wood") if getattr(row, column) is not None]
    own = [row for row in given if tree and row.tree == tree]
    rows = own or [row for row in given if not row.tree and species and row.species == species]
    return averaged((site.utc(row.date), getattr(row, column)) for row in rows)


def wound_nodes(site, probe, number, installed, tree, species):
    """Dated wound widths [mm] of one installation: of the probe, else its tree, else its species.

    number, installed : of the installation, and the dates at which each of the probe's began. A
    probe's row belongs to the installation begun last by its date, the first if none had: a wound
    is not carried over to new holes.
    """
    rows = _wound_rows(site, probe, number, installed, tree, species)
    return averaged((site.utc(row.date), row.width_mm) for row in rows)


def wound_courses(site, probe, number, installed, tree, species):
    """Rows behind `wound_nodes`, by date: (date [UTC], width, final width [mm], time constant [d]).

    The last two are None for a wound that does not grow by a time course.
    """
    rows = _wound_rows(site, probe, number, installed, tree, species)
    rows = sorted(rows, key=lambda row: (row.date, row.width_mm))
    return tuple(
        (site.utc(row.date), row.width_mm, row.final_width_mm, row.time_constant_d) for row in rows
    )


def width_at(courses, moments):
    """Width of a wound at moments: a straight line between dates, or a time course from one on.

    A row with a time course holds from its date until the next row's:
    w(t) = final - (final - w0) exp(-t / time constant), t since its date. Before the first date the
    width is the first, after the last without a time course the last; NaN without rows.

    courses : as of `wound_courses`; moments : (time) datetime64 [UTC].

    Source: common practice; that wounds grow after drilling: Larsen et al. (2020), from memory.

    >>> day = np.datetime64("2031-05-01")
    >>> width_at(((day, 2.0, 2.4, 40.0),), np.array([day, day + 40, day + 4000])).round(3).tolist()
    [2.0, 2.253, 2.4]
    """
    widths = line_at(averaged((date, width) for date, width, *_ in courses), moments)
    for date, width, final, constant in courses:
        if constant is None:
            continue
        later = [other for other, *_ in courses if other > date]
        met = moments >= date
        if later:
            met &= moments < min(later)
        days = (moments[met] - date) / np.timedelta64(1, "s") / 86400.0
        widths[met] = final - (final - width) * np.exp(-days / constant)
    return widths


def _wound_rows(site, probe, number, installed, tree, species):
    rows = site.table("wounds")
    own = [row for row in rows if row.probe == probe and _begun_last(installed, row.date) == number]
    own = own or [row for row in rows if not row.probe and tree and row.tree == tree]
    return own or [
        row for row in rows if not (row.probe or row.tree) and species and row.species == species
    ]


def profile_curves(site, tree, species, depths, moments):
    """Relative profile at each of `depths`, and when each holds.

    Returns (curves, which): curves (curve, depth) and which (time) int, the curve of each moment.
    The nodes whose [from, to) holds the moment count, the tree's own before its species'; straight
    lines between them, constant outside; NaN where none holds. No value is forced at the
    heartwood: it is 0 there where the table says so.

    depths : relative depths [1]; moments : (time) datetime64 [UTC].
    """
    table = site.table("profiles")
    sources = (
        [row for row in table if tree and row.tree == tree],
        [row for row in table if not row.tree and species and row.species == species],
    )
    edges = sorted({
        site.utc(moment)
        for rows in sources
        for row in rows
        for moment in (row.from_, row.to)
        if moment is not None
    })  # fmt: skip
    spans = np.zeros(len(moments), dtype=int)
    if edges:
        spans = np.searchsorted(np.array(edges), moments, side="right")
    met, which = np.unique(spans, return_inverse=True)
    curves = np.full((max(len(met), 1), len(depths)), np.nan)
    for place, span in enumerate(met):
        begin = edges[span - 1] if span else None  # None: before every edge
        for rows in sources:
            nodes = averaged(
                (row.relative_depth, row.ratio) for row in rows if _holds(site, row, begin)
            )
            if nodes:
                curves[place] = np.interp(depths, *zip(*nodes, strict=True))
                break
    return curves, which


def _begun_last(installed, date):
    """Number of the installation begun last by that date, 0 if none had."""
    return max(sum(begun <= date for begun in installed) - 1, 0)


def _holds(site, row, begin):
    """Whether a row holds over the span between two edges that begins there; None: the first."""
    if begin is None:
        return row.from_ is None
    starts = row.from_ is None or site.utc(row.from_) <= begin
    return starts and (row.to is None or begin < site.utc(row.to))
