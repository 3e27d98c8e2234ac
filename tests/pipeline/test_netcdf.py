"""The netCDF files hold to CF-1.11 and ACDD-1.3, and the same values give the same bytes.

The conventions are judged by compliance-checker with the standard name table it carries, offline.
"""

import errno
import json
import os
import subprocess
import sys
import warnings
from pathlib import Path

import netCDF4
import numpy as np
import pytest
import xarray as xr
from flags_by_hand import flags_defined

from sapflux import quality, schema
from sapflux.pipeline import netcdf
from sapflux.quality import Flag
from sapflux.site.config import Position
from sapflux.site.model import Site

COUNT = 96
ENDS = np.datetime64("2031-06-01T00:30", "ns") + np.arange(COUNT) * np.timedelta64(1800, "s")
RUN = {
    "identity": "0123456789abcdef",
    "recipe": {"name": "stand_water_use", "scaling": [{"stage": "tree_flow"}]},
    "inputs": {"logs/T07.dat": "ab" * 32},
    "history": ["flow_index(smallest_K=0.5)", "tree_flow()"],
    "date_created": "2031-11-01T00:00:00Z",
}
# What only a person can say; the rest the program says by itself.
PEOPLE = dict.fromkeys(
    (
        "naming_authority", "creator_name", "creator_institution", "institution", "project",
        "program", "license", "acknowledgement", "contributor_name", "contributor_role",
        "publisher_name", "publisher_institution", "platform", "platform_vocabulary",
        "keywords_vocabulary", "instrument_vocabulary", "references",
    ),
    "as given",
) | {
    "creator_email": "forest@example.org", "publisher_email": "archive@example.org",
    "creator_url": "https://example.org", "publisher_url": "https://example.org",
    "metadata_link": "https://example.org", "creator_type": "group", "publisher_type": "group",
    "date_issued": "2031-11-02",
}  # fmt: skip


def site():
    position = Position(
        name="Ridge", latitude_deg=47.5, longitude_deg=11.25, elevation_m=900.0,
        utc_offset_h=1.0, water_year_start="10-01", common_step_min=30,
    )  # fmt: skip
    return Site(Path("ridge"), "ridge", position, {}, {}, {}, {})


def numbers(*shape):
    values = np.random.default_rng(7).normal(size=shape)
    values.flat[::7] = np.nan
    return values


def probes():
    record, probe = ("probe", "point", "time"), ("probe", "time")
    bits = np.zeros((3, 2, COUNT), dtype=np.int64)
    bits[0, 0, :5] = quality.FLAGS["heater_failure"].mask | quality.FLAGS["no_record"].mask
    return xr.Dataset(
        {
            "flux_density": (record, numbers(3, 2, COUNT)),
            "quality": (record, bits),
            "origin": (record, np.ones((3, 2, COUNT), dtype=np.int8)),
            "probe_flow": (probe, numbers(3, COUNT)),
            "probe_filled_share": (probe, np.zeros((3, COUNT))),
            "radial_from": (("probe", "point"), np.array([[0.0, 0.02], [0.0, 0.02], [0, np.nan]])),
            "radial_to": (("probe", "point"), np.array([[0.02, 0.04], [0.02, 0.04], [0, np.nan]])),
        },
        {
            "probe": ["T1-N", "T1-S", "Bäume-3"], "point": [1, 2], "time": ENDS,
            "tree": ("probe", ["T1", "T1", "T2"]), "species": ("probe", ["beech", "beech", "oak"]),
            "stand": ("probe", ["upper", "upper", ""]),
        },
        attrs={"interval_s": 1800},
    )  # fmt: skip


def trees():
    dims = ("tree", "time")
    return xr.Dataset(
        {
            "tree_flow": (dims, numbers(2, COUNT)),
            "tree_filled_share": (dims, np.zeros((2, COUNT))),
            "quality": (dims, np.zeros((2, COUNT), dtype=np.int64)),
        },
        {"tree": ["T1", "T2"], "time": ENDS, "species": ("tree", ["beech", "oak"]),
         "stand": ("tree", ["upper", "upper"])},
    )  # fmt: skip


