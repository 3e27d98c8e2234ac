"""The site as one frozen object, and its clock."""

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from sapflux.site.config import Layout, Log, Position


@dataclass(frozen=True)
class Site:
    """A validated site folder.

    `tables` maps every table's name to a tuple of its rows (empty if the file is absent); rows
    are the classes of `sapflux.site.tables`. `rows_at` maps a table to the line in its file of
    each row, for messages.
    """

    folder: Path
    key: str  # name of the folder: how outputs are named
    position: Position
    layouts: dict[str, Layout]
    logs: dict[str, Log]
    tables: dict[str, tuple]
    rows_at: dict[str, tuple]

    def table(self, name):
        """Rows of a table."""
        return self.tables[name]

    @property
    def offset(self):
        """Fixed standard time minus UTC, as timedelta64[s]."""
        return np.timedelta64(round(self.position.utc_offset_h * 3600), "s")

    def utc(self, moment, default=None):
        """A table's time (fixed standard time) as UTC datetime64[s]; `default` where blank."""
        if moment is None:
            return default
        return np.datetime64(moment, "s") - self.offset

    def standard(self, utc):
        """UTC datetime64 as fixed standard time."""
        return utc + self.offset

    def day_of(self, utc_ends):
        """Day of fixed standard time that records belong to, datetime64[D], by their ends in UTC.

        A record that ends at 0 h belongs to the day before.
        """
        return (self.standard(utc_ends) - np.timedelta64(1, "s")).astype("datetime64[D]")
