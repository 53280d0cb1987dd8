"""Tables of permanent geodetic stations: where they stand, when they observed, what they saw."""

import os
import re
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.errors import TableError, nearest_names
from massfingerprint.files.tables import numbers, read_table
from massfingerprint.mass._time import parse_times

Array = NDArray[np.float64]
COMPONENTS = ("up", "north", "east")
_IDENTIFIER = re.compile(r"^[A-Z0-9_]{4}([0-9]{2}[A-Z]{3})?$")
_PLACES = ("lat", "lon")
_CARTESIAN = ("x", "y", "z")
# Metres between a point and the ellipsoid: deeper than any trench, higher than any summit
_LOWEST, _HIGHEST = -12_000.0, 10_000.0
# Geocentric to geodetic on GRS80, the ellipsoid of the ITRF; WGS84 is the same to 0.1 mm
_TO_GEODETIC = "+proj=pipeline +step +inv +proj=cart +ellps=GRS80 +step +proj=unitconvert +xy_in=rad +xy_out=deg"
_DATE_ALONE = re.compile(r"^\d{4}-\d{2}-\d{2}$")


def read_stations(path: str | os.PathLike[str]) -> pd.DataFrame:
    """Read a list of stations.

    Parameters
    ----------
    path : path
        CSV with ``station`` (identifier of 4 or 9 characters, each once, case does not matter) and either ``lat``, ``lon``
        (geodetic, degrees north and east) with optional ``height [m]``, or ``x [m]``, ``y [m]``, ``z [m]`` (geocentric, ITRF).
        Optional ``start``, ``end`` (ISO dates or decimal years; empty: as long as the mass record) and ``gaps``, intervals
        ``START/END`` with both days included, apart by semicolons.

    Returns
    -------
    DataFrame
        ``station lat lon height start end gaps``: degrees, m above GRS80 (NaN: not given), datetime64 (NaT: not given), a
        list of pairs of datetime64 per station. Identifiers in capitals.

    Raises
    ------
    MissingFileError, TableError, UnitsError
        One line: file, line, what came, what to do.
    """
    frame, units = read_table(path, required=("station",))
    out = pd.DataFrame({"station": _identifiers(frame, str(path), once=True)}, index=frame.index)
    cartesian, plain = ([name for name in names if name in frame] for names in (_CARTESIAN, _PLACES))
    if bool(cartesian) == bool(plain):
        found = ", ".join([*plain, *cartesian]) or "none of them"
        raise TableError(f"{path}: give either lat and lon or x, y and z, found {found}.")
    missing = [name for name in (_CARTESIAN if cartesian else _PLACES) if name not in frame]
    if missing:
        raise TableError(f"{path}: lacks the column {missing[0]} beside {', '.join([*plain, *cartesian])}.")
    places = _geodetic(frame, units, str(path)) if cartesian else _degrees(frame, units, str(path))
    for name, values in zip(("lat", "lon", "height"), places, strict=True):
        out[name] = values
    for name in ("start", "end"):
        out[name] = _times(frame, name, str(path))
    backwards = out.index[out["end"] <= out["start"]]
    if backwards.size:
        raise TableError(f"{path}: line {backwards[0]}: end must lie after start. Are they swapped?")
    cells = frame["gaps"] if "gaps" in frame else pd.Series("", index=frame.index)
    out["gaps"] = pd.Series({line: _gaps(cell, line, str(path)) for line, cell in cells.items()}, dtype=object)
    return out.reset_index(drop=True)


def read_station_series(path: str | os.PathLike[str], *, stations: pd.DataFrame | None = None) -> pd.DataFrame:
    """Read epochs of stations, with what was observed there if it is given.

    Parameters
    ----------
    path : path
        CSV with ``station``, ``time`` and any of ``up [mm]``, ``north [mm]``, ``east [mm]`` (or another length) with
        ``<component>_sigma``, 1 standard uncertainty above 0. An empty cell is no observation.
    stations : DataFrame, optional
        From :func:`read_stations`; a station that is not in it is refused.

    Returns
    -------
    DataFrame
        ``station time`` and the components and sigmas that are there, mm, in order of station and time.

    Raises
    ------
    MissingFileError, TableError, UnitsError
        One line: file, line, what came, what to do.
    """
    frame, units = read_table(path, required=("station", "time"))
    out = pd.DataFrame({"station": _known(frame, str(path), stations, once=False)}, index=frame.index)
    out["time"] = parse_times(frame["time"], path=str(path), column="time")
    _observed(out, frame, units, (str(path), "mm"))
    repeated = out.index[out.duplicated(["station", "time"])]
    if repeated.size:
        row = out.loc[repeated[0]]
        raise TableError(
            f"{path}: line {repeated[0]}: {row['station']} at {str(row['time'])[:10]} stands there twice. Keep one."
        )
    return out.sort_values(["station", "time"], kind="stable").reset_index(drop=True)


