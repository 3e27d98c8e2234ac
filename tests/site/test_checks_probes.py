"""`probes.csv` and `pairs.csv`: each fault in full, and alone."""

import pytest
from folder_by_hand import faults_of, write_folder

# what is wrong -> (changes of the folder, its faults)
CASES = {
    "probe with a name that parts": (
        [
            ("probes.csv", "u1,A", "u/1,A"),
            ("channels.csv", "probe,u1", "probe,u/1"),
            ("pairs.csv", "u1,a1", "u/1,a1"),
        ],
        [
            (
                "ridge/probes.csv, row 3: probe 'u/1' has a '/'. Name it without one: outputs "
                "write 'stand/species' and name files by it."
            )
        ],
    ),
    "removed before installed": (
        [("probes.csv", "2026-04-01,2026-06-01", "2026-04-01,2026-03-01")],
        [
            (
                "ridge/probes.csv, row 2: installed 2026-04-01 is not before removed "
                "2026-03-01. Intervals are half-open: the end comes after the start."
            )
        ],
    ),
    "two installations at once": (
        [
            (
                "probes.csv",
                "a1,A,heat_dissipation,1.3,0,20,20,,,,,,2026-04-01,2026-06-01\n",
                (
                    "a1,A,heat_dissipation,1.3,0,20,20,,,,,,2026-04-01,2026-06-01\n"
                    "a1,A,heat_dissipation,1.3,0,20,20,,,,,,2026-05-01,\n"
                ),
            )
        ],
        [
            (
                "ridge/probes.csv, row 3: probe 'a1' is installed already in row 2. Give that "
                "row the day of removal, or this probe a name of its own."
            )
        ],
    ),
    "probe in an unknown tree": (
        [("probes.csv", "b1,B", "b1,BB")],
        [
            (
                "ridge/probes.csv, row 4: tree 'BB' is not in trees.csv. Did you mean 'B'? "
                "Known: A, B."
            )
        ],
    ),
    "probe that moves to another tree": (
        [
            (
                "probes.csv",
                "a1,A,heat_dissipation,1.3,0,20,20,,,,,,2026-04-01,2026-06-01\n",
                (
                    "a1,A,heat_dissipation,1.3,0,20,20,,,,,,2026-04-01,2026-06-01\n"
                    "a1,B,heat_dissipation,1.3,0,20,20,,,,,,2026-06-01,\n"
                ),
            )
        ],
        [
            (
                "ridge/probes.csv, row 3: probe 'a1' has tree 'B' here and 'A' in row 2. A "
                "probe keeps its tree and method: give this one a name of its own."
            )
        ],
    ),
    "depth from beyond depth to": (
        [("probes.csv", "5 20,15 30", "20 20,15 30")],
        [
            (
                "ridge/probes.csv, row 4: a point begins at 20 mm and ends at 15 mm. Depths "
                "grow inwards: depth_from_mm is the smaller."
            )
        ],
    ),
    "unlike numbers of depths": (
        [("probes.csv", "5 20,15 30", "5 20,15")],
        [
            (
                "ridge/probes.csv, row 4: depth_from_mm has 2 and depth_to_mm 1 numbers. Give "
                "both for each point, outermost first."
            )
        ],
    ),
    "points that overlap": (
        [("probes.csv", "5 20,15 30", "5 12,15 30")],
        [
            (
                "ridge/probes.csv, row 4: the points overlap: one ends at 15 mm and the next "
                "begins at 12 mm. List the points from the outermost inwards."
            )
        ],
    ),
    "needle shorter than its points": (
        [("probes.csv", "15 30,35", "15 30,20")],
        [
            (
                "ridge/probes.csv, row 4: the points span 25 mm and needle_length_mm is 20. A "
                "needle is at least as long as its points."
            )
        ],
    ),
    "heat ratio without a spacing": (
        [("probes.csv", "35,6,6", "35,6,")],
        [
            (
                "ridge/probes.csv, row 4: spacing_upstream_mm is blank and the method is "
                "heat_ratio. Give the distance from the heater to that needle."
            )
        ],
    ),
    "spacing of zero": (
        [("probes.csv", "35,6,6", "35,6,0")],
        ["ridge/probes.csv, row 4: spacing_upstream_mm is '0'. Give a number above 0."],
    ),
    "window turned round": (
        [("probes.csv", "60,100", "100,60")],
        [
            (
                "ridge/probes.csv, row 4: the reading window begins at 100 s and ends at 60 s. "
                "Count both from the end of heating."
            )
        ],
    ),
    "needle deeper than the xylem radius": (
        [("probes.csv", "5 20,15 30,35", "5 20,15 130,135")],
        [
            (
                "ridge/probes.csv, row 4: depth_to_mm is 130 and the xylem radius of tree 'B' "
                "is 125 mm. Depths are in mm below cambium, diameters in cm."
            )
        ],
    ),
    "needle longer than the stem is thick": (
        [
            (
                "probes.csv",
                "0,20,20,,,,,,2026-04-01,2026-06-01",
                "0,20,300,,,,,,2026-04-01,2026-06-01",
            )
        ],
        [
            (
                "ridge/probes.csv, row 2: needle_length_mm is 300 and the stem of tree 'A' has "
                "150 mm from bark to pith. Lengths of needles are in mm, diameters in cm."
            )
        ],
    ),
    "tree without a diameter": (
        [("surveys.csv", "P1,A,spruce", "P1,X,spruce")],
        [
            (
                "ridge/probes.csv, row 2: probe 'a1' sits in tree 'A', which has no diameter in "
                "surveys.csv. Add it as a stem of that name in a plot of stand 'slope', or give "
                "its diameter_cm in trees.csv if it stands outside all plots."
            )
        ],
    ),
    "tree in a plot of another stand": (
        [("trees.csv", "A,slope", "A,flat")],
        [
            (
                "ridge/probes.csv, row 2: probe 'a1' sits in tree 'A', which has no diameter in "
                "surveys.csv. Add it as a stem of that name in a plot of stand 'flat', or give "
                "its diameter_cm in trees.csv if it stands outside all plots."
            )
        ],
    ),
    "tree without sapwood": (
        [("cores.csv", "B,,2026-04-01,8\n", ""), ("species.csv", "0.7,1.9", ",")],
        [
            (
                "ridge/probes.csv, row 4: probe 'b1' sits in tree 'B', which has no "
                "sapwood_depth_cm. Add it to cores.csv, or list an allometry for its species."
            )
        ],
    ),
    "allometry that gives too much": (
        [("cores.csv", "B,,2026-04-01,8\n", ""), ("species.csv", "0.7,1.9", "7,1.9")],
        [
            (
                "ridge/probes.csv, row 4: probe 'b1' sits in tree 'B', to which the allometry "
                "of 'beech' gives more sapwood than the stem has wood. Add its sapwood_depth_cm "
                "to cores.csv."
            )
        ],
    ),
    "pair of an unknown probe": (
        [("pairs.csv", "u1,a1", "u1,a9")],
        [("ridge/pairs.csv, row 2: heated probe 'a9' is not in probes.csv. Known: a1, b1, u1.")],
    ),
    "pair of heated probes": (
        [("pairs.csv", "u1,a1", "a1,a1")],
        [
            (
                "ridge/pairs.csv, row 2: unheated probe 'a1' is of the method heat_dissipation. "
                "Name a probe of the method unheated_pair."
            )
        ],
    ),
    "pair in two trees": (
        [("probes.csv", "u1,A", "u1,B")],
        [
            (
                "ridge/pairs.csv, row 2: unheated probe 'u1' sits in tree 'B' and heated probe "
                "'a1' in 'A'. The gradient of another stem says nothing: pair probes of one "
                "stem."
            )
        ],
    ),
    "two pairs of one probe at once": (
        [("pairs.csv", "u1,a1,2026-04-01,\n", "u1,a1,2026-04-01,\nu1,a1,2026-05-01,\n")],
        [
            (
                "ridge/pairs.csv, row 3: heated probe 'a1' has another unheated pair for the same "
                "time in row 2. End one where the other begins."
            )
        ],
    ),
    "pair from after to": (
        [("pairs.csv", "2026-04-01,", "2026-04-01,2026-04-01")],
        [
            (
                "ridge/pairs.csv, row 2: from 2026-04-01 is not before to 2026-04-01. Intervals "
                "are half-open: the end comes after the start."
            )
        ],
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults
