"""Faults of weather sensors: humidity, radiation, rain."""

import numpy as np

from sapflux.virtual.copy_values import as_written
from sapflux.virtual.faults_kinds import Kind, columns_of


def humidity_ceiling(records, fault, rng):
    """An aged sensor that never shows more than 1 - `size`."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        top = as_written(1.0 - fault.size, row.quantity, row.unit)
        records.values[rows, column] = np.minimum(records.values[rows, column], top)


def humidity_rain_bias(records, fault, rng):
    """A wet shield from the first rain on: humidity `size` too high, at most saturated."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        top, more = (as_written(v, row.quantity, row.unit) for v in (1.0, fault.size))
        wet = np.minimum(records.values[rows, column] + more, top)
        records.values[rows, column] = np.maximum(records.values[rows, column], wet)


def radiation_offset(records, fault, rng):
    """A pyranometer that shows `size` W m-2 in the dark, and as much too much by day."""
    rows = records.rows(fault)
    for column, row in records.struck(fault):
        records.values[rows, column] += as_written(fault.size, row.quantity, row.unit)


def clogged_gauge(records, fault, rng):
    """Leaves in the funnel: the share `size` of the rain is not counted."""
    rows = records.rows(fault)
    for column, _ in records.struck(fault):
        records.values[rows, column] *= 1.0 - fault.size


KINDS = (
    Kind("humidity_ceiling", columns_of("relative_humidity"), 0.1, (0.01, 0.15), "1", (5.0, 60.0),
         humidity_ceiling),
    Kind("humidity_rain_bias", columns_of("relative_humidity"), 0.3, (0.005, 0.05), "1",
         (0.25, 1.0), humidity_rain_bias, begins="rain"),
    Kind("radiation_offset", columns_of("shortwave_radiation"), 0.1, (1.0, 20.0), "W m-2",
         (5.0, 60.0), radiation_offset, signed=True),
    Kind("clogged_gauge", columns_of("precipitation"), 0.2, (0.1, 1.0), "1", (2.0, 40.0),
         clogged_gauge, begins="rain"),
)  # fmt: skip
