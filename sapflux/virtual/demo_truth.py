"""Truth tables of the demo site. They lie beside the tests, never beside the site."""

import numpy as np

from sapflux.virtual import demo_plan as plan
from sapflux.virtual import truth as tables
from sapflux.virtual.demo_forest import instrumented
from sapflux.virtual.weather import quiet_nights


def days():
    """Dates of the season, standard time, as text."""
    return [str(np.datetime64(plan.FIRST_DAY) + day) for day in range(plan.DAYS)]


def daily_rows(truth):
    """stand, species, date, sampled_mm, stand_mm, sampling_error_mm; species `all` is the stand."""
    rows = []
    for stand, by_species in truth.strata.items():
        total = np.zeros((2, plan.DAYS))
        for species, stratum in by_species.items():
            pair = np.array([truth.sampled_mm(stand, species), tables.stand_mm(stratum)])
            total += pair
            rows += _mm_rows(stand, species, pair)
        rows += _mm_rows(stand, "all", total)
    return rows


def tree_rows(truth):
    """tree, date, kg of each instrumented tree."""
    rows = []
    for stem in instrumented(truth):
        kg = tables.daily_sums(truth.tree_flow(stem.name), truth.step_s)
        rows += [[stem.name, date, f"{value:.5f}"] for date, value in zip(days(), kg, strict=True)]
    return rows


def stem_rows(truth):
    """What is hidden in each stem, instrumented or not."""
    carried = {stem.name for stem in instrumented(truth)}
    return [
        [
            s.name, s.stand, s.species, int(s.alive), int(s.name in carried),
            f"{s.xylem_radius * 100:.4f}", f"{s.sapwood_depth * 100:.4f}",
            f"{s.sapwood_area * 1e4:.3f}", f"{s.vigour:.5f}", f"{s.tilt:.5f}",
        ]
        for s in truth.stems
    ]  # fmt: skip


def toml_text(truth):
    """`truth.toml`: seed, what the tables hold, and what the design can deliver."""
    quiet = quiet_nights(truth.weather, plan.POSITION.utc_offset_h)
    lines = [
        f"# Truth of the virtual site {plan.POSITION.name}. Written by sapflux.virtual.demo; all",
        "# trees and values are invented. daily.csv: sampled_mm is an error-free sampling of the",
        "# trees with probes (ratio of sums on true sapwood areas), stand_mm all stems.",
        "# design_sampling_se_mm: standard error of the season total by sampling alone;",
        "# stand_in_difference_mm: what the stand-in species adds, apart from sampling.",
        f"seed = {truth.seed}",
        f'first_day = "{plan.FIRST_DAY}"',
        f"days = {plan.DAYS}",
        f"quiet_nights = {int(quiet.sum())}",
    ]
    for stand, by_species in truth.strata.items():
        error, difference = tables.stand_design(by_species, truth.carriers)
        sampled = sum(truth.sampled_mm(stand, species).sum() for species in by_species)
        whole = sum(tables.stand_mm(part).sum() for part in by_species.values())
        lines += [
            "",
            f"[stands.{stand}]",
            f"season_sampled_mm = {sampled:.4f}",
            f"season_stand_mm = {whole:.4f}",
            f"design_sampling_se_mm = {error:.4f}",
            f"stand_in_difference_mm = {difference:.4f}",
        ]
    return "\n".join(lines) + "\n"


def _mm_rows(stand, species, pair):
    return [
        [stand, species, date, f"{one:.6f}", f"{two:.6f}", f"{one - two:.6f}"]
        for date, one, two in zip(days(), *pair, strict=True)
    ]
