"""The life of each installation, on a copy of the demo site in which probes come and go."""

import shutil
from pathlib import Path

import pytest

from sapflux import quality, run_site

SITE = Path(__file__).parents[2] / "configs" / "orvelin"


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    """P01 is drilled anew on 10 September, P16 removed then."""
    folder = tmp_path_factory.mktemp("site") / "orvelin"
    shutil.copytree(SITE, folder)
    table = folder / "probes.csv"
    head, *rows = table.read_text(encoding="utf-8").splitlines()
    out = [head + ",removed"]
    for row in rows:
        gone = row.startswith(("P01,", "P16,"))
        out.append(f"{row},{'2031-09-10 12:00' if gone else ''}")
        if row.startswith("P01,"):
            out.append(row.replace("2031-08-17 12:00", "2031-09-11 12:00") + ",")
    table.write_text("\n".join(out) + "\n", encoding="utf-8")
    return run_site(folder, out=tmp_path_factory.mktemp("out"))


def test_a_redrilled_probe_has_a_row_for_each_installation(run):
    lives = run.table("installations").query("probe == 'P01'")
    assert lives["installation"].tolist() == [0, 1]
    assert lives["ended"].tolist() == ["removed", ""]
    # 18 August 0:00 to 10 September 12:00, and 11 September 12:00 to 27 October, every 10 minutes
    assert lives["records"].tolist() == [23 * 144 + 72, 45 * 144 + 72]


def test_no_baseline_reaches_across_installations(run):
    nights = run.table("zero_flow_nights").query("probe == 'P01' and accepted == 1")
    first = nights.query("installation == 0")["time_utc"].max()
    second = nights.query("installation == 1")["time_utc"].min()
    assert first < "2031-09-10 12:00" < "2031-09-11 11:00" < second


@pytest.mark.parametrize("probe", ["P01", "P16"])
def test_between_installations_and_after_removal_there_is_no_flux_and_the_reason_is_told(
    run, probe
):
    part = run.probes.sel(probe=probe, point=1).sel(
        time=slice("2031-09-10T11:30", "2031-09-11T11:00")
    )
    assert part["flux_density"].isnull().all()
    assert quality.has(part["quality"].values, "not_installed").all()


def test_shares_of_flags_are_between_zero_and_one(run):
    lives = run.table("installations")
    shares = lives.filter(like="_fraction")
    assert ((shares >= 0) & (shares <= 1)).all().all()
    early = lives["probe"] == "P16"
    assert (lives["usable_fraction"][~early] > 0.9).all()


def test_an_offset_from_too_few_nights_is_not_used_and_the_reason_is_told(run):
    # P16 was removed before five humid nights had passed
    (life,) = run.table("installations").query("probe == 'P16'").to_dict("records")
    assert life["zero_ratio_nights_accepted"] < 2 * 5  # two points, five nights each are needed
    assert life["unusable_offset_fraction"] == 1
    assert life["usable_fraction"] == 0


def test_the_nights_of_an_installation_are_those_of_its_table(run):
    lives = run.table("installations").query("method == 'heat_dissipation'")
    nights = run.table("zero_flow_nights").groupby(["probe", "installation"])
    assert lives["zero_flow_nights"].sum() > 0
    for life in lives.itertuples():
        own = nights.get_group((life.probe, life.installation))
        added = (own["accepted_if_wetter"] == 1) & (own["accepted"] == 0)
        lost = (own["accepted_if_drier"] == 0) & (own["accepted"] == 1)
        assert life.zero_flow_nights_added == added.sum()
        assert life.zero_flow_nights_lost == lost.sum()
        assert life.zero_flow_admissible == own["admissible"].all()
        # Drier air never lets a night in that counts as it is, wetter air never bars one.
        assert not ((own["accepted_if_drier"] == 1) & (own["accepted"] == 0)).any()
        assert not ((own["accepted_if_wetter"] == 0) & (own["accepted"] == 1)).any()
    others = run.table("installations").query("method != 'heat_dissipation'")
    assert others["zero_flow_admissible"].isna().all()