def read_station_velocities(path: str | os.PathLike[str], *, stations: pd.DataFrame | None = None) -> pd.DataFrame:
    """Read observed velocities, one row a station.

    Parameters
    ----------
    path : path
        CSV with ``station`` and any of ``up [mm yr-1]``, ``north [mm yr-1]``, ``east [mm yr-1]``, each with ``<component>_sigma``,
        1 standard uncertainty above 0. An empty cell is no observation.
    stations : DataFrame, optional
        From :func:`read_stations`; a station that is not in it is refused.

    Returns
    -------
    DataFrame
        ``station`` and the components with their sigmas, mm yr-1.

    Raises
    ------
    MissingFileError, TableError, UnitsError
        One line: file, line, what came, what to do.
    """
    frame, units = read_table(path, required=("station",))
    out = pd.DataFrame({"station": _known(frame, str(path), stations, once=True)}, index=frame.index)
    _observed(out, frame, units, (str(path), "mm yr-1"))
    held = [name for name in COMPONENTS if name in out]
    if not held:
        raise TableError(f"{path}: has no velocity. Give up, north or east, as 'up [mm yr-1]'.")
    bare = [name for name in held if f"{name}_sigma" not in out]
    if bare:
        raise TableError(f"{path}: lacks the column {bare[0]}_sigma. Give the standard uncertainty of {bare[0]}.")
    return out.reset_index(drop=True)


def _identifiers(frame: pd.DataFrame, path: str, *, once: bool) -> list[str]:
    """Identifiers in capitals, checked; ``once`` refuses one that comes again."""
    seen: dict[str, Any] = {}
    for line, cell in frame["station"].items():
        name = cell.upper()
        if not _IDENTIFIER.match(name):
            raise TableError(
                f"{path}: line {line}: station {cell!r} is no identifier. Give 4 characters, as ABCD, or 9, as ABCD00XYZ."
            )
        if once and name in seen:
            raise TableError(f"{path}: line {line}: station {name} stands there twice, first in line {seen[name]}.")
        seen[name] = line
    return [cell.upper() for cell in frame["station"]]


def _known(frame: pd.DataFrame, path: str, stations: pd.DataFrame | None, *, once: bool) -> list[str]:
    """Identifiers, all of them in the list of stations if there is one."""
    names = _identifiers(frame, path, once=once)
    known = names if stations is None else [str(name) for name in stations["station"]]
    held = set(known)
    for line, name in zip(frame.index, names, strict=True):
        if name not in held:
            raise TableError(
                f"{path}: line {line}: station {name} is not in the list of stations. {nearest_names(name, known)}"
            )
    return names


def _in_unit(frame: pd.DataFrame, units: dict[str, str], name: str, how: tuple[str, str]) -> Array:
    """Numbers of a column in the wanted unit; empty cells are NaN. ``how``: path and unit."""
    path, unit = how
    if name not in units:
        raise TableError(f"{path}: column {name} has no unit. Write it as '{name} [{unit}]'.")
    _, factor = vocabulary.require({"units": units[name]}, (unit,), argument=f"{path}: column {name}")
    out = np.full(len(frame), np.nan)
    filled = (frame[name] != "").to_numpy()
    if filled.any():
        out[filled] = numbers(frame[filled], name, path=path) * factor
    return out


