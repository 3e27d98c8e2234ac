"""`trees.csv` and `cores.csv`: each fault in full, and alone."""

import pytest
from folder_by_hand import faults_of, write_folder

# what is wrong -> (changes of the folder, its faults)
CASES = {
    "diameter here and in the survey": (
        [
            (
                "trees.csv",
                "bark_mm\nA,slope,spruce,10\nB,slope,beech,\n",
                "bark_mm,diameter_cm\nA,slope,spruce,10,5\nB,slope,beech,,\n",
            )
        ],
        [
            (
                "ridge/trees.csv, row 2: tree 'A' has diameter_cm 5 here and 30 in surveys.csv. "
                "Leave it blank here, where it is for trees outside all plots; a decimal comma "
                "in the row may have shifted its cells."
            )
        ],
    ),
    "tree with a name that parts": (
        [("trees.csv", "B,slope,beech,\n", "B,slope,beech,\nC/1,slope,oak,\n")],
        [
            (
                "ridge/trees.csv, row 4: tree 'C/1' has a '/'. Name it without one: outputs write "
                "'stand/species' and name files by it."
            )
        ],
    ),
    "tree twice": (
        [("trees.csv", "B,slope,beech,\n", "B,slope,beech,\nA,slope,spruce,\n")],
        [
            (
                "ridge/trees.csv, row 4: tree 'A' stands in row 2 already. Give each tree a "
                "name of its own."
            )
        ],
    ),
    "tree in an unknown stand": (
        [("trees.csv", "B,slope", "B,slop")],
        [
            (
                "ridge/trees.csv, row 3: stand 'slop' is not in stands.csv. Did you mean "
                "'slope'? Known: flat, slope."
            )
        ],
    ),
    "tree of an unknown species": (
        [("trees.csv", "B,slope,beech", "B,slope,birch")],
        [
            (
                "ridge/trees.csv, row 3: species 'birch' is not in species.csv. Did you mean "
                "'beech'? Known: beech, oak, spruce."
            )
        ],
    ),
    "tree of another species than surveyed": (
        [("trees.csv", "B,slope,beech", "B,slope,oak")],
        [
            (
                "ridge/trees.csv, row 3: tree 'B' is 'oak' here and 'beech' in surveys.csv. "
                "Mend the one that is wrong."
            )
        ],
    ),
    "more bark than diameter": (
        [("trees.csv", "spruce,10", "spruce,200")],
        [
            (
                "ridge/trees.csv, row 2: bark of 200 mm leaves no wood in tree 'A' of 30 cm. "
                "Give the bark of one side in mm."
            )
        ],
    ),
    "core twice": (
        [("cores.csv", "A,S", "A,N")],
        [
            (
                "ridge/cores.csv, row 3: the core of tree 'A' at face 'N' of 2026-04-01 stands "
                "in row 2 already. Keep one of them, or name their faces."
            )
        ],
    ),
    "core of an unknown tree": (
        [("cores.csv", "A,S", "Q,S")],
        ["ridge/cores.csv, row 3: tree 'Q' is not in trees.csv. Known: A, B."],
    ),
    "sapwood deeper than the radius": (
        [("cores.csv", "A,S,2026-04-01,6", "A,S,2026-04-01,60")],
        [
            (
                "ridge/cores.csv, row 3: sapwood_depth_cm is 60 and the xylem radius of tree "
                "'A' is 14.0 cm. Sapwood is at most as deep as the radius under bark; depths "
                "are in cm."
            )
        ],
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults
