"""Fields and series of sea level as they stand in files: NetCDF grids with the names of CF, long tables of sites. No science."""

import os
from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.errors import InputError, TableError, UnitsError, nearest_names
from massfingerprint.files.netcdf import read_netcdf
from massfingerprint.files.tables import numbers, read_table

Array = NDArray[np.float64]
_GAPS = ("", "nan", "na")
_COLUMNS = ("site", "time", "value", "sigma")
_AXES = {
    "lat": ("latitude", {"degrees_north", "degree_north", "degrees_N", "degree_N"}),
    "lon": ("longitude", {"degrees_east", "degree_east", "degrees_E", "degree_E"}),
}


def read_field_grid(path: str | os.PathLike[str], *, variable: str | None = None) -> xr.DataArray:
    """Read one gridded field from NetCDF.

    Parameters
    ----------
    path : path
        File with one-dimensional latitude and longitude, known by name (``lat``, ``lon``), CF standard name or CF units.
    variable : str, optional
        Which one to read: its name or its standard name; not needed where only one lies on latitude and longitude.

    Returns
    -------
    DataArray (..., lat, lon)
        Numbers as stored, gaps NaN, with ``attrs["units"]``; other dimensions, such as ``time``, in front.

    Raises
    ------
    MissingFileError, DamagedFileError, InputError, UnitsError
        One line, if file, axes, variable or its unit cannot be used.
    """
    source = Path(path)
    stored = read_netcdf(source)
    names = {_axis(stored, wanted, source): wanted for wanted in _AXES}
    stored = stored.rename({found: wanted for found, wanted in names.items() if found != wanted})
    fields = [str(name) for name, values in stored.data_vars.items() if {"lat", "lon"} <= set(values.dims)]
    name = _chosen(stored, fields, variable, source)
    field = stored[name].transpose(..., "lat", "lon")
    if not str(field.attrs.get("units", "")):
        raise UnitsError(f"{source}: variable {name} has no units. Set its attribute units, such as 'm'.")
    if field.dtype.kind not in "fiu":
        raise InputError(f"{source}: variable {name} must hold numbers, got {field.dtype}.")
    if "time" in field.dims:
        _check_times(field, source)
    return field.astype(np.float64)


def _axis(stored: xr.Dataset, wanted: str, source: Path) -> str:
    """Name of the dimension coordinate that is latitude or longitude."""
    word, units = _AXES[wanted]
    for name, values in stored.coords.items():
        told = values.attrs.get("standard_name") == word or values.attrs.get("units") in units
        if values.dims == (name,) and (name in (wanted, word) or told):
            return str(name)
    found = ", ".join(map(str, stored.coords)) or "none"
    raise InputError(
        f"{source}: has no {word} along a dimension of its own; coordinates: {found}. Regrid to latitude and longitude first."
    )


def _chosen(stored: xr.Dataset, fields: list[str], variable: str | None, source: Path) -> str:
    if variable is None:
        if len(fields) == 1:
            return fields[0]
        raise InputError(
            f"{source}: holds {len(fields)} fields ({', '.join(fields) or 'none'}). Pass variable= one of them."
        )
    if variable in fields:
        return variable
    by_word = [name for name in fields if stored[name].attrs.get("standard_name") == variable]
    if len(by_word) == 1:
        return by_word[0]
    raise InputError(f"{source}: no field {variable!r} on latitude and longitude. {nearest_names(variable, fields)}")


def _check_times(field: xr.DataArray, source: Path) -> None:
    if "time" not in field.coords or field["time"].dtype.kind != "M":
        raise InputError(
            f"{source}: time must be dates of the standard calendar. Give it units 'days since 1970-01-01'."
        )
    steps = np.diff(field["time"].values).astype(np.int64)
    if (steps <= 0).any():
        place = int(np.flatnonzero(steps <= 0)[0]) + 1
        when = str(field["time"].values[place])[:10]
        raise InputError(
            f"{source}: time {when} (number {place}) does not come after the one before. Sort, keep one each."
        )


