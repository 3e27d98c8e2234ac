"""The identity of a run hangs on what goes into it, and on nothing else."""

import hashlib
import json
from datetime import date
from pathlib import Path
from types import MappingProxyType

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sapflux.pipeline.identity import (
    CHUNK,
    canonical_json,
    file_sha256,
    identity,
    plain,
    write_json,
)

INPUTS = {"logs/a.dat": "11", "logs/b.dat": "22"}
TABLES = {"probes": "33", "trees": "44"}
RECIPE = {"name": "stand_water_use", "scaling": [{"stage": "tree_flow"}, {"stage": "dormancy"}]}
WHOLE = (INPUTS, TABLES, RECIPE, "0.1.0")


def test_sha256_of_the_empty_file_and_of_abc(tmp_path):
    """FIPS 180-4 example values, as NIST prints them for the empty message and "abc"."""
    for text, digest in [
        (b"", "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855"),
        (b"abc", "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"),
    ]:
        (tmp_path / "file").write_bytes(text)
        assert file_sha256(tmp_path / "file") == digest


def test_a_file_longer_than_a_piece_is_hashed_whole(tmp_path):
    data = bytes(range(256)) * (CHUNK // 256) * 2 + b"end"
    (tmp_path / "file").write_bytes(data)
    assert file_sha256(tmp_path / "file") == hashlib.sha256(data).hexdigest()


def test_identity_is_sixteen_hex_digits():
    found = identity(*WHOLE)
    assert len(found) == 16
    int(found, 16)


def test_identity_regression():
    """Our own output: a change of it makes every archived run look like another."""
    assert identity(*WHOLE) == "c057cbbd0fc95ed7"


def turned(mapping):
    return dict(reversed(mapping.items()))


def test_the_order_of_mappings_does_not_matter():
    other = (turned(INPUTS), turned(TABLES), turned(RECIPE), "0.1.0")
    assert identity(*other) == identity(*WHOLE)


@pytest.mark.parametrize(
    "other",
    [
        ({**INPUTS, "logs/a.dat": "12"}, TABLES, RECIPE, "0.1.0"),
        ({"logs/a.dat": "11"}, TABLES, RECIPE, "0.1.0"),
        ({"logs/a.dat": "22", "logs/b.dat": "11"}, TABLES, RECIPE, "0.1.0"),
        (INPUTS, {**TABLES, "trees": "45"}, RECIPE, "0.1.0"),
        (INPUTS, {"probes": "33"}, RECIPE, "0.1.0"),
        (INPUTS, TABLES, {**RECIPE, "scaling": RECIPE["scaling"][::-1]}, "0.1.0"),
        (INPUTS, TABLES, {**RECIPE, "setting": 0.5}, "0.1.0"),
        (INPUTS, TABLES, RECIPE, "0.1.1"),
        ({}, {**TABLES, **INPUTS}, RECIPE, "0.1.0"),
    ],
)
def test_whatever_goes_into_a_run_changes_its_identity(other):
    assert identity(*other) != identity(*WHOLE)


def test_the_place_of_the_folder_does_not_matter():
    """Nor the system whose paths they are."""
    found = {
        identity({f"{place}a.dat": "11"}, TABLES, RECIPE, "1")
        for place in ("/data/ridge/logs/", "/home/ridge/", "C:\\data\\", "D:/")
    }
    assert len(found) == 1
    for path in ("logs\\a.dat", Path("logs/a.dat")):
        assert identity({path: "11"}, {}, {}, "1") == identity({"logs/a.dat": "11"}, {}, {}, "1")


def test_two_files_of_one_name_count_twice():
    one = identity({"/x/a.dat": "11"}, {}, {}, "1")
    assert identity({"/x/a.dat": "11", "/y/a.dat": "11"}, {}, {}, "1") != one


@given(st.dictionaries(st.text(), st.text()))
def test_any_names_give_an_identity_whatever_their_order(names):
    assert identity({}, names, {}, "1") == identity({}, turned(names), {}, "1")


def test_numpy_and_python_numbers_are_one():
    ours = {"a": np.float64(0.5), "b": np.int32(2), "c": np.array([1.0, np.nan]), "d": np.True_,
            "e": (1, 2), "f": MappingProxyType({"x": date(2031, 6, 1)}), "g": {"b", "a"},
            "h": np.datetime64("2031-06-01T00:30", "s"), "i": np.float32(0.5)}  # fmt: skip
    assert plain(ours) == {
        "a": 0.5, "b": 2, "c": [1.0, None], "d": True, "e": [1, 2], "f": {"x": "2031-06-01"},
        "g": ["a", "b"], "h": "2031-06-01T00:30:00", "i": 0.5,
    }  # fmt: skip


@pytest.mark.parametrize(
    ("value", "error", "message"),
    [
        ({"a": float("inf")}, ValueError, "infinite"),
        ({"a": np.array([np.inf])}, ValueError, "infinite"),
        ({"a": object()}, TypeError, "cannot be written as JSON: object"),
        ({1: "a", "1": "b"}, ValueError, "two keys"),
    ],
)
def test_what_json_cannot_hold_is_refused(value, error, message):
    with pytest.raises(error, match=message):
        canonical_json(value)


def test_written_json_has_sorted_keys_and_null_for_nan(tmp_path):
    write_json({"b": float("nan"), "a": {"z": "Bäume", "y": [1]}}, tmp_path / "run.json")
    text = (tmp_path / "run.json").read_bytes()
    shown = '{\n  "a": {\n    "y": [\n      1\n    ],\n    "z": "Bäume"\n  },\n  "b": null\n}\n'
    assert text.decode() == shown
    assert json.loads(text)["b"] is None
