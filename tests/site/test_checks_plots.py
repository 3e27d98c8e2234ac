"""`stands.csv` and `plots.csv`: each fault in full, and alone."""

import pytest
from folder_by_hand import faults_of, write_folder

# what is wrong -> (changes of the folder, its faults)
CASES = {
    "stand twice": (
        [("stands.csv", "flat\n", "flat\nslope\n")],
        [("ridge/stands.csv, row 4: stand 'slope' stands in row 2 already. Keep one of them.")],
    ),
    "plot twice": (
        [("plots.csv", "P2,slope,,100,20,P1\n", "P2,slope,,100,20,P1\nP2,slope,,100,20,P1\n")],
        [
            (
                "ridge/plots.csv, row 4: plot 'P2' stands in row 3 already. Give each plot a "
                "name of its own."
            )
        ],
    ),
    "plot in an unknown stand": (
        [
            ("plots.csv", "P1,slope,400,,,\n", "P1,slope,400,,,\nP3,ridge,400,,,\n"),
            ("surveys.csv", "P2,D,", "P3,E,spruce,2026-04-01,12\nP2,D,"),
        ],
        [("ridge/plots.csv, row 3: stand 'ridge' is not in stands.csv. Known: flat, slope.")],
    ),
    "plot without an area": (
        [("plots.csv", "400,,,", ",,,")],
        [
            (
                "ridge/plots.csv, row 2: plot 'P1' has no ground area. Give plan_area_m2 "
                "(horizontal) or slope_area_m2 (along the slope), one of them."
            )
        ],
    ),
    "plot with two areas": (
        [("plots.csv", "400,,,", "400,410,10,")],
        [
            (
                "ridge/plots.csv, row 2: plot 'P1' has two ground areas. Give plan_area_m2 "
                "(horizontal) or slope_area_m2 (along the slope), one of them."
            )
        ],
    ),
    "slope area without a slope": (
        [("plots.csv", ",100,20,", ",100,,")],
        [
            (
                "ridge/plots.csv, row 3: plot 'P2' has slope_area_m2 and no slope_deg. Give the "
                "slope: ground area is plan area."
            )
        ],
    ),
    "plot within an unknown plot": (
        [("plots.csv", "20,P1", "20,P9")],
        ["ridge/plots.csv, row 3: within: plot 'P9' is not in plots.csv. Known: P1, P2."],
    ),
    "plots within each other": (
        [("plots.csv", "400,,,", "400,,,P2")],
        [
            (
                "ridge/plots.csv, row 2: plot 'P1' lies within itself: P1 in P2 in P1. Name the "
                "larger plot that it lies in; leave the largest one's blank."
            )
        ],
    ),
    "plot within itself": (
        [("plots.csv", "20,P1", "20,P2")],
        [
            (
                "ridge/plots.csv, row 3: plot 'P2' lies within itself: P2 in P2. Name the "
                "larger plot that it lies in; leave the largest one's blank."
            )
        ],
    ),
    "plot within a plot of another stand": (
        [("plots.csv", "P2,slope", "P2,flat")],
        [
            (
                "ridge/plots.csv, row 3: plot 'P2' is in stand 'flat' and lies within 'P1' of "
                "stand 'slope'. Nested plots share a stand."
            )
        ],
    ),
    "plot larger than the one around it": (
        [("plots.csv", ",100,20", ",1000,60")],
        [
            (
                "ridge/plots.csv, row 3: plot 'P2' of 500 m2 lies within 'P1' of 400 m2. The "
                "larger one is the outer plot."
            )
        ],
    ),
    "stand with a name that parts": (
        [("stands.csv", "flat\n", "flat\nnorth/1\n")],
        [
            (
                "ridge/stands.csv, row 4: stand 'north/1' has a '/'. Name it without one: outputs "
                "write 'stand/species' and name files by it."
            )
        ],
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults
