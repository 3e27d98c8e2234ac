"""Methods beside the recipe's own: the chain run again with another method of one stage.

The records, the days and everything else stay the same, so a difference is that method's alone.
All methods of a stage run together, so that what comes before the stage is done once a block.
Only days and steps on which both have a value are compared.
"""

from dataclasses import dataclass, field
from itertools import groupby, pairwise

import numpy as np
import pandas as pd
import xarray as xr

from sapflux.pipeline.execute import fit_variants, run_variants, variants_of
from sapflux.pipeline.join import Joined
from sapflux.pipeline.scale import scale
from sapflux.pipeline.total_tables import days_of
from sapflux.scaling.days import Days
from sapflux.scaling.whole_stands import ALL
from sapflux.site import facts

SECONDS_PER_HOUR = 3600.0
NEARLY_ALL_HOURS = 0.9  # share of the recipe's hours that makes a month comparable: own judgement
ADMISSIBLE = "admissible"  # column of an evidence table: whether the method may be used there
ONE_DAY = np.timedelta64(1, "D")
STAND_COLUMNS = (
    "chain", "stage", "method", "period", "stand", "species", "start", "end", "days",
    "recipe_mm", "beside_mm", "difference_mm",
)  # fmt: skip
PROBE_COLUMNS = (
    "chain", "stage", "method", "probe", "start", "end", "compared_h",
    "compared_fraction",
    "recipe_mm", "beside_mm", "difference_mm", "admissible", "spread_mm",
)  # fmt: skip


@dataclass(frozen=True)
class Corrected:
    """What a run has in memory once its probes are corrected and joined.

    chains : (method, interval) -> (Chain, its fitted tables, records that a channel covers);
    probes : the joined Dataset, and `scaled` what scaling made of it; weather : name -> series;
    days : `Days` of the recipe's own methods; evidence : their tables.
    """

    chains: dict
    probes: xr.Dataset
    scaled: xr.Dataset
    weather: dict
    days: Days
    evidence: dict


@dataclass
class Compared:
    """Tables of the methods run beside the recipe's own."""

    stands: pd.DataFrame
    probes: pd.DataFrame
    evidence: list = field(default_factory=list)  # (method, name of table, its rows) of each

    def tables(self):
        """The tables by the name of their file."""
        return {"methods_beside": self.stands, "probe_methods_beside": self.probes}


def run_beside(site, recipe, corrected, chosen, block_days):
    """Run each of the chosen methods, and compare: `Compared`.

    chosen : (chain, stage, method) as `plan.methods_beside` gives them.
    """
    stands, probes, evidence = [], [], []
    own = _own_admissible(recipe, corrected)
    for key, other, joined, tables in _each(recipe, corrected, chosen, block_days):
        chain, stage, method = key.values()
        scaled = scale(site, other, joined, corrected.weather, block_days)
        if scaled.stand is not None:
            days = days_of(site, other, scaled.stand, corrected.weather)
            touched = _touched(site, corrected, chain)
            stands += [key | row for row in _stand_rows(corrected.days, days, touched)]
        if chain != "scaling":
            table = _table_of(other, chain, stage)
            rows = tables.get(table)
            if rows is not None:
                evidence.append((method, table, rows))
            if "probe_flow" in scaled.probes and "probe_flow" in corrected.scaled:
                may = _admissible(rows)
                probes += [
                    key | row | {ADMISSIBLE: int(may.get(row["probe"], True))}
                    for row in _probe_rows(site, corrected.scaled, scaled.probes, chain, corrected)
                ]
    of_probes = pd.DataFrame(probes, columns=list(PROBE_COLUMNS))
    return Compared(
        pd.DataFrame(stands, columns=list(STAND_COLUMNS)), with_spread(of_probes, own), evidence
    )


def _each(recipe, corrected, chosen, block_days):
    """Yield (names, recipe, joined probes, tables) of each of the chosen methods."""
    for (chain, stage), group in groupby(chosen, key=lambda one: one[:2]):
        methods = [method for _, _, method in group]
        others = [recipe.with_method(chain, stage, method) for method in methods]
        made = [(corrected.probes, {})] * len(others)
        if chain != "scaling":
            made = _corrected_again(others, corrected, chain, block_days)
        for method, other, (joined, tables) in zip(methods, others, made, strict=True):
            yield {"chain": chain, "stage": stage, "method": method}, other, joined, tables