def read_site_series(path: str | os.PathLike[str], *, quantity: str) -> xr.Dataset:
    """Read series at sites from a long table.

    Parameters
    ----------
    path : path
        CSV ``site``, ``time`` (ISO dates, ascending at each site), ``value [unit]``, ``sigma [unit]`` (1 sigma), any unit of
        length. An empty value is a gap.
    quantity : str
        What the values are, for labels and messages: "dynamic sea level".

    Returns
    -------
    Dataset (time, site)
        ``value`` and ``sigma`` in mm on all times of all sites, ascending, sites as first named; NaN where the table has no value.

    Raises
    ------
    MissingFileError, TableError, UnitsError, InputError
        One line: file, line, what came, what to do; also for a repeated row and for times that do not ascend.
    """
    if not isinstance(quantity, str) or not quantity.strip():
        raise InputError(f"quantity: must say what the values are, such as 'dynamic sea level', got {quantity!r}.")
    frame, units = read_table(path, required=_COLUMNS)
    factors = {}
    for name in ("value", "sigma"):
        held = {"units": units[name]} if units.get(name) else {}
        _, factors[name] = vocabulary.require(held, ("mm",), argument=f"{path}: column {name} ({quantity})")
    _check_names(frame, path)
    times = _times(frame, path)
    _check_order(frame, times, path)
    values, sigma = (_filled(frame, name, path) * factors[name] for name in ("value", "sigma"))
    bad = np.flatnonzero(np.isfinite(values) & ~(sigma >= 0.0))
    if bad.size:
        cell = frame["sigma"].iloc[bad[0]]
        raise TableError(
            f"{path}: line {frame.index[bad[0]]}: sigma is {cell!r}; it must be 0 or more where there is a value."
        )
    sites = list(dict.fromkeys(frame["site"]))
    axis, row = np.unique(times, return_inverse=True)
    column = pd.Index(sites).get_indexer(frame["site"])
    out = xr.Dataset(coords={"time": axis, "site": np.array(sites, dtype=object)})
    words = {"value": quantity, "sigma": f"1 sigma of {quantity}"}
    for name, numbers_of in (("value", values), ("sigma", np.where(np.isfinite(values), sigma, np.nan))):
        table = np.full((axis.size, len(sites)), np.nan)
        table[row, column] = numbers_of
        out[name] = (("time", "site"), table, {"units": "mm", "long_name": words[name]})
    return out.assign_attrs(quantity=quantity)


def _check_names(frame: pd.DataFrame, path: str | os.PathLike[str]) -> None:
    empty = frame.index[frame["site"] == ""]
    if empty.size:
        raise TableError(f"{path}: line {empty[0]}: site is empty. Give each place a name.")


def _times(frame: pd.DataFrame, path: str | os.PathLike[str]) -> NDArray[np.datetime64]:
    times = pd.to_datetime(frame["time"], errors="coerce", format="ISO8601")
    if times.isna().any():
        line = times.index[times.isna()][0]
        raise TableError(f"{path}: line {line}: time is {frame['time'][line]!r}, not an ISO date such as 1993-01-15.")
    return times.to_numpy(dtype="datetime64[ns]")


def _check_order(frame: pd.DataFrame, times: NDArray[np.datetime64], path: str | os.PathLike[str]) -> None:
    """Refuse a repeated row before times that do not ascend, each by its line."""
    table = pd.DataFrame({"site": frame["site"], "time": times}, index=frame.index)
    again = table.index[table.duplicated()]
    if again.size:
        site, when = table.loc[again[0], "site"], frame.loc[again[0], "time"]
        raise TableError(f"{path}: line {again[0]}: site {site!r} at {when} stands there twice. Keep one row each.")
    steps = table.groupby("site", sort=False)["time"].diff()
    back = steps.index[steps < pd.Timedelta(0)]
    if back.size:
        site, when = table.loc[back[0], "site"], frame.loc[back[0], "time"]
        raise TableError(f"{path}: line {back[0]}: {when} of site {site!r} comes after a later time. Sort by time.")


def _filled(frame: pd.DataFrame, column: str, path: str | os.PathLike[str]) -> Array:
    """Numbers of a column, NaN where its cell marks a gap."""
    out = np.full(len(frame), np.nan)
    held = ~frame[column].str.lower().isin(_GAPS).to_numpy()
    if held.any():
        out[held] = numbers(frame[held], column, path=path)
    return out
