"""Many sites on a running scheduler: its workers load their own files."""

from pathlib import Path

import pytest

from sapflux.errors import UserError
from sapflux.pipeline.batch import run_sites

SITE = Path(__file__).parents[2] / "configs" / "orvelin"


def test_a_scheduler_gives_the_same_bytes_as_this_process(tmp_path):
    from distributed import LocalCluster

    (plain,) = run_sites([SITE], out=str(tmp_path / "plain"))
    with LocalCluster(n_workers=1, threads_per_worker=1, processes=False, dashboard_address=None,
                      protocol="tcp", host="127.0.0.1") as cluster:  # fmt: skip
        address = cluster.scheduler_address
        sites = [SITE, tmp_path / "nothing"]
        outcomes = {o.path: o for o in run_sites(sites, scheduler=address,
                                                 out=str(tmp_path / "far"))}  # fmt: skip
    assert outcomes[str(SITE)].summary["identity"] == plain.summary["identity"]
    assert outcomes[str(tmp_path / "nothing")].faults
    one, other = tmp_path / "plain" / "orvelin", tmp_path / "far" / "orvelin"
    for path in one.glob("*.csv"):
        assert (other / path.name).read_bytes() == path.read_bytes()


def test_a_scheduler_that_does_not_answer_is_told(monkeypatch):
    monkeypatch.setattr("sapflux.pipeline.batch.CONNECT_S", 0.2)
    with pytest.raises(UserError) as caught:
        list(run_sites([SITE], scheduler="tcp://127.0.0.1:9"))
    told = str(caught.value)
    assert told.startswith("--scheduler: no scheduler answers at 'tcp://127.0.0.1:9' (")
    assert told.endswith("Start one, give its address (tcp://host:8786), or use --jobs.")
