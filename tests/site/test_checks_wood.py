"""Wood, wounds, profiles and calibrations: each fault in full, and alone."""

import pytest
from folder_by_hand import faults_of, write_folder

# what is wrong -> (changes of the folder, its faults)
CASES = {
    "sample of two things": (
        [("wood.csv", "spruce,,2026", "spruce,A,2026")],
        [
            (
                "ridge/wood.csv, row 2: the row names species 'spruce' and tree 'A'. Name one "
                "of them: species or tree."
            )
        ],
    ),
    "sample of nothing": (
        [("wood.csv", "spruce,,2026", ",,2026")],
        [
            (
                "ridge/wood.csv, row 2: the row names neither species nor tree. Name one of "
                "them: species or tree."
            )
        ],
    ),
    "sample of an unknown tree": (
        [("wood.csv", ",B,2026", ",Z,2026")],
        ["ridge/wood.csv, row 3: tree 'Z' is not in trees.csv. Known: A, B."],
    ),
    "sample twice": (
        [("wood.csv", ",B,2026", "spruce,,2026")],
        [
            (
                "ridge/wood.csv, row 3: the sample of 'spruce' of 2026-04-01 stands in row 2 "
                "already. Keep one of them."
            )
        ],
    ),
    "sample without a value": (
        [("wood.csv", "400,1.3,", ",,")],
        [
            (
                "ridge/wood.csv, row 2: the sample has no value. Give dry_density_kg_m3 and "
                "water_content, or diffusivity_cm2_s."
            )
        ],
    ),
    "water content in per cent": (
        [("wood.csv", "400,1.3", "400,130")],
        [
            (
                "ridge/wood.csv, row 2: water_content is 130, which looks like a per cent. Give "
                "water mass over DRY mass, for sapwood mostly 0.4 to 2.2: 130 % is 1.3."
            )
        ],
    ),
    "water content below fibre saturation": (
        [("wood.csv", "400,1.3", "400,0.25")],
        [
            (
                "ridge/wood.csv, row 2: water_content is 0.25, which looks like a fraction of "
                "fresh mass. Give water mass over DRY mass, for sapwood mostly 0.4 to 2.2: a "
                "fraction f of fresh mass is f / (1 - f), here 0.33."
            )
        ],
    ),
    "water content of fresh mass": (
        [("wood.csv", "400,1.3", "400,0.5")],
        [
            (
                "ridge/wood.csv, row 2: water_content is 0.5, which looks like a fraction of "
                "fresh mass: it would fill 13 % of the pores of wood of 400 kg m-3. Give water "
                "mass over DRY mass, for sapwood mostly 0.4 to 2.2: a fraction f of fresh mass "
                "is f / (1 - f), here 1.00."
            )
        ],
    ),
    "more water than the wood has room for": (
        [("wood.csv", "580,0.8", "580,1.8")],
        [
            (
                "ridge/wood.csv, row 3: water_content is 1.8, and wood of 580 kg m-3 has room "
                "for 1.07. Give water mass over DRY mass, for sapwood mostly 0.4 to 2.2, and "
                "density as dry mass over FRESH volume."
            )
        ],
    ),
    "density in g cm-3": (
        [("wood.csv", "400,1.3", "0.4,1.3")],
        [
            (
                "ridge/wood.csv, row 2: dry_density_kg_m3 is 0.4. Give dry mass over fresh "
                "volume in kg m-3: sapwood lies between 150 and 1200."
            )
        ],
    ),
    "density too high": (
        [("wood.csv", "400,1.3", "1300,1.3")],
        [
            (
                "ridge/wood.csv, row 2: dry_density_kg_m3 is 1300. Give dry mass over fresh "
                "volume in kg m-3: sapwood lies between 150 and 1200."
            )
        ],
    ),
    "diffusivity in m2 s-1": (
        [("wood.csv", "0.8,0.0025", "0.8,2.5e-7")],
        [
            (
                "ridge/wood.csv, row 3: diffusivity_cm2_s is 2.5e-07. Give it in cm2 s-1: fresh "
                "sapwood lies about 0.0025."
            )
        ],
    ),
    "wound of two things": (
        [("wounds.csv", "b1,,,", "b1,B,,")],
        [
            (
                "ridge/wounds.csv, row 2: the row names probe 'b1' and tree 'B'. Name one of "
                "them: probe or tree or species."
            )
        ],
    ),
    "wound of an unknown probe": (
        [("wounds.csv", "b1,,,", "b7,,,")],
        ["ridge/wounds.csv, row 2: probe 'b7' is not in probes.csv. Known: a1, b1, u1."],
    ),
    "wound in cm": (
        [("wounds.csv", ",2.0,", ",0.2,")],
        [
            (
                "ridge/wounds.csv, row 2: width_mm is 0.2. Give the width of wounded wood "
                "across the needles in mm: it lies between 0.5 and 6."
            )
        ],
    ),
    "wound twice": (
        [("wounds.csv", ",,beech", "b1,,")],
        [
            (
                "ridge/wounds.csv, row 3: the wound of 'b1' of 2026-10-01 stands in row 2 "
                "already. Keep one of them."
            )
        ],
    ),
    "half a time course": (
        [
            ("wounds.csv", "width_mm,source", "width_mm,final_width_mm,time_constant_d,source"),
            ("wounds.csv", ",2.0,own", ",2.0,2.4,,own"),
            ("wounds.csv", ",2.1,own", ",2.1,,30,own"),
        ],
        [
            (
                "ridge/wounds.csv, row 2: the row has final_width_mm and no time_constant_d. Give "
                "both for a wound that grows by a time course, or neither."
            ),
            (
                "ridge/wounds.csv, row 3: the row has time_constant_d and no final_width_mm. Give "
                "both for a wound that grows by a time course, or neither."
            ),
        ],
    ),
    "a wound that shrinks, and one too wide": (
        [
            ("wounds.csv", "width_mm,source", "width_mm,final_width_mm,time_constant_d,source"),
            ("wounds.csv", ",2.0,own", ",2.0,1.9,30,own"),
            ("wounds.csv", ",2.1,own", ",2.1,21,30,own"),
        ],
        [
            (
                "ridge/wounds.csv, row 2: final_width_mm 1.9 is less than width_mm 2. A wound "
                "grows: give in width_mm the width at `date`, in final_width_mm the last one."
            ),
            (
                "ridge/wounds.csv, row 3: final_width_mm is 21. Give the width of wounded wood "
                "across the needles in mm: it lies between 0.5 and 6."
            ),
        ],
    ),
    "profile of nothing": (
        [
            (
                "profiles.csv",
                "spruce,,0,1,own,,\nspruce,,1,0.2,own,,\n",
                ",,0,1,own,,\n,,1,0.2,own,,\n",
            )
        ],
        [
            (
                "ridge/profiles.csv, rows 2 and 3: the row names neither species nor tree. Name "
                "one of them: species or tree."
            ),
        ],
    ),
    "profile of one node": (
        [("profiles.csv", "spruce,,1,0.2,own,,\n", "")],
        [
            (
                "ridge/profiles.csv, row 2: the profile of 'spruce' has one node. Give at least "
                "two relative depths."
            )
        ],
    ),
    "profile with a depth twice": (
        [("profiles.csv", "spruce,,1,", "spruce,,0,")],
        [
            (
                "ridge/profiles.csv, row 3: the profile of 'spruce' has relative_depth 0 in row "
                "2 already. Give each depth once."
            )
        ],
    ),
    "profile of zero": (
        [
            (
                "profiles.csv",
                "spruce,,0,1,own,,\nspruce,,1,0.2,own,,\n",
                "spruce,,0,0,own,,\nspruce,,1,0,own,,\n",
            )
        ],
        [
            (
                "ridge/profiles.csv, row 2: the profile of 'spruce' is 0 at every depth. Give a "
                "ratio above 0 somewhere."
            )
        ],
    ),
    "negative ratio": (
        [("profiles.csv", "1,0.2", "1,-0.2")],
        ["ridge/profiles.csv, row 3: ratio is -0.2. Give a ratio of at least 0."],
    ),
    "two profiles at once": (
        [
            (
                "profiles.csv",
                ",B,0.5,1,own,2026-01-01,2026-06-01\n",
                (
                    ",B,0.5,1,own,2026-01-01,2026-06-01\n"
                    ",B,0,1,own,2026-05-01,\n"
                    ",B,1,1,own,2026-05-01,\n"
                ),
            )
        ],
        [
            (
                "ridge/profiles.csv, row 6: 'B' has another profile for the same time from row "
                "4 on. End one where the other begins."
            )
        ],
    ),
    "nodes of two sources": (
        [
            (
                "profiles.csv",
                "spruce,,1,0.2,own,,\n",
                "spruce,,1,0.2,own,,\nspruce,,0,0.9,a trial,,\n",
            )
        ],
        [
            (
                "ridge/profiles.csv, row 4: the profile of 'spruce' has nodes of source 'a trial' "
                "here and of 'own' in row 2. Two profiles do not mix: give each its own time, or "
                "keep one of them."
            )
        ],
    ),
    "two calibrations of one date": (
        [
            (
                "calibrations.csv",
                "lab,spruce,119,1.23,0.1,0.9,own,2026-03-01\n",
                (
                    "lab,spruce,119,1.23,0.1,0.9,own,2026-03-01\n"
                    "field,spruce,130,1.2,0.1,0.9,own,2026-03-01\n"
                ),
            )
        ],
        [
            (
                "ridge/calibrations.csv, row 3: species 'spruce' has a calibration for "
                "heat_dissipation of 2026-03-01 in row 2 already. The latest counts: keep one of "
                "them, or give the dates on which they were made."
            )
        ],
    ),
    "calibration twice": (
        [
            (
                "calibrations.csv",
                "lab,spruce,119,1.23,0.1,0.9,own,2026-03-01\n",
                (
                    "lab,spruce,119,1.23,0.1,0.9,own,2026-03-01\n"
                    "lab,beech,119,1.23,0.1,0.9,own,2026-03-01\n"
                ),
            )
        ],
        [
            (
                "ridge/calibrations.csv, row 3: calibration 'lab' stands in row 2 already. Give "
                "each a name of its own."
            )
        ],
    ),
    "calibration of an unknown species": (
        [("calibrations.csv", "lab,spruce", "lab,sprue")],
        [
            (
                "ridge/calibrations.csv, row 2: species 'sprue' is not in species.csv. Did you "
                "mean 'spruce'? Known: beech, oak, spruce."
            )
        ],
    ),
    "range turned round": (
        [("calibrations.csv", "0.1,0.9", "0.9,0.1")],
        [
            (
                "ridge/calibrations.csv, row 2: lowest_index 0.9 is not below highest_index "
                "0.1. Give the range of flow index that the calibration covers."
            )
        ],
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults
