"""The measured cube: one for each method and native interval, on its own clock."""

import numpy as np
import xarray as xr

from sapflux import quality, schema
from sapflux.errors import DataError, Fault
from sapflux.ingest.channels import excluded, single_series, values_of, within
from sapflux.ingest.pulse_traces import is_trace, record_ends, record_interval_s, traced_points
from sapflux.ingest.series import grid, on_records, place
from sapflux.ingest.unheated import natural_signals
from sapflux.site.installations import installation_numbers, installed_span

METHODS = ("heat_dissipation", "heat_ratio")  # unheated pairs serve these, and have no chain

# Series of a whole logger or tree that a stage may ask for beside the probe's own signal.
OWNER_OF = {
    "heater_voltage": "log",
    "heater_state": "log",
    "stem_temperature": "tree",
    "stem_diameter_change": "tree",
}


def measured_cubes(site, logs):
    """Cubes of the measured signals, by (method, interval in seconds).

    logs : name -> log series as `read_log` gives them.
    Each cube is a Dataset with dims (probe, point, time), its signals in SI as measured, and
    `quality`; `interval_s` is in its attributes. Probes without any record are left in, so that
    they are counted. DataError for logs whose records do not end on whole intervals of the
    site's standard time.
    """
    groups = {}
    _check_phase(site, logs)
    for channel in site.table("channels"):
        if channel.kind != "probe" or channel.log not in logs:
            continue
        method = _method(site, channel.id)
        if method in METHODS and channel.quantity in schema.SIGNALS[method]:
            key = (method, record_interval_s(site, logs, channel))
            groups.setdefault(key, []).append(channel)
    return {key: _cube(site, logs, key, channels) for key, channels in sorted(groups.items())}


def _check_phase(site, logs):
    """Records of one interval share a grid, or they could not be laid side by side."""
    carried = {c.log for c in site.table("channels") if c.kind == "probe"}
    faults = []
    for name in sorted(carried & logs.keys()):
        series = logs[name]
        standard = site.standard(series.end[:1])
        since_midnight = standard - standard.astype("datetime64[D]")
        off = (since_midnight % np.timedelta64(series.interval_s, "s")).astype(np.int64)
        if off.any():
            faults.append(
                Fault(
                    f"{site.folder}/site.toml, [logs.{name}]",
                    f"its records end {off[0] / 60:g} min after whole intervals of the site's "
                    f"standard time (utc_offset_h {site.position.utc_offset_h:g})",
                    "Let utc_offset_h and the log's clock differ by whole intervals.",
                )
            )
    if faults:
        raise DataError(faults)


def probe_names(site, method):
    """Probes of a method, in the order of `probes.csv`, each once."""
    return list(dict.fromkeys(p.probe for p in site.table("probes") if p.method == method))


def _method(site, probe):
    return next((p.method for p in site.table("probes") if p.probe == probe), None)


def _cube(site, logs, key, channels):
    method, interval_s = key
    used = {channel.id for channel in channels}
    probes = [name for name in probe_names(site, method) if name in used]
    points = max(channel.point for channel in channels)
    time = _axis(site, logs, channels, probes, interval_s)
    shape = (len(probes), points, len(time))
    names = [name for c in channels for name in (schema.TRACED if is_trace(c) else (c.quantity,))]
    signals = {name: np.full(shape, np.nan) for name in names}
    expected = np.zeros(shape, dtype=bool)
    absent = np.zeros(shape, dtype=bool)
    conflicting = np.zeros(shape, dtype=bool)
    beyond = np.zeros(shape, dtype=bool)
    for channel in channels:
        if is_trace(channel):
            continue
        series = logs[channel.log]
        rows, values, withheld = values_of(channel, series, site)
        if not len(rows) or not len(time):
            continue
        on_axis = (series.end[rows] >= time[0]) & (series.end[rows] <= time[-1])
        values, withheld = values[on_axis], withheld[on_axis]
        at = place(series.end[rows[on_axis]], time[0], interval_s)
        where = (probes.index(channel.id), channel.point - 1, at)
        row = schema.QUANTITIES[channel.quantity]
        signals[channel.quantity][where] = values
        expected[where] = True
        absent[where] |= np.isnan(values)
        conflicting[where] |= withheld
        with np.errstate(invalid="ignore"):
            beyond[where] |= (values < row.low) | (values > row.high)
    for probe, point, traced in traced_points(site, logs, channels, time):
        where = (probes.index(probe), point - 1)
        lost = traced.there & np.isnan(traced.readings["pre_pulse_drift"])
        for name, values in traced.readings.items():
            signals[name][where] = np.where(traced.there, values, signals[name][where])
        expected[where] |= traced.there
        absent[where] |= lost
        conflicting[where] |= lost & traced.withheld
        beyond[where] |= lost & traced.beyond
        for name in ("rise_downstream", "rise_upstream"):
            row, values = schema.QUANTITIES[name], traced.readings[name]
            with np.errstate(invalid="ignore"):
                beyond[where] |= (values < row.low) | (values > row.high)
    taken_out = _excluded(site, probes, channels, time, interval_s)[:, None, :]
    outside = installation_numbers(site, probes, time, interval_s) < 0
    bits = quality.bits(
        no_record=~expected | absent,
        conflicting=conflicting,
        out_of_range=beyond,
        excluded=np.broadcast_to(taken_out, shape),
        not_installed=np.broadcast_to(outside[:, None, :], shape),
    )
    variables = {name: (schema.RECORD, values) for name, values in signals.items()}
    variables["quality"] = (schema.RECORD, bits)
    variables.update(_beside(site, logs, probes, channels, time, interval_s))
    if method == "heat_dissipation":
        variables.update(natural_signals(site, logs, probes, points, time, interval_s))
    coords = {
        "probe": np.array(probes, dtype=object).astype(str),
        "point": np.arange(1, points + 1),
        "time": time.astype("datetime64[ns]"),
    }
    return xr.Dataset(variables, coords, attrs={"method": method, "interval_s": interval_s})


