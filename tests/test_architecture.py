"""The shape of the program holds: imports point down, names and units come from one table."""

import ast
import inspect
import re
from pathlib import Path

import pytest

import sapflux.correction
import sapflux.scaling
from sapflux import schema
from sapflux.stage import REGISTRY

ROOT = Path(__file__).parents[1]
PACKAGE = ROOT / "sapflux"
_ = (sapflux.correction, sapflux.scaling)

# Lower number: lower layer. Modules of one layer with different names never import one another,
# except inside the layers that are marked as open.
LAYERS = {
    "errors": 0, "constants": 0,
    "physics": 1, "schema": 1, "units": 1,
    "quality": 2, "stage": 2, "site": 2,
    "ingest": 3, "correction": 3, "scaling": 3, "virtual": 3,
    "pipeline": 4,
    "study": 5,
    "cli": 7,
}  # fmt: skip
CLOSED = {3}
MODULES = sorted(PACKAGE.rglob("*.py"))


def part_of(path):
    inside = path.relative_to(PACKAGE)
    return inside.parts[0].removesuffix(".py")


def imported_parts(path):
    """Parts of the package a module imports, wherever in the module the import stands."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        names = []
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom) and node.level == 0 and node.module:
            names = [node.module, *(f"{node.module}.{alias.name}" for alias in node.names)]
        for name in names:
            parts = name.split(".")
            if parts[0] == "sapflux" and len(parts) > 1 and parts[1] in LAYERS:
                yield parts[1]


def test_every_part_of_the_package_has_a_layer():
    parts = {part_of(path) for path in MODULES} - {"__init__", "__main__"}
    assert parts <= LAYERS.keys()


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_imports_point_down(path):
    own = part_of(path)
    if own in ("__init__", "__main__"):
        return
    for other in set(imported_parts(path)) - {own}:
        assert LAYERS[other] <= LAYERS[own], f"{own} imports {other}, which lies above it"
        if LAYERS[own] in CLOSED:
            assert LAYERS[other] < LAYERS[own], f"{own} and {other} meet in the cube only"


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_modules_stay_short(path):
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 330


def test_only_the_command_line_prints():
    for path in MODULES:
        if part_of(path) in ("cli", "virtual"):
            continue
        tree = ast.parse(path.read_text(encoding="utf-8"))
        calls = [n for n in ast.walk(tree) if isinstance(n, ast.Call)]
        assert not [c for c in calls if getattr(c.func, "id", "") == "print"], path


@pytest.mark.parametrize("key", REGISTRY, ids="/".join)
def test_every_stage_documents_settings_units_and_source(key):
    stage = REGISTRY[key]
    text = inspect.getdoc(stage.function)
    assert "Source:" in text
    for name in stage.settings:
        assert re.search(rf"^{name} : ", text, re.M), f"{name} is not in the docstring"
    for name in stage.makes:
        units = schema.VARIABLES[name].units
        assert re.search(rf"^{name} : .*\[{re.escape(units)}\]", text, re.M), (
            f"{name} should be documented as [{units}]"
        )


@pytest.mark.parametrize("key", REGISTRY, ids="/".join)
def test_stages_make_what_the_schema_names(key):
    assert set(REGISTRY[key].makes) <= schema.VARIABLES.keys()


def test_every_path_the_developers_page_names_exists():
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    for path in re.findall(r"`((?:sapflux|pipelines|configs|tests|\.ci)/[^`*<> ]*)`", text):
        assert (ROOT / path).exists(), path


def test_the_top_level_holds_what_was_agreed():
    agreed = {
        "README.md",
        "DEVELOPERS.md",
        "pyproject.toml",
        "sapflux",
        "pipelines",
        "configs",
        "tests",
    }
    import subprocess

    listed = subprocess.run(
        ["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=True
    ).stdout.split("\n")
    tops = {line.split("/")[0] for line in listed if line and not line.startswith(".")}
    assert tops <= agreed


def test_continuous_integration_calls_the_readme_test_command():
    commands = (ROOT / ".ci" / "run").read_text(encoding="utf-8").splitlines()
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    test_command = next(line for line in commands if "pytest" in line)
    assert test_command in readme
