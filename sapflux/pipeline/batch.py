"""Many sites: each on its own, one failing site stops no other."""

import signal
import threading
import time
import traceback
from concurrent.futures import ProcessPoolExecutor, as_completed
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path

from sapflux.errors import Fault, RecipeError, SiteError, UserError
from sapflux.ingest.logs import match_files
from sapflux.pipeline.api import run_site, summary
from sapflux.pipeline.check import header_faults
from sapflux.pipeline.plan import methods_of, plan_faults
from sapflux.pipeline.recipe import load_recipe
from sapflux.site.load import load_site

CONNECT_S = 10  # seconds to wait for a scheduler


@dataclass(frozen=True)
class Outcome:
    """What came of one site: a summary, or its faults."""

    path: str
    summary: dict | None = None
    faults: list = field(default_factory=list)
    usage: bool = False  # the faults are of the site's config or the recipe
    seconds: float = 0.0


def run_sites(paths, *, jobs=1, scheduler=None, **options):
    """Run each site and yield its `Outcome`, in the order given, or as they finish.

    jobs : sites at the same time, each in a process of its own; scheduler : address of a running
    dask.distributed scheduler whose workers see the same folders, instead of jobs.
    UserError where the scheduler cannot be used.
    """
    paths = [str(path) for path in paths]
    _check_keys(paths)
    if scheduler:
        yield from _on_cluster(paths, scheduler, options)
    elif jobs == 1 or len(paths) == 1:
        for path in paths:
            yield run_one(path, **options)
    else:
        yield from _in_processes(paths, min(jobs, len(paths)), options)


def _check_keys(paths):
    """UserError where two sites would share a folder of results."""
    places = {}
    for path in paths:
        places.setdefault(Path(path).resolve().name, []).append(path)
    faults = [
        Fault(
            ", ".join(own),
            f"sites of the same folder name {key!r} would share their results",
            "Name each site once, give each folder its own name, or run them with another --out.",
        )
        for key, own in places.items()
        if len(own) > 1
    ]
    if faults:
        raise UserError(faults)


def _in_processes(paths, workers, options):
    """Outcomes from worker processes, which leave an interrupt to this one."""
    pool = ProcessPoolExecutor(workers, initializer=signal.signal,
                               initargs=(signal.SIGINT, signal.SIG_IGN))  # fmt: skip
    try:
        waiting = {pool.submit(run_one, path, **options): path for path in paths}
        for future in as_completed(waiting):
            yield _outcome(future, waiting[future])
    except BaseException:
        # Interrupted: whoever still works is stopped. A run is published whole or not at all.
        with _undisturbed():
            for worker in list((pool._processes or {}).values()):
                worker.terminate()
            pool.shutdown(wait=False, cancel_futures=True)
        raise
    pool.shutdown()


def _on_cluster(paths, address, options):
    try:
        from distributed import Client
        from distributed import as_completed as finished
    except ImportError:
        fault = Fault("--scheduler", "the package 'distributed' is not installed",
                      "Install sapflux[cluster], or use --jobs.")  # fmt: skip
        raise UserError(fault) from None
    try:
        client = Client(address, timeout=CONNECT_S)
    except (OSError, ValueError) as error:
        fault = Fault("--scheduler", f"no scheduler answers at {address!r} ({error})",
                      "Start one, give its address (tcp://host:8786), or use --jobs.")  # fmt: skip
        raise UserError(fault) from None
    with client:
        # The workers load their own files: only paths and outcomes travel.
        waiting = {client.submit(run_one, path, pure=False, **options): path for path in paths}
        for future in finished(waiting):
            yield _outcome(future, waiting[future])


@contextmanager
def _undisturbed():
    """Without interrupts, where this is the thread that takes them."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    former = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, former)


def _outcome(future, path):
    error = future.exception()
    if error is None:
        return future.result()
    return Outcome(path, faults=[f"{path}: its worker ended: {error!r}"])


def run_one(path, **options):
    """Run one site; whatever goes wrong is in the outcome."""
    start = time.perf_counter()
    try:
        result = run_site(path, **options)
    except UserError as error:
        usage = isinstance(error, SiteError | RecipeError)
        return Outcome(
            path,
            faults=[str(fault) for fault in error.faults],
            usage=usage,
            seconds=time.perf_counter() - start,
        )
    except Exception:
        return Outcome(
            path,
            faults=[f"{path}: a defect of the program:\n{traceback.format_exc()}"],
            seconds=time.perf_counter() - start,
        )
    seconds = time.perf_counter() - start
    return Outcome(path, summary=summary(result) | {"seconds": seconds}, seconds=seconds)


def dry_run(path, recipe):
    """What a run would read and do."""
    site, chosen = load_site(path), load_recipe(recipe)
    faults = [*header_faults(site)[0], *plan_faults(site, chosen)]
    if faults:
        raise SiteError(faults)
    methods = {*methods_of(site), "scaling"}
    steps = [s.line() for chain, own in chosen.chains.items() if chain in methods for s in own]
    return {
        "site": site.position.name,
        "recipe": chosen.name,
        "files": {name: [str(p) for p in match_files(site, name)] for name in site.logs},
        "steps": steps,
    }
