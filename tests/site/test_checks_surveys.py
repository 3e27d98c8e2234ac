"""`surveys.csv`: each fault in full, and alone."""

import pytest
from folder_by_hand import TEXTS, faults_of, write_folder

from sapflux.site.load import load_site

# what is wrong -> (changes of the folder, its faults)
CASES = {
    "stem twice on one date": (
        [("surveys.csv", "P1,C,oak", "P1,B,beech")],
        [
            (
                "ridge/surveys.csv, row 4: stem 'B' of plot 'P1' stands in row 3 with the same "
                "date 2026-04-01. Keep one of them, or name the stems apart."
            )
        ],
    ),
    "stem of an unknown plot": (
        [("surveys.csv", "P2,D", "P7,D")],
        ["ridge/surveys.csv, row 5: plot 'P7' is not in plots.csv. Known: P1, P2."],
    ),
    "stems of an unknown species": (
        [
            (
                "surveys.csv",
                "P2,D,spruce,2026-04-01,10\n",
                "P2,D,birch,2026-04-01,10\nP2,E,birch,2026-04-01,11\n",
            )
        ],
        [
            (
                "ridge/surveys.csv, rows 5 and 6: species 'birch' is not in species.csv. Did you "
                "mean 'beech'? Known: beech, oak, spruce."
            )
        ],
    ),
    "stem in an inner and an outer plot": (
        [
            (
                "surveys.csv",
                "P2,D,spruce,2026-04-01,10",
                "P2,D,spruce,2026-04-01,10\nP1,D,spruce,2026-04-02,10",
            )
        ],
        [
            (
                "ridge/surveys.csv, row 5: stem 'D' of plot 'P2' stands in row 6 as a stem of "
                "'P1', which 'P2' lies in. It would count twice: keep it in one plot, or name two "
                "stems apart."
            )
        ],
    ),
    "stem thinner than its plot measures": (
        [
            (
                "plots.csv",
                "slope_deg,within\nP1,slope,400,,,\nP2,slope,,100,20,P1\n",
                "slope_deg,within,smallest_diameter_cm\nP1,slope,400,,,,20.5\n"
                "P2,slope,,100,20,P1,\n",
            ),
            ("surveys.csv", "P1,C,", "P1,E,oak,2026-04-01,12.5\nP1,C,"),
        ],
        [
            (
                "ridge/surveys.csv, row 4: plot 'P1' has smallest_diameter_cm 20.5 and 2 living "
                "stems below it, the first 'E' of 12.5 cm. Take them out, or give in plots.csv "
                "the diameter from which on the plot lists all."
            )
        ],
    ),
    "plot without a stem": (
        [("plots.csv", "20,P1\n", "20,P1\nP3,flat,400,,,\n")],
        [
            (
                "ridge/plots.csv, row 4: plot 'P3' has no stem in surveys.csv and would count as "
                "empty ground. List its stems, or take it out; write yes in its column 'empty' if "
                "none stands on it."
            )
        ],
    ),
    "empty plot with stems": (
        [
            (
                "plots.csv",
                "slope_deg,within\nP1,slope,400,,,\nP2,slope,,100,20,P1\n",
                "slope_deg,within,empty\nP1,slope,400,,,,no\nP2,slope,,100,20,P1,yes\n",
            )
        ],
        [
            (
                "ridge/plots.csv, row 3: plot 'P2' is empty, and surveys.csv has living stems of "
                "it. Leave the column 'empty' blank, or mend the survey."
            )
        ],
    ),
    "later survey of few stems": (
        [("surveys.csv", "P2,D,", "P1,A,spruce,2027-04-01,31\nP2,D,")],
        [
            (
                "ridge/surveys.csv, row 5: the survey of plot 'P1' of 2027-04-01 leaves out 2 of "
                "the 3 living stems of the one before, the first 'B'. What a survey does not list "
                "counts as gone: list every stem, with status dead or removed where it is."
            )
        ],
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults


# Half of three stems is one and a half: two are enough, the first day or weeks later.
RIGHT = {
    "two of three": "P1,A,spruce,2027-04-01,31\nP1,B,beech,2027-04-01,26\n",
    "a survey of two days": "P1,A,spruce,2026-04-20,30\n",
}


@pytest.mark.parametrize("case", RIGHT)
def test_a_later_survey_of_most_stems_and_a_survey_of_several_days_are_right(
    case, tmp_path, monkeypatch
):
    monkeypatch.chdir(tmp_path)
    assert load_site(write_folder([("surveys.csv", "P2,D,", RIGHT[case] + "P2,D,")]))


def test_dead_stems_need_not_be_listed_again_and_listed_dead_ones_count(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    head, *rows = TEXTS["surveys.csv"].splitlines()
    status = {"P1,B": "dead", "P1,C": "removed"}
    rows = [f"{row},{status.get(row[:4], '')}" for row in rows]
    later = ["P1,A,spruce,2028-04-01,30,dead", "P2,D,spruce,2028-04-01,12,"]
    texts = TEXTS | {"surveys.csv": "\n".join([f"{head},status", *rows, *later]) + "\n"}
    assert load_site(write_folder(texts=texts))


def test_a_plot_that_is_said_to_be_empty_is_right(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    plots = [("plots.csv", "slope_deg,within\nP1,slope,400,,,\nP2,slope,,100,20,P1\n",
              "slope_deg,within,empty\nP1,slope,400,,,,\nP2,slope,,100,20,P1,\n"
              "P3,slope,400,,,,yes\n")]  # fmt: skip
    site = load_site(write_folder(plots))
    assert [row.empty for row in site.table("plots")] == [False, False, True]
