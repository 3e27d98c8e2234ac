"""Sensitivity against age: known losses with random places of needles, found by controls."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from correction_records import beside, evaluated, record, stamps, table_of

import sapflux.correction  # noqa: F401
from sapflux.correction.control_pairs import Pair, independent
from sapflux.stage import REGISTRY, bind

STAGE = REGISTRY["heat_dissipation", "ageing"]
TIME = stamps("2033-05-01", 40)
HOUR = (TIME - TIME.astype("datetime64[D]")) / np.timedelta64(1, "h")
DAY_S, YEAR_S = 86400.0, 365.25 * 86400.0
NO_CONTROLS = (
    "no re-installed controls: a fall of sensitivity cannot be told from drought; not corrected"
)


def labels(names, like):
    return xr.DataArray(np.array(names), {"probe": like["probe"].values}, ("probe",))


def site(ages_d, trees, *, rate=0.2, places=0.0, noise=0.0, seed=1, deficit_kPa=1.0, **changed):
    """Records of probes of an age [d] at the start, each with a constant effect of its place.

    All see the same flow, which falls through the season as in a drought.
    """
    generator = np.random.default_rng(seed)
    age = np.array(ages_d)[:, None] * DAY_S + (TIME - TIME[0]) / np.timedelta64(1, "s")
    flow = 0.3 * np.sin(np.pi * (HOUR - 6) / 12).clip(0) * np.linspace(1.0, 0.5, len(TIME))
    place = np.exp(generator.normal(0.0, places, (len(ages_d), 1)))
    values = flow * place * np.exp(-rate * age / YEAR_S)
    values = values * np.exp(generator.normal(0.0, noise, values.shape))
    index = record(values[:, None, :], TIME)
    around = beside(index, deficit_Pa=1000.0 * np.broadcast_to(deficit_kPa, len(TIME)))
    sun = xr.DataArray(np.where((HOUR > 9) & (HOUR < 15), 700.0, 100.0), {"time": TIME}, ("time",))
    arrays = {
        "flow_index": index,
        "installed_age": around["installation"].copy(data=age),
        "probe_tree": labels(trees, index),
        "probe_stratum": labels([f"ridge/{tree[0]}" for tree in trees], index),
        "shortwave_radiation": sun,
        **around,
    } | changed
    return arrays, flow * place


def corrected(arrays, **settings):
    table = table_of(STAGE, arrays, **settings)
    return evaluated(STAGE, arrays, table, **settings)["flow_index"][:, 0], table


def paired(count):
    """Ages and trees of `count` trees, each with a probe of 2 to 3 years and a new one."""
    ages = [value for i in range(count) for value in (730.0 + 20 * i, 10.0 + i)]
    return ages, [f"T{i // 2}" for i in range(2 * count)]


def test_without_effects_of_place_the_rate_comes_back_and_with_it_the_flow():
    arrays, true = site(*paired(3), rate=0.2)
    found, table = corrected(arrays)
    assert table["rate_per_year"].to_numpy() == pytest.approx(0.2, rel=1e-9)
    assert table["applied"].all()
    np.testing.assert_allclose(found, true, rtol=1e-8)


def test_no_age_far_beyond_that_of_the_compared_probes_is_corrected_for():
    ages, trees = paired(3)  # the oldest of them is 770 d, 809.4 d at its last reference record
    arrays, true = site([*ages, 1500.0], [*trees, "T9"], rate=0.2)
    found, table = corrected(arrays)
    assert table["applied"].all()
    np.testing.assert_allclose(found[:6], true[:6], rtol=1e-8)
    noon = np.flatnonzero(true[6] > 0)[0]
    gain = found[6][noon] / arrays["flow_index"].values[6, 0, noon]
    # by hand: (809.4 + 30) d / 365.25 d a year * 0.2 a year = 0.4596
    assert np.log(gain) == pytest.approx(0.4596, abs=2e-4)


def test_the_rate_is_within_its_error_whatever_the_places_of_the_needles():
    # 30 sites of 8 trees with effects of place of 5 %, so sqrt(2) * 5 % a pair over 2.1 years: 95 %
    # of Student's t with 7 degrees of freedom lie within 2.365 errors (statistical tables).
    scores = []
    for seed in range(30):
        arrays, _ = site(*paired(8), rate=0.2, places=0.05, noise=0.02, seed=seed)
        row = table_of(STAGE, arrays).iloc[0]
        assert row["pairs"] == 8
        scores.append((row["rate_per_year"] - 0.2) / row["rate_error_per_year"])
    inside = (np.abs(scores) < 2.365).mean()
    assert inside > 0.83  # 28.5 of 30 expected with a binomial error of 1.2: three of them less
    assert abs(np.mean(scores)) < 0.65  # Student's t of 7 has deviation 1.18: 3 / sqrt(30) of it


def test_without_controls_nothing_changes_and_the_table_says_so():
    arrays, _ = site([800.0, 820.0, 900.0, 0.0], ["T1", "T2", "T3", "T4"])
    found, table = corrected(arrays)
    assert np.array_equal(found, arrays["flow_index"].values[:, 0])
    assert (table["verdict"] == NO_CONTROLS).all()
    assert not table["applied"].any() and table["rate_per_year"].isna().all()
    assert table["oldest_age_d"].to_numpy() == pytest.approx([839.4, 859.4, 939.4, 39.4], abs=0.3)


def settled(arrays, **settings):
    """What the dates alone say, as the runner asks it: one record a day."""
    some = {n: a.isel(time=slice(None, None, 48), missing_dims="ignore") for n, a in arrays.items()}
    some["probe"] = arrays["flow_index"]["probe"]
    return bind(STAGE.settled, some, STAGE.defaults() | settings)


def test_dates_that_rule_out_a_control_settle_it_without_the_records():
    arrays, _ = site([800.0, 10.0, 740.0, 0.0], ["T1", "T2", "T3", "T4"])
    table = settled(arrays)
    assert list(table.columns) == list(table_of(STAGE, arrays).columns)
    assert (table["verdict"] == NO_CONTROLS).all() and not table["applied"].any()
    assert table["oldest_age_d"].to_numpy() == pytest.approx([839, 49, 779, 39], abs=0.5)
    found = evaluated(STAGE, arrays, table)["flow_index"]
    assert np.array_equal(found, arrays["flow_index"].values)
    # The stand and species have both old and new ones, and so have the trees of pairs.
    assert settled(arrays, method="same_stand_and_species") is None
    assert settled(site(*paired(1))[0]) is None
    # 89.9 days apart is less than a control must be.
    assert settled(site([89.9, 0.0], ["T1", "T1"])[0]) is not None


def test_probes_of_unlike_age_that_never_stood_together_are_no_controls():
    arrays, _ = site([700.0, 0.0], ["T1", "T1"])
    late = np.arange(len(TIME)) >= 960
    numbers = np.array([np.where(late, -1, 0), np.where(late, 0, -1)])
    arrays["installation"] = arrays["installation"].copy(data=numbers)
    assert settled(arrays) is not None


@pytest.mark.parametrize(
    ("count", "changed", "words"),
    [
        (2, {}, "2 controls, 3 needed: not corrected"),
        (
            3,
            {"rate": 0.0, "places": 0.1},
            "not beyond its error at a confidence of 95%: not corrected",
        ),
        (3, {"rate": -0.3}, "not beyond its error at a confidence of 95%: not corrected"),
    ],
)
def test_a_rate_that_does_not_carry_is_not_applied(count, changed, words):
    arrays, _ = site(*paired(count), **changed)
    found, table = corrected(arrays)
    assert np.array_equal(found, arrays["flow_index"].values[:, 0])
    assert table["verdict"].iloc[0].endswith(words)


def test_a_control_is_in_the_same_tree_or_by_choice_in_the_same_stand_and_species():
    arrays, _ = site([730.0, 740.0, 750.0, 5.0, 6.0, 7.0], ["oak1", "oak2", "oak3"] * 2)
    alone = dict(arrays, probe_tree=labels(["a", "b", "c", "d", "e", "f"], arrays["flow_index"]))
    assert table_of(STAGE, arrays)["pairs"].iloc[0] == 3
    assert table_of(STAGE, alone)["pairs"].iloc[0] == 0
    other = table_of(STAGE, alone, method="same_stand_and_species")
    assert other["pairs"].iloc[0] == 3
    assert other["rate_per_year"].iloc[0] == pytest.approx(0.2, rel=1e-9)


def test_a_probe_heated_in_cycles_is_no_control_of_one_that_is_not():
    # Each kind of heating has its own index; by cycles here 0.6 of the other, whatever the age.
    arrays, _ = site(*paired(3))
    index = arrays["flow_index"]
    cycles = xr.DataArray([np.nan, 900.0] * 3, {"probe": index["probe"].values}, ("probe",))
    mixed = dict(arrays, heating_on=cycles, flow_index=index.where(cycles.isnull(), 0.6 * index))
    assert (table_of(STAGE, mixed)["verdict"] == NO_CONTROLS).all()
    alike = dict(arrays, heating_on=cycles.fillna(900.0), flow_index=0.6 * index)
    assert table_of(STAGE, alike)["rate_per_year"].iloc[0] == pytest.approx(0.2, rel=1e-9)


def test_only_reference_weather_counts():
    arrays, _ = site(*paired(3), deficit_kPa=np.where(TIME < TIME[480], 1.0, 2.0))
    days = table_of(STAGE, arrays)["reference_days"]
    assert (days == 10).all()
    dark = dict(arrays, shortwave_radiation=arrays["shortwave_radiation"] * 0.5)
    assert not len(table_of(STAGE, dark))
    del dark["shortwave_radiation"]  # not logged: the deficit alone counts
    assert len(table_of(STAGE, dark)) == 6
    dry = {name: array for name, array in arrays.items() if name != "vapour_pressure_deficit"}
    found, table = corrected(dry)
    assert not len(table) and np.array_equal(found, arrays["flow_index"].values[:, 0])


def test_a_probe_drilled_anew_is_its_own_control_nowhere():
    # Two installations of one name follow one another: no day in common.
    arrays, _ = site([700.0], ["T1"])
    late = np.arange(len(TIME)) >= 960
    arrays["installation"] = arrays["installation"].copy(data=late[None].astype(np.int64))
    arrays["installed_age"] = arrays["installed_age"].where(~late, arrays["installed_age"] - 6e7)
    table = table_of(STAGE, arrays)
    assert table["installation"].tolist() == [0, 1]
    assert (table["verdict"] == NO_CONTROLS).all()


def test_the_same_bytes_for_every_block_length():
    arrays, _ = site(*paired(4), places=0.03, noise=0.05)
    values = arrays["flow_index"].values.copy()
    values[np.random.default_rng(3).random(values.shape) < 0.1] = np.nan
    arrays["flow_index"] = arrays["flow_index"].copy(data=values)
    whole = table_of(STAGE, arrays)
    made = evaluated(STAGE, arrays, whole)["flow_index"]
    assert whole["applied"].all()
    for days in (1, 3, 7.5, 16):
        table = table_of(STAGE, arrays, block_days=days)
        pd.testing.assert_frame_equal(table, whole, check_exact=True)
        cut = evaluated(STAGE, arrays, table, block_days=days)["flow_index"]
        assert cut.tobytes() == made.tobytes()


def test_an_installation_counts_in_one_pair_only():
    one, two, three = (("A", 1, 0), ("B", 1, 0), ("C", 1, 0))
    pairs = [Pair(one, two, 20, 300.0, -0.1), Pair(one, three, 20, 500.0, -0.2),
             Pair(two, three, 20, 200.0, -0.1)]  # fmt: skip
    assert independent(pairs) == [pairs[1]]
