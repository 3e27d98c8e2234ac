"""The reports of a rehearsal: `rehearsal.json` and `rehearsal.csv`."""

import numpy as np
import pandas as pd

import sapflux
from sapflux.pipeline.identity import plain, write_json
from sapflux.pipeline.tables import guarded
from sapflux.scaling.whole_stands import ALL

COLUMNS = (
    "level", "name", "species", "unit", "days", "days_refused", "truth", "sampled", "result",
    "sampling_error", "processing_error", "design_error", "bias",
)  # fmt: skip


def write_reports(found):
    """Write the reports beside the virtual site and return their paths.

    With faults, `faults.csv` is the truth table of all that were injected.
    """
    json, csv = found.folder / "rehearsal.json", found.folder / "rehearsal.csv"
    write_json(as_data(found), json)
    _write(rows(found), csv)
    if not len(found.faults):
        return [json, csv]
    faults = found.folder / "faults.csv"
    _write(found.faults, faults)
    return [json, csv, faults]


def _write(table, path):
    safe = table.map(lambda cell: guarded(cell) if isinstance(cell, str) else cell)
    safe.to_csv(path, index=False, float_format="%.5f", lineterminator="\n", encoding="utf-8")


def as_data(found):
    """A rehearsal as plain data."""
    return plain({
        "program": "sapflux",
        "version": sapflux.__version__,
        "seed": found.seed,
        "knowledge": found.knowledge,
        "recipe": found.recipe,
        "forward_model": found.options,
        "run": found.identity,
        "stands": found.stands.to_dict("records"),
        "steps": found.steps.to_dict("records"),
        "trees": spread(found.trees) | {"each": found.trees.to_dict("records")},
        "probes": spread(found.probes) | {"each": found.probes.to_dict("records")},
        "faults": found.faults["kind"].value_counts().sort_index().to_dict(),
        "left_out": list(found.left_out),
        "unverified": list(found.unverified),
    })  # fmt: skip


def spread(table):
    """Mean and spread of the relative bias over trees or probes."""
    bias = table["bias"].to_numpy(dtype=float) if len(table) else np.empty(0)
    return {
        "number": len(bias),
        "mean_bias": float(bias.mean()) if len(bias) else None,
        "spread": float(bias.std(ddof=1)) if len(bias) > 1 else None,
    }


def rows(found):
    """One table of all levels: stand and species [mm], tree [kg], probe, step [mm]."""
    stands = found.stands.rename(columns=lambda name: name.removesuffix("_mm"))
    stands = stands.rename(columns={"stand": "name"}).assign(
        level=np.where(found.stands["species"] == ALL, "stand", "species"), unit="mm"
    )
    stands["bias"] = stands["result"] / stands["sampled"] - 1.0
    steps = found.steps.rename(columns={"stand": "name", "error_mm": "processing_error"})
    steps = steps.assign(level="step: " + steps.pop("step"), unit="mm")
    whole = pd.concat([stands, found.trees, found.probes, steps], ignore_index=True)
    return whole.reindex(columns=list(COLUMNS))
