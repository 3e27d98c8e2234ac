"""The netCDF files of a run: flat, CF-1.11 and ACDD-1.3, the same bytes for the same values."""

import errno
import os
import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr

from sapflux import quality, schema
from sapflux.pipeline.metadata import global_attributes

LABELS = {
    "probe": "name of the probe",
    "tree": "name of the tree",
    "species": "species",
    "stand": "name of the stand",
    "stand_species": "stand and species",
    "stand_in": "species whose flux density stands in for one without probes",
    "method": "method of the probe",
    "log": "name of the log",
    "file": "name of the input file",
}
# Numbers that are not in the schema: name -> long name and units
COUNTED = {
    "point": ("measuring point along the needle, 1 is the outermost", "1"),
    "row_size": ("number of samples of the log", "1"),
    "interval": ("interval of the log", "s"),
    "file_index": ("place of the input file in the list of files, from 0", "1"),
    "line": ("line in the input file, from 1", "1"),
}
SUMS = {"precipitation", "throughfall"}
ENUMERATED = {"origin", "stand_origin"}
FLAGS = {"quality", "faults", *ENUMERATED}
NOT_AVERAGED = {*FLAGS, "installation", "live_trees", "in_leaf"}
ANCILLARY = {
    "tree_flow": ("tree_filled_share",),
    "probe_flow": ("probe_filled_share",),
    "stand_transpiration": ("stand_origin", "stand_filled_share", "live_trees"),
}
AUXILIARY = {"installation", "in_leaf", "live_trees", "probe_filled_share", "tree_filled_share",
          "stand_filled_share"}  # fmt: skip
TELLING = ("qualityInformation", "auxiliaryInformation")
TIME = {
    "units": "seconds since 1970-01-01",
    "calendar": "standard",
    "dtype": "float64",
    "_FillValue": None,
}
MEASURED = "measured_"
LONGEST_CHUNK = 65536


def probes_dataset(dataset, site, attributes):
    """Flux density of the probes on the common step: dims (probe, point, time).

    dataset : variables and coordinates named as in the schema, labels along `probe`; site : the
    `Site`; attributes : see `global_attributes`. Its attributes are replaced whole.
    ValueError for a name that is not in the schema.
    """
    return _series(dataset, "probes", "probe", site, attributes)


def trees_dataset(dataset, site, attributes):
    """Sap flow of the trees on the common step: dims (tree, time). See `probes_dataset`."""
    return _series(dataset, "trees", "tree", site, attributes)


def stand_dataset(dataset, site, attributes):
    """Transpiration on the common step: dims (stand_species, time). See `probes_dataset`."""
    return _series(dataset, "stand", "stand_species", site, attributes)


def native_dataset(dataset, site, attributes):
    """Signals at the native step: dims (probe, point, time). See `probes_dataset`.

    `measured_X` beside `X` is the signal as logged, where X is what a stage made of it.
    """
    return _series(dataset, "native", "probe", site, attributes)


def origin_records(logs):
    """File and line of every kept sample, log after log, as `origin_dataset` takes them.

    logs : name -> (ends [UTC, datetime64], interval in seconds, files (one name a sample),
    lines (one number a sample, from 1)). Logs and files are sorted by name.
    """
    names = sorted(logs)
    found = {name: pd.factorize(np.asarray(logs[name][2], dtype=object)) for name in names}
    files = sorted({str(file) for _, own in found.values() for file in own})

    def joined(values, dtype):
        return np.concatenate([np.empty(0, dtype), *values]).astype(dtype)

    indices = [
        np.array([files.index(str(file)) for file in own], np.int32)[code]
        for code, own in found.values()
    ]
    return xr.Dataset(
        {
            "row_size": ("log", np.array([len(logs[name][0]) for name in names], np.int32)),
            "interval": ("log", np.array([logs[name][1] for name in names], np.float64)),
            "file_index": ("record", joined(indices, np.int32)),
            "line": ("record", joined([logs[name][3] for name in names], np.int32)),
        },
        {
            "log": np.array(names, dtype=str),
            "file": np.array(files, dtype=str),
            "time": ("record", joined([logs[name][0] for name in names], "datetime64[ns]")),
        },
    )


