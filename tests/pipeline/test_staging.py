"""A run is made whole before it takes the place of the former one, whatever happens."""

import errno
import json
import os
import re
import socket
import subprocess
import sys
from pathlib import Path

import pytest

from sapflux.errors import DataError, UserError
from sapflux.pipeline import staging
from sapflux.pipeline.lock import alive, held
from sapflux.pipeline.staging import publish, recover

A, B, C = "a" * 16, "b" * 16, "c" * 16


def run(identity, note=""):
    """A `write` that makes a small run."""

    def write(folder):
        (folder / "daily.csv").write_text(f"day,{identity}{note}\n")
        (folder / "probes.nc").write_bytes(identity.encode() * 100)
        (folder / "draws.nc").write_bytes(b"draws")
        (folder / "site").mkdir()
        (folder / "site" / "trees.csv").write_text("tree\n")
        (folder / "site" / "site.toml").write_text("[site]\n")
        (folder / "figures").mkdir()
        (folder / "figures" / "day.png").write_bytes(b"png")
        (folder / "run.json").write_text(json.dumps({"identity": identity}))

    return write


def content(folder):
    """Relative name -> bytes of every file below a folder."""
    return {
        path.relative_to(folder).as_posix(): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


def whole(tmp_path, identity, note=""):
    """What a run of that identity holds."""
    folder = tmp_path / f"reference-{identity}{note}"
    if not folder.exists():
        folder.mkdir()
        run(identity, note)(folder)
    return content(folder)


KEPT = {"daily.csv", "draws.nc", "run.json", "site/trees.csv", "site/site.toml"}


def test_a_first_run_stands_alone_in_its_folder(tmp_path):
    out = tmp_path / "made" / "results"
    place = publish(out, "ridge", A, run(A))
    assert place == out / "ridge"
    assert content(place) == whole(tmp_path, A)
    assert [path.name for path in out.iterdir()] == ["ridge"]


def test_a_run_of_another_identity_keeps_the_tables_of_the_former(tmp_path):
    out = tmp_path / "results"
    publish(out, "ridge", A, run(A))
    publish(out, "ridge", B, run(B))
    assert content(out / "ridge") == whole(tmp_path, B)
    earlier = out / "earlier" / "ridge" / A
    assert content(earlier) == {n: v for n, v in whole(tmp_path, A).items() if n in KEPT}
    assert not (earlier / "figures").exists()
    assert sorted(path.name for path in out.iterdir()) == ["earlier", "ridge"]


def test_keep_all_keeps_every_file(tmp_path):
    publish(tmp_path / "out", "ridge", A, run(A))
    publish(tmp_path / "out", "ridge", B, run(B), keep_all=True)
    earlier = tmp_path / "out" / "earlier" / "ridge" / A
    assert content(earlier) == whole(tmp_path, A)


def test_the_same_identity_is_replaced_and_not_kept(tmp_path):
    out = tmp_path / "out"
    publish(out, "ridge", A, run(A))
    publish(out, "ridge", A, run(A, "again"))
    assert content(out / "ridge") == whole(tmp_path, A, "again")
    assert [path.name for path in out.iterdir()] == ["ridge"]


def test_an_earlier_copy_is_never_overwritten(tmp_path):
    out = tmp_path / "out"
    for identity, note in [(A, "first"), (B, ""), (A, "second"), (C, "")]:
        publish(out, "ridge", identity, run(identity, note), keep_all=True)
        assert {path.name for path in out.iterdir()} <= {"earlier", "ridge"}
    assert content(out / "earlier" / "ridge" / A) == whole(tmp_path, A, "first")
    assert content(out / "earlier" / "ridge" / B) == whole(tmp_path, B)
    assert content(out / "ridge") == whole(tmp_path, C)


KILLED = """
import os, sys
sys.path[:0] = [{root!r}, {tests!r}]
from sapflux.pipeline.staging import publish
from test_staging_run import write
out, steps = {out!r}, {steps}
CHANGES = {{"open", "os.rename", "os.remove", "os.rmdir", "os.mkdir"}}
seen = 0

def hook(event, arguments):
    global seen
    if event in CHANGES and str(arguments[0]).startswith(out):
        seen += 1
        if seen == steps:
            os._exit(9)

sys.addaudithook(hook)
publish(__import__("pathlib").Path(out), "ridge", {identity!r}, write)
os._exit(0)
"""
WRITE = """
import json
def write(folder):
    (folder / "daily.csv").write_text("day,new")
    (folder / "probes.nc").write_bytes(b"new")
    (folder / "run.json").write_text(json.dumps({{"identity": {identity!r}}}))
"""


@pytest.mark.parametrize("identity", [A, B], ids=["same identity", "another identity"])
def test_a_kill_at_any_moment_leaves_the_former_or_the_new_result_whole(tmp_path, identity):
    """The process ends at once, no handler run, before each single change of the disk in turn."""
    (tmp_path / "test_staging_run.py").write_text(WRITE.format(identity=identity))
    root = str(Path(staging.__file__).parents[2])
    new = {"daily.csv": b"day,new", "probes.nc": b"new",
           "run.json": json.dumps({"identity": identity}).encode()}  # fmt: skip
    outcomes, step, code = [], 0, 9
    while code == 9:
        step += 1
        out = tmp_path / f"out{step}"
        publish(out, "ridge", A, run(A))
        script = KILLED.format(root=root, tests=str(tmp_path), out=str(out), steps=step,
                               identity=identity)  # fmt: skip
        code = subprocess.run([sys.executable, "-S", "-c", script], check=False).returncode
        recover(out, "ridge")
        newest = content(out / "ridge")
        assert newest in (whole(tmp_path, A), new), step
        assert not [path for path in out.iterdir() if path.name.startswith(".")], step
        if newest == new and identity == B:
            kept = content(out / "earlier" / "ridge" / A)
            assert kept.keys() >= KEPT
            assert kept.items() <= whole(tmp_path, A).items()
        else:
            assert not (out / "earlier" / "ridge" / A).exists(), step
        outcomes.append("new" if newest == new else "former")
    assert code == 0
    assert step > 20, "the hook saw too few changes to have covered every moment"
    # former, ..., former, new, ..., new: once the new one stands it stays
    assert re.fullmatch(r"(former)+(new)+", "".join(outcomes))
    assert outcomes[-3:] == ["new"] * 3


def test_a_kill_is_recovered_by_the_next_run_itself(tmp_path):
    out = tmp_path / "out"
    publish(out, "ridge", A, run(A))
    (out / "ridge").rename(out / ".ridge.former")  # as after the first of the two renames
    (out / ".ridge.staging").mkdir()
    run(B)(out / ".ridge.staging")
    publish(out, "ridge", C, run(C))
    assert content(out / "ridge") == whole(tmp_path, C)
    assert [path.name for path in (out / "earlier" / "ridge").iterdir()] == [A]
    assert sorted(path.name for path in out.iterdir()) == ["earlier", "ridge"]


def test_recover_has_nothing_to_do_where_nothing_was_run(tmp_path):
    recover(tmp_path / "none", "ridge")
    assert not (tmp_path / "none").exists()
    publish(tmp_path / "out", "ridge", A, run(A))
    recover(tmp_path / "out", "ridge")
    assert content(tmp_path / "out" / "ridge") == whole(tmp_path, A)


def test_a_run_that_raises_leaves_the_former_and_no_rubbish(tmp_path):
    def broken(folder):
        run(B)(folder)
        raise KeyboardInterrupt

    publish(tmp_path / "out", "ridge", A, run(A))
    with pytest.raises(KeyboardInterrupt):
        publish(tmp_path / "out", "ridge", B, broken)
    assert content(tmp_path / "out" / "ridge") == whole(tmp_path, A)
    assert [path.name for path in (tmp_path / "out").iterdir()] == ["ridge"]


@pytest.mark.parametrize(
    ("code", "message"),
    [
        (errno.ENOSPC, r"ridge: the disk is full: .*\. Free some space and run again; "
                       r"the former result stands as it was\.$"),
        (errno.EROFS, r"ridge: the file system may only be read: .*\. Choose another --out; "
                      r"the former result stands as it was\.$"),
    ],
)  # fmt: skip
def test_trouble_with_the_disk_is_told_and_the_former_result_stands(tmp_path, code, message):
    def full(folder):
        (folder / "daily.csv").write_text("half")
        raise OSError(code, os.strerror(code), str(folder / "daily.csv"))

    publish(tmp_path / "out", "ridge", A, run(A))
    with pytest.raises(UserError, match=message):
        publish(tmp_path / "out", "ridge", B, full)
    assert content(tmp_path / "out" / "ridge") == whole(tmp_path, A)
    assert [path.name for path in (tmp_path / "out").iterdir()] == ["ridge"]


def test_another_error_of_the_system_is_not_disguised(tmp_path):
    def careless(folder):
        (folder / "none" / "daily.csv").write_text("")

    with pytest.raises(FileNotFoundError):
        publish(tmp_path / "out", "ridge", A, careless)


@pytest.mark.parametrize("failing", [1, 2], ids=["first rename", "second rename"])
def test_a_file_open_in_a_spreadsheet_is_told_and_the_former_result_stands(
    tmp_path, monkeypatch, failing
):
    publish(tmp_path / "out", "ridge", A, run(A))
    calls, rename = [], os.rename

    def refusing(source, target):
        calls.append(source)
        if len(calls) == failing:
            raise PermissionError(errno.EACCES, "in use", str(source))
        rename(source, target)

    monkeypatch.setattr(os, "rename", refusing)
    with pytest.raises(UserError) as caught:
        publish(tmp_path / "out", "ridge", B, run(B))
    monkeypatch.undo()
    place = tmp_path / "out" / "ridge"
    assert str(caught.value) == (
        f"{place}: may not be written or renamed: in use ({calls[failing - 1]}). Close any "
        "spreadsheet or viewer that holds a file of it open, see that you may write there, and "
        "run again; the former result stands as it was."
    )
    assert content(place) == whole(tmp_path, A)
    assert [path.name for path in (tmp_path / "out").iterdir()] == ["ridge"]


def test_a_former_run_that_cannot_be_filed_yet_is_filed_by_the_next_run(tmp_path, monkeypatch):
    out, rename = tmp_path / "out", os.rename
    publish(out, "ridge", A, run(A))

    def refusing(source, target):
        if "earlier" in str(target):
            raise PermissionError(errno.EACCES, "in use", str(source))
        rename(source, target)

    monkeypatch.setattr(os, "rename", refusing)
    publish(out, "ridge", B, run(B))
    monkeypatch.undo()
    assert content(out / "ridge") == whole(tmp_path, B)
    publish(out, "ridge", C, run(C))
    assert sorted(p.name for p in (out / "earlier" / "ridge").iterdir()) == [A, B]


def test_a_folder_that_is_no_run_is_never_replaced(tmp_path):
    site = tmp_path / "out" / "ridge"
    site.mkdir(parents=True)
    (site / "site.toml").write_text("[site]\n")
    with pytest.raises(UserError) as caught:
        publish(tmp_path / "out", "ridge", A, run(A))
    assert str(caught.value) == (
        f"{site}: holds something else than a run: it has no run.json with an identity. "
        "Choose another --out, or move it away."
    )
    assert content(site) == {"site.toml": b"[site]\n"}
    assert [path.name for path in (tmp_path / "out").iterdir()] == ["ridge"]


def test_an_out_that_is_a_file_is_told(tmp_path):
    (tmp_path / "out").write_text("")
    with pytest.raises(UserError, match="a part of the path is a file"):
        publish(tmp_path / "out" / "deeper", "ridge", A, run(A))


def test_an_empty_folder_is_filled(tmp_path):
    (tmp_path / "out" / "ridge").mkdir(parents=True)
    publish(tmp_path / "out", "ridge", A, run(A))
    assert content(tmp_path / "out" / "ridge") == whole(tmp_path, A)


def test_a_site_may_not_be_called_as_the_folder_of_earlier_runs(tmp_path):
    with pytest.raises(UserError, match=r"^Earlier: a site may not be called 'Earlier'"):
        publish(tmp_path, "Earlier", A, run(A))


def test_a_run_must_carry_its_identity(tmp_path):
    with pytest.raises(ValueError, match="says identity"):
        publish(tmp_path / "out", "ridge", B, run(A))
    assert list((tmp_path / "out").iterdir()) == []


def lock_text(pid, host=None):
    return json.dumps({"pid": pid, "host": host or socket.gethostname()})


def test_a_live_run_on_the_same_site_is_told(tmp_path):
    lock = tmp_path / ".ridge.lock"
    lock.write_text(lock_text(os.getppid()))
    with pytest.raises(DataError) as caught:
        publish(tmp_path, "ridge", A, run(A))
    assert str(caught.value) == (
        f"{lock}: another run (process {os.getppid()}) is at work on this site. Wait until it "
        "ends; if no run is at work there, delete this file and run again."
    )
    assert lock.exists()


def test_two_runs_of_one_process_do_not_meet(tmp_path):
    def nested(folder):
        publish(tmp_path, "ridge", B, run(B))

    with pytest.raises(DataError, match="another run"):
        publish(tmp_path, "ridge", A, nested)
    publish(tmp_path, "ridge", A, run(A))


def test_runs_on_two_sites_do_not_hinder_one_another(tmp_path):
    def nested(folder):
        publish(tmp_path, "valley", B, run(B))
        run(A)(folder)

    publish(tmp_path, "ridge", A, nested)
    assert sorted(path.name for path in tmp_path.iterdir()) == ["ridge", "valley"]


def test_the_lock_of_another_computer_is_respected(tmp_path):
    (tmp_path / ".ridge.lock").write_text(lock_text(1, "field-station"))
    with pytest.raises(DataError, match=r"a run on field-station \(process 1\)"):
        publish(tmp_path, "ridge", A, run(A))


def ended_process():
    child = subprocess.Popen([sys.executable, "-S", "-c", ""])
    child.wait()
    return child.pid


def test_the_lock_of_an_ended_run_is_taken_over(tmp_path):
    pid = ended_process()
    assert not alive(pid)
    # of an ended process, and of one that had the number of this one
    for number in (pid, os.getpid()):
        (tmp_path / ".ridge.lock").write_text(lock_text(number))
        publish(tmp_path, "ridge", A, run(A))
        assert [path.name for path in tmp_path.iterdir()] == ["ridge"]


def test_a_lock_nothing_was_written_into_is_stale_after_a_while(tmp_path):
    lock = tmp_path / ".ridge.lock"
    lock.write_text("")
    with pytest.raises(DataError, match="or was cut off"), held(lock):
        pass
    os.utime(lock, (1, 1))
    with held(lock):
        assert json.loads(lock.read_text())["pid"] == os.getpid()
    assert not lock.exists()
