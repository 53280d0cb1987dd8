"""Files of tide gauges as they stand: semicolon archives of monthly or yearly means, CSV, NetCDF. No science."""

import os
import re
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.errors import InputError, MissingFileError, TableError, UnitsError
from massfingerprint.files.netcdf import read_netcdf
from massfingerprint.files.tables import numbers, read_table

Array = NDArray[np.float64]
MISSING = -99999.0
# Bits of what a file says against a value
ATTENTION, OTHER_LEVEL, INCOMPLETE = 1, 2, 4
_FEW_DAYS = 15  # missing days of a month up to which its mean counts as whole
_GEOCENTRIC = re.compile(r"geocentric|ellipsoid", re.IGNORECASE)
_HEADER_UNIT = re.compile(r"level\s*[\[(]?\s*([a-z]+)\s*[\])]?$", re.IGNORECASE)
_GAPS = ("", "nan", "-99999", "-99999.0")
_WIDEST = 4  # columns of an archive


@dataclass(frozen=True, kw_only=True)
class GaugeFile:
    """What one file holds.

    Parameters
    ----------
    path : str
        Where it was read.
    times : Series of str (nrow,)
        Cells as written, indexed by line number (by place for NetCDF).
    level : array (nrow,)
        In ``unit``, NaN where the file marks a gap.
    unit : str
        A unit of length.
    attention : int8 array (nrow,)
        Sum of 1 (flagged for attention), 2 (not a mean sea level, such as a mean of high and low waters), 4 (made of too few data).
    pressure : array (nrow,), optional
        Air pressure in ``pressure_unit``.
    pressure_unit : str
        Empty without pressure.
    lat, lon : float
        Degrees, NaN where the file does not say.
    """

    path: str
    times: pd.Series
    level: Array
    unit: str
    attention: NDArray[np.int8]
    pressure: Array | None = None
    pressure_unit: str = ""
    lat: float = np.nan
    lon: float = np.nan


def read_gauge_file(path: str | os.PathLike[str]) -> GaugeFile:
    """Read one file of a tide gauge.

    Parameters
    ----------
    path : path
        ``.nc``: one variable on time alone in a unit of length (or one named ``level``), optional variables ``attention`` and
        ``pressure``, ``lat`` and ``lon`` without dimension. Text with semicolons: ``time; level; incomplete; flags``, mm, -99999
        for a gap, ``incomplete`` N or Y or a count of missing days, ``flags`` three digits of 0 and 1, lines that start with
        ``#`` are comments. Other text: CSV with ``time``, ``level [unit]``, optional ``flag`` and ``pressure [unit]``.

    Returns
    -------
    GaugeFile
        Numbers as written.

    Raises
    ------
    MissingFileError, DamagedFileError, TableError, UnitsError, InputError
        One line: file, line, what came, what to do; also if the file says that its levels are geocentric.
    """
    source = Path(path)
    if not source.is_file():
        raise MissingFileError(f"{source}: there is no such file. Check the path; it is taken from the current folder.")
    if source.suffix.lower() in (".nc", ".nc4"):
        return _from_netcdf(source)
    try:
        lines = source.read_bytes().decode("utf-8-sig").splitlines()
    except UnicodeDecodeError as error:
        raise TableError(f"{source}: is not UTF-8 text (byte {error.start}). Save it as UTF-8.") from error
    rows = {number: line for number, line in enumerate(lines, 1) if line.strip()}
    plain = {number: line for number, line in rows.items() if not line.lstrip().startswith("#")}
    for number, line in rows.items():
        if number not in plain or not line.lstrip()[0].isdigit():
            _refuse_geocentric(line, f"{source}: line {number}")
    if not plain:
        raise TableError(f"{source}: has no rows.")
    return _from_archive(plain, source) if ";" in next(iter(plain.values())) else _from_csv(source)