def _corrected_again(recipes, corrected, method, block_days):
    """Yield the joined probes with those of `method` corrected by each recipe, and its tables."""
    own = [parts for key, parts in corrected.chains.items() if key[0] == method]
    ends = corrected.probes["time"].values.astype("datetime64[s]")
    step_s = int(corrected.probes.attrs["interval_s"])
    cubes = [chain.cube for chain, _, _ in own]
    joined = [Joined(cubes, ends, step_s, recipe.join["least_coverage"]) for recipe in recipes]
    fitted = [{} for _ in recipes]
    for chain, known, answered in own:
        variants = variants_of(chain, known, [recipe.chains[method] for recipe in recipes])
        fit_variants(chain, variants, block_days)
        for block, workings in run_variants(chain, variants, block_days):
            for one, working in zip(joined, workings, strict=True):
                one.add_block(chain, block, working, answered)
        for whole, (_, tables) in zip(fitted, variants, strict=True):
            for name, rows in tables.items():
                whole[name] = pd.concat([whole[name], rows]) if name in whole else rows
    for one, tables in zip(joined, fitted, strict=True):
        yield _with_probes(corrected.probes, one.dataset()), tables


def _with_probes(whole, part):
    """The joined cube with the probes of `part` in the place of its own."""
    names = [str(name) for name in whole["probe"].values]
    rows = [names.index(str(name)) for name in part["probe"].values]
    made = whole.copy()
    for name in ("flux_density", "quality", "origin"):
        values = whole[name].values.copy()
        values[rows, : part.sizes["point"]] = part[name].values
        made[name] = whole[name].copy(data=values)
    return made


def _touched(site, corrected, chain):
    """(stand, species) that have probes of the chain of their own; of scaling, that have any."""
    labels = zip(
        corrected.probes["probe"].values.astype(str),
        corrected.probes["stand"].values.astype(str),
        corrected.probes["species"].values.astype(str),
        strict=True,
    )
    names = {row.probe for row in site.table("probes") if chain in ("scaling", row.method)}
    return {(stand, species) for probe, stand, species in labels if probe in names}


def _stand_rows(ours, theirs, touched):
    """Rows by month and over the season, stratum by stratum and for each stand whole.

    touched : (stand, species) that the method may change by itself. A stratum that it does not
    change is left out, and a stand of which it touches none. Without a day on which both may be
    totalled, the season's row has no millimetres.
    """
    for stand in dict.fromkeys(ours.stands):
        strata = [n for n, own in enumerate(ours.stands) if own == stand]
        groups = [
            (ours.species[n], [n])
            for n in strata
            if (stand, ours.species[n]) in touched or _differ(ours, theirs, n)
        ]
        if groups:
            groups.append((ALL, strata))
        for species, members in groups:
            both = ours.valid[members].all(axis=0) & theirs.valid[members].all(axis=0)
            for period, picked in _periods(ours):
                used = picked[both[picked]]
                if not len(used) and period != "season":
                    continue
                recipe, beside = (
                    float(own.total[np.ix_(members, used)].sum()) if len(used) else np.nan
                    for own in (ours, theirs)
                )
                yield {
                    "period": period,
                    "stand": stand,
                    "species": species,
                    "start": str(ours.dates[picked[0]]),
                    "end": str(ours.dates[picked[-1]] + ONE_DAY),
                    "days": len(used),
                    "recipe_mm": recipe,
                    "beside_mm": beside,
                    "difference_mm": beside - recipe,
                }


def _differ(ours, theirs, stratum):
    return not np.array_equal(ours.total[stratum], theirs.total[stratum], equal_nan=True)


def _periods(days):
    """("season" or "month", places of its days) of the days that the records touch."""
    touched = np.flatnonzero(days.touched)
    yield "season", touched
    months = days.dates[touched].astype("datetime64[M]")
    for month in np.unique(months):
        yield "month", touched[months == month]