def stand():
    dims = ("stand_species", "time")
    return xr.Dataset(
        {
            "stand_transpiration": (dims, numbers(2, COUNT)),
            "stand_filled_share": (dims, np.zeros((2, COUNT))),
            "live_trees": (dims, np.full((2, COUNT), 4)),
            "in_leaf": (dims, np.ones((2, COUNT))),
            "quality": (dims, np.zeros((2, COUNT), dtype=np.int64)),
            "origin": (dims, np.ones((2, COUNT), dtype=np.int8)),
        },
        {"stand_species": ["upper/beech", "upper/oak"], "time": ENDS,
         "stand": ("stand_species", ["upper", "upper"]),
         "species": ("stand_species", ["beech", "oak"]), "stand_in": ("stand_species", ["", ""])},
    )  # fmt: skip


def native(method):
    record = ("probe", "point", "time")
    names = {
        "heat_dissipation": ("heated_difference", "measured_heated_difference",
                             "zero_flow_difference", "flow_index"),
        "heat_ratio": ("rise_downstream", "rise_upstream", "heat_pulse_velocity"),
    }[method]  # fmt: skip
    return xr.Dataset(
        {name: (record, numbers(2, 1, COUNT)) for name in names}
        | {
            "heater_voltage": (("probe", "time"), numbers(2, COUNT)),
            "installation": (("probe", "time"), np.zeros((2, COUNT), dtype=np.int64)),
            "quality": (record, np.zeros((2, 1, COUNT), dtype=np.int64)),
        },
        {"probe": ["T1-N", "T1-S"], "point": [1], "time": ENDS},
        attrs={"method": method, "interval_s": 600},
    )


def origin():
    return netcdf.origin_records({
        "upper": (ENDS, 1800, ["logs/u1.dat"] * 50 + ["logs/u2.dat"] * 46, range(5, 5 + COUNT)),
        "lower": (ENDS[:10], 600, ["logs/l.dat"] * 10, range(2, 12)),
    })  # fmt: skip


MADE = {
    "probes": lambda given: netcdf.probes_dataset(probes(), site(), given),
    "trees": lambda given: netcdf.trees_dataset(trees(), site(), given),
    "stand": lambda given: netcdf.stand_dataset(stand(), site(), given),
    "heat_dissipation": lambda given: netcdf.native_dataset(
        native("heat_dissipation"), site(), given
    ),
    "heat_ratio": lambda given: netcdf.native_dataset(native("heat_ratio"), site(), given),
    "origin": lambda given: netcdf.origin_dataset(origin(), site(), given),
}


@pytest.fixture(scope="module")
def files(tmp_path_factory):
    folder = tmp_path_factory.mktemp("files")
    for name, make in MADE.items():
        netcdf.write_netcdf(make(RUN | PEOPLE), folder / f"{name}.nc")
    return folder


