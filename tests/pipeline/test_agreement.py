"""Settings that follow another stage's: the exponent that undoes a needle is that of the flux."""

import tomllib

import pytest

from sapflux.errors import RecipeError
from sapflux.pipeline.recipe import load_recipe, read_recipe

CHAIN = """
[[heat_dissipation]]
stage = "sapwood_contact"
{setting}

[[heat_dissipation]]
stage = "flow_index"

[[heat_dissipation]]
stage = "flux_density"
method = "{method}"
"""


def read(setting="", method="general"):
    text = CHAIN.format(setting=setting, method=method)
    return read_recipe(tomllib.loads(text), "oak.toml", "oak")


def calibration_of(recipe):
    steps = recipe.chains["heat_dissipation"]
    return next(s.settings["calibration"] for s in steps if s.stage.name == "sapwood_contact")


@pytest.mark.parametrize("method", ["general", "species", "species_else_general"])
def test_contact_takes_the_calibration_of_the_flux(method):
    assert calibration_of(read(method=method)) == method
    assert calibration_of(read(f'calibration = "{method}"', method)) == method


def test_a_recipe_that_says_otherwise_is_refused():
    with pytest.raises(RecipeError) as caught:
        read('calibration = "species"', "general")
    (fault,) = caught.value.faults
    assert str(fault) == (
        "oak.toml, [[heat_dissipation]] step 1: sapwood_contact: calibration = 'species', and "
        "method of 'flux_density' is 'general'. Remove calibration: it follows method of "
        "'flux_density'."
    )


def test_another_method_of_the_flux_takes_contact_along():
    recipe = load_recipe().with_method("heat_dissipation", "flux_density", "general")
    assert calibration_of(recipe) == "general"
    assert calibration_of(load_recipe()) == "species_else_general"


def test_a_chain_without_flux_leaves_the_setting_as_it_is():
    text = '[[heat_dissipation]]\nstage = "sapwood_contact"\ncalibration = "species"\n'
    assert calibration_of(read_recipe(tomllib.loads(text), "oak.toml", "oak")) == "species"
