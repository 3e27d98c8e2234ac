"""Faults gathered for a reader: what is the same in many rows is told once."""

import re
from dataclasses import replace
from itertools import groupby

ROW = re.compile(r"(?P<file>.*), row (?P<row>\d+)", re.DOTALL)
KNOWN = "Known: "
SHORTEST_RUN = 4  # consecutive rows that are told as "a to b"
MOST_PARTS = 8  # runs of rows that are named; the rest is counted


def gathered(faults):
    """Faults without repetition, in the order of their first rows.

    Faults of one file that differ in their row only become one of 'rows 4, 5 and 6'. A list of
    known names is written once a file; where it comes again, 'Known: see above.' stands for it.
    """
    groups = {}
    for fault in faults:
        found = ROW.fullmatch(fault.where)
        place, row = (found["file"], int(found["row"])) if found else (fault.where, None)
        key = (place, row is None, fault.what, fault.remedy)
        _, rows = groups.setdefault(key, (fault, []))
        rows += [] if row is None else [row]
    told, out = set(), []
    for (place, *_), (fault, rows) in groups.items():
        if len(set(rows)) > 1:
            fault = replace(fault, where=f"{place}, rows {in_words(rows)}")
        before, mark, names = fault.remedy.partition(KNOWN)
        # Sections of site.toml are in one file.
        source = place.rpartition(", [")[0] or place
        if mark and (source, names) in told:
            fault = replace(fault, remedy=f"{before}{KNOWN}see above.")
        told.add((source, names))
        out.append(fault)
    return out


def in_words(rows):
    """Row numbers as messages write them.

    >>> in_words([6, 4, 5]), in_words([4, 5, 6, 7, 9])
    ('4, 5 and 6', '4 to 7 and 9')
    >>> in_words(range(1, 40, 2))
    '1, 3, 5, 7, 9, 11, 13, 15 and 12 more'
    """
    parts, counts = [], []
    numbered = enumerate(sorted(set(rows)))
    for _, run in groupby(numbered, key=lambda pair: pair[1] - pair[0]):
        run = [row for _, row in run]
        if len(run) >= SHORTEST_RUN:
            parts.append(f"{run[0]} to {run[-1]}")
            counts.append(len(run))
        else:
            parts += map(str, run)
            counts += [1] * len(run)
    if len(parts) > MOST_PARTS:
        parts = [*parts[:MOST_PARTS], f"{sum(counts[MOST_PARTS:])} more"]
    return " and ".join(filter(None, [", ".join(parts[:-1]), parts[-1]]))
