"""The cross checks as a whole: silent on what is right, and no noise after a fault."""

import pytest
from folder_by_hand import TEXTS, faults_of, write_folder

from sapflux.site import checks
from sapflux.site.load import load_site


@pytest.fixture(autouse=True)
def in_a_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)


def test_a_right_folder_has_no_fault():
    site = load_site(write_folder())
    assert len(site.table("surveys")) == 4


def test_a_plan_without_logs_is_valid():
    toml = TEXTS["site.toml"].split("[layouts")[0]
    keep = ("probes.csv", "trees.csv", "cores.csv", "stands.csv", "plots.csv", "surveys.csv",
            "species.csv")  # fmt: skip
    site = load_site(write_folder(texts={"site.toml": toml, **{f: TEXTS[f] for f in keep}}))
    assert site.logs == {} and site.table("channels") == ()


def test_a_survey_without_probes_needs_no_stand_in():
    keep = ("stands.csv", "plots.csv", "surveys.csv", "species.csv")
    toml = TEXTS["site.toml"].split("[layouts")[0]
    assert load_site(write_folder(texts={"site.toml": toml, **{f: TEXTS[f] for f in keep}}))


def test_faults_of_many_tables_come_at_once():
    changes = [
        ("site.toml", "common_step_min = 60", "common_step_min = 20"),
        ("channels.csv", "heated_emf,mV", "heated_emf,degC"),
        ("species.csv", "1.7,beech", "1.7,"),
        ("visits.csv", "T1,2026-06", "T9,2026-06"),
    ]
    wheres = [fault.split(":")[0] for fault in faults_of(write_folder(changes))]
    assert wheres == [
        "ridge/site.toml, [site]",
        "ridge/channels.csv, row 2",
        "ridge/species.csv, row 4",
        "ridge/visits.csv, row 3",
    ]


@pytest.mark.parametrize(
    ("change", "fault"),
    [
        (
            ("trees.csv", "A,slope,spruce,10", "A,slope,spruce,10 mm"),
            "ridge/trees.csv, row 2: bark_mm is '10 mm'. Give a number. A cell that is not known "
            "stays blank.",
        ),
        (
            ("probes.csv", "b1,B,heat_ratio,1.3", "b1,B,heat_ratio,-1.3"),
            "ridge/probes.csv, row 4: height_m is '-1.3'. Give a number of at least 0.",
        ),
        (
            ("species.csv", "beech,diffuse_porous", "beech,diffuse"),
            "ridge/species.csv, row 3: anatomy is 'diffuse'. Did you mean 'diffuse_porous'? Known: "
            "conifer, diffuse_porous, other, ring_porous.",
        ),
        (
            ("site.toml", 'stamp = "start"', 'stamp = "begin"'),
            "ridge/site.toml, [logs.H1]: stamp is 'begin'. Known: end, start.",
        ),
        (
            ("site.toml", "names_line = 2", "names_line = 0"),
            "ridge/site.toml, [layouts.wide]: names_line is 0. Give a number of at least 1.",
        ),
        (
            ("trees.csv", "tree,stand,species,bark_mm", "name,stand,species,bark_mm"),
            None,
        ),
    ],
)
def test_a_row_with_a_fault_still_counts_as_known(change, fault):
    faults = faults_of(write_folder([change]))
    if fault is None:  # a table that lost its names: told in its own header, nowhere else
        assert all(one.startswith("ridge/trees.csv, row 1:") for one in faults)
    else:
        assert faults == [fault]


def test_a_row_that_cannot_be_parted_makes_no_name_unknown():
    change = ("trees.csv", "B,slope,beech,", '"B,slope,beech,')
    assert faults_of(write_folder([change])) == [
        "ridge/trees.csv, row 3: the quotes do not match in '\"B,slope,beech,'. Close every quote "
        "on its own line, and double a quote inside a cell."
    ]


def test_tables_that_are_needed_and_absent_are_told():
    texts = {name: text for name, text in TEXTS.items() if name != "stands.csv"}
    assert faults_of(write_folder(texts=texts)) == [
        f"ridge/{table}.csv, {rows}: stand 'slope' is not in stands.csv. Add "
        "it there: the table names none."
        for table, rows in [
            ("trees", "rows 2 and 3"),
            ("plots", "rows 2 and 3"),
            ("events", "row 2"),
        ]
    ]


def test_every_module_of_checks_is_asked():
    from pathlib import Path

    modules = {path.stem for path in Path(checks.__file__).parent.glob("checks_*.py")}
    asked = {check.__module__.rpartition(".")[2] for check in checks.CHECKS}
    assert asked == modules
