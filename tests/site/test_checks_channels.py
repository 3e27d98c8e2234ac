"""`channels.csv`: each fault in full, and alone."""

import pytest
from folder_by_hand import faults_of, write_folder

from sapflux import units
from sapflux.site.load import load_site

# what is wrong -> (changes of the folder, its faults)
CASES = {
    "from after to": (
        [
            (
                "channels.csv",
                "T1,dT_a,probe,a1,1,heated_emf,mV,,2026-06-01\n",
                "T1,dT_a,probe,a1,1,heated_emf,mV,2026-07-01,2026-06-01\n",
            )
        ],
        [
            (
                "ridge/channels.csv, row 2: from 2026-07-01 is not before to 2026-06-01. "
                "Intervals are half-open: the end comes after the start."
            )
        ],
    ),
    "unknown log": (
        [("channels.csv", "T1,AirT", "T2,AirT")],
        ["ridge/channels.csv, row 6: log 'T2' is not in site.toml. Known: H1, T1."],
    ),
    "unknown probe": (
        [("channels.csv", "probe,u1,1", "probe,u2,1")],
        ["ridge/channels.csv, row 3: probe 'u2' is not in probes.csv. Known: a1, b1, u1."],
    ),
    "unknown tree": (
        [("channels.csv", "AirT,site,,1,air_temperature", "AirT,tree,Z,1,stem_temperature")],
        ["ridge/channels.csv, row 6: tree 'Z' is not in trees.csv. Known: A, B."],
    ),
    "unknown stand": (
        [("channels.csv", "AirT,site,", "AirT,stand,slop")],
        [
            (
                "ridge/channels.csv, row 6: stand 'slop' is not in stands.csv. Did you mean "
                "'slope'? Known: flat, slope."
            )
        ],
    ),
    "site with an id": (
        [("channels.csv", "AirT,site,", "AirT,site,slope")],
        [
            (
                "ridge/channels.csv, row 6: id is 'slope' in a channel of the site. Leave it "
                "blank, or give the kind of thing it names."
            )
        ],
    ),
    "log without an id": (
        [("channels.csv", "log,T1,1", "log,,1")],
        ["ridge/channels.csv, row 7: id is blank in a channel of a log. Name the log."],
    ),
    "quantity not of its kind": (
        [("channels.csv", "AirT,site,,1", "AirT,probe,a1,1")],
        [
            (
                "ridge/channels.csv, row 6: air_temperature is no quantity of a probe. It "
                "belongs to a site or a stand."
            )
        ],
    ),
    "unit of another quantity": (
        [("channels.csv", "heated_emf,mV", "heated_emf,degC")],
        [("ridge/channels.csv, row 2: unit 'degC' does not fit heated_emf. Known: V, mV, uV.")],
    ),
    "unit that is blank": (
        [("channels.csv", "heated_emf,mV", "heated_emf,")],
        ["ridge/channels.csv, row 2: unit is blank. Units of heated_emf: V, mV, uV."],
    ),
    "unit and quantity that are blank": (
        [("channels.csv", "heated_emf,mV", ",")],
        [
            "ridge/channels.csv, row 2: quantity is blank. Give its value: the row has no meaning "
            "without it.",
            "ridge/channels.csv, row 2: unit is blank. Give its value: the row has no meaning "
            "without it.",
        ],
    ),
    "wind in a unit of sap": (
        [("channels.csv", "air_temperature,degC", "wind_speed,cm h-1")],
        [
            "ridge/channels.csv, row 6: unit 'cm h-1' does not fit wind_speed. Did you mean "
            "'km h-1'? Known: km h-1, m s-1."
        ],
    ),
    "humidity by volume": (
        [("channels.csv", "air_temperature,degC", "relative_humidity,m3 m-3")],
        ["ridge/channels.csv, row 6: unit 'm3 m-3' does not fit relative_humidity. Known: %, 1."],
    ),
    "rain in a unit of pressure": (
        [("channels.csv", "air_temperature,degC", "precipitation,kPa")],
        [
            "ridge/channels.csv, row 6: unit 'kPa' does not fit precipitation. Known: kg m-2, mm, "
            "mm water."
        ],
    ),
    "unit of a difference": (
        [("channels.csv", "heated_emf,mV", "heated_difference,mV")],
        [
            (
                "ridge/channels.csv, row 2: unit 'mV' does not fit heated_difference. Known: K, "
                "degC, degF."
            )
        ],
    ),
    "point of the weather": (
        [("channels.csv", "AirT,site,,1", "AirT,site,,2")],
        [
            (
                "ridge/channels.csv, row 6: point is 2, and air_temperature of a site has no "
                "points. Leave it blank."
            )
        ],
    ),
    "point beyond the needle": (
        [
            (
                "channels.csv",
                "H1,b1/ratio2,probe,b1,2,heat_ratio,1,,\n",
                "H1,b1/ratio2,probe,b1,3,heat_ratio,1,,\n",
            )
        ],
        [
            (
                "ridge/channels.csv, row 5: point is 3, and probe 'b1' has 2 points. Points are "
                "counted from 1, outermost first; their depths stand in probes.csv."
            )
        ],
    ),
    "signal of another method": (
        [
            (
                "channels.csv",
                "H1,b1/ratio2,probe,b1,2,heat_ratio,1,,\n",
                "H1,b1/ratio2,probe,b1,2,heated_difference,K,,\n",
            )
        ],
        [
            (
                "ridge/channels.csv, row 5: heated_difference is a signal of heat_dissipation, "
                "and probe 'b1' is of the method heat_ratio. Signals of heat_ratio: "
                "temperature_before_downstream, temperature_after_downstream, "
                "temperature_before_upstream, temperature_after_upstream, rise_downstream, "
                "rise_upstream, heat_ratio, log_heat_ratio, logged_velocity, "
                "temperature_trace_downstream, temperature_trace_upstream."
            )
        ],
    ),
    "stored velocity without its constants": (
        [
            (
                "channels.csv",
                "H1,b1/ratio2,probe,b1,2,heat_ratio,1,,\n",
                "H1,b1/ratio2,probe,b1,2,logged_velocity,cm h-1,,\n",
            )
        ],
        [
            (
                "ridge/channels.csv, row 5: logged_velocity of probe 'b1' cannot be undone: the "
                "constants inside it are not known. Give embedded_diffusivity_cm2_s and "
                "embedded_spacing_mm in probes.csv."
            )
        ],
    ),
    "one temperature of four": (
        [
            (
                "channels.csv",
                "H1,b1/ratio2,probe,b1,2,heat_ratio,1,,\n",
                "H1,b1/T2,probe,b1,2,temperature_before_downstream,degC,,\n",
            )
        ],
        [
            (
                "ridge/channels.csv, row 5: point 2 of probe 'b1' has "
                "temperature_before_downstream and no temperature_after_downstream, "
                "temperature_before_upstream, temperature_after_upstream. A point needs both "
                "rises, all four temperatures, both temperature traces, heat_ratio, log_heat_ratio "
                "or logged_velocity, for the same time."
            )
        ],
    ),
    "one rise that ends before the other": (
        [
            (
                "channels.csv",
                "H1,b1/ratio2,probe,b1,2,heat_ratio,1,,\n",
                "H1,b1/up2,probe,b1,2,rise_upstream,K,,2026-07-01\n"
                "H1,b1/down2,probe,b1,2,rise_downstream,K,,\n",
            )
        ],
        [
            (
                "ridge/channels.csv, row 6: point 2 of probe 'b1' has rise_downstream from "
                "2026-07-01 to open and no rise_upstream. A point needs both rises, all four "
                "temperatures, both temperature traces, heat_ratio, log_heat_ratio or "
                "logged_velocity, for the same time."
            )
        ],
    ),
    "too few names of a long table": (
        [("channels.csv", "b1/ratio2", "ratio2")],
        [
            (
                "ridge/channels.csv, row 5: column 'ratio2' names too little of the long table "
                "of log 'H1'. Join the cells of probe, what by '/'."
            )
        ],
    ),
    "one column twice": (
        [
            (
                "channels.csv",
                "H1,b1/ratio2,probe,b1,2,heat_ratio,1,,\n",
                (
                    "H1,b1/ratio2,probe,b1,2,heat_ratio,1,,\n"
                    "T1,Batt,site,,1,air_pressure,hPa,,2026-06-01\n"
                ),
            )
        ],
        [
            (
                "ridge/channels.csv, row 8: column 'Batt' of log 'T1' is taken for the same "
                "time in row 6. End one channel where the other begins."
            )
        ],
    ),
    "one probe from two columns": (
        [
            (
                "channels.csv",
                "T1,dT_a,probe,a1,1,heated_emf,mV,,2026-06-01\n",
                (
                    "T1,dT_a,probe,a1,1,heated_emf,mV,,2026-06-01\n"
                    "T1,dT_b,probe,a1,1,heated_emf,mV,2026-05-01,\n"
                ),
            )
        ],
        [
            (
                "ridge/channels.csv, row 3: heated_emf of probe 'a1' at point 1 has another "
                "column for the same time in row 2. End one channel where the other begins."
            )
        ],
    ),
    "weather from two columns": (
        [
            (
                "channels.csv",
                "T1,dT_a,probe,a1,1,heated_emf,mV,,2026-06-01\n",
                (
                    "T1,dT_a,probe,a1,1,heated_emf,mV,,2026-06-01\n"
                    "T1,Ta,site,,1,air_temperature,K,,\n"
                ),
            )
        ],
        [
            (
                "ridge/channels.csv, row 7: air_temperature of the site has another column for "
                "the same time in row 3. End one channel where the other begins."
            )
        ],
    ),
}


