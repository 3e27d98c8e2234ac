"""A species' own calibration from a table of gravimetric flux: read, fitted, written, drawn."""

import csv
import io
import re
from dataclasses import dataclass
from datetime import date
from pathlib import Path
from typing import Literal

from scipy.stats import t as student

from sapflux.errors import DataError, Fault
from sapflux.physics.calibration import FEWEST_STEMS, PowerLaw, fit_power_law
from sapflux.pipeline.tables import guarded
from sapflux.site.cells import Positive
from sapflux.site.csvfile import read_table
from sapflux.site.tables import Calibration, Row, columns_of

FEWEST_POINTS = 5  # own judgement
LEAST_RANGE = 1.5  # highest over lowest index: own judgement
DIGITS = 5  # significant, of what is written


class Gravimetric(Row):
    """One observation: the flow index of a probe and the flux that was weighed meanwhile."""

    flow_index: Positive
    flux_g_m2_s: float  # may be 0 or negative: the scatter about a small mean
    stem: str = ""
    heating: Literal["continuous", "intermittent"] = "continuous"


@dataclass(frozen=True)
class Fitted:
    """A calibration with the observations behind it."""

    name: str
    species: str
    heating: str
    source: str
    rows: tuple  # of Gravimetric
    law: PowerLaw  # in g m-2 s-1


def calibrate(path, *, species="", name=""):
    """Fit the calibration of a table; see `Gravimetric` for its columns.

    species, name : of the register's row; name "": that of the file.

    DataError with every fault of the table: those of its cells by line, a stem named in some rows
    only, several kinds of heating, fewer than 5 points, too narrow a range of the flow index,
    fluxes that no power law has as its mean, or that do not rise with the index.
    """
    path = Path(path)
    table = read_table(path, Gravimetric)
    faults = [*table.faults, *_table_faults(path, table)]
    if faults:
        raise DataError(faults)
    stems = [row.stem for row in table.rows]
    index, flux = zip(*((row.flow_index, row.flux_g_m2_s) for row in table.rows), strict=True)
    try:
        law = fit_power_law(index, flux, stems if all(stems) else None)
    except ValueError as error:
        remedy = "The mean of flux_g_m2_s must be positive at every flow index: see its signs."
        raise DataError(Fault(str(path), str(error), remedy)) from None
    if law.exponent <= 0.0:
        fault = f"the flux does not rise with the flow index: exponent {law.exponent:.3g}"
        remedy = "An exponent is above 0: see that both columns are of the same moments."
        raise DataError(Fault(str(path), fault, remedy))
    stems = f" of {law.stems} stem{'s' * (law.stems > 1)}" if law.stems else ""
    source = f"gravimetric, {law.points} points{stems} ({path.name})"
    return Fitted(name or path.stem, species, table.rows[0].heating, source, table.rows, law)


def _table_faults(path, table):
    """What is wrong with the rows together; those that cannot be read count as rows."""
    rows = list(zip(table.rows, table.lines, strict=True))
    if any(row.stem for row, _ in rows):
        for row, line in rows:
            if not row.stem:
                yield Fault(f"{path}, row {line}", "the stem is blank, and other rows name theirs",
                            "Name the stem of every row, or of none.")  # fmt: skip
    for row, line in rows:
        if row.heating != rows[0][0].heating:
            yield Fault(
                f"{path}, row {line}",
                f"heating is {row.heating!r}, and {rows[0][0].heating!r} in row {rows[0][1]}",
                "Each kind of heating has a calibration of its own: give them in two tables.",
            )
    number = len(rows)
    if table.faults:
        return
    if number < FEWEST_POINTS:
        yield Fault(str(path), f"{number} points", f"Give at least {FEWEST_POINTS}.")
        return
    lowest, highest = (f(row.flow_index for row, _ in rows) for f in (min, max))
    if highest < LEAST_RANGE * lowest:
        yield Fault(
            str(path),
            f"the flow index has no range: {lowest:g} to {highest:g}",
            f"An exponent needs a highest index of {LEAST_RANGE:g} times the lowest, or more.",
        )


def register_row(fitted):
    """Column of calibrations.csv -> text, or number of 5 significant digits, dated today."""
    law = fitted.law
    cells = {
        "calibration": fitted.name,
        "species": fitted.species,
        "method": "heat_dissipation",
        "heating": fitted.heating,
        "factor_g_m2_s": law.factor,
        "exponent": law.exponent,
        "lowest_index": law.lowest,
        "highest_index": law.highest,
        "ln_factor_error": law.ln_factor_error,
        "exponent_error": law.exponent_error,
        "error_correlation": law.error_correlation,
        "source": fitted.source,
        "date": date.today().isoformat(),
    }
    return {
        name: cells[name] if isinstance(cells[name], str) else float(f"{cells[name]:.{DIGITS}g}")
        for name in columns_of(Calibration)
    }


def register_text(fitted):
    """Header and row to paste into calibrations.csv."""
    row = register_row(fitted)
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(row)
    writer.writerow([guarded(v) if isinstance(v, str) else f"{v:g}" for v in row.values()])
    return text.getvalue()


def covariance_in_words(law):
    """How the errors were found."""
    if law.by_stem:
        times = student.ppf(0.975, law.stems - 1)
        return (
            f"from leaving out each of the {law.stems} stems in turn; the 95 % interval is "
            f"{times:.1f} of them to either side (Student's t)"
        )
    if law.stems:
        return f"from the scatter of points: {law.stems} of {FEWEST_STEMS} stems needed for theirs"
    return "from the scatter of points, as if no stem differed from another"


def plot_path(out, name):
    """Where the plot goes: `out` itself if it ends in .svg, else a file of the name in it."""
    out = Path(out)
    safe = re.sub(r"[^\w.-]+", "_", name) or "calibration"
    return out if out.suffix.lower() == ".svg" else out / f"{safe}.svg"
