"""A site's own design rehearsed on a virtual forest: what the pipeline makes of known truth."""

import shutil
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from sapflux.pipeline.api import run_and_keep
from sapflux.pipeline.compute import compute
from sapflux.pipeline.recipe import load_recipe
from sapflux.scaling.whole_stands import ALL
from sapflux.site.load import load_site
from sapflux.study.substitution import REST, ROUNDS, known_truth
from sapflux.virtual.copy import write_copy
from sapflux.virtual.faults import fault_table
from sapflux.virtual.given_table import read_weather
from sapflux.virtual.truth import stand_design, stand_mm

DAYS_A_YEAR = 365
MARK = ".rehearsal"  # marks a folder as one that a rehearsal may replace


@dataclass(frozen=True)
class Rehearsal:
    """What came of a rehearsal. `folder` holds the virtual site, its run and the reports.

    stands : one row a stand and species: truth, error-free sampling and result over the same
    days. trees, probes : bias of each. steps : contribution of each step to the error [mm].
    """

    folder: Path
    seed: int
    knowledge: str
    recipe: str
    identity: str
    stands: pd.DataFrame
    trees: pd.DataFrame
    probes: pd.DataFrame
    steps: pd.DataFrame
    left_out: tuple
    options: dict  # how the forward model made the truth
    faults: pd.DataFrame  # every fault injected: kind, log, name, begin, end, size, ...
    unverified: tuple  # published values of the recipe known from memory only


def rehearse(path, out, *, seed=1, years=None, days=None, recipe="stand_water_use",
             knowledge="estimated", weather=None, **options):  # fmt: skip
    """Write a virtual copy of a site, run the pipeline on it, and compare with its truth.

    path : site folder, a plan without logs is enough; out : folder for the copy, its run and the
    reports; seed : of all that is drawn; years : length, None is one growing season; days : the
    same in days; knowledge : "estimated", what a crew would know, or "exact"; weather : a `Weather`
    or the path of a table (`sapflux.virtual.given_table.WeatherRow`) whose whole days are the
    period, None for a stochastic one; options : of the forward model, see
    `sapflux.virtual.copy.write_copy` (faults, wound, azimuth, gradients). A former rehearsal of the
    same seed is replaced.

    Raises what loading, checking and running a site raise.
    """
    site = load_site(path)
    table = Path(weather) if isinstance(weather, str | Path) else None
    if table is not None:
        weather = read_weather(table, site)
    folder = Path(out) / site.key / f"seed_{seed}_{knowledge}"
    length = years * DAYS_A_YEAR if years else days
    if (folder / MARK).is_file():
        shutil.rmtree(folder)
    folder.mkdir(parents=True, exist_ok=True)
    (folder / MARK).touch()
    truth = write_copy(site, folder / site.key, seed=seed, days=length, knowledge=knowledge,
                       weather=weather, **options)  # fmt: skip
    run, first = run_and_keep(folder / site.key, recipe=recipe, out=folder / "run",
                              beside=False)  # fmt: skip
    copy, chosen = load_site(folder / site.key), load_recipe(recipe).alone()
    stands = stand_errors(truth, run.table("daily"))
    return Rehearsal(
        folder,
        seed,
        knowledge,
        chosen.name,
        run.record["identity"],
        stands,
        tree_errors(truth, run.table("tree_daily")),
        probe_errors(truth, first.probes, copy.position.common_step_min * 60),
        step_errors(truth, copy, chosen, first),
        truth.left_out,
        truth.options | ({} if table is None else {"weather_table": table.name}),
        fault_frame(truth),
        tuple(run.record["unverified"]),
    )


def fault_frame(truth):
    """The truth table of the faults injected, as text."""
    columns, rows = fault_table(truth)
    return pd.DataFrame(rows, columns=columns)


