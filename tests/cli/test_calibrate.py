"""`sapflux calibrate`: from a table of gravimetric flux to a row of the register."""

import json
import tomllib
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest

from sapflux.cli import main
from sapflux.site.csvfile import read_table
from sapflux.site.tables import Calibration

INDEX = np.array([0.05, 0.1, 0.2, 0.4, 0.6, 0.8, 1.0, 0.3, 0.7])
HEAD = "flow_index,flux_g_m2_s,stem\n"


def table(path, text):
    path.write_text(text, encoding="utf-8")
    return str(path)


def good(path, head=HEAD, extra=""):
    generator = np.random.default_rng(2)
    flux = 210.0 * INDEX**1.3 * np.exp(generator.normal(0.0, 0.1, len(INDEX)))
    rows = [f"{k},{j:.3f},tree {n % 3}{extra}\n" for n, (k, j) in enumerate(zip(INDEX, flux))]  # noqa: B905
    return table(path, head + "".join(rows))


def told(arguments, capsys):
    code = main(["calibrate", *arguments])
    return code, capsys.readouterr()


def test_the_row_can_be_pasted_into_the_register(tmp_path, capsys):
    arguments = [good(tmp_path / "beech.csv"), "--species", "beech", "--out", str(tmp_path / "o")]
    code, out = told(arguments, capsys)
    assert code == 0
    lines = out.out.splitlines()
    start = next(n for n, line in enumerate(lines) if line.startswith("calibration,species"))
    pasted = tmp_path / "calibrations.csv"
    pasted.write_text("\n".join(lines[start : start + 2]), encoding="utf-8")
    read = read_table(pasted, Calibration)
    assert not read.faults
    (row,) = read.rows
    assert (row.calibration, row.species, row.heating) == ("beech", "beech", "continuous")
    assert row.factor_g_m2_s == pytest.approx(210, rel=0.15)
    assert row.exponent == pytest.approx(1.3, abs=0.2)
    assert (row.lowest_index, row.highest_index) == (0.05, 1.0)
    assert 0 < row.ln_factor_error < 0.2 and 0 < row.exponent_error < 0.2
    assert "9 points of 3 stems" in row.source
    assert "from leaving out each of the 3 stems in turn" in out.out


def test_the_plot_is_the_same_file_for_the_same_table(tmp_path, capsys):
    path = good(tmp_path / "beech.csv")
    for name in ("one.svg", "two.svg"):
        assert told([path, "--out", str(tmp_path / name)], capsys)[0] == 0
    one, two = ((tmp_path / name).read_bytes() for name in ("one.svg", "two.svg"))
    assert one == two
    assert ElementTree.fromstring(one).tag.endswith("svg")


def test_json_holds_the_covariance_and_the_row(tmp_path, capsys):
    path = good(tmp_path / "beech.csv", "flow_index,flux_g_m2_s,stem,heating\n", ",intermittent")
    code, out = told([path, "--name", "b 31", "--out", str(tmp_path), "--json"], capsys)
    found = json.loads(out.out)
    assert code == 0 and found["points"] == 9 and found["stems"] == 3
    assert found["register"]["heating"] == "intermittent"
    assert found["register"]["ln_factor_error"] == pytest.approx(
        np.sqrt(found["covariance"][0][0]), rel=1e-4
    )
    assert Path(found["plot"]).name == "b_31.svg" and Path(found["plot"]).is_file()


FAULTY = {
    "every bad cell by its line": (
        HEAD + "0.1,10,a\n0,12,a\n-0.2,20,a\nx,30,a\n0.5,,a\n0.6,60,a\n",
        ["row 3", "row 4", "row 5", "row 6"],
    ),
    "stems of some rows only": (
        HEAD + "0.1,10,a\n0.2,22,\n0.3,36,a\n0.4,50,\n0.5,65,b\n",
        ["row 3: the stem is blank", "row 5: the stem is blank"],
    ),
    "two kinds of heating": (
        "flow_index,flux_g_m2_s,heating\n0.1,10,continuous\n0.2,22,intermittent\n0.3,36,continuous\n"
        "0.4,50,continuous\n0.5,65,continuous\n",
        ["row 3: heating is 'intermittent'"],
    ),
    "too few points": (HEAD + "0.1,10,a\n0.2,22,a\n0.3,36,a\n0.4,50,a\n", ["4 points"]),
    "no range": (
        HEAD + "".join(f"0.{n},60,a\n" for n in (50, 52, 54, 56, 60)),
        ["has no range: 0.5 to 0.6"],
    ),
    "no positive mean": (
        HEAD + "0.1,-1,a\n0.2,-1,a\n0.3,0,a\n0.4,0,a\n0.5,1,a\n",
        ["the sum of the flux is not positive"],
    ),
    "a flux that falls with the index": (
        HEAD + "0.1,65,a\n0.2,50,a\n0.3,36,a\n0.4,22,a\n0.5,10,a\n",
        ["does not rise with the flow index: exponent -"],
    ),
    "an unknown column": ("flow_index,flux\n0.1,10\n", ["unknown column 'flux'", "flux_g_m2_s"]),
}


@pytest.mark.parametrize("name", FAULTY)
def test_faults_are_told_all_at_once(tmp_path, capsys, name):
    text, parts = FAULTY[name]
    path = table(tmp_path / "bad.csv", text)
    code, out = told([path, "--out", str(tmp_path / "o")], capsys)
    assert code == 1 and out.out == ""
    for part in parts:
        assert part in out.err
    assert f"{path}" in out.err and not (tmp_path / "o").exists()


def test_a_table_that_is_not_there_and_a_folder_that_cannot_be_made(tmp_path, capsys):
    code, out = told([str(tmp_path / "none.csv")], capsys)
    assert code == 1 and "cannot be read" in out.err
    (tmp_path / "file").write_text("x", encoding="utf-8")
    path = good(tmp_path / "beech.csv")
    code, out = told([path, "--out", str(tmp_path / "file")], capsys)
    assert code == 1 and "the plot cannot be written" in out.err


def test_the_library_that_draws_is_among_the_requirements():
    text = (Path(__file__).parents[2] / "pyproject.toml").read_text(encoding="utf-8")
    assert any("matplotlib" in name for name in tomllib.loads(text)["project"]["dependencies"])
