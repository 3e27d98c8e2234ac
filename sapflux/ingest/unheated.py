"""Signals of unheated pairs, laid on the records of the heated probes that they serve."""

import numpy as np

from sapflux import schema
from sapflux.ingest.channels import single_series
from sapflux.ingest.series import on_records
from sapflux.site.installations import installation_numbers
from sapflux.site.spans import holding

# What a pair logs -> what it is beside the heated probe.
SERVED = {"unheated_emf": "natural_emf", "unheated_difference": "natural_difference"}


def natural_names(site, probes):
    """Names of the natural signals that some of the heated probes have by `pairs.csv`."""
    pairs = {row.unheated for row in site.table("pairs") if row.heated in set(probes)}
    logged = {c.quantity for c in site.table("channels") if c.kind == "probe" and c.id in pairs}
    return {SERVED[quantity] for quantity in logged & SERVED.keys()}


def natural_signals(site, logs, probes, points, time, interval_s):
    """name -> (dims, values) of the natural signals on the records of a cube.

    A pair counts while `pairs.csv` gives it to the probe, by the middle of a record, and while it
    is installed. Each point of the probe takes the pair's point of the same number, or the
    deepest where the pair has fewer. Values outside the plausible range, or taken out by
    `exclusions.csv`, are NaN. Another interval than that of the records is read as weather is.

    time : (time) datetime64[s], ends of the records [UTC]; interval_s : their length [s].
    """
    shape = (len(probes), points, len(time))
    found = {name: np.full(shape, np.nan) for name in SERVED.values()}
    middles = time - np.timedelta64(interval_s * 500, "ms")
    for row in site.table("pairs"):
        if row.heated not in probes:
            continue
        held = installation_numbers(site, [row.unheated], time, interval_s)[0] >= 0
        held &= holding(site, row, middles)
        if not held.any():
            continue
        for point, own in enumerate(_points(site, row.unheated, points)):
            for quantity, name in SERVED.items():
                series = single_series(site, logs, "probe", quantity, row.unheated, own)
                if series is not None:
                    line = found[name][probes.index(row.heated), point]
                    line[held] = on_records(series, time[held], interval_s)
    return {
        name: (schema.RECORD, values) for name, values in found.items() if np.isfinite(values).any()
    }


def _points(site, unheated, points):
    """For each point of the heated probe, the point of the pair that serves it."""
    own = max(
        (c.point for c in site.table("channels") if c.kind == "probe" and c.id == unheated),
        default=1,
    )
    return [min(point, own) for point in range(1, points + 1)]
