"""Whole chains through the runner: made-up signals with gaps, an outage and two installations."""

from types import SimpleNamespace

import numpy as np
import pytest
import xarray as xr
from correction_records import beside, fact, record, stamps

import sapflux.correction  # noqa: F401
from sapflux import quality, schema
from sapflux.pipeline.execute import Chain, fitted_tables, run_blocks
from sapflux.stage import ORDER, REGISTRY

TIME = stamps("2031-03-01", 24)
SHAPE = (4, 2, len(TIME))
HOUR = (TIME - TIME.astype("datetime64[D]")) / np.timedelta64(1, "h")
INDEX = 0.3 * np.sin(np.pi * (HOUR - 7) / 10).clip(0)
NAN = np.nan


def dissipation_signal(generator):
    values = 10.0 / (1.0 + INDEX) + generator.normal(0, 0.01, SHAPE)
    values[:, :, 500:506] = 0.3  # power loss
    return "heated_difference", values


def ratio_signal(generator):
    return "heat_ratio", np.exp(3 * INDEX + 0.05 + generator.normal(0, 0.001, SHAPE))


FACTS = {
    "heat_dissipation": {
        "contact_fraction": [1.0, 0.8, NAN, 0.4],
        "calibration_factor": [0.2, NAN, NAN, NAN],
        "calibration_exponent": [1.4, NAN, NAN, NAN],
    },
    "heat_ratio": {
        "dry_density": [500.0] * 4,
        "water_content": [1.0, 1.0, 1.0, NAN],
        "given_diffusivity": [NAN] * 4,
        "spacing_downstream": [6e-3] * 4,
        "spacing_upstream": [6e-3] * 4,
        "window_from": [60.0] * 4,
        "window_to": [100.0] * 4,
        "pulse_length": [8.0] * 4,
        "wound_width": [2e-3, 2e-3, NAN, 2e-3],
    },
}


def chain_of(method, made):
    generator = np.random.default_rng(1)
    name, values = made(generator)
    values[generator.random(SHAPE) < 0.02] = NAN
    installation = np.zeros((4, len(TIME)), dtype=int)
    installation[1, 600:] = 1
    installation[2, :100] = -1
    values[2, :, :100] = NAN
    signal = record(values, TIME)
    cube = xr.Dataset({name: signal}, attrs={"interval_s": 1800})
    bits = quality.bits(no_record=np.isnan(values))
    cube["quality"] = signal.copy(data=bits)
    quiet = (np.arange(len(TIME)) // 48) % 3 == 0
    around = beside(signal, deficit_Pa=np.where(quiet, 20.0, 150.0), installation=installation)
    around |= {fact_name: fact(row, signal) for fact_name, row in FACTS[method].items()}
    old = np.array([[400.0], [0.0], [0.0], [0.0]]) + np.arange(len(TIME)) / 48  # days
    around["installed_age"] = around["installation"].copy(data=86400.0 * old)
    trees = np.array(["T1", "T1", "T2", "T3"])
    around["probe_tree"] = xr.DataArray(trees, {"probe": signal["probe"].values}, ("probe",))

    def beside_block(ends, wanted):
        at = np.searchsorted(TIME.astype("datetime64[s]"), ends)
        return {
            n: array.isel(time=at) if "time" in array.dims else array
            for n, array in around.items()
            if n in wanted
        }

    steps = tuple(
        SimpleNamespace(stage=REGISTRY[method, n], settings=REGISTRY[method, n].defaults())
        for n in ORDER[method]
    )
    return Chain(cube, steps, beside_block)


def run(chain, block_days):
    tables = fitted_tables(chain, block_days)
    flux, bits = [], []
    for block, working in run_blocks(chain, tables, block_days):
        flux.append(working.variables["flux_density"].isel(time=block.core).values)
        bits.append(working.quality[schema.RECORD].isel(time=block.core).values)
    return np.concatenate(flux, axis=-1), np.concatenate(bits, axis=-1), tables


@pytest.mark.parametrize(
    ("method", "made"),
    [("heat_dissipation", dissipation_signal), ("heat_ratio", ratio_signal)],
)
def test_a_record_is_absent_exactly_where_masked_and_blocks_do_not_matter(method, made):
    chain = chain_of(method, made)
    flux, bits, tables = run(chain, None)
    assert np.array_equal(np.isnan(flux), quality.masked(bits))
    assert np.isfinite(flux[0]).mean() > 0.9
    for block_days in (1, 5, 12):
        other = run(chain, block_days)
        assert other[0].tobytes() == flux.tobytes()
        assert other[1].tobytes() == bits.tobytes()
        for name, table in tables.items():
            assert other[2][name].equals(table)


def test_heat_dissipation_chain_returns_the_flow_that_was_put_in():
    flux, bits, _ = run(chain_of("heat_dissipation", dissipation_signal), 12)
    whole, partial = flux[0, 0], flux[2, 0]
    noon = (HOUR > 11) & (HOUR < 13)
    # Noise of 0.01 K is 0.5 % of the flux density at this index, far less in the mean.
    assert np.nanmean(whole[noon]) == pytest.approx(np.mean(0.2 * INDEX[noon] ** 1.4), rel=0.01)
    general = 0.11899 * INDEX[noon] ** 1.231
    assert np.nanmean(partial[noon]) == pytest.approx(np.mean(general), rel=0.01)
    assert np.isnan(flux[3]).all()  # 0.4 of the needle in sapwood
    outage = quality.has(bits, "heater_failure") | quality.has(bits, "heater_recovery")
    assert outage[0, 0, 499:512].all() and not outage[0, 0, :499].any()


def test_heat_ratio_chain_takes_the_offset_off_before_the_wound():
    flux, bits, tables = run(chain_of("heat_ratio", ratio_signal), 12)
    # Wood of 500 kg m-3 and water content 1.0: 0.00247 cm2 s-1 (Burgess et al. 2001, from memory),
    # so a log ratio of 0.05 at rest is 0.05 * 0.00247 / 0.6 * 3600 = 0.741 cm h-1.
    # Noise of 0.001 in the log is 0.015 cm h-1 a record, 0.0033 in the median of 8 means of 4.
    offsets = tables["zero_ratio_nights"].query("probe == 'P1'")["offset_cm_h"]
    assert offsets.to_numpy() == pytest.approx(0.741, abs=0.01)
    rest = (HOUR > 0) & (HOUR < 6)
    noon_log = 0.9 * np.sin(np.pi * 5 / 10)  # 12:00
    apparent = noon_log * 0.00247 / 0.6 * 3600
    true = 1.8292 * apparent - 0.0019 * apparent**2 + 0.0003 * apparent**3
    noon = HOUR == 12
    cm_h = flux[0, 0] / 1000 * 3.6e5
    assert abs(np.nanmean(cm_h[rest])) < 0.05
    assert np.nanmean(cm_h[noon]) == pytest.approx(true * 0.643, rel=0.01)
    # One installation of 12 days has 4 quiet nights, one fewer than an offset needs.
    assert quality.has(bits, "unusable_offset")[1].any()
