"""Blocks in time: the core a block answers for, and the halo a stage may look at around it."""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

NO_OFFSET = np.timedelta64(0, "s")


@dataclass(frozen=True)
class Block:
    """Records [first, last) to compute on, of which [core_first, core_last) are kept."""

    first: int
    last: int
    core_first: int
    core_last: int

    @property
    def core(self):
        """The core within the block."""
        return slice(self.core_first - self.first, self.core_last - self.first)

    @property
    def whole(self):
        """The block within the record."""
        return slice(self.first, self.last)


def blocks(time, interval_s, reach_s=0.0, days=12, offset=NO_OFFSET):
    """Blocks that cover `time`, cut at midnights of the site's fixed standard time.

    time : (time) datetime64[s] regular ends of interval [UTC]; reach_s : halo on each side [s];
    days : length of a core [d], or None for one block; offset : fixed standard time minus UTC.
    A cut lies between records so that a record ending at midnight belongs to the day before.

    >>> hours = np.datetime64("2031-06-01T01", "s") + np.arange(48) * np.timedelta64(3600, "s")
    >>> [(b.first, b.core_first, b.core_last, b.last) for b in blocks(hours, 3600, 7200, days=1)]
    [(0, 0, 24, 26), (22, 24, 48, 48)]
    """
    count = len(time)
    if not count:
        return []
    halo = int(-(-reach_s // interval_s))
    if days is None:
        return [Block(0, count, 0, count)]
    day = (time + offset - np.timedelta64(1, "s")).astype("datetime64[D]").astype(np.int64)
    group = (day - day[0]) // days
    cuts = [0, *(np.flatnonzero(np.diff(group)) + 1).tolist(), count]
    return [
        Block(max(0, start - halo), min(count, stop + halo), start, stop)
        for start, stop in pairwise(cuts)
    ]


def span(time, interval_s, block):
    """The span of time [from, to) that the core of a block answers for.

    The first core reaches back, and the last ahead, without end, so that every row has an owner.
    """
    start = time[block.core_first] - np.timedelta64(interval_s, "s")
    stop = time[block.core_last - 1]
    first = np.datetime64("0001-01-01", "s") if block.core_first == 0 else start
    last = np.datetime64("9999-01-01", "s") if block.core_last == len(time) else stop
    return first, last