def stand_errors(truth, daily):
    """Truth, error-free sampling and result of each stand and species, over its valid days [mm].

    sampling_error_mm : error-free sampling minus truth, these trees for the stand;
    processing_error_mm : result minus error-free sampling, the pipeline on these trees;
    design_error_mm : standard error of sampling that the design implies, of the whole stand.
    """
    rows = []
    for stand, by_species in truth.strata.items():
        carriers = {s: c for s, c in truth.carriers.items() if s in by_species and c in by_species}
        design = _design(by_species, carriers)
        parts = {
            species: (truth.sampled_mm(stand, species), stand_mm(stratum))
            for species, stratum in by_species.items()
        }
        parts[ALL] = tuple(np.sum(list(parts.values()), axis=0))
        for species, (sampled, whole) in parts.items():
            own = daily[(daily["stand"] == stand) & (daily["species"] == species)]
            valid = own[own["valid"] == 1]
            days = np.isin(truth.dates, valid["start"].to_numpy(dtype="datetime64[D]"))
            result = valid["transpiration_mm"].sum() if len(valid) else np.nan
            rows.append({
                "stand": stand,
                "species": species,
                "days": len(valid),
                "days_refused": len(own) - len(valid),
                "truth_mm": whole[days].sum(),
                "sampled_mm": sampled[days].sum(),
                "result_mm": result,
                "sampling_error_mm": (sampled - whole)[days].sum(),
                "processing_error_mm": result - sampled[days].sum(),
                "design_error_mm": design * days.mean() if species == ALL else np.nan,
            })  # fmt: skip
    return pd.DataFrame(rows)


def _design(by_species, carriers):
    """Standard error of sampling of the season's total [mm]; NaN where a species has no sample."""
    judged = [stratum for species, stratum in by_species.items() if species not in carriers]
    if any(not stratum.sampled.any() or len(stratum.stems) < 2 for stratum in judged):
        return np.nan
    return stand_design(by_species, carriers)[0]


def tree_errors(truth, tree_daily):
    """Water use of each instrumented tree over its valid days [kg]: truth, result, bias."""
    rows = []
    per_day = 86400 // truth.step_s
    for tree, own in tree_daily[tree_daily["valid"] == 1].groupby("tree", sort=True):
        daily = truth.tree_flow(tree).reshape(-1, per_day).sum(axis=1) * truth.step_s
        days = np.isin(truth.dates, own["start"].to_numpy(dtype="datetime64[D]"))
        rows.append(_biased("tree", tree, daily[days].sum(), own["water_use_kg"].sum(), "kg"))
    return pd.DataFrame(rows)


def probe_errors(truth, probes, step_s):
    """Mean flux density of each probe's points over the steps that have a value [g m-2 s-1]."""
    rows = []
    every = step_s // truth.step_s
    ends = probes["time"].values.astype("datetime64[s]")
    steps = truth.weather.end[every - 1 :: every]
    here, there = np.isin(ends, steps), np.isin(steps, ends)
    for name in sorted(probes["probe"].values.astype(str)):
        true = truth.point_flux(name)
        true = true.reshape(len(true), -1, every).mean(axis=-1)[:, there]
        made = probes["flux_density"].sel(probe=name).values[: len(true), here]
        both = np.isfinite(made)
        if both.any():
            rows.append(_biased("probe", name, true[both].mean() * 1e3, made[both].mean() * 1e3,
                                "g m-2 s-1"))  # fmt: skip
    return pd.DataFrame(rows)


def step_errors(truth, site, recipe, first):
    """Contribution of each step to the processing error of each stand, over the same days [mm]."""
    days = {stand: _valid_days(first.tables["daily"], stand) for stand in truth.strata}
    errors = [_errors(truth, first, days)]
    for _, parts in ROUNDS:
        again = compute(site, recipe, logs=first.logs, known=known_truth(truth, parts))
        errors.append(_errors(truth, again, days))
    rows = []
    for stand in truth.strata:
        own = [round_of[stand] for round_of in errors]
        for (step, _), before, after in zip(ROUNDS, own[:-1], own[1:], strict=True):
            rows.append({"stand": stand, "step": step, "error_mm": before - after})
        rows.append({"stand": stand, "step": REST, "error_mm": own[-1]})
    return pd.DataFrame(rows)


def _valid_days(daily, stand):
    own = daily[(daily["stand"] == stand) & (daily["species"] == ALL) & (daily["valid"] == 1)]
    return own["start"].to_numpy(dtype="datetime64[D]")


def _errors(truth, found, days):
    """stand -> result minus error-free sampling over the given days [mm]."""
    daily = found.tables["daily"]
    out = {}
    for stand, by_species in truth.strata.items():
        own = daily[(daily["stand"] == stand) & (daily["species"] == ALL)]
        inside = np.isin(own["start"].to_numpy(dtype="datetime64[D]"), days[stand])
        true = np.isin(truth.dates, days[stand])
        sampled = [truth.sampled_mm(stand, species)[true].sum() for species in by_species]
        out[stand] = own["transpiration_mm"][inside].sum() - float(np.sum(sampled))
    return out


def _biased(level, name, true, made, unit):
    return {
        "level": level,
        "name": name,
        "truth": true,
        "result": made,
        "unit": unit,
        "bias": made / true - 1.0 if true else np.nan,
    }
