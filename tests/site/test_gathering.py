"""Faults told to a reader: the same fault of many rows once, a list of names once a file."""

import pytest
from folder_by_hand import TEXTS, faults_of, write_folder

from sapflux.errors import Fault
from sapflux.site.gathering import gathered, in_words


@pytest.fixture(autouse=True)
def in_a_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)


@pytest.mark.parametrize(
    ("rows", "words"),
    [
        ([4], "4"),
        ([4, 4], "4"),
        ([5, 4], "4 and 5"),
        ([4, 5, 6], "4, 5 and 6"),
        ([4, 5, 6, 7], "4 to 7"),
        ([2, *range(4, 14), 20], "2, 4 to 13 and 20"),
        ([*range(2, 18, 2), 30, 31, 32, 33], "2, 4, 6, 8, 10, 12, 14, 16 and 4 more"),
    ],
)
def test_rows_in_words(rows, words):
    assert in_words(rows) == words


def test_one_unknown_name_in_many_rows_is_one_fault():
    stems = "".join(f"P1,X{n},birch,2026-04-01,20\n" for n in range(10))
    change = ("surveys.csv", "P2,D,spruce,2026-04-01,10\n", f"P2,D,spruce,2026-04-01,10\n{stems}")
    assert faults_of(write_folder([change])) == [
        "ridge/surveys.csv, rows 6 to 15: species 'birch' is not in species.csv. Did you mean "
        "'beech'? Known: beech, oak, spruce."
    ]


def test_known_names_are_written_once_a_file():
    changes = [
        ("trees.csv", "A,slope,spruce", "A,slope,spruces"),
        ("trees.csv", "B,slope,beech", "B,slope,birch"),
        ("surveys.csv", "P1,C,oak", "P1,C,oaks"),
    ]
    assert faults_of(write_folder(changes)) == [
        "ridge/trees.csv, row 2: species 'spruces' is not in species.csv. Did you mean 'spruce'? "
        "Known: beech, oak, spruce.",
        "ridge/trees.csv, row 3: species 'birch' is not in species.csv. Did you mean 'beech'? "
        "Known: see above.",
        "ridge/surveys.csv, row 4: species 'oaks' is not in species.csv. Did you mean 'oak'? "
        "Known: beech, oak, spruce.",
    ]


def test_lists_that_differ_are_both_written():
    changes = [
        ("channels.csv", "heated_emf,mV", "heated_emf,degC"),
        ("channels.csv", "unheated_emf,uV", "unheated_emf,ohm"),
        ("channels.csv", "air_temperature,degC", "air_temperature,mV"),
    ]
    assert faults_of(write_folder(changes)) == [
        "ridge/channels.csv, row 2: unit 'degC' does not fit heated_emf. Known: V, mV, uV.",
        "ridge/channels.csv, row 3: unit 'ohm' does not fit unheated_emf. Known: see above.",
        "ridge/channels.csv, row 6: unit 'mV' does not fit air_temperature. Known: K, degC, degF.",
    ]


def test_sections_of_the_site_file_are_one_file():
    text = TEXTS["site.toml"].replace('layout = "wide"', 'layout = "w"')
    text = text.replace('layout = "long"', 'layout = "l"')
    assert faults_of(write_folder(texts={**TEXTS, "site.toml": text})) == [
        "ridge/site.toml, [logs.T1]: layout 'w' is not in site.toml. Known: long, wide.",
        "ridge/site.toml, [logs.H1]: layout 'l' is not in site.toml. Known: see above.",
    ]


def test_faults_that_say_unlike_things_stay_apart_and_in_order():
    faults = [
        Fault("a.csv, row 3", "x is 1", "Mend it."),
        Fault("a.csv, row 4", "x is 2", "Mend it."),
        Fault("b.csv, row 4", "x is 1", "Mend it."),
        Fault("a.csv", "x is 1", "Mend it."),
        Fault("a.csv, row 9", "x is 1", "Mend it."),
    ]
    assert [fault.where for fault in gathered(faults)] == [
        "a.csv, rows 3 and 9", "a.csv, row 4", "b.csv, row 4", "a.csv"
    ]  # fmt: skip
