"""Tide gauges: monthly or yearly mean levels relative to the land, as one dataset."""

import os
import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import real_number
from massfingerprint.errors import InputError, SiteError, TableError
from massfingerprint.files.gauge_files import GaugeFile, gauge_paths, read_gauge_file
from massfingerprint.mass._time import check_order, decimal_years, parse_times

Array = NDArray[np.float64]
SAMPLINGS = ("monthly", "yearly")
_FLAGS = {
    "flag_masks": np.array([1, 2, 4], dtype=np.int8),
    "flag_meanings": "flagged_for_attention not_a_mean_sea_level too_few_data",
}
_WIDEST_LEVEL = 30_000.0  # mm: twice the datum of any archive; beyond it a number is a code or in another unit
_PRESSURES = (800.0, 1100.0)  # hPa, wider than the records at sea level
_WHOLE_YEAR = re.compile(r"^\d{4}(\.0*)?$")
_ROOM = 0.1  # of a step: uneven months, leap years


@dataclass(frozen=True)
class _Record:
    """One gauge: name, place, dataset on its own times, unit of its file, sampling."""

    data: xr.Dataset
    unit: str
    sampling: str


def read_gauge(
    path: str | os.PathLike[str],
    *,
    name: str | None = None,
    lat: float | None = None,
    lon: float | None = None,
    drop_flagged: bool = False,
) -> xr.Dataset:
    """Read the mean levels of one tide gauge.

    Parameters
    ----------
    path : path
        Archive of yearly or monthly means (``time; level; missing-data flag; attention flag``, mm, -99999 for a gap; time is the
        year, or year + (month - 0.5)/12), CSV (``time``, ``level [unit]``, optional ``flag``, ``pressure [unit]``) or NetCDF.
    name : str, optional
        Of the gauge; the name of the file without its ending by default.
    lat, lon : float, optional
        Degrees north and east; what the file says, or unknown, by default.
    drop_flagged : bool
        Make a gap of every value that the file flags.

    Returns
    -------
    Dataset (gauge, time)
        As :func:`read_gauges`, one gauge long.

    Raises
    ------
    MissingFileError, DamagedFileError, TableError, UnitsError, InputError
        One line: file, line, what came, what to do; also if the file says that its levels are geocentric.
    """
    return _joined([_read(path, name, (lat, lon), drop_flagged)])


def read_gauges(path: str | os.PathLike[str], *, drop_flagged: bool = False) -> xr.Dataset:
    """Read the mean levels of several tide gauges.

    Parameters
    ----------
    path : path
        A folder of files, each named as its gauge, or a CSV ``gauge``, ``file``, optional ``lat``, ``lon``; files as for
        :func:`read_gauge`.
    drop_flagged : bool
        Make a gap of every value that a file flags.

    Returns
    -------
    Dataset (gauge, time)
        ``level`` [mm] relative to the datum of each gauge, positive = sea higher against the land, NaN in gaps; ``attention``, the
        sum of 1 (flagged for attention), 2 (not a mean sea level) and 4 (too few data), 0 in gaps; ``pressure`` [hPa] if a file
        has it; coordinates ``lat``, ``lon`` (gauge), NaN if unknown; times are the middles of months, or of years where a file
        gives year and month or the year alone. Attribute ``sampling`` is ``monthly`` or ``yearly``.

    Raises
    ------
    MissingFileError, DamagedFileError, TableError, UnitsError, InputError
        As :func:`read_gauge`; also if two gauges have one name, or gauges are in different units or some monthly, some yearly.
    """
    listed = gauge_paths(path)
    repeated = listed.index[listed["gauge"].duplicated()]
    if repeated.size:
        name = listed["gauge"][repeated[0]]
        held = " and ".join(str(file) for file in listed["file"][listed["gauge"] == name])
        raise SiteError(f"{path}: two gauges have the name {name!r}: {held}. Give each its own name.")
    return _joined(
        [_read(row["file"], row["gauge"], (row["lat"], row["lon"]), drop_flagged) for _, row in listed.iterrows()]
    )


