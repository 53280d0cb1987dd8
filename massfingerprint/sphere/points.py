"""Named sites, and fields evaluated exactly at their coordinates."""

import os

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.constants import SPHERE_RADIUS
from massfingerprint.errors import SiteError
from massfingerprint.files.tables import numbers, read_table
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import Grid

Array = NDArray[np.float64]
_COLUMNS = ("site", "lat", "lon")


def check_sites(sites: pd.DataFrame, *, argument: str = "sites") -> pd.DataFrame:
    """Return the columns site, lat, lon of a site table once they are sound.

    Parameters
    ----------
    sites : DataFrame
        Columns ``site`` (unique names), ``lat`` (-90 to 90) and ``lon`` (-180 to 360), degrees.
    argument : str
        What to call the table in an error.

    Raises
    ------
    SiteError
        If a column is missing, a coordinate is impossible, lat and lon look swapped, or a name stands there twice.
    """
    missing = [name for name in _COLUMNS if name not in sites.columns]
    if missing:
        found = ", ".join(str(name) for name in sites.columns)
        raise SiteError(
            f"{argument}: lacks the column {missing[0]}; found {found}. Name the columns site, lat and lon."
        )
    if sites.empty:
        raise SiteError(f"{argument}: holds no sites.")
    out = pd.DataFrame({"site": sites["site"].astype(str).to_numpy(dtype=object)})
    for axis in ("lat", "lon"):
        values = pd.to_numeric(sites[axis], errors="coerce").to_numpy(dtype=np.float64)
        _check_axis(values, axis, sites, argument)
        out[axis] = values
    repeated = out["site"][out["site"].duplicated()]
    if not repeated.empty:
        raise SiteError(f"{argument}: site {repeated.iloc[0]!r} stands there twice. Give each place its own name.")
    return out


def _check_axis(values: Array, axis: str, sites: pd.DataFrame, argument: str) -> None:
    low, high = (-90.0, 90.0) if axis == "lat" else (-180.0, 360.0)
    bad = np.flatnonzero(~((values >= low) & (values <= high)))
    if not bad.size:
        return
    first = bad[0]
    name, given = sites["site"].iloc[first], sites[axis].iloc[first]
    other = pd.to_numeric(sites["lon"], errors="coerce").to_numpy(dtype=np.float64)[first]
    swapped = axis == "lat" and abs(values[first]) <= 360.0 and abs(other) <= 90.0
    cure = "Are lat and lon swapped?" if swapped else "Use degrees, north and east positive."
    raise SiteError(
        f"{argument}: site {str(name)!r}: {axis} must lie between {low:g} and {high:g}, got {given}. {cure}"
    )


def read_sites(path: str | os.PathLike[str]) -> pd.DataFrame:
    """Read named sites from a CSV file.

    Parameters
    ----------
    path : path
        Comma-separated with columns ``site``, ``lat``, ``lon`` (degrees); more columns are left alone.

    Returns
    -------
    DataFrame
        Columns site, lat, lon.

    Raises
    ------
    MissingFileError, TableError, SiteError
        If the file, a column, a number or a coordinate cannot be used.
    """
    frame, _ = read_table(path, required=_COLUMNS)
    empty = frame.index[frame["site"] == ""]
    if empty.size:
        raise SiteError(f"{path}: line {empty[0]}: site is empty. Give each place a name.")
    table = pd.DataFrame(
        {"site": frame["site"], "lat": numbers(frame, "lat", path=path), "lon": numbers(frame, "lon", path=path)}
    )
    return check_sites(table, argument=str(path))


def values_at(coefficients: xr.DataArray, sites: pd.DataFrame) -> Array:
    """Values (..., nsite) of real coefficients (..., part, coefficient) at sites, exact to rounding."""
    alm = _transform.complex_from_real(np.asarray(coefficients.values, dtype=np.float64))
    colatitude = np.deg2rad(90.0 - sites["lat"].to_numpy(dtype=np.float64))
    azimuth = np.deg2rad(sites["lon"].to_numpy(dtype=np.float64) % 360.0)
    return _transform.synthesise_at(alm, colatitude, azimuth)


def gradients_at(coefficients: xr.DataArray, sites: pd.DataFrame) -> Array:
    """Surface gradient on the unit sphere (..., 2, nsite), north and east, of real coefficients (..., part, coefficient)."""
    alm = _transform.complex_from_real(np.asarray(coefficients.values, dtype=np.float64))
    colatitude = np.deg2rad(90.0 - sites["lat"].to_numpy(dtype=np.float64))
    azimuth = np.deg2rad(sites["lon"].to_numpy(dtype=np.float64) % 360.0)
    return _transform.gradient_at(alm, colatitude, azimuth)


def _unit_vectors(lat: Array, lon: Array) -> Array:
    phi, lam = np.deg2rad(lat), np.deg2rad(lon)
    return np.stack([np.cos(phi) * np.cos(lam), np.cos(phi) * np.sin(lam), np.sin(phi)], axis=-1)


def distance_between(places: tuple[Array, Array], others: tuple[Array, Array]) -> Array:
    """Great-circle distance (n,) in km from places (latitudes, longitudes in degrees) to the nearest of the others."""
    from scipy.spatial import cKDTree  # noqa: PLC0415  half a second, only when places are searched

    chord, _ = cKDTree(_unit_vectors(*others)).query(_unit_vectors(*places))
    return np.asarray(2.0 * np.arcsin(np.clip(chord / 2.0, 0.0, 1.0)) * SPHERE_RADIUS.value / 1e3, dtype=np.float64)


def distance_to_cells(mask: NDArray, grid: Grid, sites: pd.DataFrame) -> Array:
    """Great-circle distance (nsite,) in km from sites to the nearest marked cell of a mask (nlat, nlon).

    Measured to the cell's centre less half its diagonal, so it never overstates; 0 inside, infinite where nothing is marked.
    """
    rows, columns = np.nonzero(mask)
    if rows.size == 0:
        return np.full(len(sites), np.inf)
    from scipy.spatial import cKDTree  # noqa: PLC0415  half a second, only when masks are searched

    tree = cKDTree(_unit_vectors(grid.latitudes[rows], grid.longitudes[columns]))
    chord, _ = tree.query(_unit_vectors(sites["lat"].to_numpy(), sites["lon"].to_numpy()))
    angle = 2.0 * np.arcsin(np.clip(chord / 2.0, 0.0, 1.0))
    half_diagonal = np.deg2rad(0.5 * np.hypot(180.0 / grid.nlat, 360.0 / grid.nlon))
    return np.maximum(angle - half_diagonal, 0.0) * SPHERE_RADIUS.value / 1e3
