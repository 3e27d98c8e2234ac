"""Faults of a logger's clock: summer time, drift, a lost date, the other end of the interval."""

import numpy as np

from sapflux.virtual.faults_kinds import Kind, whole_logs

CLOCK = ("summer_time", "stamp_mixup", "clock_reset", "clock_drift")
EPOCHS = ("1990-01-02", "2000-01-01")  # what a clock shows that lost its date


def shown_end(end, log, faults):
    """Ends of intervals as the clock of a log has them, from the true ones: (record) UTC."""
    shown = end.copy()
    for fault in faults:
        rows = (end > fault.begin) & (end <= fault.end)
        if fault.kind == "summer_time":
            shown[rows] += np.timedelta64(round(fault.size * 3600), "s")
        elif fault.kind == "stamp_mixup":
            way = -1 if log.stamp == "end" else 1
            shown[rows] += way * np.timedelta64(round(log.interval_min * 60), "s")
        elif fault.kind == "clock_reset":
            # Which date a clock falls back to is a matter of its make: by the length, for any seed.
            epoch = EPOCHS[round(fault.size * 100) % 2]
            shown[rows] = np.datetime64(epoch, "s") + (end[rows] - fault.begin)
    return shown


def drifted(values, end, faults):
    """Values (record, channel) that stand at each stamp of a clock that drifts.

    A clock that is `size` s d-1 fast writes its stamps too early: a stamp holds what truly was
    so much before, taken here by straight lines between records.
    """
    seconds = (end - end[0]) / np.timedelta64(1, "s")
    made = values
    for fault in faults:
        if fault.kind == "clock_drift":
            rows = np.flatnonzero((end > fault.begin) & (end <= fault.end))
            days = (end[rows] - fault.begin) / np.timedelta64(86400, "s")
            true = seconds[rows] - fault.size * days
            made = made.copy()
            for column in range(values.shape[1]):
                made[rows, column] = np.interp(true, seconds, values[:, column])
    return made


def interval_of(place, plan):
    """The one size that an exchange of start and end can have: the interval of the log [min]."""
    return (plan.logs[place.log].interval_min,)


KINDS = (
    Kind("summer_time", whole_logs, 0.02, (1.0, 1.0), "h", (1.0, 1.0), begins="visit",
         until="visit"),
    Kind("stamp_mixup", whole_logs, 0.01, (1.0, 1440.0), "min", (1.0, 1.0), begins="visit",
         until="visit", choices=interval_of),
    Kind("clock_reset", whole_logs, 0.01, (0.2, 6.0), "d", None),
    Kind("clock_drift", whole_logs, 0.05, (1.0, 120.0), "s d-1", (1.0, 1.0), begins="set",
         until="visit", signed=True),
)  # fmt: skip
