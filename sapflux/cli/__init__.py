"""The command line: the only place that prints.

Exit codes: 0 done (refused periods are printed); 1 failed; 2 usage or configuration; 3 finished,
but some sites failed; 130 interrupted.
"""

import argparse
import os
import signal
import sys

from sapflux import __version__

DONE, FAILED, USAGE, SOME_FAILED, INTERRUPTED = 0, 1, 2, 3, 130


def main(arguments=None):
    """Run one command and return its exit code."""
    options = parser().parse_args(arguments)
    if not hasattr(options, "command"):
        parser().print_help()
        return USAGE
    from sapflux.errors import RecipeError, SiteError, UserError

    try:
        code = options.command(options)
        sys.stdout.flush()
        return code
    except (SiteError, RecipeError) as error:
        return _tell(error, USAGE)
    except UserError as error:
        return _tell(error, FAILED)
    except KeyboardInterrupt:
        signal.signal(signal.SIGINT, signal.SIG_IGN)  # once is enough: let the end be orderly
        print("interrupted; what was finished before stands as it was", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:  # who reads has seen enough
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return DONE
    except OSError as error:
        if error.filename is not None:
            raise
        print(f"the output cannot be written ({error.strerror})", file=sys.stderr)
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return FAILED


def _tell(error, code):
    for fault in error.faults:
        print(fault, file=sys.stderr)
    count = len(error.faults)
    print(f"{count} fault{'s' if count > 1 else ''}; nothing was changed", file=sys.stderr)
    return code


def parser():
    """The arguments of every command. Imports nothing heavy, so that --help is quick."""
    top = argparse.ArgumentParser(
        prog="sapflux",
        description="Logger downloads of thermal sap flow probes in; tree water use and stand "
        "transpiration out, with an account of every line read.",
    )
    top.add_argument("--version", action="version", version=f"sapflux {__version__}")
    commands = top.add_subparsers(metavar="COMMAND")

    start = commands.add_parser("init", help="write a commented starter site")
    start.add_argument("folder", metavar="DIR", help="the new site folder")
    start.add_argument(
        "--from",
        dest="files",
        nargs="+",
        metavar="FILE",
        default=[],
        help="logger files whose headers the layouts and channels are drafted from",
    )
    start.set_defaults(command=_init)

    check = commands.add_parser("check", help="validate a site, reading only the head of each file")
    _sites(check)
    check.set_defaults(command=_check)

    run = commands.add_parser("run", help="downloads in, stand millimetres out")
    _sites(run)
    run.add_argument("--out", metavar="DIR", default="results", help="default: results")
    many = run.add_mutually_exclusive_group()
    many.add_argument("--jobs", type=_count, default=1, metavar="N", help="sites at the same time")
    many.add_argument(
        "--scheduler",
        metavar="ADDRESS",
        help="run the sites on the workers of a dask.distributed scheduler",
    )
    run.add_argument(
        "--native", action="store_true", help="also write each method's signals at the native step"
    )
    run.add_argument(
        "--keep-all",
        action="store_true",
        help="keep every file of earlier runs, not only their tables",
    )
    run.add_argument(
        "--dry-run",
        action="store_true",
        help="check the site and the recipe, list the files, run nothing",
    )
    run.set_defaults(command=_run)

    stages = commands.add_parser("stages", help="what each stage does, its settings and sources")
    stages.add_argument("name", metavar="NAME", nargs="?", help="one stage, in full")
    stages.add_argument("--json", action="store_true", help="print JSON alone")
    stages.add_argument(
        "--recipe", metavar="RECIPE", help="print a recipe, to be changed as a file"
    )
    stages.add_argument(
        "--quantities", action="store_true", help="what a logger column may be, and in which units"
    )
    stages.set_defaults(command=_stages)

    rehearse = commands.add_parser(
        "rehearse", help="the site's own design on a virtual forest whose truth is known"
    )
    rehearse.add_argument("site", metavar="SITE", help="site folder; a plan without logs will do")
    length = rehearse.add_mutually_exclusive_group()
    length.add_argument("--years", type=_count, metavar="N", help="default: one growing season")
    length.add_argument(
        "--weather",
        metavar="TABLE",
        help="weather from a CSV file in place of an invented season; its whole days are the "
        "period. A row each interval of at most 3 h; columns end_utc (of the interval), "
        "air_temperature_degC, relative_humidity_percent and shortwave_radiation_W_m2 (means), "
        "and if known precipitation_mm (sum), wind_speed_m_s (mean)",
    )
    rehearse.add_argument("--seed", type=int, default=1, metavar="S", help="default: 1")
    rehearse.add_argument(
        "--recipe",
        metavar="NAME",
        default="stand_water_use",
        help="recipe by name, or a TOML file; default: stand_water_use",
    )
    rehearse.add_argument(
        "--knowledge",
        choices=("estimated", "exact"),
        default="estimated",
        help="what the copy's tables know of the truth; default: estimated",
    )
    rehearse.add_argument(
        "--wound",
        choices=("cubic", "strip"),
        default="cubic",
        help="true wound: the inverse of the published cubic, or a strip in which no sap moves, "
        "solved numerically; default: cubic",
    )
    rehearse.add_argument(
        "--faults",
        choices=("none", "few", "many"),
        default="none",
        help="faults of probes, loggers and files to inject; default: none",
    )
    rehearse.add_argument(
        "--gradients",
        choices=("natural", "none"),
        default="natural",
        help="whether stems have temperature gradients of their own; default: natural",
    )
    rehearse.add_argument("--azimuth", action="store_true", help="let flux differ around each stem")
    rehearse.add_argument("--out", metavar="DIR", default="rehearsals", help="default: rehearsals")
    rehearse.add_argument("--json", action="store_true", help="print JSON alone")
    rehearse.set_defaults(command=_rehearse)

    calibrate = commands.add_parser(
        "calibrate", help="a species' own calibration of heat dissipation from gravimetric flux"
    )
    calibrate.add_argument(
        "table",
        metavar="TABLE",
        help="CSV with flow_index and flux_g_m2_s, and if known stem and heating "
        "(continuous or intermittent)",
    )
    calibrate.add_argument("--species", default="", metavar="NAME", help="of the register's row")
    calibrate.add_argument("--name", default="", metavar="NAME", help="default: that of the file")
    calibrate.add_argument(
        "--out",
        default="calibrations",
        metavar="DIR|FILE",
        help="where the plot goes, a folder or an .svg file; default: calibrations",
    )
    calibrate.add_argument("--json", action="store_true", help="print JSON alone")
    calibrate.set_defaults(command=_calibrate)
    return top


def _sites(command):
    command.add_argument("sites", metavar="SITE", nargs="+", help="site folder")
    command.add_argument(
        "--recipe",
        metavar="NAME",
        default="stand_water_use",
        help="recipe by name, or a TOML file; default: stand_water_use",
    )
    command.add_argument("--json", action="store_true", help="print JSON alone")


def _count(text):
    number = int(text) if text.isdecimal() else 0
    if number < 1:
        raise argparse.ArgumentTypeError("takes a whole number from 1")
    return number


def _init(options):
    from sapflux.cli.init import init

    return init(options)


def _check(options):
    from sapflux.cli.check import check

    return check(options)


def _run(options):
    from sapflux.cli.run import run

    return run(options)


def _stages(options):
    from sapflux.cli.stages import stages

    return stages(options)


def _calibrate(options):
    from sapflux.cli.calibrate import calibrate

    return calibrate(options)


def _rehearse(options):
    from sapflux.cli.rehearse import rehearse

    return rehearse(options)