def gauge_paths(path: str | os.PathLike[str]) -> pd.DataFrame:
    """Files of several gauges, of a folder or of a table.

    Parameters
    ----------
    path : path
        A folder: each visible file in it is a gauge named as the file without its ending. A CSV: ``gauge``, ``file`` (relative
        to the table), optional ``lat``, ``lon`` in degrees.

    Returns
    -------
    DataFrame
        ``gauge file lat lon``, NaN where a place is not given; names as they stand, repeated ones too.

    Raises
    ------
    MissingFileError, TableError
        If there is nothing there, or a cell cannot be used.
    """
    source = Path(path)
    if source.is_dir():
        files = sorted(f for f in source.iterdir() if f.is_file() and not f.name.startswith("."))
        if not files:
            raise MissingFileError(f"{source}: the folder holds no files. Put one file per gauge there.")
        return pd.DataFrame({"gauge": [f.stem for f in files], "file": files, "lat": np.nan, "lon": np.nan})
    frame, _ = read_table(source, required=("gauge", "file"))
    for name in ("gauge", "file"):
        empty = frame.index[frame[name] == ""]
        if empty.size:
            raise TableError(f"{source}: line {empty[0]}: {name} is empty. Give each gauge a name and a file.")
    out = pd.DataFrame({"gauge": frame["gauge"], "file": [source.parent / cell for cell in frame["file"]]})
    for name in ("lat", "lon"):
        out[name] = _filled(frame, name, str(source)) if name in frame else np.nan
    return out.reset_index(drop=True)


def _refuse_geocentric(text: str, where: str) -> None:
    if _GEOCENTRIC.search(text):
        raise InputError(
            f"{where}: says {text.strip()!r}; a gauge must be relative to its land. Take the land motion off the level first."
        )


def _filled(frame: pd.DataFrame, column: str, path: str) -> Array:
    """Numbers of a column, NaN where its cell marks a gap."""
    out = np.full(len(frame), np.nan)
    held = ~frame[column].str.lower().isin(_GAPS).to_numpy()
    if held.any():
        out[held] = numbers(frame[held], column, path=path)
    return out


def _flags(cell: str, where: str) -> int:
    """Bits of a cell of flags: three digits of 0 and 1, one of them, or N and Y; empty is none."""
    if cell.upper() in ("", "N"):
        return 0
    if cell.upper() == "Y":
        return ATTENTION
    if not re.fullmatch(r"[01]{1,3}", cell):
        raise TableError(f"{where}: flags are {cell!r}; allowed are three digits of 0 and 1, as 001, or N and Y.")
    digits = cell.zfill(3)
    return ATTENTION * (digits[2] == "1" or digits[0] == "1") | OTHER_LEVEL * (digits[1] == "1")


def _incomplete(cell: str, where: str) -> int:
    """Bits of a cell of missing data: N, Y, or a count of days, 99 where the month was interpolated."""
    if cell.upper() in ("", "N", "Y"):
        return INCOMPLETE * (cell.upper() == "Y")
    if not cell.isdigit():
        raise TableError(f"{where}: missing data are {cell!r}; allowed are N, Y or a count of days.")
    return INCOMPLETE * (int(cell) > _FEW_DAYS)


def _from_archive(rows: dict[int, str], source: Path) -> GaugeFile:
    """Rows ``time; level; incomplete; flags`` by line number; a header may stand above."""
    cells = {number: [cell.strip() for cell in line.split(";")] for number, line in rows.items()}
    first = min(cells)
    unit = "mm"
    if not cells[first][0][:1].isdigit():
        named = _HEADER_UNIT.search(cells.pop(first)[1])
        unit = named[1] if named else unit
    if not cells:
        raise TableError(f"{source}: has a header but no rows.")
    level, attention = np.empty(len(cells)), np.zeros(len(cells), dtype=np.int8)
    for place, (number, row) in enumerate(cells.items()):
        where = f"{source}: line {number}"
        if not 2 <= len(row) <= _WIDEST + (row[-1] == ""):
            raise TableError(f"{where}: has {len(row)} cells. Write time; level; missing-data flag; attention flag.")
        level[place] = _level(row[1], where)
        incomplete, flags = [*row[2:_WIDEST], "", ""][:2]
        attention[place] = _incomplete(incomplete, where) | _flags(flags, where)
    times = pd.Series({number: row[0] for number, row in cells.items()}, dtype=object)
    return GaugeFile(path=str(source), times=times, level=level, unit=unit, attention=attention)


