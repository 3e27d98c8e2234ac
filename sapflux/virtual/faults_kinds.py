"""What a fault of a virtual copy is, where it can strike, and when it can begin."""

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

HEATED = ("heated_emf", "heated_difference")
UNHEATED = ("unheated_emf", "unheated_difference")
RISES = ("rise_downstream", "rise_upstream")
BEFORE = ("temperature_before_downstream", "temperature_before_upstream")
AFTER = ("temperature_after_downstream", "temperature_after_upstream")
RATIOS = ("log_heat_ratio", "logged_velocity")  # odd in the flow
PULSE = (*RISES, *AFTER, "heat_ratio", *RATIOS)  # what a log may keep of the rises of a pulse
THERMAL = (*HEATED, *UNHEATED, *RISES, *BEFORE, *AFTER)
SIGNAL = (*THERMAL, "heat_ratio", *RATIOS)
FROST = 272.65  # K of the air, below which wood can freeze
DAY = np.timedelta64(86400, "s")


@dataclass(frozen=True)
class Injected:
    """A fault of a virtual copy, as its truth table tells it.

    log : whose files show it; name : the probe, column or file; columns : all logger columns that
    it changes, empty for faults of a file or clock. Records whose end lies in (begin, end] show
    it; both are UTC. size is in `unit`; a sign says which way. third : 1, 2 or 3, where the size
    lies in the range of its kind, from barely visible to large.
    """

    kind: str
    log: str
    name: str
    begin: np.datetime64
    end: np.datetime64
    size: float
    unit: str
    third: int
    columns: tuple = ()


@dataclass(frozen=True)
class Place:
    """Where a fault can strike: a log, the name of what is struck, and the columns it changes."""

    log: str
    name: str
    columns: tuple = ()


@dataclass(frozen=True)
class Kind:
    """One kind of fault. All rates and ranges: own judgement.

    few : expected number per place in a season of 150 days at a well kept site. size : lowest
    and highest, drawn evenly in the logarithm, with either sign if `signed`. lasting : days,
    shortest and longest; None if the size is how long it lasts, in `unit`. begins : a key of
    `BEGINS`. until : "" for as long as drawn, "visit" to go on to the next download, "end" to
    go on to the end of the copy.
    places : (plan, truth) -> list of `Place`. act : (records, fault, generator) -> None, changes
    `records.values`; None for faults of trees, clocks and files, which their modules know by name.
    """

    name: str
    places: Callable
    few: float
    size: tuple
    unit: str
    lasting: tuple | None
    act: Callable | None = None
    begins: str = "any"
    until: str = ""
    signed: bool = False
    choices: Callable | None = None  # place, plan -> sizes that it can have, in place of a draw
    after_h: float = 0.0  # h that what it did takes to fade, within its begin and end

    def third(self, size):
        """1, 2 or 3: in which third of the range a size lies, by its logarithm."""
        low, high = self.size
        if low == high:
            return 3
        share = np.log(abs(size) / low) / np.log(high / low)
        return int(np.clip(share * 3.0, 0.0, 2.999)) + 1


@dataclass(frozen=True)
class Calendar:
    """When a log writes: ends of its records, its downloads, and the weather at each record."""

    end: np.ndarray
    interval: np.timedelta64
    spans: list
    hour: np.ndarray  # standard time at the middle of each record [h]
    rain: np.ndarray
    temperature: np.ndarray

    @property
    def begin(self):
        """The moment at which the first record begins."""
        return self.end[0] - self.interval


def _first_of(mask):
    """Where a mask turns true."""
    return mask & ~np.concatenate([[False], mask[:-1]])


BEGINS = {
    "any": lambda c: c.end[: max(len(c.end) - 12, 1)],
    "first": lambda c: np.array([c.begin]),
    "set": lambda c: np.array([c.begin, *(last for _, last in c.spans[:-1])], "datetime64[s]"),
    "visit": lambda c: np.array([last for _, last in c.spans[:-1]], "datetime64[s]"),
    "rain": lambda c: c.end[_first_of(c.rain > 0.0)] - c.interval,
    "frost": lambda c: c.end[_first_of(c.temperature < FROST)] - c.interval,
    "dawn": lambda c: c.end[_first_of((c.hour > 5.0) & (c.hour < 6.0))],
    "noon": lambda c: c.end[_first_of((c.hour > 11.0) & (c.hour < 12.0))],
    "evening": lambda c: c.end[_first_of((c.hour > 20.0) & (c.hour < 21.0))],
    "file": lambda c: np.array([first for first, _ in c.spans], "datetime64[s]"),
    "later file": lambda c: np.array([first for first, _ in c.spans[1:]], "datetime64[s]"),
}


def columns_of(*quantities):
    """Places: every column of these quantities by itself."""

    def places(plan, truth):
        return [
            Place(r.log, r.column, (r.column,)) for r in plan.channels if r.quantity in quantities
        ]

    return places


def probes_of(*quantities):
    """Places: every point of a probe with all its columns of these quantities in one log."""

    def places(plan, truth):
        found = {}
        for r in plan.channels:
            if r.quantity in quantities:
                found.setdefault((r.log, r.id, r.point), []).append(r)
        return [
            Place(log, probe, tuple(r.column for r in rows))
            for (log, probe, _), rows in found.items()
        ]

    return places


def logs_of(*quantities, more=(), fewest=1):
    """Places: every log with at least `fewest` such columns; they and those of `more` change."""

    def places(plan, truth):
        found = []
        for log in plan.logs:
            own = [r for r in plan.channels if r.log == log]
            if sum(r.quantity in quantities for r in own) >= fewest:
                struck = [r.column for r in own if r.quantity in (*quantities, *more)]
                found.append(Place(log, log, tuple(struck)))
        return found

    return places


def neighbours(plan):
    """Places: two columns side by side that keep the same of two probes; the second is named."""
    found = []
    for log in plan.logs:
        own = [r for r in plan.channels if r.log == log]
        found += [
            (log, a, b)
            for a, b in pairwise(own)
            if a.quantity == b.quantity and a.quantity in SIGNAL and a.unit == b.unit
        ]
    return found


def followers(plan, truth):
    """Places: the second of two neighbours, which alone changes."""
    return [Place(log, b.column, (b.column,)) for log, a, b in neighbours(plan)]


def couples(plan, truth):
    """Places: two neighbours that both change."""
    return [Place(log, b.column, (a.column, b.column)) for log, a, b in neighbours(plan)]


def whole_logs(plan, truth):
    """Places: every log."""
    return [Place(log, log) for log in plan.logs]


def wide_logs(plan, truth):
    """Places: every log of one line a record and at least two columns."""
    return [
        Place(name, name)
        for name, log in plan.logs.items()
        if plan.layouts[log.layout].long is None and sum(r.log == name for r in plan.channels) > 1
    ]


def quoted_logs(plan, truth):
    """Places: every log whose layout marks text by quotes."""
    return [p for p in whole_logs(plan, truth) if plan.layouts[plan.logs[p.log].layout].quote]
