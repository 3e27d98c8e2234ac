"""Heating cycles of `probes.csv`: each fault in full, and alone."""

import pytest
from folder_by_hand import faults_of, write_folder

from sapflux.site.load import load_site

HEAD = "embedded_diffusivity_cm2_s,installed,removed"
A1, B1 = "0,20,20,,,,,,2026-04-01,2026-06-01", "60,100,0.0025,2026-04-01,"


def cycle(of_a, of_b=","):
    """Changes that give the probes a1 (heat dissipation, every 10 min) and b1 heating cycles."""
    return [
        ("probes.csv", HEAD, f"{HEAD},heating_on_min,heating_off_min"),
        ("probes.csv", A1, f"{A1},{of_a}"),
        ("probes.csv", B1, f"{B1},{of_b}"),
        ("probes.csv", "0,20,20,,,,,,2026-04-01,\n", "0,20,20,,,,,,2026-04-01,,,\n"),
    ]


STATE = ("channels.csv", "T1,Batt,log", "T1,on,log,T1,1,heater_state,1,,\nT1,Batt,log")
# what is wrong -> (changes of the folder, its faults)
CASES = {
    "half of a cycle": (
        cycle("30,"),
        [
            (
                "ridge/probes.csv, row 2: probe 'a1' has heating_on_min and no heating_off_min. "
                "Give both, or neither for a needle heated without a break."
            )
        ],
    ),
    "the other half": (
        cycle(",30"),
        [
            (
                "ridge/probes.csv, row 2: probe 'a1' has heating_off_min and no heating_on_min. "
                "Give both, or neither for a needle heated without a break."
            )
        ],
    ),
    "cycle of another method": (
        cycle(",", "30,30"),
        [
            (
                "ridge/probes.csv, row 4: probe 'b1' has a heating cycle and is of the method "
                "heat_ratio. Leave heating_on_min and heating_off_min blank: cycles are of heat "
                "dissipation."
            )
        ],
    ),
    "cycle in seconds": (
        cycle("900,900"),
        [
            (
                "ridge/probes.csv, row 2: the heating cycle of probe 'a1' lasts 1800 min. Give "
                "minutes, at most 120 together: cycles in use last 20 to 60."
            )
        ],
    ),
    "parts of records": (
        cycle("15,15"),
        [
            (
                "ridge/probes.csv, row 2: probe 'a1' is heated 15 min and not heated 15 min, and "
                "log 'T1' has a record every 10 min. Both times are a whole number of records: the "
                "readings are taken at their ends."
            )
        ],
    ),
    "cycle that goes into no hour": (
        cycle("20,30"),
        [
            (
                "ridge/probes.csv, row 2: the heating cycle of probe 'a1' lasts 50 min, which "
                "cannot be counted from the full hour. Log heater_state, or give a cycle of 20, 30 "
                "or 60 min."
            )
        ],
    ),
    "full hours that are not those of UTC": (
        [*cycle("30,30"), ("site.toml", "utc_offset_h = 1.0", "utc_offset_h = 1.5")],
        [
            (
                "ridge/probes.csv, row 2: the heating cycle of probe 'a1' lasts 60 min, and the "
                "site's full hours (utc_offset_h 1.5) are not those of UTC, from which it is "
                "counted. Log heater_state of the probe or of its log."
            )
        ],
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults


@pytest.mark.parametrize(
    "changes",
    [
        cycle("30,30"),
        cycle("10,20"),
        [*cycle("20,30"), STATE],
        [*cycle("30,30"), STATE, ("site.toml", "utc_offset_h = 1.0", "utc_offset_h = 1.5")],
        [*cycle("10,20"), ("site.toml", "utc_offset_h = 1.0", "utc_offset_h = 1.5")],
    ],
)
def test_cycles_that_can_be_told(changes, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    row = load_site(write_folder(changes)).table("probes")[0]
    assert row.heating_on_min and row.heating_off_min
