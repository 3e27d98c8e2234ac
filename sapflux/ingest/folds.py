"""The repeated hour of civil time: which pass each record belongs to, by file order.

A run is what a file holds of one repeated hour without a break. In order of evidence:
1. The clock steps back inside the run: what comes before is the first pass (daylight time), the
   rest the second. An equal time counts as a step back if the interval is no shorter than the
   hour that repeats.
2. The record before it in its file is less than the repeated span older: first pass.
3. It begins inside the hour. Lines that another file shows in one pass belong to that pass.
4. Another file runs through the same times in one pass, with other lines: the other pass.
5. It leads without a gap into the record after it in its file: second pass. Or it follows, or leads
   into, a record known of one pass alone without a gap: that pass. Where these disagree, none is
   taken.
6. A record of another file that leads into the first pass is less than the repeated span older:
   first pass.
7. Nothing tells: first pass.
Of the runs that are left the one with the best evidence is settled next, and is evidence then.
Where records are lost inside the hour and files end there too, this may take the wrong pass.
"""

from dataclasses import dataclass

import numpy as np

from sapflux.ingest.clock import DAY, read_civil

# A record follows another without a gap if it is no more than this many intervals later: one step
# and the jitter of a stamp, short of a missing record (two). Source: own judgement.
LONGEST_STEP = 1.5


@dataclass
class _Run:
    """Rows `begin` to `end` (exclusive) of one file inside one repeated hour.

    lines : (local, cell name, text) of each row. before, after : time to the neighbour in the file,
    0 where there is none. shift : the span that repeats.
    """

    file: int
    begin: int
    end: int
    lines: list
    before: int
    after: int
    shift: int

    @property
    def follows(self):
        """Whether the record before it leads into the first pass."""
        return 0 < self.before < self.shift


@dataclass
class _Passes:
    """Lines known to be in each pass, (local, cell) -> texts, and what first passes run through."""

    first: dict
    second: dict
    through: list  # (from, to, cell names)


def civil_utc(files, zone_name, interval):
    """UTC of the rows of each file, and where they do not exist: list of (utc, absent).

    files : list of `Parsed`; interval : microseconds.
    """
    readings = [read_civil(parsed.local, zone_name) for parsed in files]
    utc = [reading.late.copy() for reading in readings]
    known, waiting = _Passes({}, {}, []), []

    def settle(run, split):
        rows = slice(run.begin, run.begin + split)
        utc[run.file][rows] = readings[run.file].early[rows]
        _take(known.first, run.lines[:split])
        _take(known.second, run.lines[split:])
        if split:
            known.through.append(_through(run, split))

    for number, (parsed, reading) in enumerate(zip(files, readings, strict=True)):
        for begin, end in _runs(parsed.local, reading.repeated):
            shift = int(reading.late[begin] - reading.early[begin])
            run = _run(number, parsed, begin, end, shift)
            back = _step_back(run.lines, interval >= shift)
            if back is not None:
                settle(run, back)
            elif run.follows:
                settle(run, len(run.lines))
            else:
                waiting.append(run)
    if waiting:
        clear = [parsed.local[~r.repeated] for parsed, r in zip(files, readings, strict=True)]
        clear = np.unique(np.concatenate(clear))
        waiting.sort(key=lambda one: one.lines)
    while waiting:
        told = [_evidence(run, known, clear, interval) for run in waiting]
        best = min(range(len(waiting)), key=lambda n: told[n][0])
        run = waiting.pop(best)
        settle(run, len(run.lines) if told[best][1] else 0)
    return [(moments, reading.absent) for moments, reading in zip(utc, readings, strict=True)]


def _runs(local, repeated):
    """(begin, end) of the runs of repeated times of the same date, in file order."""
    rows = np.flatnonzero(repeated)
    if not len(rows):
        return []
    breaks = (np.diff(rows) > 1) | (np.abs(np.diff(local[rows])) > DAY)
    begins = rows[np.concatenate([[True], breaks])]
    ends = rows[np.concatenate([breaks, [True]])] + 1
    return list(zip(begins.tolist(), ends.tolist(), strict=True))


def _run(number, parsed, begin, end, shift):
    lines, local = [], parsed.local
    for row in range(begin, end):
        cell = "" if parsed.cell is None else str(parsed.columns[parsed.cell[row]])
        lines.append((int(local[row]), cell, parsed.sheet.line(int(parsed.line[row]))))
    before = int(local[begin] - local[begin - 1]) if begin else 0
    after = int(local[end] - local[end - 1]) if end < len(local) else 0
    return _Run(number, begin, end, lines, before, after, shift)


def _through(run, split):
    """Local times that a run's first `split` rows, and its neighbours, show to be passed."""
    low = run.lines[0][0] - (run.before if run.follows else 0)
    goes_on = split < len(run.lines) or run.after
    high = run.lines[0][0] + DAY if goes_on else run.lines[split - 1][0]
    return low, high, {cell for _, cell, _ in run.lines}


def _step_back(lines, equal_counts):
    """Index of the first line whose clock has stepped back, or None."""
    seen = set()
    for index, (local, cell, _) in enumerate(lines):
        if index and local < lines[index - 1][0]:
            return index
        if equal_counts and (local, cell) in seen:
            return index
        seen.add((local, cell))
    return None


def _take(taken, lines):
    for local, cell, text in lines:
        taken.setdefault((local, cell), set()).add(text)


def _evidence(run, known, clear, interval):
    """(number of the rule that tells, whether it tells of the first pass)."""
    alike = [_shares(run, taken) for taken in (known.first, known.second)]
    if alike[0] != alike[1]:
        return 3, alike[0]
    for low, high, cells in known.through:
        if any(low <= local <= high and cell in cells for local, cell, _ in run.lines):
            return 4, False
    if any((local, cell) in known.second for local, cell, _ in run.lines):
        return 4, True
    links = _links(run, known, clear, LONGEST_STEP * interval)
    if len(links) == 1:
        return 5, links.pop()
    start = run.lines[0][0]
    if ((clear < start) & (clear > start - run.shift)).any():
        return 6, True
    if any(0 < start - local < run.shift for local, _ in known.first):
        return 6, True
    return 7, True


def _shares(run, taken):
    """Whether a line of the run is one of those taken."""
    return any(text in taken.get((local, cell), ()) for local, cell, text in run.lines)


def _links(run, known, clear, longest):
    """What records less than `longest` before or after the run tell: a set of first pass or not."""
    start, last = run.lines[0][0], run.lines[-1][0]
    links = set()
    if 0 < run.after <= longest:
        links.add(False)
    if ((clear < start) & (clear >= start - longest)).any():
        links.add(True)
    for near in (
        lambda local: 0 < start - local <= longest,
        lambda local: 0 < local - last <= longest,
    ):
        first, second = (
            any(near(local) for local, _ in taken) for taken in (known.first, known.second)
        )
        if first != second:
            links.add(first)
    return links
