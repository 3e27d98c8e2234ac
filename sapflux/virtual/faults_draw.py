"""Which faults befall a virtual copy: kind, place, time and size, drawn from its seed."""

import numpy as np

from sapflux.virtual.copy_files import download_path, spans
from sapflux.virtual.faults import KINDS, LEVELS, Injected
from sapflux.virtual.faults_clock import CLOCK
from sapflux.virtual.faults_files import FROM_THE_END, SPOIL
from sapflux.virtual.faults_kinds import BEGINS, Calendar
from sapflux.virtual.seeds import generator

SEASON_DAYS = 150.0
MANY_TIMES = 3.0  # the number expected of "few"
TRIES = 40  # for a place and time at which no other fault is at work
LONGEST_SHARE = 0.5  # of the copy, that a fault with an end of its own lasts
SECONDS = {"h": 3600.0, "d": 86400.0}


def check_level(level):
    """ValueError for a level that is not in `LEVELS`."""
    if level not in LEVELS:
        raise ValueError(f"faults is {level!r}; known: {', '.join(LEVELS)}")


def draw_faults(truth, site, plan, level, kinds=None):
    """Faults of a virtual copy, a tuple of `Injected` in the order in which they act.

    level : "none"; "few", about what a well kept site sees: a number of each kind from its rate;
    "many", three times as many, and of every kind that has a place at least one in each season
    of 150 days and one in all.
    kinds : names of kinds to draw, None for all. Places and times are drawn so that faults do not
    overlap, as far as there is room; kinds earlier in the table choose first, and a fault of a
    whole log rather overlaps one of a column than none is drawn.

    ValueError for another level.
    """
    check_level(level)
    found = []
    if level == "none":
        return ()
    calendars = {name: calendar(truth, site, log) for name, log in plan.logs.items()}
    seasons = len(truth.dates) / SEASON_DAYS
    for kind in KINDS.values() if kinds is None else (KINDS[name] for name in kinds):
        rng = generator(truth.seed, f"fault/{kind.name}", "draw")
        begins = {log: BEGINS[kind.begins](c) for log, c in calendars.items()}
        places = [place for place in kind.places(plan, truth) if len(begins[place.log])]
        if not places:
            continue
        expected = kind.few * len(places) * seasons
        number = int(rng.poisson(expected))
        if level == "many":
            number = max(1, round(seasons), round(MANY_TIMES * expected))
        for _ in range(number):
            tries = []
            for _ in range(TRIES):
                place = places[rng.integers(len(places))]
                begin = begins[place.log][rng.integers(len(begins[place.log]))]
                fault = _fault(kind, place, begin, calendars[place.log], site, plan, rng)
                if fault:
                    clashes = max((_clash(fault, other) for other in found), default=0)
                    tries.append((clashes, len(tries), fault))
                    if not clashes:
                        break
            if tries:
                found.append(min(tries)[2])
    return tuple(found)


def calendar(truth, site, log):
    """The `Calendar` of a `Log` in a virtual copy."""
    every = round(log.interval_min * 60) // truth.step_s
    end = truth.weather.end[every - 1 :: every]
    interval = np.timedelta64(every * truth.step_s, "s")
    middle = site.standard(end - interval // 2)
    return Calendar(
        end,
        interval,
        spans(end[0] - interval, end[-1]),
        (middle - middle.astype("datetime64[D]")) / np.timedelta64(3600, "s"),
        truth.weather.precipitation.reshape(-1, every).sum(axis=1),
        truth.weather.air_temperature.reshape(-1, every).min(axis=1),
    )


def _fault(kind, place, begin, calendar, site, plan, rng):
    """The `Injected` that begins then; None where it cannot end within the copy."""
    whole = (calendar.end[-1] - begin) / np.timedelta64(1, "s")
    copy = (calendar.end[-1] - calendar.begin) / np.timedelta64(1, "s")
    low, high = kind.size
    if kind.lasting is None:
        high = max(min(high, LONGEST_SHARE * copy / SECONDS[kind.unit]), low)
    size = low * (high / low) ** rng.random()
    if kind.choices is not None:
        sizes = kind.choices(place, plan)
        size = sizes[rng.integers(len(sizes))]
    elif kind.signed:
        size *= rng.choice([-1.0, 1.0])
    name = place.name
    if kind.name in SPOIL and kind.until != "end":
        first, last = next(span for span in calendar.spans if span[0] == begin)
        name, end = download_path(plan.logs[place.log], site.standard(last)), last
        if kind.name in FROM_THE_END:
            size = min(size, 0.9 * (last - first) / np.timedelta64(86400, "s"))
            begin = last - np.timedelta64(round(size * 86400), "s")
    else:
        end = _end(kind, begin, size, calendar, rng)
    if end > calendar.end[-1] or whole <= 0.0:
        return None
    return Injected(
        kind.name, place.log, name, begin, end, float(size), kind.unit, kind.third(size),
        place.columns,
    )  # fmt: skip


def _end(kind, begin, size, calendar, rng):
    if kind.until == "end":
        return calendar.end[-1]
    if kind.until == "visit":
        later = [last for _, last in calendar.spans if last > begin]
        return later[0]
    if kind.lasting is None:
        seconds = size * SECONDS[kind.unit] + kind.after_h * 3600.0
    elif kind.lasting[0] == 0.0:
        return begin + calendar.interval * int(rng.integers(1, 3))
    else:
        shortest, longest = kind.lasting
        copy = (calendar.end[-1] - calendar.begin) / np.timedelta64(86400, "s")
        longest = max(min(longest, LONGEST_SHARE * copy), min(shortest, LONGEST_SHARE * copy))
        shortest = min(shortest, longest)
        seconds = shortest * (longest / shortest) ** rng.random() * 86400.0
    return max(begin + np.timedelta64(round(seconds), "s"), begin + calendar.interval)


def _clash(one, other):
    """2 if two faults would be at work on one thing at one time, 0 if not.

    1 if one of them is of a whole log and the other of some of its columns: that is borne where
    there is no room left.
    """
    if one.log != other.log or one.begin >= other.end or other.begin >= one.end:
        return 0
    if not _things(one) & _things(other):
        return 0
    return 2 if (one.name == one.log) == (other.name == other.log) else 1


def _things(fault):
    if fault.kind in CLOCK:
        return {("clock", fault.log)}
    if fault.kind in SPOIL:
        return {("file", fault.name)}
    return set(fault.columns)