def _observed(out: pd.DataFrame, frame: pd.DataFrame, units: dict[str, str], how: tuple[str, str]) -> None:
    """Put components and their sigmas into a table."""
    for name in COMPONENTS:
        spread = f"{name}_sigma"
        if name in frame:
            out[name] = _in_unit(frame, units, name, how)
        if spread not in frame:
            continue
        if name not in frame:
            raise TableError(f"{how[0]}: has {spread} but no {name}. Add it, or take the column out.")
        out[spread] = _in_unit(frame, units, spread, how)
        wrong = out.index[(out[spread] <= 0.0) | (out[name].notna() & out[spread].isna())]
        if wrong.size:
            cell = frame[spread][wrong[0]]
            raise TableError(f"{how[0]}: line {wrong[0]}: {spread} is {cell!r}; an uncertainty must be more than 0.")


def _degrees(frame: pd.DataFrame, units: dict[str, str], path: str) -> tuple[Array, Array, Array]:
    """Latitude, longitude, height as given."""
    lat, lon = (numbers(frame, name, path=path) for name in _PLACES)
    for name, values, low, high in (("lat", lat, -90.0, 90.0), ("lon", lon, -180.0, 360.0)):
        wrong = np.flatnonzero((values < low) | (values > high))
        if wrong.size:
            swapped = name == "lat" and abs(values[wrong[0]]) <= 360.0 and abs(lon[wrong[0]]) <= 90.0
            cure = "Are lat and lon swapped?" if swapped else "Use degrees, north and east positive."
            raise TableError(
                f"{path}: line {frame.index[wrong[0]]}: {name} must lie between {low:g} and {high:g}, "
                f"got {frame[name].iloc[wrong[0]]}. {cure}"
            )
    height = _in_unit(frame, units, "height", (path, "m")) if "height" in frame else np.full(lat.size, np.nan)
    _check_heights(height, frame, path)
    return lat, lon, height


def _geodetic(frame: pd.DataFrame, units: dict[str, str], path: str) -> tuple[Array, Array, Array]:
    """Latitude, longitude, height of geocentric coordinates."""
    from pyproj import Transformer  # noqa: PLC0415  a tenth of a second, only where it is needed

    x, y, z = (_in_unit(frame, units, name, (path, "m")) for name in _CARTESIAN)
    empty = np.flatnonzero(~np.isfinite(x + y + z))
    if empty.size:
        raise TableError(f"{path}: line {frame.index[empty[0]]}: x, y and z must all be given.")
    lon, lat, height = (np.asarray(part) for part in Transformer.from_pipeline(_TO_GEODETIC).transform(x, y, z))
    _check_heights(height, frame, path)
    return lat, lon, height


def _check_heights(height: Array, frame: pd.DataFrame, path: str) -> None:
    wrong = np.flatnonzero((height < _LOWEST) | (height > _HIGHEST))
    if wrong.size:
        raise TableError(
            f"{path}: line {frame.index[wrong[0]]}: lies {height[wrong[0]] / 1e3:.6g} km above the ellipsoid; allowed are "
            f"{_LOWEST / 1e3:g} to {_HIGHEST / 1e3:+g} km. Are the units in the header right (m, not km or mm)?"
        )


def _times(frame: pd.DataFrame, name: str, path: str) -> NDArray[np.datetime64]:
    """Times of a column that may have empty cells, or may not be there."""
    out = np.full(len(frame), np.datetime64("NaT", "ns"))
    if name in frame:
        filled = (frame[name] != "").to_numpy()
        if filled.any():
            out[filled] = parse_times(frame[name][filled], path=path, column=name)
    return out


def _gaps(cell: str, line: Any, path: str) -> list[tuple[np.datetime64, np.datetime64]]:
    """Intervals of one cell; an end that is a date belongs to the gap with its whole day."""
    out = []
    for text in (part.strip() for part in cell.split(";") if part.strip()):
        ends = [end.strip() for end in text.split("/")]
        if len(ends) != 2 or not all(ends):
            raise TableError(f"{path}: line {line}: gap {text!r} must be START/END, such as 2008-01-01/2008-06-30.")
        start, end = (parse_times(pd.Series([value], index=[line]), path=path, column="gaps")[0] for value in ends)
        if _DATE_ALONE.match(ends[1]):
            end = end + np.timedelta64(1, "D") - np.timedelta64(1, "ns")
        if not end > start:
            raise TableError(f"{path}: line {line}: gap {text!r} must end after it starts.")
        out.append((start, end))
    return out
