"""Sap flux density, tree water use and stand transpiration from thermal probe logger files."""

__version__ = "0.1.0"


def run_site(path, **options):
    """Run one site folder and return its written results, opened lazily.

    See `sapflux.pipeline.api.run_site` for the options and what comes back.
    """
    from sapflux.pipeline.api import run_site as run

    return run(path, **options)
