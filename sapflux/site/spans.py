"""Spans of time that tables give, laid on records as 1 inside and 0 outside."""

import numpy as np


def paired(site, records):
    """(dims, values): 1 while `pairs.csv` has an unheated pair for the probe.

    A record is where its middle is.
    """
    inside = np.zeros((len(records.probes), len(records.middles)), dtype=bool)
    for row in site.table("pairs"):
        if row.heated in records.probes:
            inside[records.probes.index(row.heated)] |= holding(site, row, records.middles)
    return _laid(inside)


def power_off(site, records):
    """(dims, values): 1 where the heater was off on purpose in a record or in part of it."""
    inside = np.zeros((len(records.probes), len(records.middles)), dtype=bool)
    for row, own in _references(site, records, ("power_off",)):
        inside[own] |= _touched(records, site.utc(row.from_), site.utc(row.to))
    return _laid(inside)


def at_rest(site, records):
    """(dims, values): 1 where a person vouches for a whole record that no sap flows."""
    inside = np.zeros((len(records.probes), len(records.middles)), dtype=bool)
    for row, own in _references(site, records, ("dormant", "cut")):
        begin, end = site.utc(row.from_), site.utc(row.to)
        inside[own] |= (records.begins >= begin) & (_ends(records) <= end)
    return _laid(inside)


def visited(site, records):
    """(dims, values): 1 where somebody was at a logger of the probe in a record or part of it.

    A visit counts while a channel of the probe is on its log.
    """
    inside = np.zeros((len(records.probes), len(records.middles)), dtype=bool)
    seen = {}
    for row in site.table("visits"):
        touched = _touched(records, site.utc(row.arrival), site.utc(row.departure))
        seen[row.log] = seen.get(row.log, False) | touched
    for row in site.table("channels"):
        if row.kind == "probe" and row.id in records.probes and row.log in seen:
            here = seen[row.log] & holding(site, row, records.middles)
            inside[records.probes.index(row.id)] |= here
    return _laid(inside)


def heater_state_given(site, records):
    """(dims, values): 1 while a channel gives the heater's state, of the probe or of its logger.

    A record is where its middle is. What a logger gives counts while the probe's signal is on it.
    """
    inside = np.zeros((len(records.probes), len(records.middles)), dtype=bool)
    channels = site.table("channels")
    states = [row for row in channels if row.quantity == "heater_state"]
    for place, probe in enumerate(records.probes):
        signals = [row for row in channels if row.kind == "probe" and row.id == probe]
        for state in states:
            held = holding(site, state, records.middles)
            if state.kind == "probe" and state.id == probe:
                inside[place] |= held
            for signal in signals if state.kind == "log" else ():
                if signal.log == state.id:
                    inside[place] |= held & holding(site, signal, records.middles)
    return _laid(inside)


def _references(site, records, kinds):
    """(row, [bool of each probe]) of `references.csv`: the probe named, its species, or all."""
    for row in site.table("references"):
        if row.kind in kinds:
            yield (
                row,
                [
                    row.probe in ("", probe) and row.species in ("", species)
                    for probe, species in zip(records.probes, records.species, strict=True)
                ],
            )


def _touched(records, begin, end):
    """(time) bool: a record has a part in [begin, end), or holds that moment if they are one."""
    return (_ends(records) > begin) & (records.begins < max(end, begin + np.timedelta64(1, "s")))


def _ends(records):
    return records.begins + 2 * (records.middles - records.begins)


def holding(site, row, moments):
    """(time) bool: [from, to) of a row holds the moment [UTC]; blank is open."""
    inside = np.ones(len(moments), dtype=bool)
    if row.from_ is not None:
        inside &= moments >= site.utc(row.from_)
    if row.to is not None:
        inside &= moments < site.utc(row.to)
    return inside


def _laid(inside):
    return ("probe", "time"), inside.astype(np.int8)
