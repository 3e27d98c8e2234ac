"""`species.csv`: each fault in full, and alone."""

import pytest
from folder_by_hand import faults_of, write_folder

# what is wrong -> (changes of the folder, its faults)
CASES = {
    "species twice": (
        [
            (
                "species.csv",
                "spruce,conifer,,,0.6,1.8,\n",
                "spruce,conifer,,,0.6,1.8,\nspruce,conifer,,,0.6,1.8,\n",
            )
        ],
        [("ridge/species.csv, row 3: species 'spruce' stands in row 2 already. Keep one of them.")],
    ),
    "species called as the whole stand": (
        [("species.csv", "oak,ring", "all,ring"), ("surveys.csv", "P1,C,oak", "P1,C,all")],
        [
            (
                "ridge/species.csv, row 4: a species is called 'all'. Give it another name: in "
                "results this one is the whole stand."
            )
        ],
    ),
    "species with a name that parts": (
        [("species.csv", "oak,ring", "oak/2,ring"), ("surveys.csv", "P1,C,oak", "P1,C,oak/2")],
        [
            (
                "ridge/species.csv, row 4: species 'oak/2' has a '/'. Name it without one: outputs "
                "write 'stand/species' and name files by it."
            )
        ],
    ),
    "leaf on without leaf off": (
        [("species.csv", "04-20,10-20", "04-20,")],
        [
            (
                "ridge/species.csv, row 3: species 'beech' has leaf_on and no leaf_off. Give "
                "both, or neither for a species in leaf all year."
            )
        ],
    ),
    "leaf on and leaf off on one day": (
        [("species.csv", "04-20,10-20", "04-20,04-20")],
        [
            (
                "ridge/species.csv, row 3: leaf_on and leaf_off are both '04-20'. leaf_off is "
                "the first day out of leaf."
            )
        ],
    ),
    "day that no year has": (
        [("species.csv", "04-20,10-20", "04-31,10-20")],
        [
            (
                "ridge/species.csv, row 3: leaf_on: '04-31' is not a day of every year. Write "
                "month and day, like '10-01'."
            )
        ],
    ),
    "only one half of the allometry": (
        [("species.csv", "0.7,1.9", "0.7,")],
        [
            (
                "ridge/species.csv, row 3: species 'beech' has sapwood_area_a_cm2 and no "
                "sapwood_area_b. Sapwood area is a * diameter^b: give both or neither."
            )
        ],
    ),
    "species without probes or stand-in": (
        [("species.csv", "1.7,beech", "1.7,")],
        [
            (
                "ridge/species.csv, row 4: species 'oak' is in surveys.csv and has neither "
                "probes nor a stand_in. Name one with probes as its stand_in: beech, spruce."
            )
        ],
    ),
    "stand-in itself": (
        [("species.csv", "1.7,beech", "1.7,oak")],
        [
            (
                "ridge/species.csv, row 4: species 'oak' is its own stand_in. Name another "
                "species that has probes, or leave it blank."
            )
        ],
    ),
    "unknown stand-in": (
        [("species.csv", "1.7,beech", "1.7,birch")],
        [
            (
                "ridge/species.csv, row 4: stand_in 'birch' is not in species.csv. Did you mean "
                "'beech'? Known: beech, oak, spruce."
            )
        ],
    ),
    "stand-in without probes": (
        [("species.csv", "1.9,\n", "1.9,oak\n")],
        [
            (
                "ridge/species.csv, row 3: the stand_in 'oak' of species 'beech' has no probes "
                "itself. Species with probes: beech, spruce."
            )
        ],
    ),
    "allometry beyond the disc": (
        [("species.csv", "0.3,1.7", "30,1.7")],
        [
            (
                "ridge/species.csv, row 4: the allometry of species 'oak' gives 1 of 1 stems "
                "without probes more sapwood than they have wood. Sapwood area in cm2 is "
                "sapwood_area_a_cm2 times the diameter over bark in cm to the power of "
                "sapwood_area_b."
            )
        ],
    ),
    "stems without cores or allometry": (
        [("species.csv", "0.3,1.7", ",")],
        [
            (
                "ridge/species.csv, row 4: species 'oak' has no allometry and 1 living stem "
                "without a core, the first 'C' of plot 'P1'. Give sapwood_area_a_cm2 and "
                "sapwood_area_b."
            )
        ],
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults
