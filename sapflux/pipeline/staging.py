"""Publishing a run: made whole beside the former one, then put in its place by two renames.

`<out>/<site>` is the newest run. While a run is published these may stand beside it:
`.<site>.staging` the run being made, `.<site>.former` the run it replaces, `.<site>.lock`.
One rule mends what a kill left: a missing `<out>/<site>` is the former run, which goes back; a
former run beside a newest one goes to `earlier/<site>/<identity>`; staging is rubbish.
"""

import errno
import json
import re
import shutil
from contextlib import contextmanager, suppress
from pathlib import Path

from sapflux.errors import Fault, UserError
from sapflux.pipeline.lock import held

EARLIER = "earlier"
KEPT_SUFFIXES = {".csv", ".toml"}  # tables of the run and of the site
KEPT_NAMES = {"run.json", "draws.nc"}
IDENTITY = re.compile(r"[0-9A-Za-z_-]{1,64}")


def publish(out, site_key, identity, write, keep_all=False):
    """Write a run and make it the newest of its site; returns its folder.

    out : folder of results; site_key : name of the run's folder in it; identity : of the run;
    write : called with an empty folder, into which it writes every file, `run.json` with the
    identity among them; keep_all : keep every file of the former run, not only its tables,
    `run.json` and draws.

    A former run of another identity moves to `<out>/earlier/<site>/<identity>/` unless a run of
    that identity lies there already; one of the same identity is replaced. Whatever fails, the
    former result stays whole or is put back by the next `publish` or `recover`.

    UserError where the disk is full, the folder may not be written, a file of it is held open, or
    `<out>/<site>` is not a run; DataError where another run is at work on the site; whatever
    `write` raises.
    """
    places = _Places(Path(out), site_key)
    with _told(places.place):
        _make(places.out)
        with held(places.lock):
            _recover(places)
            _check_replaceable(places.place)
            try:
                places.staging.mkdir()
                write(places.staging)
                written = written_identity(places.staging)
                if written != identity:
                    raise ValueError(f"run.json says identity {written!r}, not {identity!r}")
                _swap(places)
            finally:
                with suppress(OSError):
                    _put_back(places)
                with suppress(OSError):
                    _remove(places.staging)
            # The new run stands. What cannot be cleared away now is left to the next run.
            with suppress(OSError):
                _file_former(places, keep_all)
    return places.place


def _make(out):
    """The folder of results. UserError where something else is in its way."""
    try:
        out.mkdir(parents=True, exist_ok=True)
    except (FileExistsError, FileNotFoundError) as error:
        fault = Fault(str(out), f"the folder of results cannot be made ({error.strerror})",
                      "It, or a part of its path, is a file: choose another --out.")  # fmt: skip
        raise UserError(fault) from None


def recover(out, site_key):
    """Mend what a killed run left of a site's results. Does nothing where nothing is amiss.

    UserError and DataError as `publish`.
    """
    places = _Places(Path(out), site_key)
    if not places.out.is_dir():
        return
    with _told(places.place), held(places.lock):
        _recover(places)


def written_identity(folder):
    """The identity in a run's `run.json`, "" where there is none that can be read."""
    try:
        record = json.loads((Path(folder) / "run.json").read_text(encoding="utf-8"))
        found = record["identity"]
    except (OSError, ValueError, KeyError, TypeError):
        return ""
    return found if isinstance(found, str) and IDENTITY.fullmatch(found) else ""


class _Places:
    """Where the parts of a site's results lie."""

    def __init__(self, out, site_key):
        if site_key.lower() == EARLIER:
            raise UserError(Fault(
                site_key, f"a site may not be called {site_key!r}: earlier runs are kept there",
                "Rename the site folder.",
            ))  # fmt: skip
        self.out = out
        self.place = out / site_key
        self.staging = out / f".{site_key}.staging"
        self.former = out / f".{site_key}.former"
        self.lock = out / f".{site_key}.lock"
        self.earlier = out / EARLIER / site_key


def _swap(places):
    """The two renames. The first moves the former run aside, the second the new one in."""
    if places.place.exists():
        if written_identity(places.place):
            places.place.rename(places.former)
        else:
            places.place.rmdir()  # empty, as was checked
    places.staging.rename(places.place)


def _put_back(places):
    """The former run back in its place if no other took it."""
    if places.former.exists() and not places.place.exists():
        places.former.rename(places.place)


def _recover(places):
    _put_back(places)
    # How much of the former run was to be kept is not known any more, so all of it is.
    _file_former(places, keep_all=True)
    _remove(places.staging)


def _file_former(places, keep_all):
    """Move the replaced run among the earlier ones, or delete it where it is there already."""
    if not places.former.exists():
        return
    if not any(places.former.iterdir()):  # deleted but for the folder itself
        places.former.rmdir()
        return
    identity = written_identity(places.former)
    if not identity:
        raise UserError(Fault(
            str(places.former), "holds something else than a run: it has no run.json",
            "Move it away, and run again.",
        ))  # fmt: skip
    target = places.earlier / identity
    if identity == written_identity(places.place) or target.exists():
        _remove(places.former)
        return
    if not keep_all:
        _prune(places.former)
    target.parent.mkdir(parents=True, exist_ok=True)
    places.former.rename(target)


def _prune(folder):
    """Delete what is not kept of an earlier run."""
    for path in sorted(folder.rglob("*"), reverse=True):  # what is inside a folder comes first
        if path.is_dir():
            if not any(path.iterdir()):
                path.rmdir()
        elif path.suffix not in KEPT_SUFFIXES and path.name not in KEPT_NAMES:
            path.unlink()


def _remove(folder):
    """Delete a replaced run or rubbish, its `run.json` last so that it stays known as a run."""
    if not folder.exists():
        return
    for path in sorted(folder.iterdir()):
        if path.is_dir():
            shutil.rmtree(path)
        elif path.name != "run.json":
            path.unlink()
    (folder / "run.json").unlink(missing_ok=True)
    folder.rmdir()


def _check_replaceable(place):
    """UserError where a run would replace what is no run."""
    if not place.exists() or (place.is_dir() and not any(place.iterdir())):
        return
    if not place.is_dir() or not written_identity(place):
        raise UserError(Fault(
            str(place), "holds something else than a run: it has no run.json with an identity",
            "Choose another --out, or move it away.",
        ))  # fmt: skip


# what the operating system says -> what it means, what to do
TROUBLES = {
    errno.ENOSPC: ("the disk is full", "Free some space and run again"),
    errno.EDQUOT: ("the disk quota is used up", "Free some space and run again"),
    errno.EFBIG: ("a file grew larger than it may", "Raise the limit or choose another --out"),
    errno.EROFS: ("the file system may only be read", "Choose another --out"),
    errno.ENOTDIR: ("a part of the path is a file", "Choose another --out"),
    errno.EIO: ("the disk cannot be written", "Choose another --out"),
}
HELD = (
    "may not be written or renamed",
    "Close any spreadsheet or viewer that holds a file of it open, see that you may write there, "
    "and run again",
)
TROUBLES |= {errno.EACCES: HELD, errno.EPERM: HELD, errno.EBUSY: HELD}


@contextmanager
def _told(place):
    """Trouble with the disk as UserError; any other OSError as it is."""
    try:
        yield
    except OSError as error:
        if error.errno not in TROUBLES:
            raise
        what, remedy = TROUBLES[error.errno]
        concerned = f" ({error.filename})" if error.filename else ""
        raise UserError(Fault(
            str(place), f"{what}: {error.strerror}{concerned}",
            f"{remedy}; the former result stands as it was.",
        )) from error  # fmt: skip
