"""References, potentials, events, visits, exclusions, decisions: each fault in full, and alone."""

import pytest
from folder_by_hand import faults_of, write_folder

# what is wrong -> (changes of the folder, its faults)
CASES = {
    "reference of two things": (
        [("references.csv", "a1,,2026", "a1,spruce,2026")],
        [
            (
                "ridge/references.csv, row 2: the row names probe 'a1' and species 'spruce'. "
                "Name one of them, or neither where it holds for all probes."
            )
        ],
    ),
    "reference of an unknown probe": (
        [("references.csv", "a1,,", "a7,,")],
        [("ridge/references.csv, row 2: probe 'a7' is not in probes.csv. Known: a1, b1, u1.")],
    ),
    "reference of an unknown species": (
        [("references.csv", "a1,,", ",fir,")],
        [
            (
                "ridge/references.csv, row 2: species 'fir' is not in species.csv. Known: "
                "beech, oak, spruce."
            )
        ],
    ),
    "reference from after to": (
        [("references.csv", "2026-05-02", "2026-04-02")],
        [
            (
                "ridge/references.csv, row 2: from 2026-05-01 is not before to 2026-04-02. "
                "Intervals are half-open: the end comes after the start."
            )
        ],
    ),
    "soil potential without a stand": (
        [("potentials.csv", "leaf,,A", "soil,,A")],
        [
            (
                "ridge/potentials.csv, row 2: stand is blank in a potential of kind soil. Name "
                "the stand."
            )
        ],
    ),
    "potential of an unknown tree": (
        [("potentials.csv", "leaf,,A", "leaf,,Z")],
        ["ridge/potentials.csv, row 2: tree 'Z' is not in trees.csv. Known: A, B."],
    ),
    "event in an unknown stand": (
        [("events.csv", "slope,", "slop,")],
        [
            (
                "ridge/events.csv, row 2: stand 'slop' is not in stands.csv. Did you mean "
                "'slope'? Known: flat, slope."
            )
        ],
    ),
    "event from after to": (
        [("events.csv", "2026-05-02", "2026-05-01")],
        [
            (
                "ridge/events.csv, row 2: from 2026-05-01 is not before to 2026-05-01. "
                "Intervals are half-open: the end comes after the start."
            )
        ],
    ),
    "visit to an unknown log": (
        [("visits.csv", "T1,2026-06", "T9,2026-06")],
        ["ridge/visits.csv, row 3: log 'T9' is not in site.toml. Known: H1, T1."],
    ),
    "visit that ends before it begins": (
        [("visits.csv", "2026-06-01 11:00", "2026-06-01 09:00")],
        [
            (
                "ridge/visits.csv, row 3: arrival 2026-06-01 10:00 is after departure "
                "2026-06-01 09:00. Give both in the site's standard time."
            )
        ],
    ),
    "two visits at once": (
        [("visits.csv", "2026-06-01 10:00,2026-06-01 11:00", "2026-05-01 10:30,2026-05-01 12:00")],
        [
            (
                "ridge/visits.csv, row 3: log 'T1' was visited at that time in row 2 already. "
                "Write one row for a visit."
            )
        ],
    ),
    "exclusion of an unknown probe": (
        [("exclusions.csv", "probe,a1", "probe,a7")],
        [("ridge/exclusions.csv, row 2: probe 'a7' is not in probes.csv. Known: a1, b1, u1.")],
    ),
    "exclusion of an unknown log": (
        [("exclusions.csv", "probe,a1", "log,a1")],
        ["ridge/exclusions.csv, row 2: log 'a1' is not in site.toml. Known: H1, T1."],
    ),
    "exclusion from after to": (
        [("exclusions.csv", "2026-05-04", "2026-05-02")],
        [
            (
                "ridge/exclusions.csv, row 2: from 2026-05-03 is not before to 2026-05-02. "
                "Intervals are half-open: the end comes after the start."
            )
        ],
    ),
    "decision on an unknown log": (
        [("decisions.csv", "T1,", "T7,")],
        ["ridge/decisions.csv, row 2: log 'T7' is not in site.toml. Known: H1, T1."],
    ),
    "decision twice": (
        [
            (
                "decisions.csv",
                "T1,swap,2026-05-01 10:00,reject,xy,2026-05-20\n",
                (
                    "T1,swap,2026-05-01 10:00,reject,xy,2026-05-20\n"
                    "T1,swap,2026-05-01 10:00,accept,xy,2026-05-21\n"
                ),
            )
        ],
        [
            (
                "ridge/decisions.csv, row 3: this proposal on log 'T1' is answered in row 2 "
                "already. Keep the answer that holds."
            )
        ],
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults
