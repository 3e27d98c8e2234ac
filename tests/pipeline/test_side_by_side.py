"""Methods run beside the recipe's own: what a recipe of their own would give, and no more."""

import tomllib
from dataclasses import replace
from datetime import timedelta
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sapflux.errors import RecipeError
from sapflux.pipeline import side_by_side
from sapflux.pipeline.compute import compute
from sapflux.pipeline.plan import methods_beside, plan_faults
from sapflux.pipeline.recipe import find_recipe, load_recipe, read_recipe
from sapflux.pipeline.scale import scale
from sapflux.pipeline.side_by_side import with_spread
from sapflux.site import inventory
from sapflux.site.load import load_site
from sapflux.site.tables import Reference

SITE = Path(__file__).parents[2] / "configs" / "orvelin"
PLAIN = load_recipe().alone()


def recipe_of(chain, stage, beside):
    """The default recipe with `beside` at one stage alone."""
    raw = PLAIN.resolved()
    raw.pop("name")
    for step in raw[chain]:
        if step["stage"] == stage:
            step["beside"] = beside
    return read_recipe(raw, "own.toml", "own")


def faults_of(text):
    with pytest.raises(RecipeError) as caught:
        read_recipe(tomllib.loads(text), "own.toml", "own")
    return [str(fault) for fault in caught.value.faults]


@pytest.fixture(scope="module")
def site():
    return load_site(SITE)


@pytest.fixture(scope="module")
def own(site):
    return compute(site, PLAIN)


@pytest.mark.parametrize(
    ("chain", "stage", "method"),
    [
        ("heat_dissipation", "zero_flow_difference", "nightly_maximum"),
        ("scaling", "probe_flow", "outer_value_inwards"),
    ],
)
def test_a_method_beside_gives_what_a_recipe_with_it_gives(site, own, chain, stage, method):
    beside = compute(site, recipe_of(chain, stage, [method]), logs=own.logs)
    alone = compute(site, PLAIN.with_method(chain, stage, method), logs=own.logs)
    rows = beside.tables["methods_beside"].set_index(["period", "stand", "species"])
    for stand in ("upper", "lower"):
        totals = [
            frame[(frame["stand"] == stand) & (frame["species"] == "all")].set_index("start")
            for frame in (own.tables["daily"], alone.tables["daily"])
        ]
        both = totals[0]["valid"].astype(bool) & totals[1]["valid"].astype(bool)
        row = rows.loc["season", stand, "all"]
        assert row["days"] == both.sum()
        assert row["recipe_mm"] == pytest.approx(totals[0]["transpiration_mm"][both].sum())
        assert row["beside_mm"] == pytest.approx(totals[1]["transpiration_mm"][both].sum())
        months = rows.loc["month", stand, "all"]
        assert months["difference_mm"].sum() == pytest.approx(row["difference_mm"])
    assert rows["difference_mm"].abs().max() > 1.0


@pytest.mark.parametrize(
    ("chain", "stage"),
    [
        ("heat_dissipation", "zero_flow_difference"),
        ("heat_dissipation", "flux_density"),
        ("heat_ratio", "wound"),
    ],
)
def test_methods_run_together_give_the_bytes_of_runs_of_their_own(
    site, own, monkeypatch, chain, stage
):
    """flux_density: its method is followed by a stage before it, which is then not shared."""
    scaled = []

    def kept(*arguments, **more):
        scaled.append(scale(*arguments, **more))
        return scaled[-1]

    monkeypatch.setattr(side_by_side, "scale", kept)
    recipe = recipe_of(chain, stage, "all")
    found = compute(site, recipe, logs=own.logs)
    methods = [method for _, _, method in methods_beside(site, recipe)[0]]
    assert len(methods) == len(scaled) > 0
    for method, beside in zip(methods, scaled, strict=True):
        alone = compute(site, PLAIN.with_method(chain, stage, method), logs=own.logs)
        for name in ("flux_density", "quality", "probe_flow"):
            assert beside.probes[name].values.tobytes() == alone.probes[name].values.tobytes()
        for one, table, rows in found.beside.evidence:
            if one == method:
                pd.testing.assert_frame_equal(rows, alone.evidence[table], check_exact=True)


def test_running_methods_beside_changes_no_result_of_the_recipe(site, own):
    beside = compute(site, recipe_of("heat_ratio", "zero_flow_ratio", "all"), logs=own.logs)
    assert "methods_beside" in beside.tables and "methods_beside" not in own.tables
    for name, frame in own.tables.items():
        pd.testing.assert_frame_equal(frame, beside.tables[name])


def test_a_probe_row_is_its_flow_over_the_ground_of_its_species(site, own):
    recipe = recipe_of("heat_dissipation", "zero_flow_difference", ["moving_window"])
    found = compute(site, recipe, logs=own.logs)
    row = found.tables["probe_methods_beside"].query("probe == 'P01'").iloc[0]
    alone = compute(
        site,
        PLAIN.with_method("heat_dissipation", "zero_flow_difference", "moving_window"),
        logs=own.logs,
    )
    months = site.day_of(own.probes["time"].values.astype("datetime64[s]"))
    august = months < np.datetime64(row["end"])
    flows = [f.probes["probe_flow"].sel(probe="P01").values[august] for f in (own, alone)]
    both = np.isfinite(flows[0]) & np.isfinite(flows[1])
    # Flow of the one over flow of the other does not hang on any area.
    ratio = flows[1][both].sum() / flows[0][both].sum()
    assert row["beside_mm"] / row["recipe_mm"] == pytest.approx(ratio)
    assert row["compared_h"] == pytest.approx(both.sum() * 0.5)
    area = inventory.tree_sapwood_area(site, "U2-05")
    ground = inventory.sapwood_per_ground(site)["upper", "spruce"]
    depth = flows[0][both].sum() * 1800.0 / area * ground  # kg m-2 over the ground, which is mm
    assert row["recipe_mm"] == pytest.approx(depth)


def test_the_spread_is_that_of_the_admissible_methods_with_the_recipes_own():
    rows = pd.DataFrame(
        {
            "chain": "c",
            "stage": "s",
            "method": ["a", "b", "c"],
            "probe": "P",
            "start": "2031-06-01",
            "difference_mm": [-2.0, 3.0, 9.0],
            "admissible": [1, 1, 0],
            "compared_fraction": [0.9, 1.0, 1.0],
        }
    )
    # By hand: 3 - (-2); the third may not be used. Without the first the recipe's own 0 counts.
    assert set(with_spread(rows, {})["spread_mm"]) == {5.0}
    assert set(with_spread(rows.iloc[1:], {})["spread_mm"]) == {3.0}
    assert set(with_spread(rows.iloc[1:], {("c", "s"): {"P": False}})["spread_mm"]) == {0.0}
    # A method that covers less than nine tenths of the recipe's hours says nothing of the month.
    few = rows.assign(compared_fraction=[1.0, 0.89, 1.0])
    assert set(with_spread(few, {})["spread_mm"]) == {2.0}
    none = with_spread(rows.iloc[2:], {("c", "s"): {"P": False}})["spread_mm"]
    assert none.isna().all()


def test_a_method_without_a_day_to_compare_says_so(site, own):
    """A cut stem for a week gives the family of dates no day on which the stand is whole."""
    start = site.standard(own.probes["time"].values[0].astype("datetime64[s]")).item()
    reference = Reference(kind="cut", probe="P01", from_=start, to=start + timedelta(days=7))
    dated = replace(site, tables={**site.tables, "references": (reference,)})
    recipe = recipe_of("heat_dissipation", "zero_flow_difference", ["reference_dates"])
    rows = compute(dated, recipe, logs=own.logs).tables["methods_beside"]
    assert list(rows["period"].unique()) == ["season"]
    whole = rows[rows["species"] == "all"].set_index("stand")
    assert (whole["days"] == 0).all() and whole["beside_mm"].isna().all()
    # Beech and oak of the lower stand: only oak carries heat dissipation probes there.
    lower = set(rows[rows["stand"] == "lower"]["species"])
    assert "oak" in lower and "beech" not in lower


def test_all_leaves_out_what_the_site_cannot_serve_and_a_named_method_is_refused(site):
    recipe = recipe_of("heat_dissipation", "heated_difference", "all")
    chosen, left_out = methods_beside(site, recipe)
    methods = {method for _, _, method in chosen}
    assert "constant" in methods and "its90_alone" not in methods
    assert ("heat_dissipation", "heated_difference", "its90_alone") in left_out
    named = recipe_of("heat_dissipation", "heated_difference", ["its90_alone"])
    (fault,) = map(str, plan_faults(site, named))
    assert "method 'its90_alone', needs stem_temperature" in fault


def test_a_wrong_beside_says_what_would_be_right():
    (fault,) = faults_of('[[heat_dissipation]]\nstage = "flow_index"\nbeside = "all"\n')
    assert fault == (
        "own.toml, [[heat_dissipation]] step 1: stage 'flow_index' has one method. Remove beside."
    )
    for wrong in ('"nightly_maximum"', '["quiet_nights"]', '["calm_nights"]', "3"):
        text = f'[[heat_dissipation]]\nstage = "zero_flow_difference"\nbeside = {wrong}\n'
        (fault,) = faults_of(text)
        assert fault.startswith(
            "own.toml, [[heat_dissipation]] step 1: zero_flow_difference: beside = "
        )
        assert "nightly_maximum" in fault


def test_the_default_recipe_reads_back_with_what_runs_beside():
    recipe = load_recipe()
    steps = {step.stage.name: step for step in recipe.chains["heat_dissipation"]}
    assert steps["zero_flow_difference"].beside == ("all",)
    assert "beside" in find_recipe("stand_water_use").read_text(encoding="utf-8")