def complaints(path, convention):
    """(weight, what) of every check that is not wholly passed; 3 is the highest weight."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # the checker's own
        from compliance_checker.runner import CheckSuite

        CheckSuite.load_all_available_checkers()
        suite = CheckSuite()
        dataset = suite.load_dataset(str(path))
        results, errors = suite.run_all(dataset, [convention])[convention]
        dataset.close()
    assert not errors
    assert len(results) > 15
    return [
        (result.weight, result.name, message)
        for result in results
        if (result.value[0] != result.value[1] if isinstance(result.value, tuple)
            else not result.value)
        for message in result.msgs
    ]  # fmt: skip


@pytest.mark.parametrize("name", MADE)
def test_cf_checker_has_no_complaint(files, name):
    assert complaints(files / f"{name}.nc", "cf:1.11") == []


@pytest.mark.parametrize("name", MADE)
def test_acdd_checker_only_misses_standard_names_that_do_not_exist(files, name):
    found = complaints(files / f"{name}.nc", "acdd:1.3")
    assert {message for _, _, message in found} <= {"standard_name"}
    named = {row.name for row in schema.ROWS if row.standard_name}
    assert not [what for _, what, _ in found for one in named if f'"{one}"' in what]


def test_the_checker_sees_a_fault(tmp_path):
    made = MADE["stand"](RUN)
    made["stand_transpiration"].attrs["units"] = "mm"
    netcdf.write_netcdf(made, tmp_path / "wrong.nc")
    assert any("units" in what for _, _, what in complaints(tmp_path / "wrong.nc", "cf:1.11"))


def test_without_what_people_say_only_that_is_missing(tmp_path):
    netcdf.write_netcdf(MADE["stand"](RUN), tmp_path / "stand.nc")
    found = {m for _, _, m in complaints(tmp_path / "stand.nc", "acdd:1.3")} - {"standard_name"}
    assert found
    for message in found:
        assert any(name in message for name in [*PEOPLE, "acknowledgment"]), message


@pytest.mark.parametrize("name", MADE)
def test_what_the_checker_does_not_see(files, name):
    """featureType, fill values and units: the checker passes files that lack them."""
    with netCDF4.Dataset(files / f"{name}.nc") as file:
        assert file.featureType == "timeSeries"
        assert not file.groups
        roles = [v for v in file.variables.values() if "cf_role" in v.ncattrs()]
        assert [v.cf_role for v in roles] == ["timeseries_id"]
        for key, variable in file.variables.items():
            text = variable.dtype == "S1"
            moving = {"time", "record"} & set(variable.dimensions) and "time" not in key
            assert ("_FillValue" in variable.ncattrs()) == bool(
                (variable.dtype.kind == "f" and moving) or key in ("radial_from", "radial_to")
            ), key
            assert ("units" in variable.ncattrs()) == (
                not text and key not in ("quality", "faults", "origin", "time_bnds")
            ), key
            assert variable.dtype in ("float64", "int32", "int8", "S1")


@pytest.mark.parametrize("name", MADE)
def test_units_are_those_of_the_schema(files, name):
    with netCDF4.Dataset(files / f"{name}.nc") as file:
        own = set(file.variables) & schema.VARIABLES.keys() - {"quality", "faults", "origin"}
        assert own or name == "origin"
        for key in own:
            assert file[key].units == schema.VARIABLES[key].units


def test_attributes_are_replaced_whole():
    data = probes()
    data["flux_density"].attrs = {"units": "cm h-1", "stale": "yes"}
    data.attrs["stale"] = "yes"
    made = netcdf.probes_dataset(data, site(), RUN)
    assert made["flux_density"].attrs == {
        "long_name": "sap flux density per sapwood area",
        "units": "kg m-2 s-1",
        "coverage_content_type": "physicalMeasurement",
        "cell_methods": "time: mean",
        "ancillary_variables": "quality faults origin",
    }
    assert "stale" not in made.attrs
    assert data["flux_density"].attrs["stale"] == "yes"  # what was given is left alone


def test_what_was_given_comes_back(files):
    with xr.open_dataset(files / "probes.nc") as file:
        given = probes()
        for name in given.variables:
            np.testing.assert_array_equal(file[name].values, given[name].values, err_msg=name)
        assert file["flux_density"].sel(probe="Bäume-3", point=1).shape == (COUNT,)
        assert file["flux_density"].dims == schema.RECORD
        bounds = file["time_bnds"].values
        np.testing.assert_array_equal(bounds[:, 1], ENDS)
        np.testing.assert_array_equal(bounds[:, 0], ENDS - np.timedelta64(1800, "s"))


def test_flags_are_ancillary_and_told_by_name(files):
    with netCDF4.Dataset(files / "probes.nc") as file:
        assert file["flux_density"].ancillary_variables == "quality faults origin"
        assert file["probe_flow"].ancillary_variables == "probe_filled_share"
        bits = file["quality"]
        meanings = dict(zip(bits.flag_meanings.split(), bits.flag_masks, strict=True))
        assert bits.flag_masks.dtype == bits.dtype == np.int32
        first = bits[0, 0, 0]
        flagged = {name for name, mask in meanings.items() if first & mask}
        assert flagged == {"heater_failure", "no_record"}
        origins = file["origin"]
        values = dict(zip(origins.flag_meanings.split(), origins.flag_values, strict=True))
        assert values == quality.ORIGINS
        assert origins.flag_values.dtype == origins.dtype == np.int8


@pytest.mark.parametrize("scaled", [(), ("fault",)])
def test_faults_are_written_where_one_can_be_set(scaled):
    native = {name for name, make in MADE.items() if "faults" in make(RUN)}
    assert native == {"probes", "trees", "heat_dissipation", "heat_ratio"}
    with flags_defined(Flag("fault", 40, True, "a fault"), scaled=scaled):
        having = {name for name, make in MADE.items() if "faults" in make(RUN)}
    assert having == native | ({"stand"} if scaled else set())


def test_a_fault_of_another_level_is_not_lost_unheard():
    made = stand()
    made["quality"][0, 0] = 1 << 40
    defined = flags_defined(Flag("fault", 40, True, "a fault of a record"))
    with defined, pytest.raises(ValueError, match="stand: a fault is set that is not one of this"):
        netcdf.stand_dataset(made, site(), RUN)


def test_the_native_files_say_how_a_value_stands_for_its_interval(files):
    with netCDF4.Dataset(files / "heat_dissipation.nc") as file:
        assert file["heated_difference"].cell_methods == "time: mean"
        assert file["measured_heated_difference"].long_name.endswith(", as logged")
        assert "cell_methods" not in file["installation"].ncattrs()
        assert file["time_bnds"][0, 1] - file["time_bnds"][0, 0] == 600
    with netCDF4.Dataset(files / "heat_ratio.nc") as file:
        assert file["rise_upstream"].cell_methods.startswith("time: point (")
        assert file["heater_voltage"].cell_methods == "time: mean"


def test_file_and_line_of_a_sample_are_found_again(files):
    with xr.open_dataset(files / "origin.nc") as file:
        assert file["log"].values.tolist() == ["lower", "upper"]
        assert file["row_size"].values.tolist() == [10, COUNT]
        sample = 10 + 50  # the first sample of the second file of the log "upper"
        assert file["file"].values[file["file_index"].values[sample]] == "logs/u2.dat"
        assert file["line"].values[sample] == 5 + 50
        assert file["time"].values[sample] == ENDS[50]
        start = file["time_bnds"].values[[0, sample], 0]
        assert (file["time"].values[[0, sample]] - start).astype("m8[s]").astype(int).tolist() == [
            600, 1800,
        ]  # fmt: skip


def test_the_file_tells_how_it_was_made(files):
    with netCDF4.Dataset(files / "stand.nc") as file:
        assert json.loads(file.sapflux_recipe) == RUN["recipe"]
        assert json.loads(file.sapflux_inputs_sha256) == RUN["inputs"]
        assert file.sapflux_identity == RUN["identity"]
        assert file.history.split("\n")[1:] == RUN["history"]
        assert file.time_coverage_start == "2031-06-01T00:00:00Z"
        assert file.time_coverage_end == "2031-06-03T00:00:00Z"
        assert file.time_coverage_duration == "P2DT0H0M0S"
        assert (file.geospatial_lat_min, file.geospatial_lon_max) == (47.5, 11.25)
        assert file.institution == "as given"


def test_the_hashes_of_thousands_of_files_fit(tmp_path):
    inputs = {f"logs/download-{number:05d}.dat": "ab" * 32 for number in range(3000)}
    netcdf.write_netcdf(MADE["trees"](RUN | {"inputs": inputs}), tmp_path / "trees.nc")
    with netCDF4.Dataset(tmp_path / "trees.nc") as file:
        assert json.loads(file.sapflux_inputs_sha256) == inputs


BY_ITSELF = """
import sys, time
sys.path[:0] = [{root!r}, {tests!r} + "/pipeline", {tests!r} + "/support"]
import test_netcdf as made
time.sleep({wait})
for name, make in made.MADE.items():
    made.netcdf.write_netcdf(make(made.RUN), {out!r} + "/" + name + ".nc")
