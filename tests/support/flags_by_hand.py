"""Flags that exist while a test runs, so that bits which no screen uses yet can be tested."""

from contextlib import contextmanager

import numpy as np
import pytest

from sapflux import quality
from sapflux.pipeline import tables


@contextmanager
def flags_defined(*flags, scaled=()):
    """The flags beside the program's own; scaled : names of those of what is scaled."""
    rows = [*quality.ROWS, *flags]
    known = quality.by_name(rows)
    above = {*quality.SCALED, *scaled}
    columns = list(tables.COLUMNS["installations"])
    columns[-1:-1] = [f"{flag.name}_fraction" for flag in flags if flag.name not in above]
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(quality, "FLAGS", known)
        patch.setattr(quality, "SCALED", above)
        patch.setattr(quality, "NATIVE", tuple(name for name in known if name not in above))
        patch.setattr(quality, "MASKING", np.int64(sum(row.mask for row in rows if row.masks)))
        patch.setitem(tables.COLUMNS, "installations", tuple(columns))
        yield
