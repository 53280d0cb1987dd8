"""Datasets to NetCDF, whole or not at all; with the layout that the CF conventions want for names."""

import os
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import xarray as xr

from massfingerprint.errors import DamagedFileError, MissingFileError
from massfingerprint.files.atomic import replacing

CONVENTIONS = "CF-1.11, ACDD-1.3"
_PLACES = {
    "lat": {"units": "degrees_north", "standard_name": "latitude", "long_name": "latitude"},
    "lon": {"units": "degrees_east", "standard_name": "longitude", "long_name": "longitude"},
}


_CLOCK = {"units_metadata": "leap_seconds: unknown"}
_WORDS = {"degree": "spherical-harmonic degree", "order": "spherical-harmonic order"}
_SPELLINGS = {"mas": "milliarcsecond"}  # as the unit library of CF knows them
_QUALITY = ("sigma", "residual", "truncation", "converged", "rounds", "resolved")


def write_netcdf(dataset: xr.Dataset, path: str | os.PathLike[str]) -> None:
    """Write a dataset as compressed NetCDF-4.

    Parameters
    ----------
    dataset : Dataset
        Real variables only.
    path : path
        Target file; its folder must exist. An existing file is replaced only once the new one is complete.

    Raises
    ------
    MissingFileError
        If the folder does not exist.
    """
    encoding = {
        name: {"zlib": True, "_FillValue": None} for name in dataset.variables if dataset[name].dtype.kind in "fiu"
    }
    with replacing(path) as temporary:
        dataset.to_netcdf(temporary, engine="netcdf4", format="NETCDF4", encoding=encoding)


def read_netcdf(path: str | os.PathLike[str]) -> xr.Dataset:
    """Read a NetCDF file into memory; names stored by ``write_cf_netcdf`` are dimensions again.

    Raises
    ------
    MissingFileError
        If there is no such file.
    DamagedFileError
        If it is not NetCDF or cannot be read.
    """
    source = Path(path)
    if not source.is_file():
        raise MissingFileError(f"{source}: there is no such file. Check the path; it is taken from the current folder.")
    try:
        with xr.open_dataset(source, engine="netcdf4") as stored:
            return _named(stored.load())
    except (OSError, ValueError, RuntimeError) as error:
        raise DamagedFileError(
            f"{source}: cannot be read as NetCDF ({str(error).splitlines()[0]}). Write it again."
        ) from error


def write_cf_netcdf(dataset: xr.Dataset, path: str | os.PathLike[str], *, attributes: Mapping[str, Any]) -> None:
    """Write a dataset as NetCDF-4 in the layout of CF-1.11, with the global attributes of ACDD-1.3.

    A dimension with names, such as ``source``, becomes ``source_index`` with the character variable ``source_name``; gaps in
    floating-point variables are marked by ``_FillValue``, coordinates have none.

    Parameters
    ----------
    dataset : Dataset
        Real numbers, datetimes and text.
    path : path
        Target file; its folder must exist.
    attributes : mapping
        Global attributes, in place of the dataset's own.

    Raises
    ------
    MissingFileError
        If the folder does not exist.
    """
    out = _indexed(dataset)
    for label, variable in out.data_vars.items():  # order of dimensions that CF recommends
        last = [axis for axis in ("time", "lat", "lon") if axis in variable.dims]
        out[label] = variable.transpose(*(dim for dim in variable.dims if dim not in last), *last)
    out.attrs = {"Conventions": CONVENTIONS, **attributes}
    encoding: dict[Any, dict[str, Any]] = {}
    for name in out.variables:
        kind = out[name].dtype.kind
        if kind in "OUS":
            encoding[name] = {"dtype": "S1", "char_dim_name": f"{name}_length"}
        elif kind == "M":
            encoding[name] = {
                "units": "days since 1970-01-01 00:00:00",
                "calendar": "proleptic_gregorian",
                "dtype": "f8",
            }
            encoding[name] |= {"_FillValue": None}
        else:
            gaps = kind == "f" and name not in out.coords and bool(np.isnan(out[name].values).any())
            # coefficients are noise to a compressor: it takes its time and saves nothing
            squeeze = {} if str(name).endswith("_coefficients") else {"zlib": True, "complevel": 1, "shuffle": True}
            encoding[name] = {**squeeze, "_FillValue": np.nan if gaps else None}
    with replacing(path) as temporary:
        out.to_netcdf(temporary, engine="netcdf4", format="NETCDF4", encoding=encoding)