def _probe_rows(site, ours, theirs, method, corrected):
    """Rows by month of every probe of a method, in mm over the ground of its stand.

    ours, theirs : Datasets with probe_flow. A probe stands for all trees of its species in its
    stand: its flow per sapwood area of its tree, times their sapwood per ground area.
    """
    ends = ours["time"].values.astype("datetime64[s]")
    step_s = int(ours.attrs["interval_s"])
    months, begins = np.unique(site.day_of(ends).astype("datetime64[M]"), return_index=True)
    spans = [slice(*pair) for pair in pairwise([*begins, len(ends)])]
    names = {str(name) for key, (chain, *_) in corrected.chains.items() if key[0] == method
             for name in chain.cube["probe"].values}  # fmt: skip
    first, second = ours["probe_flow"].values, theirs["probe_flow"].values
    both = np.isfinite(first) & np.isfinite(second)
    ground = _ground_per_flow(site, ours)
    for row, probe in enumerate(ours["probe"].values.astype(str)):
        if probe not in names or np.isnan(ground[row]):
            continue
        for month, span in zip(months, spans, strict=True):
            here = both[row, span]
            if not here.any():
                continue
            of_recipe = np.isfinite(first[row, span])
            recipe, beside = (
                float(own[row, span][here].sum() * step_s * ground[row]) for own in (first, second)
            )
            yield {
                "probe": probe,
                "start": str(month.astype("datetime64[D]")),
                "end": str((month + 1).astype("datetime64[D]")),
                "compared_h": int(here.sum()) * step_s / SECONDS_PER_HOUR,
                "compared_fraction": here.sum() / of_recipe.sum(),
                "recipe_mm": recipe,
                "beside_mm": beside,
                "difference_mm": beside - recipe,
            }


def _ground_per_flow(site, probes):
    """(probe) sapwood per ground of the species over the sapwood area of the tree [m-2]."""
    trees = [str(name) for name in probes["tree"].values]
    area = facts.tree_facts(site, trees)["sapwood_area"].values
    ground = facts.stand_facts(site, probes["time"].values[:1])["sapwood_per_ground"]
    of_stratum = dict(zip(ground["stand_species"].values.astype(str), ground.values, strict=True))
    labels = zip(probes["stand"].values, probes["species"].values, strict=True)
    own = np.array([of_stratum.get(f"{stand}/{species}", np.nan) for stand, species in labels])
    return own / area


def _table_of(recipe, chain, stage):
    return next(s.stage.table for s in recipe.chains[chain] if s.stage.name == stage)


def _admissible(rows):
    """Probe -> whether the method may be used in all its installations and at all its points."""
    if rows is None or ADMISSIBLE not in rows:
        return {}
    return rows.groupby("probe")[ADMISSIBLE].all().to_dict()


def _own_admissible(recipe, corrected):
    """(chain, stage) -> `_admissible` of the recipe's own method."""
    return {
        (chain, step.stage.name): _admissible(corrected.evidence.get(step.stage.table))
        for chain, steps in recipe.chains.items()
        for step in steps
        if step.stage.table
    }


def with_spread(rows, own):
    """The rows with `spread_mm`: highest less lowest difference among the admissible methods.

    A method counts where it covers nearly all of the hours that the recipe's own covers, since
    differences over a few of them say nothing of the month. The recipe's own, at a difference of
    0, counts where it is admissible. NaN without any.
    """
    counts = (rows[ADMISSIBLE] == 1) & (rows["compared_fraction"] >= NEARLY_ALL_HOURS)
    differences = rows["difference_mm"].where(counts).astype(float)
    of_month = differences.groupby([rows[key] for key in ("chain", "stage", "probe", "start")])
    may = [
        own.get((chain, stage), {}).get(probe, True)
        for chain, stage, probe in zip(rows["chain"], rows["stage"], rows["probe"], strict=True)
    ]
    recipes = np.where(np.array(may, dtype=bool), 0.0, np.nan)
    highest, lowest = (of_month.transform(extreme).to_numpy() for extreme in ("max", "min"))
    return rows.assign(spread_mm=np.fmax(highest, recipes) - np.fmin(lowest, recipes))
