"""A recipe is checked whole, and every fault says where, what, and what would be right."""

import tomllib

import pytest

from sapflux.errors import RecipeError
from sapflux.pipeline.recipe import load_recipe, read_recipe, recipe_names
from sapflux.stage import REGISTRY, Stage


def faults(text):
    with pytest.raises(RecipeError) as caught:
        read_recipe(tomllib.loads(text), "oak.toml", "oak")
    return [str(fault) for fault in caught.value.faults]


HEAD = '[[heat_dissipation]]\nstage = "heated_difference"\n'


def test_the_default_recipe_comes_with_the_program():
    assert "stand_water_use" in recipe_names()
    recipe = load_recipe()
    assert [step.stage.name for step in recipe.chains["heat_dissipation"]] == [
        "heated_difference",
        "heating_cycle",
        "natural_gradient",
        "screen_power_loss",
        "screen_frost",
        "zero_flow_difference",
        "sapwood_contact",
        "flow_index",
        "ageing",
        "flux_density",
    ]


def test_a_resolved_recipe_spells_out_every_setting_and_reads_back_the_same():
    recipe = load_recipe()
    resolved = recipe.resolved()
    for chain, steps in recipe.chains.items():
        for step, table in zip(steps, resolved[chain], strict=True):
            assert table.keys() - {"stage", "beside"} == step.stage.settings.keys()
            assert ("beside" in table) == bool(step.beside)
    again = read_recipe({k: v for k, v in resolved.items() if k != "name"}, "again", recipe.name)
    assert again.resolved() == resolved


def test_an_unknown_stage_names_the_nearest():
    (fault,) = faults(HEAD + '[[heat_dissipation]]\nstage = "flow_indx"\n')
    assert fault == (
        "oak.toml, [[heat_dissipation]] step 2: no stage 'flow_indx'. Did you mean 'flow_index'? "
        "Known: ageing, flow_index, flux_density, heated_difference, heating_cycle, "
        "natural_gradient, sapwood_contact, screen_frost, screen_power_loss, zero_flow_difference."
    )


def test_a_step_without_a_stage():
    (fault,) = faults("[[heat_ratio]]\nmethod = 'wood'\n")
    assert fault.startswith("oak.toml, [[heat_ratio]] step 1: no 'stage' is named. ")


def test_an_unknown_setting_names_the_nearest():
    (fault,) = faults(HEAD + 'metod = "constant"\n')
    assert fault == (
        "oak.toml, [[heat_dissipation]] step 1: stage 'heated_difference' has no setting 'metod'. "
        "Did you mean 'method'? Known: assumed_stem_temperature_degC, "
        "conductivity_growth_percent_per_K, method, reference_temperature_degC, "
        "sensitivity_uV_per_K."
    )


def test_a_setting_out_of_its_choices():
    (fault,) = faults(HEAD + 'method = "its68"\n')
    assert fault == (
        "oak.toml, [[heat_dissipation]] step 1: heated_difference: method = 'its68'. "
        "It takes one of: its90_given, its90_and_wood, its90_alone, constant."
    )


def test_a_setting_of_the_wrong_type():
    (fault,) = faults('[[scaling]]\nstage = "stand_transpiration"\nfewest_trees = "three"\n')
    assert fault == (
        "oak.toml, [[scaling]] step 1: stand_transpiration: fewest_trees = 'three'. "
        "It takes a whole number."
    )


def test_a_setting_out_of_its_limits():
    (fault,) = faults('[[heat_dissipation]]\nstage = "sapwood_contact"\nleast_fraction = 3\n')
    assert fault == (
        "oak.toml, [[heat_dissipation]] step 1: sapwood_contact: least_fraction = 3.0. "
        "It takes 0.05 to 1."
    )


def test_a_correction_twice():
    (fault,) = faults(HEAD + HEAD)
    assert fault == (
        "oak.toml, [[heat_dissipation]] step 2: stage 'heated_difference' stands at step 1 "
        "already. A correction is applied once: remove one."
    )


def test_an_order_that_makes_no_sense():
    order = ["flow_index", "zero_flow_difference"]
    text = "".join(f'[[heat_dissipation]]\nstage = "{name}"\n' for name in order)
    (fault,) = faults(text)
    assert fault == (
        "oak.toml, [[heat_dissipation]] step 1: stage 'flow_index' stands before "
        "'zero_flow_difference' (step 2). 'flow_index' works on what 'zero_flow_difference' has "
        "made: move it after."
    )


def test_an_unknown_part():
    (fault,) = faults(HEAD + "[jion]\nleast_coverage = 1\n")
    assert fault == (
        "oak.toml: unknown part 'jion'. Did you mean 'join'? Known: heat_dissipation, heat_ratio, "
        "join, scaling, title, totals."
    )


def test_parts_that_are_no_stages_are_checked_too():
    found = faults(HEAD + "[join]\nleast_coverage = 75\n[totals]\nleast_dayligt = 0.5\n")
    assert found == [
        "oak.toml, [join]: least_coverage = 75.0. It takes 0 to 1.",
        "oak.toml, [totals]: unknown setting 'least_dayligt'. Did you mean 'least_daylight'? "
        "Known: largest_deficit_difference, least_daylight, least_deficit_probability, "
        "least_month, least_month_in_water_year, least_records, least_water_year, "
        "longest_daylight_gap_h.",
    ]


def test_a_chain_that_is_no_list():
    (fault,) = faults("[scaling]\nstage = 'tree_flow'\n")
    assert fault == (
        "oak.toml: scaling is not a list of stages. Write each stage under its own [[scaling]]."
    )


def test_an_empty_recipe():
    assert faults("title = 'nothing'") == [
        "oak.toml: the recipe has no stage. List stages under [[scaling]], ..."
    ]


def test_all_faults_at_once():
    assert len(faults('[[scaling]]\nstage = "a"\n[[heat_ratio]]\nstage = "b"\n[c]\n')) == 3


def test_an_unknown_recipe_names_those_there_are():
    with pytest.raises(RecipeError) as caught:
        load_recipe("stand_wateruse")
    assert str(caught.value) == (
        "--recipe: no recipe 'stand_wateruse'. Did you mean 'stand_water_use'? "
        "Known: stand_water_use."
    )


def test_a_recipe_file_that_is_not_there(tmp_path):
    with pytest.raises(RecipeError, match=r"no such recipe file\. Give the path of a TOML file\."):
        load_recipe(str(tmp_path / "mine.toml"))


def test_a_recipe_file_that_is_not_toml(tmp_path):
    path = tmp_path / "mine.toml"
    path.write_text("[[scaling\n", encoding="utf-8")
    with pytest.raises(RecipeError) as caught:
        load_recipe(str(path))
    assert str(caught.value).startswith(f"{path}: not readable as TOML: ")


def test_a_part_that_is_no_table():
    assert faults(HEAD.replace("[[", "join = 1\n[[", 1)) == [
        "oak.toml, [join]: not a table. Write its keys under [join]."
    ]


def test_a_setting_without_a_default_must_be_stated(monkeypatch):
    def flow_index(heated_difference, /, *, smallest_K):
        return heated_difference

    stage = Stage("flow_index", flow_index, "heat_dissipation", (), ())
    monkeypatch.setitem(REGISTRY, ("heat_dissipation", "flow_index"), stage)
    assert faults('[[heat_dissipation]]\nstage = "flow_index"\n') == [
        "oak.toml, [[heat_dissipation]] step 1: stage 'flow_index' needs the setting 'smallest_K'. "
        "It has no default: state it."
    ]