def origin_dataset(dataset, site, attributes):
    """File and line of every kept sample: a contiguous ragged array, `row_size` samples a log.

    dataset : as `origin_records` gives it; the rest as `probes_dataset`.
    """
    made = _described(dataset, "log", site)
    made["row_size"].attrs["sample_dimension"] = "record"
    ends = dataset["time"].values.astype("datetime64[s]")
    steps = np.repeat(dataset["interval"].values, dataset["row_size"].values)
    starts = ends - steps.astype("timedelta64[s]")
    made["time_bnds"] = (("record", "bnds"), _bounds(starts, ends))
    return _finished(made, "origin", site, starts, ends, steps.min(initial=86400), attributes)


def write_netcdf(dataset, path):
    """Write a dataset of this module. The same dataset gives the same bytes.

    OSError where the disk does not take it.
    """
    try:
        dataset.to_netcdf(path, engine="netcdf4", format="NETCDF4")
    except RuntimeError as error:  # the library tells nothing else of a full disk
        free = shutil.disk_usage(Path(path).absolute().parent).free
        code = errno.ENOSPC if free < max(dataset.nbytes, 1 << 20) else errno.EIO
        raise OSError(code, f"{os.strerror(code)} ({error})", str(path)) from error


def _series(dataset, level, instance, site, attributes):
    """A file of time series of one kind of thing, all on one regular clock."""
    step_s = int(dataset.attrs.get("interval_s", site.position.common_step_min * 60))
    dataset = _with_words(dataset, level)
    made = _described(dataset.transpose(instance, ..., "time"), instance, site)
    ends = dataset["time"].values.astype("datetime64[s]")
    starts = ends - np.timedelta64(step_s, "s")
    made["time_bnds"] = (("time", "bnds"), _bounds(starts, ends))
    pulses = dataset.attrs.get("method") == "heat_ratio" and level == "native"
    for name, variable in made.data_vars.items():
        if name == "time_bnds":
            continue
        method = _cell_method(name.removeprefix(MEASURED), pulses and "point" in variable.dims)
        if method:
            variable.attrs["cell_methods"] = method
        beside = [other for other in _ancillary(name) if other in made]
        beside = [other for other in beside if made[other].dims == variable.dims]
        if beside:
            variable.attrs["ancillary_variables"] = " ".join(beside)
    return _finished(made, level, site, starts, ends, step_s, attributes)


def _with_words(dataset, level):
    """The dataset with its flags as the int32 words of a file: see `quality.split`.

    `faults` is left out where no fault can be set. Files of the stand hold only the flags of what
    is scaled; files at the native step hold none of them.
    """
    if "quality" not in dataset:
        return dataset
    steps, faults = quality.split(dataset["quality"])
    known = quality.faults_defined()
    own = {"native": known - quality.SCALED, "stand": known & quality.SCALED}.get(level, known)
    if own:
        return dataset.assign(quality=steps, faults=faults)
    if faults.any():
        raise ValueError(f"{level}: a fault is set that is not one of this level")
    return dataset.assign(quality=steps)


def _ancillary(name):
    """Names of the variables that tell of the variable, if the file has them."""
    if _content(name) in TELLING:
        return ()
    return ("quality", "faults", "origin", *ANCILLARY.get(name, ()))


def _content(name):
    """What kind of content a variable is, by the vocabulary of ACDD."""
    if name in FLAGS:
        return "qualityInformation"
    return "auxiliaryInformation" if name in AUXILIARY or name in COUNTED else "physicalMeasurement"


def _cell_method(name, pulses):
    if name in NOT_AVERAGED:
        return ""
    if name in SUMS:
        return "time: sum"
    return "time: point (one heat pulse in each interval)" if pulses else "time: mean"


