"""Calibration of heat dissipation: which applies, and how much a baseline error counts."""

import numpy as np
import pytest
from correction_records import CM_H, fact, record
from hypothesis import given
from hypothesis import strategies as st

import sapflux.correction  # noqa: F401
from sapflux.stage import REGISTRY

STAGE = REGISTRY["heat_dissipation", "flux_density"]
NAN = np.nan


def call(*arrays, **settings):
    return STAGE.function(*arrays, **settings)


@pytest.mark.parametrize(
    ("index", "amplification"),
    # Granier (1985), exponent from memory; 1.231 (1 + K) / K calculated, one decimal.
    [(0.05, 25.9), (0.1, 13.5), (0.2, 7.4), (0.3, 5.3), (0.5, 3.7), (1.0, 2.5)],
)
def test_amplification_of_baseline_errors_published(index, amplification):
    made = call(record([index]))["baseline_amplification"]
    assert made.item() == pytest.approx(amplification, abs=0.05)


def test_a_baseline_one_per_cent_high_changes_the_flux_by_the_amplification():
    # To first order: 1 % of 10 K at 8 K is an index of 0.2625 for 0.25.
    heated, zero = record([8.0, 9.5]), record([10.0, 10.0])
    index = REGISTRY["heat_dissipation", "flow_index"].function
    up, down = (
        call(index(heated, zero * (1 + e))["flow_index"])["flux_density"] for e in (1e-6, -1e-6)
    )
    made = call(index(heated, zero)["flow_index"])["baseline_amplification"]
    np.testing.assert_allclose(np.log(up / down) / 2e-6, made, rtol=1e-6)


def test_amplification_has_the_exponent_in_use_by_hand():
    index = record(np.full((3, 1, 1), 0.25))
    factor, exponent = fact([0.3, 0.3, NAN], index), fact([2.0, NAN, 2.0], index)
    made = call(index, factor, exponent)["baseline_amplification"].values.ravel()
    # 2 * 1.25 / 0.25 = 10; 1.231 * 5 where factor and exponent are not of one calibration.
    assert made == pytest.approx([10.0, 6.155, 6.155])


def test_amplification_is_negative_above_the_baseline_and_absent_at_zero_flow():
    made = call(record([-0.2, 0.0, NAN]))["baseline_amplification"].values.ravel()
    assert made[0] == pytest.approx(-1.231 * 4)  # (1 - 0.2) / -0.2
    assert np.isnan(made[1:]).all()


def test_the_general_calibration_is_for_heat_that_is_never_cut():
    index = record(np.full((3, 1, 1), 0.4))
    factor, exponent = fact([NAN, NAN, 0.36], index), fact([NAN, NAN, 1.0], index)
    heating = fact([NAN, 900.0, 900.0], index)
    for method, lost in (
        ("species_else_general", [False, True, False]),
        ("general", [False, True, True]),
        ("species", [True, True, False]),
    ):
        made = call(index, factor, exponent, None, None, heating, method=method)
        assert made["no_calibration"].values.ravel().tolist() == lost
        for name in ("flux_density", "baseline_amplification"):
            assert np.isnan(made[name].values.ravel()).tolist() == lost
    made = call(index, factor, exponent, None, None, heating)
    assert made["flux_density"].values[2].item() == pytest.approx(0.144)


def test_a_published_coefficient_of_cycles_is_one_of_the_species():
    # Isarangkool Na Ayutthaya et al. (2010), 12.95 K' in L dm-2 h-1, from memory: at K' = 0.5
    # 6.475 L dm-2 h-1 = 64.75 cm h-1; as a factor 12.95 kg / (0.01 m2 * 3600 s) = 0.35972.
    index = record([0.5])
    made = call(index, fact(12.95 / 36, index), fact(1.0, index), None, None, fact(900.0, index))[
        "flux_density"
    ]
    assert made.item() / 1000 / CM_H == pytest.approx(64.75, abs=0.005)


def test_a_probe_whose_heating_changes_is_calibrated_by_what_it_has_at_the_time():
    index = record(np.full((1, 1, 4), 0.4))
    heating = record([NAN, NAN, 900.0, 900.0]).isel(point=0, drop=True)
    made = call(index, None, None, None, None, heating)
    assert made["no_calibration"].values.ravel().tolist() == [False, False, True, True]


def test_each_calibration_has_its_own_range():
    index = record(np.full((2, 1, 1), 1.6))  # 76 cm h-1 by the general one, that ends at 70
    none = fact([NAN, NAN], index)
    own = (fact([0.1, NAN], index), fact([1.0, NAN], index))
    assert call(index, *own, none, none)["beyond_calibration"].values.ravel().tolist() == [
        False, True,
    ]  # fmt: skip
    highest = fact([1.5, NAN], index)
    assert call(index, *own, none, highest)["beyond_calibration"].all()
    general = call(index, *own, none, highest, method="general")
    assert general["beyond_calibration"].all()


@given(st.floats(0.01, 3.0), st.floats(0.5, 2.5))
def test_amplification_falls_with_flow_towards_the_exponent(index, exponent):
    values = record([index, 2 * index])
    made = call(values, fact(0.2, values), fact(exponent, values))["baseline_amplification"]
    first, second = made.values.ravel()
    assert first > second > exponent


def test_what_is_known_from_memory_only_is_declared():
    assert any("Granier" in value for value in STAGE.unverified)
    assert any("70 cm h-1" in value for value in STAGE.unverified)