WHOLE = {
    "both rises": ["rise_downstream,K,,", "rise_upstream,K,,"],
    "four temperatures": [
        f"temperature_{when}_{needle},degC,,"
        for when in ("before", "after")
        for needle in ("downstream", "upstream")
    ],
    "a rise and two temperatures": [
        "rise_downstream,K,,",
        "temperature_before_upstream,degC,,",
        "temperature_after_upstream,degC,,",
    ],
    "log ratio": ["log_heat_ratio,1,,"],
    "ratio, then rises, with a gap between": [
        "heat_ratio,1,,2026-06-01",
        "rise_downstream,K,2026-07-01,",
        "rise_upstream,K,2026-07-01,",
    ],
}


@pytest.mark.parametrize("case", WHOLE)
def test_signals_that_make_a_ratio_together_are_right(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    rows = "".join(f"H1,b1/{n},probe,b1,2,{rest}\n" for n, rest in enumerate(WHOLE[case]))
    change = ("channels.csv", "H1,b1/ratio2,probe,b1,2,heat_ratio,1,,\n", rows)
    assert load_site(write_folder([change]))


def test_a_rise_logged_on_after_the_probes_removal_is_right(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    rows = (
        "H1,b1/up,probe,b1,2,rise_upstream,K,,2026-07-01\nH1,b1/dn,probe,b1,2,rise_downstream,K,,\n"
    )
    changes = [
        ("channels.csv", "H1,b1/ratio2,probe,b1,2,heat_ratio,1,,\n", rows),
        ("probes.csv", "60,100,0.0025,2026-04-01,\n", "60,100,0.0025,2026-04-01,2026-07-01\n"),
    ]
    assert load_site(write_folder(changes))


def test_heat_dissipation_is_right_with_a_voltage_or_kelvin(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    for signal in ("heated_emf,mV", "heated_difference,K"):
        assert load_site(write_folder([("channels.csv", "heated_emf,mV", signal)]))


def test_millimetres_of_rain_are_a_depth_of_water(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes = [
        ("channels.csv", "air_temperature,degC", "precipitation,mm"),
        ("channels.csv", "T1,Batt,log,T1,1,battery_voltage,V", "T1,h,site,,1,stage,mm"),
    ]
    rain, stage = load_site(write_folder(changes)).table("channels")[-2:]
    assert units.to_si(2.5, rain.unit) == 2.5  # kg m-2
    assert units.to_si(2.5, stage.unit) == 2.5e-3  # m


@pytest.mark.parametrize("case", CASES)
def test_every_fault_is_told_in_full_and_alone(case, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    changes, faults = CASES[case]
    assert faults_of(write_folder(changes)) == faults