def _axis(site, logs, channels, probes, interval_s):
    """Ends of the records of a cube, from its first to its last, but none outside installations.

    A clock that fell back to its epoch would else stretch the cube over decades of nothing.
    """
    ends = [
        record_ends(site, logs, channel)
        for channel in {(c.log, is_trace(c)): c for c in channels}.values()
    ]
    first, last = installed_span(site, probes)
    inside = [end[(end > first) & (end <= last)] for end in ends]
    inside = [end for end in inside if len(end)]
    if not inside:
        return np.empty(0, dtype="datetime64[s]")
    return grid(min(end[0] for end in inside), max(end[-1] for end in inside), interval_s)


def answered_records(site, logs, cube):
    """(probe, point, time) bool: records of the cube that a channel of its interval covers."""
    interval_s = int(cube.attrs["interval_s"])
    end = cube["time"].values.astype("datetime64[s]")
    probes = [str(name) for name in cube["probe"].values]
    covered = np.zeros((len(probes), cube.sizes["point"], len(end)), dtype=bool)
    for channel in site.table("channels"):
        own = channel.kind == "probe" and channel.id in probes and channel.log in logs
        signal = channel.quantity in schema.SIGNALS[cube.attrs["method"]]
        if own and signal and record_interval_s(site, logs, channel) == interval_s:
            where = (probes.index(channel.id), channel.point - 1)
            covered[where] |= within(site, channel, end, interval_s)
    return covered


def _excluded(site, probes, channels, time, interval_s):
    """(probe, time) where `exclusions.csv` takes the records out."""
    out = np.zeros((len(probes), len(time)), dtype=bool)
    trees = {p.probe: p.tree for p in site.table("probes")}
    stands = {t.tree: t.stand for t in site.table("trees")}
    for index, probe in enumerate(probes):
        tree = trees.get(probe)
        for kind, name in [("probe", probe), ("tree", tree), ("stand", stands.get(tree))]:
            out[index] |= excluded(site, kind, name, time, interval_s)
        for channel in channels:
            if channel.id == probe:
                on_log = within(site, channel, time, interval_s)
                out[index] |= on_log & excluded(site, "log", channel.log, time, interval_s)
    return out


def _beside(site, logs, probes, channels, time, interval_s):
    """Series of the probe itself, of its loggers or of its tree, laid on the records.

    What belongs to a logger counts while the probe's signal is on it.
    """
    trees = {p.probe: p.tree for p in site.table("probes")}
    found = {}
    for name, kind in OWNER_OF.items():
        rows = np.full((len(probes), len(time)), np.nan)
        for index, probe in enumerate(probes):
            own = single_series(site, logs, "probe", name, probe)
            if own is not None:
                rows[index] = on_records(own, time, interval_s)
                continue
            for owner, inside in _owners(kind, probe, trees, channels, site, time, interval_s):
                series = single_series(site, logs, kind, name, owner)
                if series is not None:
                    rows[index, inside] = on_records(series, time[inside], interval_s)
        if np.isfinite(rows).any():
            found[name] = (schema.PROBE, rows)
    return found


def _owners(kind, probe, trees, channels, site, time, interval_s):
    """The tree of a probe, or each logger its signal was on, and the records of that span."""
    if kind == "tree":
        return [(trees.get(probe), np.ones(len(time), dtype=bool))]
    return [
        (channel.log, within(site, channel, time, interval_s))
        for channel in channels
        if channel.id == probe
    ]
