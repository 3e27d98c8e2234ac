"""The Python entry: run a site, get its written files opened lazily."""

import json
import time
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path

import pandas as pd
import xarray as xr

from sapflux.errors import Fault, UserError, nearest
from sapflux.pipeline.compute import compute
from sapflux.pipeline.execute import BLOCK_DAYS
from sapflux.pipeline.outputs import run_identity, write_run
from sapflux.pipeline.plan import check_plan
from sapflux.pipeline.recipe import load_recipe
from sapflux.pipeline.staging import publish
from sapflux.scaling.whole_stands import ALL
from sapflux.site.load import load_site

# Columns of text that may be blank throughout: blank is "", never a missing number.
TEXTS = ("reason", "text", "removed", "ended", "verdict", "stand", "species", "tree")


@dataclass(frozen=True)
class Run:
    """A written run. Tables and netCDF files are read when asked for."""

    folder: Path

    def table(self, name):
        """A table of the run as a DataFrame, for example `table("daily")`."""
        path = self._file(name, ".csv", "table")
        frame = pd.read_csv(path, dtype=dict.fromkeys(TEXTS, str))
        texts = [column for column in TEXTS if column in frame]
        return frame.fillna(dict.fromkeys(texts, ""))

    def dataset(self, name):
        """A netCDF file of the run, opened lazily: "probes", "trees", "stand", "origin", ..."""
        return xr.open_dataset(self._file(name, ".nc", "file"), decode_timedelta=False)

    def _file(self, name, suffix, kind):
        path = self.folder / f"{name}{suffix}"
        if not path.is_file():
            known = [own.stem for own in self.folder.glob(f"*{suffix}")]
            raise UserError(
                Fault(str(self.folder), f"no {kind} {name!r} in this run", nearest(name, known))
            )
        return path

    @cached_property
    def record(self):
        """`run.json`: version, identity, recipe, inputs."""
        return json.loads((self.folder / "run.json").read_text(encoding="utf-8"))

    @property
    def probes(self):
        """Sap flux density of every probe on the common step."""
        return self.dataset("probes")

    @property
    def trees(self):
        """Sap flow of every instrumented tree."""
        return self.dataset("trees")

    @property
    def stand(self):
        """Transpiration of every stand and species."""
        return self.dataset("stand")


def run_site(
    path,
    *,
    recipe="stand_water_use",
    out="results",
    native=False,
    keep_all=False,
    block_days=BLOCK_DAYS,
):
    """Run one site folder and return its `Run`.

    path : site folder; recipe : name or path of a recipe; out : folder of results, in which the
    run stands under the site folder's name; native : also write the signals at the native step;
    keep_all : keep every file of earlier runs; block_days : length of a block in time [d], which
    changes no result.

    Raises SiteError, RecipeError or DataError, each with every fault found, and UserError where
    the results cannot be written; the former result then stands as it was.
    """
    return run_and_keep(
        path, recipe=recipe, out=out, native=native, keep_all=keep_all, block_days=block_days
    )[0]


def run_and_keep(
    path, *, recipe, out, native=False, keep_all=False, block_days=BLOCK_DAYS, beside=True
):
    """As `run_site`, with what was computed still in memory: (`Run`, `Computed`).

    beside : whether to run the methods that the recipe lists beside its own.
    """
    start = time.perf_counter()
    site = load_site(path)
    chosen = load_recipe(recipe) if beside else load_recipe(recipe).alone()
    check_plan(site, chosen)
    found = compute(site, chosen, native=native, block_days=block_days)
    identity = run_identity(site, chosen, found)

    def write(folder):
        found.seconds["total"] = round(time.perf_counter() - start, 3)
        write_run(folder, site, chosen, found, identity)

    publish(Path(out), site.key, identity, write, keep_all=keep_all)
    return Run(Path(out) / site.key), found


def summary(run):
    """What a person wants to know first of a run, as plain data."""
    ledger = run.table("ledger")
    classes = ledger.drop(columns=["file", "sha256"]).sum()
    scaled = (run.folder / "season.csv").is_file()  # a recipe may end before the stand
    return {
        "site": run.record["site"]["name"],
        "recipe": run.record["recipe"]["name"],
        **run.record["span"],
        "files": len(ledger),
        "ledger": {name: int(number) for name, number in classes.items()},
        "season": run.table("season").to_dict("records") if scaled else [],
        "beside": season_beside(run),
        "refused": [*refused_days(run.table("daily"))] if scaled else [],
        "notes": run.record["notes"],
        "unverified": run.record["unverified"],
        "folder": str(run.folder),
        "identity": run.record["identity"],
        "written": [
            (path.name, run.record["written"].get(path.name, ""))
            for path in sorted(run.folder.iterdir())
        ],
    }


def season_beside(run):
    """What other methods of a stage made of each stand's season: rows, none without any."""
    if not (run.folder / "methods_beside.csv").is_file():
        return []
    rows = run.table("methods_beside")
    season = rows[(rows["period"] == "season") & (rows["species"] == ALL)]
    return season.drop(columns=["period", "species"]).to_dict("records")


def refused_days(daily):
    """A sentence for each stand with refused days: how many, and the commonest reason."""
    whole = daily[(daily["species"] == "all") & (daily["valid"] == 0)]
    for stand, own in whole.groupby("stand", sort=False):
        parts = daily[(daily["stand"] == stand) & (daily["valid"] == 0)]
        reasons = parts[parts["species"] != "all"]["reason"].value_counts()
        days = "day" if len(own) == 1 else "days"
        yield (
            f"{stand}: {len(own)} {days} refused, most often because: {reasons.index[0]} "
            "(daily.csv has each)"
        )
