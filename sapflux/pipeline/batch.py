"""Many sites: each on its own, one failing site stops no other."""

import time
import traceback
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass, field

from sapflux.errors import RecipeError, SiteError, UserError
from sapflux.ingest.logs import match_files
from sapflux.pipeline.api import run_site, summary
from sapflux.pipeline.plan import check_plan
from sapflux.pipeline.recipe import load_recipe
from sapflux.site.load import load_site


@dataclass(frozen=True)
class Outcome:
    """What came of one site: a summary, or its faults."""

    path: str
    summary: dict | None = None
    faults: list = field(default_factory=list)
    usage: bool = False  # the faults are of the site's config or the recipe
    seconds: float = 0.0


def run_sites(paths, *, jobs=1, **options):
    """Run each site and yield its `Outcome`, in the order given, or as they finish with jobs."""
    paths = [str(path) for path in paths]
    if jobs == 1 or len(paths) == 1:
        for path in paths:
            yield run_one(path, **options)
        return
    with ProcessPoolExecutor(max_workers=min(jobs, len(paths))) as pool:
        waiting = {pool.submit(run_one, path, **options): path for path in paths}
        for future in as_completed(waiting):
            error = future.exception()
            yield (
                future.result()
                if error is None
                else Outcome(
                    waiting[future], faults=[f"{waiting[future]}: its worker ended: {error!r}"]
                )
            )


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
    check_plan(site, chosen)
    return {
        "site": site.position.name,
        "recipe": chosen.name,
        "files": {name: [str(p) for p in match_files(site, name)] for name in site.logs},
        "steps": [step.line() for steps in chosen.chains.values() for step in steps],
    }
