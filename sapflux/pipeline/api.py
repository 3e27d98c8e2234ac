"""The Python entry: run a site, get its written files opened lazily."""

import json
import time
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path

import pandas as pd
import xarray as xr

from sapflux.pipeline.compute import compute
from sapflux.pipeline.execute import BLOCK_DAYS
from sapflux.pipeline.outputs import run_identity, write_run
from sapflux.pipeline.plan import check_plan
from sapflux.pipeline.recipe import load_recipe
from sapflux.pipeline.staging import publish
from sapflux.site.load import load_site

# Columns of text that may be blank throughout: blank is "", never a missing number.
TEXTS = ("reason", "text", "removed", "ended", "verdict", "stand", "species", "tree")


@dataclass(frozen=True)
class Run:
    """A written run. Tables and netCDF files are read when asked for."""

    folder: Path

    def table(self, name):
        """A table of the run as a DataFrame, for example `table("daily")`."""
        frame = pd.read_csv(self.folder / f"{name}.csv", dtype=dict.fromkeys(TEXTS, str))
        texts = [column for column in TEXTS if column in frame]
        return frame.fillna(dict.fromkeys(texts, ""))

    def dataset(self, name):
        """A netCDF file of the run, opened lazily: "probes", "trees", "stand", "origin", ..."""
        return xr.open_dataset(self.folder / f"{name}.nc", decode_timedelta=False)

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

    Raises SiteError, RecipeError or DataError, each with every fault found; the former result
    then stands as it was.
    """
    start = time.perf_counter()
    site = load_site(path)
    chosen = load_recipe(recipe)
    check_plan(site, chosen)
    found = compute(site, chosen, native=native, block_days=block_days)
    identity = run_identity(site, chosen, found)

    def write(folder):
        found.seconds["total"] = round(time.perf_counter() - start, 3)
        write_run(folder, site, chosen, found, identity)

    publish(Path(out), site.key, identity, write, keep_all=keep_all)
    return Run(Path(out) / site.key)


def summary(run):
    """What a person wants to know first of a run, as plain data."""
    season = run.table("season")
    ledger = run.table("ledger")
    classes = ledger.drop(columns=["file", "sha256"]).sum()
    daily = run.table("daily")
    return {
        "site": run.record["site"]["name"],
        "recipe": run.record["recipe"]["name"],
        "from": str(daily["start"].min()),
        "to": str(daily["end"].max()),
        "files": len(ledger),
        "ledger": {name: int(number) for name, number in classes.items()},
        "season": season.to_dict("records"),
        "notes": run.record["notes"],
        "folder": str(run.folder),
        "identity": run.record["identity"],
        "written": [
            (path.name, run.record["written"].get(path.name, ""))
            for path in sorted(run.folder.iterdir())
        ],
    }
