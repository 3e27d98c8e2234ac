"""The records of one log as faults see and change them."""

from dataclasses import dataclass, field

import numpy as np

from sapflux.physics import thermocouple
from sapflux.virtual import sensors
from sapflux.virtual.copy_values import as_written, decimals, probe_series

EMF = ("heated_emf", "unheated_emf")


@dataclass(frozen=True)
class Records:
    """`values` (record, channel) as a log writes them, each in the unit of its channel.

    end : (record) UTC; channels : rows of `channels.csv`; every : steps of the weather in a record;
    clean : the values without faults; declared : numbers that the layout declares as missing.
    """

    truth: object
    site: object
    channels: list
    every: int
    end: np.ndarray
    values: np.ndarray
    clean: np.ndarray
    declared: tuple = ()
    _kept: dict = field(default_factory=dict, repr=False)

    def rows(self, fault):
        """Numbers of the records that show a fault."""
        return np.flatnonzero((self.end > fault.begin) & (self.end <= fault.end))

    def days(self, fault):
        """Days since the fault began, at each of its records."""
        return (self.end[self.rows(fault)] - fault.begin) / np.timedelta64(86400, "s")

    def progress(self, fault):
        """0 to 1 from the begin of a fault to its end, at each of its records."""
        rows = self.rows(fault)
        return (self.end[rows] - fault.begin) / (fault.end - fault.begin)

    def hours(self, rows):
        """Hour of standard time at the end of records."""
        local = self.site.standard(self.end[rows])
        return (local - local.astype("datetime64[D]")) / np.timedelta64(3600, "s")

    def struck(self, fault):
        """(number, row of `channels.csv`) of each column of a fault."""
        return [(n, row) for n, row in enumerate(self.channels) if row.column in fault.columns]

    def mean(self, series):
        """A series of the weather's clock as means of records."""
        return series.reshape(-1, self.every).mean(axis=1)

    def daily_range(self, column):
        """How far a column goes from night to day: 5th to 95th percentile of the whole copy."""
        key = ("range", column)
        if key not in self._kept:
            values = self.clean[:, column]
            known = values[np.isfinite(values)]
            low, high = np.percentile(known, [5.0, 95.0]) if len(known) else (0.0, 1.0)
            row = self.channels[column]
            self._kept[key] = max(high - low, 10.0 ** -decimals(row.quantity, row.unit))
        return self._kept[key]

    def noise(self, column):
        """Standard deviation of a column's noise: 1.4826 MAD / sqrt(2) of first differences."""
        differences = np.diff(self.clean[:, column])
        return 1.4826 * np.nanmedian(np.abs(differences - np.nanmedian(differences))) / 2**0.5

    def zero_flow(self, row):
        """What a heated column would show without flow, in its unit: (record)."""
        key = ("zero", row.id, row.point, row.quantity)
        if key not in self._kept:
            kelvin = self.truth.zero_flow(row.id, row.point)
            if row.quantity in EMF and self.truth.stores[row.id] != "heated_difference":
                kelvin = thermocouple.emf(sensors.ROOM + kelvin) - thermocouple.emf(sensors.ROOM)
            elif row.quantity in EMF:
                kelvin = kelvin * thermocouple.sensitivity(sensors.ROOM)
            elif self.truth.stores[row.id] != "heated_difference":
                kelvin = sensors.kelvin_by_constant(
                    thermocouple.emf(sensors.ROOM + kelvin) - thermocouple.emf(sensors.ROOM)
                )
            self._kept[key] = as_written(self.mean(kelvin), row.quantity, row.unit)
        return self._kept[key]

    def rises(self, row):
        """Rises of the pulses behind a column without faults, downstream first: (2, record) [K]."""
        key = ("rises", row.id)
        if key not in self._kept:
            series = probe_series(self.truth, self.site, row, self.every)
            self._kept[key] = np.array([series["rise_downstream"], series["rise_upstream"]])
        return self._kept[key][:, row.point - 1]

    def natural(self, row):
        """What a heated column shows of the stem's own gradient, in its unit: (record)."""
        part = self.truth.probes[row.id][row.point - 1]
        return self.mean(sensors.natural_gradient(part, self.truth.weather)) * per_kelvin(row)


def per_kelvin(row):
    """Units of a thermal column in one kelvin of difference.

    >>> from sapflux.site.tables import Channel
    >>> row = Channel(log="a", column="b", kind="probe", id="P", point=1, quantity="heated_emf",
    ...               unit="mV")
    >>> round(per_kelvin(row), 4)
    0.0403
    """
    si = thermocouple.sensitivity(sensors.ROOM) if row.quantity in EMF else 1.0
    return float(as_written(si, row.quantity, row.unit) - as_written(0.0, row.quantity, row.unit))
