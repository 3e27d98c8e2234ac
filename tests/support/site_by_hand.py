"""A small site from tables written as text, as they stand in the CSV files."""

import csv
import io
from pathlib import Path

from sapflux.site.config import Position
from sapflux.site.model import Site
from sapflux.site.tables import TABLES


def site_by_hand(utc_offset_h=0.0, **texts):
    """A `Site` whose tables are the given texts; lines may be indented, blank cells are blank."""
    assert texts.keys() <= TABLES.keys()
    tables = {name: rows(TABLES[name], texts.get(name, "")) for name in TABLES}
    position = Position(
        name="Ridge", latitude_deg=47.0, longitude_deg=15.0, elevation_m=400.0,
        utc_offset_h=utc_offset_h, water_year_start="10-01", common_step_min=30,
    )  # fmt: skip
    rows_at = {name: tuple(range(2, 2 + len(kept))) for name, kept in tables.items()}
    return Site(Path("configs/ridge"), "ridge", position, {}, {}, tables, rows_at)


def rows(row_class, text):
    lines = "\n".join(line.strip() for line in text.strip().splitlines())
    cells = csv.DictReader(io.StringIO(lines))
    return tuple(row_class(**{k: v for k, v in row.items() if v != ""}) for row in cells)
