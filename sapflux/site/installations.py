"""Installations of probes: episodes with a start and an end, numbered from 0 for each probe.

A re-drilled or re-wired probe is a new installation: nothing that looks along time, be it a
baseline, an offset or a wound, reaches across.
"""

import numpy as np

STILL_IN = np.datetime64("NaT", "s")  # sorts after every time


def episodes(site, probe):
    """Rows of `probes.csv` of a probe, earliest first: their places are installation numbers."""
    rows = [row for row in site.table("probes") if row.probe == probe]
    return sorted(rows, key=lambda row: row.installed)


def heating(row):
    """How a row of `probes.csv` says that it is heated, in the words of `calibrations.csv`."""
    return "continuous" if row.heating_on_min is None else "intermittent"


def installed_span(site, probes):
    """(first installation, last removal) of these probes, datetime64[s] UTC; no end: year 9999."""
    rows = [row for row in site.table("probes") if row.probe in set(probes)]
    never = np.datetime64("9999-01-01", "s")
    begins = [site.utc(row.installed) for row in rows]
    ends = [site.utc(row.removed, never) for row in rows]
    return min(begins, default=never), max(ends, default=never)


def latest_begun(site, probes, times_end, interval_s):
    """Number of the installation that began last before each record, (probe, time) int16.

    Before the first installation it is the first. It goes on through the gap after a removal, so
    that facts laid by it hang on the moment alone, not on which other records are looked at.

    times_end : (time) datetime64, ends of the records [UTC]; interval_s : their length [s].
    """
    begins = times_end - np.timedelta64(int(interval_s), "s")
    numbers = np.zeros((len(probes), len(times_end)), dtype=np.int16)
    for place, probe in enumerate(probes):
        starts = [site.utc(row.installed) for row in episodes(site, probe)]
        if len(starts) > 1:
            found = np.searchsorted(np.array(starts), begins, side="right") - 1
            numbers[place] = np.maximum(found, 0)
    return numbers


def installation_numbers(site, probes, times_end, interval_s):
    """Number of the installation each record belongs to, (probe, time) int16; -1 outside.

    A record belongs where its whole interval lies in [installed, removed).

    times_end : (time) datetime64, ends of the records in order [UTC]; interval_s : length [s].
    """
    begins = times_end - np.timedelta64(int(interval_s), "s")
    numbers = np.full((len(probes), len(times_end)), -1, dtype=np.int16)
    for place, probe in enumerate(probes):
        for number, row in enumerate(episodes(site, probe)):
            first = np.searchsorted(begins, site.utc(row.installed))
            last = np.searchsorted(times_end, site.utc(row.removed, STILL_IN), side="right")
            numbers[place, first:] = -1  # what began last counts
            numbers[place, first:last] = number
    return numbers