def _described(dataset, instance, site):
    """The variables with attributes and encoding of their own, and the position of the site."""
    known = {*schema.VARIABLES, *LABELS, *COUNTED, "time"}
    unknown = [n for n in dataset.variables if str(n).removeprefix(MEASURED) not in known]
    if unknown:
        raise ValueError(f"not in the schema: {', '.join(map(str, sorted(unknown)))}")
    made = xr.Dataset()
    # Sorted, but for what a reader looks for first: the order in the file is part of its bytes.
    for name in sorted(dataset.variables):
        moves = "time" in dataset[name].dims or "record" in dataset[name].dims
        variable = _variable(name, dataset[name].variable, is_data=moves)
        if name in dataset.coords or (not moves and name not in COUNTED):
            made = made.assign_coords({name: variable})
        else:
            made[name] = variable
    made[instance].attrs["cf_role"] = "timeseries_id"
    count, place = dataset.sizes[instance], site.position
    of_site = {
        "lat": (place.latitude_deg, "latitude", "degrees_north", "latitude of the site"),
        "lon": (place.longitude_deg, "longitude", "degrees_east", "longitude of the site"),
        "alt": (place.elevation_m, "altitude", "m", "elevation of the site above sea level"),
    }
    for name, (value, standard_name, units, long_name) in of_site.items():
        attrs = {"standard_name": standard_name, "long_name": long_name, "units": units}
        attrs["coverage_content_type"] = "coordinate"
        if name == "alt":
            attrs |= {"positive": "up", "axis": "Z"}
        variable = xr.Variable(instance, np.full(count, float(value)), attrs, {"_FillValue": None})
        made = made.assign_coords({name: variable})
    return made


def _variable(name, variable, is_data):
    """A variable as it is written: attributes whole from the schema, dtype and encoding fixed."""
    values = variable.values
    if name == "time":
        attrs = {
            "standard_name": "time",
            "long_name": "end of the averaging interval, UTC",
            "axis": "T",
            "bounds": "time_bnds",
            "units_metadata": "leap_seconds: none",
            "coverage_content_type": "coordinate",
        }
        return xr.Variable(variable.dims, values.astype("datetime64[ns]"), attrs, dict(TIME))
    if name in LABELS:
        texts = np.array([str(value) for value in values.ravel()], dtype=str).reshape(values.shape)
        encoding = {"dtype": "S1", "char_dim_name": f"{name}_length"}
        return xr.Variable(variable.dims, texts, {"long_name": LABELS[name]}, encoding)
    attrs = _attributes(name)
    attrs["coverage_content_type"] = _content(name) if is_data else "coordinate"
    if name in ENUMERATED:
        values = values.astype(np.int8)
    elif values.dtype.kind in "iub":
        values = values.astype(np.int32)
    else:
        values = values.astype(np.float64)
    encoding = {"_FillValue": None}
    if values.dtype.kind == "f" and (is_data or np.isnan(values).any()):
        encoding["_FillValue"] = np.nan
    if is_data and values.size:
        chunks = [*values.shape[:-1], min(values.shape[-1], LONGEST_CHUNK)]
        chunks[0] = 1 if values.ndim > 1 else chunks[0]
        # Shuffling bytes packs whole numbers well, and makes measured ones larger.
        encoding |= {"zlib": True, "complevel": 1, "shuffle": values.dtype.kind != "f",
                     "chunksizes": tuple(chunks)}  # fmt: skip
    return xr.Variable(variable.dims, values, attrs, encoding)


def _attributes(name):
    if name in COUNTED:
        return dict(zip(("long_name", "units"), COUNTED[name], strict=True))
    attrs = schema.VARIABLES[name.removeprefix(MEASURED)].attributes()
    if name.startswith(MEASURED):
        attrs["long_name"] += ", as logged"
    if name == "quality":
        attrs |= quality.quality_attributes()
    if name == "faults":
        attrs |= quality.faults_attributes()
    if name in ENUMERATED:
        attrs |= quality.origin_attributes()
    if name in FLAGS:
        del attrs["units"]  # flags have none
    return attrs


def _bounds(starts, ends):
    return np.stack([starts, ends], axis=-1).astype("datetime64[ns]")


def _finished(made, level, site, starts, ends, step_s, attributes):
    """The dataset with global attributes and fixed encoding of its bounds."""
    if not len(ends):
        raise ValueError(f"{level}: no record to write")
    made["time_bnds"].encoding = dict(TIME)
    span = (starts.min(), ends.max(), step_s)
    made.attrs = {"featureType": "timeSeries", **global_attributes(level, site, span, attributes)}
    return made
