import numpy as np
import pytest
from correction_records import CM_H, beside, evaluated, record, stamps, table_of

import sapflux.correction  # noqa: F401
from sapflux.stage import REGISTRY

STAGE = REGISTRY["heat_ratio", "zero_offset"]


def arrays_of(velocity_cm_h, time, deficit_Pa=20.0, **around):
    velocity = record(np.asarray(velocity_cm_h) * CM_H, time)
    return {"heat_pulse_velocity": velocity, **beside(velocity, deficit_Pa=deficit_Pa, **around)}


def run(arrays, **changed):
    table = table_of(STAGE, arrays, **changed)
    return table, evaluated(STAGE, arrays, table, **changed)


def day_course(time, day=12.0, rest=0.0):
    # Flow begins after the sun is up, at 06:45 in early March at 48 degrees north.
    hour = (time - time.astype("datetime64[D]")) / np.timedelta64(1, "h")
    return rest + day * np.sin(np.pi * (hour - 7.5) / 9).clip(0)


def test_one_offset_for_the_installation_is_taken_off_by_hand():
    time = stamps("2031-03-01", 8)
    table, made = run(arrays_of(day_course(time, rest=1.5), time))
    assert table["accepted"].all()
    np.testing.assert_allclose(table["offset_cm_h"], 1.5, atol=1e-12)
    assert set(table["verdict"]) == {"usable"}
    np.testing.assert_allclose(
        made["heat_pulse_velocity"][0, 0] / CM_H, day_course(time), atol=1e-12
    )
    assert not made["unusable_offset"].any()


def test_needles_askew_by_a_millimetre_read_zero_at_rest_after_it():
    # x1 6 mm, x2 7 mm at zero flow, read by the plain ratio formula with 6 mm at 80 s: 2.44
    # cm h-1 = (x2**2 - x1**2) / (4 t x); Burgess et al. (2001), calculated.
    reading = (0.7**2 - 0.6**2) / (4 * 80 * 0.6) * 3600
    assert reading == pytest.approx(2.44, abs=0.005)
    time = stamps("2031-03-01", 8)
    _, made = run(arrays_of(day_course(time, rest=reading), time))
    assert np.abs(made["heat_pulse_velocity"][0, 0, :10]).max() < 1e-15


def test_flow_on_dry_nights_does_not_enter_the_offset():
    time = stamps("2031-03-01", 12)
    dry = (np.arange(len(time)) // 48) % 2 == 1
    velocity = day_course(time, rest=0.5) + np.where(dry, 1.2, 0.0)
    table, made = run(arrays_of(velocity, time, deficit_Pa=np.where(dry, 600.0, 20.0)))
    assert table["accepted"].sum() == 6
    assert table["offset_cm_h"].iloc[0] == pytest.approx(0.5)
    # The night flow of the dry nights stays in the result.
    assert made["heat_pulse_velocity"][0, 0, 50] / CM_H == pytest.approx(1.2)
    every, _ = run(arrays_of(velocity, time), method="all_nights")
    assert every["offset_cm_h"].iloc[0] == pytest.approx((0.5 + 1.7) / 2)


def test_every_night_says_why_it_is_not_accepted():
    time = stamps("2031-03-01", 5)
    velocity = np.full(len(time), 1.0)
    deficit = np.full(len(time), 20.0)
    deficit[48:64] = 240.0
    velocity[96:112] = np.nan
    velocity[97] = 1.0
    velocity[144:160] = np.nan
    deficit[192:208] = np.nan
    table, _ = run(arrays_of(velocity, time, deficit_Pa=deficit))
    assert table["reason"].tolist() == [
        "accepted",
        "deficit 0.24 kPa above 0.1",
        "too few records",
        "no night record",
        "no vapour pressure deficit",
    ]


@pytest.mark.parametrize(
    ("nights", "rest", "verdict"),
    [
        (4, 1.0, "4 accepted nights, 5 needed"),
        (8, 5.5, "offset 5.5 cm h-1 beyond 5"),
        (8, -5.5, "offset -5.5 cm h-1 beyond 5"),
        # 0, 1, ... 7: quartiles 1.75 and 5.25
        (8, None, "spread 3.5 cm h-1 above 0.5"),
    ],
)
def test_an_offset_that_cannot_be_trusted_takes_the_probe_out(nights, rest, verdict):
    time = stamps("2031-03-01", nights)
    level = np.arange(nights) if rest is None else np.full(nights, rest)
    table, made = run(arrays_of(np.repeat(level, 48), time))
    assert set(table["verdict"]) == {verdict}
    assert not table["usable"].any()
    assert made["unusable_offset"].all()
    assert np.isnan(made["heat_pulse_velocity"]).all()


def test_each_installation_has_its_own_offset():
    time = stamps("2031-03-01", 16)
    installation = np.repeat([0, 1], 8 * 48)[None]
    installation[0, :5] = -1
    velocity = np.where(installation[0] == 1, -2.0, 1.0)
    velocity[:5] = np.nan
    table, made = run(arrays_of(velocity, time, installation=installation))
    assert table.groupby("installation")["offset_cm_h"].first().tolist() == pytest.approx([1, -2])
    known = installation[0] >= 0
    np.testing.assert_allclose(made["heat_pulse_velocity"][0, 0, known], 0.0, atol=1e-18)
    assert not made["unusable_offset"][0, 0, ~known].any()


@pytest.mark.parametrize("longitude", [-170.0, 0.0, 170.0])
def test_same_bytes_for_every_block_length(longitude):
    generator = np.random.default_rng(3)
    time = stamps("2031-03-01", 17)
    velocity = generator.normal(1.0, 0.1, (2, 2, len(time)))
    velocity[generator.random(velocity.shape) < 0.1] = np.nan
    installation = np.zeros((2, len(time)), dtype=int)
    installation[1, 400:] = 1
    arrays = arrays_of(velocity, time, longitude=longitude, installation=installation)
    table = table_of(STAGE, arrays)
    assert table["usable"].any()
    whole = evaluated(STAGE, arrays, table)
    for days in (1, 1.3, 5, 12):
        other = table_of(STAGE, arrays, block_days=days)
        assert table.equals(other)
        parts = evaluated(STAGE, arrays, other, block_days=days)
        for name in whole:
            assert whole[name].tobytes() == parts[name].tobytes()