def _level(cell: str, where: str) -> float:
    try:
        value = float(cell)
    except ValueError as error:
        raise TableError(f"{where}: level is {cell!r}, not a number. Mark a gap by {MISSING:.0f}.") from error
    return np.nan if value == MISSING else value


def _from_csv(source: Path) -> GaugeFile:
    frame, units = read_table(source, required=("time", "level"))
    for name in ("level", "pressure"):
        if name in frame and name not in units:
            raise UnitsError(f"{source}: column {name} has no unit. Write it as '{name} [mm]' or '{name} [hPa]'.")
    flags = [0] * len(frame)
    if "flag" in frame:
        flags = [_flags(cell, f"{source}: line {line}") for line, cell in frame["flag"].items()]
    return GaugeFile(
        path=str(source),
        times=frame["time"],
        level=_filled(frame, "level", str(source)),
        unit=units["level"],
        attention=np.array(flags, dtype=np.int8),
        pressure=_filled(frame, "pressure", str(source)) if "pressure" in frame else None,
        pressure_unit=units.get("pressure", ""),
    )


def _from_netcdf(source: Path) -> GaugeFile:
    stored = read_netcdf(source)
    name = _level_name(stored, source)
    level = stored[name]
    texts = {**stored.attrs, **level.attrs}
    for key, text in {"variable": name, **texts}.items():
        _refuse_geocentric(str(text), f"{source}: {key} of {name}")
    if "time" not in stored.coords or stored["time"].dtype.kind != "M":
        raise InputError(
            f"{source}: time must be dates of the standard calendar. Give it units 'days since 1970-01-01'."
        )
    cells = np.datetime_as_string(stored["time"].values.astype("datetime64[s]"))
    values = level.values.astype(np.float64)
    pressure = stored["pressure"] if "pressure" in stored and stored["pressure"].dims == ("time",) else None
    flags = stored["attention"].values if "attention" in stored else np.zeros(values.size)
    return GaugeFile(
        path=str(source),
        times=pd.Series(cells, index=np.arange(1, cells.size + 1), dtype=object),
        level=np.where(values == MISSING, np.nan, values),
        unit=str(level.attrs["units"]),
        attention=np.nan_to_num(flags).astype(np.int8),
        pressure=None if pressure is None else pressure.values.astype(np.float64),
        pressure_unit="" if pressure is None else str(pressure.attrs.get("units", "")),
        lat=_place(stored, "lat"),
        lon=_place(stored, "lon"),
    )


def _place(stored: xr.Dataset, name: str) -> float:
    held: Any = stored[name].values if name in stored.variables else np.nan
    return float(held) if np.ndim(held) == 0 else np.nan


def _level_name(stored: xr.Dataset, source: Path) -> str:
    """Name of the variable on time alone with a unit of length; ``level`` where there are several."""
    found = []
    for name, values in stored.data_vars.items():
        if values.dims != ("time",) or "units" not in values.attrs:
            continue
        try:
            vocabulary.require(values.attrs, ("mm",), argument=str(name))
        except UnitsError:  # not a length, so not the level
            continue
        found.append(str(name))
    if len(found) == 1 or "level" in found:
        return found[0] if len(found) == 1 else "level"
    held = ", ".join(found) or "none"
    raise InputError(
        f"{source}: must hold one variable on time alone in a unit of length, found {held}. Name the one to use 'level'."
    )