"""


def test_the_same_dataset_gives_the_same_bytes(tmp_path):
    """In two processes, seconds apart, with unlike hash seeds and unlike garbage in memory."""
    root, tests = str(Path(netcdf.__file__).parents[2]), str(Path(__file__).parents[1])
    for seed, wait in (("1", 0), ("2", 1.1)):
        out = tmp_path / seed
        out.mkdir()
        script = BY_ITSELF.format(root=root, tests=tests, out=str(out), wait=wait)
        environment = os.environ | {"PYTHONHASHSEED": seed, "MALLOC_PERTURB_": f"8{seed}"}
        subprocess.run([sys.executable, "-c", script], check=True, env=environment)
    for name in MADE:
        first, second = (tmp_path / seed / f"{name}.nc" for seed in ("1", "2"))
        assert abs(first.stat().st_mtime - second.stat().st_mtime) > 1, "no second went by"
        assert first.read_bytes() == second.read_bytes(), name


def test_two_runs_differ_in_their_creation_stamps_alone():
    first = MADE["probes"](RUN)
    second = MADE["probes"](RUN | {"date_created": "2032-01-01T00:00:00Z"})
    assert {name for name in first.attrs if first.attrs[name] != second.attrs[name]} == {
        "date_created", "date_modified", "date_metadata_modified", "history",
    }  # fmt: skip
    assert second.attrs["history"] == first.attrs["history"].replace("2031-11-01", "2032-01-01")
    xr.testing.assert_equal(first, second)


def test_the_order_of_the_variables_changes_nothing(tmp_path):
    data = probes()
    turned = data[list(data.data_vars)[::-1]].assign_attrs(data.attrs)
    for name, one in [("a", data), ("b", turned)]:
        netcdf.write_netcdf(netcdf.probes_dataset(one, site(), RUN), tmp_path / name)
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes()


def test_a_name_outside_the_schema_is_refused():
    with pytest.raises(ValueError, match="not in the schema: sap_flow, stuff"):
        netcdf.trees_dataset(trees().rename(tree_flow="sap_flow").assign(stuff=1), site(), RUN)


def test_a_run_must_say_what_it_is():
    with pytest.raises(ValueError, match="are missing: history, inputs"):
        given = {name: RUN[name] for name in ("identity", "recipe", "date_created")}
        netcdf.trees_dataset(trees(), site(), given)


def test_nothing_to_write_is_refused():
    with pytest.raises(ValueError, match="trees: no record to write"):
        netcdf.trees_dataset(trees().isel(time=slice(0)), site(), RUN)


@pytest.mark.parametrize(("free", "code"), [(0, errno.ENOSPC), (1 << 40, errno.EIO)])
def test_a_full_disk_is_told_as_such(tmp_path, monkeypatch, free, code):
    """The netCDF library says no more than "HDF error" (seen on a full file system)."""

    def failing(*arguments, **options):
        raise RuntimeError("NetCDF: HDF error")

    monkeypatch.setattr(xr.Dataset, "to_netcdf", failing)
    usage = type("Usage", (), {"free": free})
    monkeypatch.setattr(netcdf.shutil, "disk_usage", lambda path: usage)
    with pytest.raises(OSError, match="NetCDF: HDF error") as caught:
        netcdf.write_netcdf(MADE["trees"](RUN), tmp_path / "trees.nc")
    assert caught.value.errno == code