def _read(
    path: str | os.PathLike[str], name: str | None, place: tuple[float | None, float | None], drop_flagged: bool
) -> _Record:
    held = read_gauge_file(path)
    label = name or os.path.splitext(os.path.basename(held.path))[0]
    time, sampling = _times(held, label)
    _, factor = vocabulary.require({"units": held.unit}, ("mm",), argument=f"{held.path}: level")
    level = held.level * factor
    _check_range(level, held, (f"level of {label!r}", "mm"), (-_WIDEST_LEVEL, _WIDEST_LEVEL))
    attention = np.where(np.isnan(level), 0, held.attention).astype(np.int8)
    if drop_flagged:
        level = np.where(attention > 0, np.nan, level)
        attention = np.zeros_like(attention)
    lat, lon = (_degrees(*pair) for pair in zip(("lat", "lon"), place, (held.lat, held.lon), strict=True))
    words = {"units": "mm", "long_name": "mean sea level relative to the datum of the gauge"}
    flags = {"long_name": "what the archive says against the value", "units": "1", **_FLAGS}
    data = xr.Dataset(
        {
            "level": (("gauge", "time"), level[None], {**words, "comment": "positive = sea higher against the land"}),
            "attention": (("gauge", "time"), attention[None], flags),
        },
        coords={
            "gauge": np.array([label], dtype=object),
            "time": time,
            "lat": ("gauge", [lat]),
            "lon": ("gauge", [lon]),
        },
    )
    if held.pressure is not None:
        _, factor = vocabulary.require({"units": held.pressure_unit}, ("hPa",), argument=f"{held.path}: pressure")
        pressure = held.pressure * factor
        _check_range(pressure, held, (f"pressure at {label!r}", "hPa"), _PRESSURES)
        data["pressure"] = (("gauge", "time"), pressure[None], {"units": "hPa", "long_name": "air pressure"})
    return _Record(data, held.unit, sampling)


def _times(held: GaugeFile, name: str) -> tuple[NDArray[np.datetime64], str]:
    """Times in order, and how they are sampled; a bare year is the middle of it."""
    if held.times.map(lambda cell: bool(_WHOLE_YEAR.match(cell))).all():
        time = decimal_years(np.asarray(held.times, dtype=np.float64) + 0.5)
    else:
        time = parse_times(held.times, path=held.path, column="time")
    check_order(time, held.times.index.to_numpy(), path=held.path, source=name)
    return time, sampling_of(time, argument=held.path)


def sampling_of(time: NDArray[np.datetime64], *, argument: str) -> str:
    """Return ``monthly`` or ``yearly``, whichever the usual step (at least two times, ascending) is.

    Raises
    ------
    InputError
        If it is neither.
    """
    if time.size < 2:
        raise InputError(f"{argument}: holds {time.size} epoch, two at least are needed. Give a longer record.")
    days = float(np.median(np.diff(time) / np.timedelta64(1, "D")))
    for name, usual in zip(SAMPLINGS, (365.25 / 12.0, 365.25), strict=True):
        if abs(days / usual - 1.0) < _ROOM:
            return name
    raise InputError(f"{argument}: epochs are usually {days:.1f} days apart; allowed are monthly or yearly means.")


def _check_range(values: Array, held: GaugeFile, what: tuple[str, str], bounds: tuple[float, float]) -> None:
    """Refuse numbers that cannot be what they are called. ``what``: name and unit."""
    wrong = np.flatnonzero(~np.isnan(values) & ~((values >= bounds[0]) & (values <= bounds[1])))
    if wrong.size:
        raise TableError(
            f"{held.path}: line {held.times.index[wrong[0]]}: {what[0]} is {values[wrong[0]]:g} {what[1]}; allowed are "
            f"{bounds[0]:g} to {bounds[1]:g}. Mark gaps by -99999, or is the unit another?"
        )


def _degrees(name: str, given: float | None, stored: float) -> float:
    """A coordinate as given, else as stored, else NaN."""
    value = stored if given is None or pd.isna(given) else given
    if np.isnan(value):
        return float("nan")
    low, high = (-90.0, 90.0) if name == "lat" else (-180.0, 360.0)
    return real_number(value, argument=name, allowed=f"degrees from {low:g} to {high:g}", low=low, high=high)


def _joined(records: Sequence[_Record]) -> xr.Dataset:
    """Gauges beside each other on all times that any of them has."""
    first = records[0]
    for record in records[1:]:
        for word, own, other in (("in", record.unit, first.unit), ("of", record.sampling, first.sampling)):
            if own != other:
                names = [str(held.data["gauge"].values[0]) for held in (record, first)]
                kind = "unit" if word == "in" else "sampling"
                raise InputError(
                    f"gauges: {names[0]!r} has the {kind} {own}, {names[1]!r} {other}. Read gauges of one {kind} together."
                )
    parts = [record.data for record in records]
    if any("pressure" in part for part in parts):
        words = {"units": "hPa", "long_name": "air pressure"}
        parts = [p if "pressure" in p else p.assign(pressure=(p["level"] * np.nan).assign_attrs(words)) for p in parts]
    out = xr.concat(parts, dim="gauge", join="outer", fill_value={"attention": np.int8(0)}, combine_attrs="override")
    out["lat"].attrs = {"units": "degrees_north", "long_name": "latitude"}
    out["lon"].attrs = {"units": "degrees_east", "long_name": "longitude"}
    return out.sortby("time").assign_attrs(sampling=first.sampling, reference="land beside the gauge")
