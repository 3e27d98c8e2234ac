"""One run at a time on a site's results: a lock file that says who holds it."""

import json
import os
import socket
import time
from contextlib import contextmanager, suppress
from pathlib import Path

from sapflux.errors import DataError, Fault

# Between making the lock file and writing into it a run takes no time to speak of [s].
UNWRITTEN_S = 10.0
_held = set()  # lock files of this process


@contextmanager
def held(path):
    """Hold the lock file `path` while the block runs.

    A lock left by a process of this computer that no longer runs is taken over. DataError where
    another run holds it.
    """
    path = Path(path)
    text = json.dumps({"pid": os.getpid(), "host": socket.gethostname()}, sort_keys=True)
    _take(path, text)
    _held.add(str(path.absolute()))
    try:
        yield
    finally:
        _held.discard(str(path.absolute()))
        with suppress(FileNotFoundError):
            path.unlink()


def _take(path, text):
    for _ in range(3):  # a stale lock may be taken over by another run before us
        try:
            handle = os.open(path, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o644)
        except FileExistsError:
            _clear_stale(path)
            continue
        try:
            os.write(handle, text.encode("utf-8"))
        finally:
            os.close(handle)
        return
    raise _busy(path, "another run is at work on this site")


def _clear_stale(path):
    """Remove the lock if its process is gone; DataError if it is not."""
    try:
        found = path.read_text(encoding="utf-8")
        age = time.time() - path.stat().st_mtime
    except FileNotFoundError:
        return
    if not found and age > UNWRITTEN_S:
        _remove_if_same(path, found)
        return
    try:
        holder = json.loads(found)
        pid, host = int(holder["pid"]), str(holder["host"])
    except (ValueError, KeyError, TypeError):
        raise _busy(path, "another run is at work on this site, or was cut off") from None
    if host != socket.gethostname():
        raise _busy(path, f"a run on {host} (process {pid}) is at work on this site")
    # Our own number without the lock being ours: an ended process had the same number.
    ours = pid == os.getpid() and str(path.absolute()) not in _held
    if not ours and alive(pid):
        raise _busy(path, f"another run (process {pid}) is at work on this site")
    _remove_if_same(path, found)


def _remove_if_same(path, text):
    """Remove the lock if it still reads `text`: two runs may find the same stale lock at once."""
    aside = path.with_name(f"{path.name}.{os.getpid()}")
    with suppress(FileNotFoundError, FileExistsError):
        path.rename(aside)
        if aside.read_text(encoding="utf-8") == text:
            aside.unlink()
        else:
            aside.rename(path)


def _busy(path, what):
    return DataError(Fault(
        str(path), what,
        "Wait until it ends; if no run is at work there, delete this file and run again.",
    ))  # fmt: skip


def alive(pid):
    """Whether a process of this computer with that number runs."""
    if pid <= 0:
        return False
    if os.name == "nt":
        return _alive_on_windows(pid)
    try:
        os.kill(pid, 0)
    except (ProcessLookupError, OverflowError):
        return False
    except PermissionError:  # there, but another user's
        return True
    return True


def _alive_on_windows(pid):
    # os.kill would end the process there: 0 is a signal of its own.
    import ctypes

    query, still_active = 0x1000, 259
    kernel = ctypes.windll.kernel32
    process = kernel.OpenProcess(query, False, pid)
    if not process:
        return kernel.GetLastError() == 5  # access denied: there, but another user's
    code = ctypes.c_ulong()
    kernel.GetExitCodeProcess(process, ctypes.byref(code))
    kernel.CloseHandle(process)
    return code.value == still_active
