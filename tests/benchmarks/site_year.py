"""One site-year from downloads to stand totals, beside pandas' parse of the same files alone.

Work: 52,560 ten-minute rows of 60 heat dissipation channels in 26 overlapping downloads, and a
weather log. Run by hand:

    python tests/benchmarks/site_year.py

Prints the median seconds of both, taken in turn, and their ratio. Speed is never asserted.
"""

import statistics
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import pandas as pd

import sapflux

ROWS, PROBES, DOWNLOADS = 52_560, 60, 26
SITE = """[site]
name = "Benchmark"
latitude_deg = 46.0
longitude_deg = 9.0
elevation_m = 500.0
utc_offset_h = 0.0
water_year_start = "10-01"
common_step_min = 30
[layouts.plain]
"""
LOG = """[logs.{name}]
files = ["raw/{name}_*.dat"]
layout = "plain"
interval_min = {interval:.1f}
stamp = "end"
clock = "utc"
"""
TABLES = {
    "stands": "stand\nslope\n",
    "plots": "plot,stand,plan_area_m2\nA,slope,1000\n",
    "species": "species,anatomy,sapwood_area_a_cm2,sapwood_area_b\nfir,conifer,1.0,1.7\n",
    "profiles": "species,relative_depth,ratio,source\nfir,0,1,invented\nfir,1,0.2,invented\n",
}


def write_site(folder):
    """The site folder with its downloads: a plain daily course, one night in three humid."""
    random = np.random.default_rng(1)
    (folder / "raw").mkdir(parents=True)
    end = np.datetime64("2031-01-01T00:10") + np.arange(ROWS) * np.timedelta64(10, "m")
    hour = (end - end.astype("M8[D]")) / np.timedelta64(1, "h")
    light = np.clip(np.sin((hour - 6) / 12 * np.pi), 0, None)
    index = 0.3 * light[:, None] * random.uniform(0.7, 1.3, PROBES)
    difference = random.uniform(9, 11, PROBES) / (1 + index)
    difference += random.normal(0, 0.008, difference.shape)
    humid = np.where(random.random(ROWS // 144 + 1) < 0.3, 99.5, 70.0)[np.arange(ROWS) // 144]
    weather = np.c_[15 + 5 * light, humid - 30 * light][::3]
    probes = [f"P{number:02d}" for number in range(PROBES)]
    _write_downloads(folder, "stem", end, probes, difference, "%.3f", 100)
    _write_downloads(folder, "air", end[::3], ["T", "RH"], weather, "%.2f", 30)
    logs = LOG.format(name="stem", interval=10) + LOG.format(name="air", interval=30)
    (folder / "site.toml").write_text(SITE + logs)
    for name, text in (TABLES | _tables(probes)).items():
        (folder / f"{name}.csv").write_text(text)


def _write_downloads(folder, name, end, columns, values, form, overlap):
    stamps = [text.replace("T", " ") for text in np.datetime_as_string(end, unit="s")]
    rows = [",".join(form % value for value in row) for row in values]
    lines = [f"{stamp},{row}\n" for stamp, row in zip(stamps, rows, strict=True)]
    size = len(lines) // DOWNLOADS
    for number in range(DOWNLOADS):
        stop = (number + 1) * size if number < DOWNLOADS - 1 else None
        text = "".join(lines[max(0, number * size - overlap) : stop])
        path = folder / "raw" / f"{name}_{number:02d}.dat"
        path.write_text(f"TIMESTAMP,{','.join(columns)}\n{text}")


def _tables(probes):
    channel = "stem,{0},probe,{0},heated_difference,K\n"
    probe = "{0},T{0},heat_dissipation,1.3,0,20,20,2030-12-01\n"
    air = "air,T,site,,air_temperature,degC\nair,RH,site,,relative_humidity,%\n"
    heads = {
        "channels": "log,column,kind,id,quantity,unit\n" + air,
        "probes": "probe,tree,method,height_m,depth_from_mm,depth_to_mm,needle_length_mm,"
        "installed\n",
        "trees": "tree,stand,species,bark_mm\n",
        "surveys": "plot,stem,species,date,diameter_cm\n",
    }
    rows = {
        "channels": channel,
        "probes": probe,
        "trees": "T{0},slope,fir,5\n",
        "surveys": "A,T{0},fir,2030-12-01,30\n",
    }
    return {n: heads[n] + "".join(rows[n].format(p) for p in probes) for n in heads}


def seconds(work):
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def main(rounds=5):
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name) / "bench"
        write_site(folder)
        files = sorted((folder / "raw").glob("*.dat"))
        print(f"{len(files)} files, {sum(f.stat().st_size for f in files) / 1e6:.1f} MB")
        out = Path(name) / "out"
        sapflux.run_site(folder, out=out)  # warm
        taken = [
            (seconds(lambda: [pd.read_csv(path) for path in files]),
             seconds(lambda: sapflux.run_site(folder, out=out)))
            for _ in range(rounds)
        ]  # fmt: skip
        parse, run = (statistics.median(column) for column in zip(*taken, strict=True))
        print(
            f"pandas' parse alone {parse:.2f} s, sapflux run {run:.2f} s: ratio {run / parse:.1f}"
        )
        print((out / "bench" / "timings.json").read_text().strip())
    return 0


if __name__ == "__main__":
    sys.exit(main())