def _indexed(dataset: xr.Dataset) -> xr.Dataset:
    """Named dimensions as ``<name>_index`` with a text coordinate ``<name>_name``; lat and lon with their CF attributes."""
    out = dataset.copy()  # variables share their numbers with the caller's, attributes are new
    for dim in map(str, dataset.dims):
        if dim in out.coords and out[dim].dtype.kind in "OU":
            words = {"long_name": out[dim].attrs.get("long_name", f"name of the {dim.replace('_', ' ')}")}
            values = np.array([str(value) for value in out[dim].values], dtype=object)
            out = out.drop_vars(dim).rename({dim: f"{dim}_index"})
            out = out.assign_coords({f"{dim}_name": (f"{dim}_index", values, words)})
    for name, attrs in _PLACES.items():
        if name in out.coords:
            own = attrs | ({"axis": "Y" if name == "lat" else "X"} if out[name].dims == (name,) else {})
            out[name] = out[name].assign_attrs(own)
    if "time" in out.coords:
        out["time"].attrs.update({"standard_name": "time", "long_name": "time", "axis": "T"} | _CLOCK)
    for name, meaning in _WORDS.items():
        if name in out.coords:
            out[name].attrs = {"long_name": meaning, "units": "1"}
    for label in map(str, out.data_vars):
        attrs = dict(out[label].attrs)
        first, _, rest = str(attrs.get("units", "")).partition(" ")
        if first in _SPELLINGS:
            attrs["units"] = f"{_SPELLINGS[first]} {rest}".strip()
        attrs.setdefault("long_name", label.replace("_", " "))
        if f"{label}_sigma" in out:
            attrs["ancillary_variables"] = f"{label}_sigma"
        kind = "qualityInformation" if any(word in label for word in _QUALITY) else "modelResult"
        out[label].attrs = {**attrs, "coverage_content_type": kind}
    return out


def _named(stored: xr.Dataset) -> xr.Dataset:
    out = stored
    for dim in [str(dim) for dim in stored.dims if str(dim).endswith("_index")]:
        name = dim.removesuffix("_index")
        if f"{name}_name" in out.variables and out[f"{name}_name"].dims == (dim,):
            values = np.array([_text(value) for value in out[f"{name}_name"].values], dtype=object)
            out = out.drop_vars(f"{name}_name").rename({dim: name}).assign_coords({name: values})
    texts = {name: v for name, v in out.data_vars.items() if v.dtype.kind in "SO"}
    return out.assign(
        {name: (v.dims, np.vectorize(_text, otypes=[object])(v.values), v.attrs) for name, v in texts.items()}
    )


def _text(value: Any) -> str:
    return value.decode("utf-8") if isinstance(value, bytes) else str(value)


@contextmanager
def netcdf_steps(path: str | os.PathLike[str], dim: str) -> Iterator[Callable[[xr.Dataset], None]]:
    """Give a callable that appends datasets along a dimension of one NetCDF-4 file; the file is there whole or not at all.

    Parameters
    ----------
    path : path
        Target file; its folder must exist.
    dim : str
        Dimension along which steps are appended; each step has it with any length. Variables without it are written once.

    Raises
    ------
    MissingFileError
        If the folder does not exist.
    """
    with replacing(path) as temporary:
        state: dict[str, int] = {"written": 0}

        def append(step: xr.Dataset) -> None:
            if state["written"] == 0:
                plain = [name for name in step.variables if step[name].dtype.kind in "fiu"]
                encoding: dict[Any, dict[str, Any]] = {name: {"_FillValue": None} for name in plain}
                if step[dim].dtype.kind == "M":
                    encoding[dim] = {"units": "days since 1970-01-01", "dtype": "f8"}
                step.to_netcdf(temporary, engine="netcdf4", format="NETCDF4", encoding=encoding, unlimited_dims=[dim])
            else:
                _append(temporary, step, dim, state["written"])
            state["written"] += step.sizes[dim]

        yield append
        if state["written"] == 0:
            raise MissingFileError(f"{path}: no step was given, nothing is written. Append at least one.")


def _append(path: Path, step: xr.Dataset, dim: str, start: int) -> None:
    """Write the variables of a step that have the dimension behind those that are there."""
    with netCDF4.Dataset(path, "a") as stored:
        for name, variable in step.variables.items():
            if dim not in variable.dims:
                continue
            values: Any = variable.values
            if variable.dtype.kind == "M":
                values = (values - np.datetime64("1970-01-01")) / np.timedelta64(1, "D")
            place = tuple(slice(start, start + step.sizes[dim]) if d == dim else slice(None) for d in variable.dims)
            stored[str(name)][place] = values
