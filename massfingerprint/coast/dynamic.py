"""Sea level of an ocean model: dynamic and sterodynamic, at a coast, and what the pressure on the sea floor weighs.

Sterodynamic sea level is dynamic sea level, whose mean over the ocean is 0, plus global-mean thermosteric sea level (Gregory et al.
2019). The mean is the quadrature of the grid (``Grid.quadrature_weights``) times the ocean fraction, as everywhere in this package.
"""

from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import real_number
from massfingerprint.constants import SPHERE_RADIUS, Constant
from massfingerprint.errors import GridError, InputError
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sphere.grids import Grid, grid_of
from massfingerprint.sphere.points import check_sites

Array = NDArray[np.float64]
STANDARD_GRAVITY = Constant(9.80665, "m s-2", 0.0, "definition, CGPM 1901")
FARTHEST_CELL = 300.0  # km to the nearest cell with a value; beyond, it says nothing about the coast
_WIDEST_PRESSURE = 5e4  # Pa, 5 m of water: no monthly anomaly, but less than the air on any sea
_NO_MASS = 1e-9  # of the load's own size: what rounding leaves of a sum that is zero


def sterodynamic(
    dynamic: xr.DataArray,
    global_thermosteric: xr.DataArray,
    *,
    ocean: xr.DataArray | None = None,
    mean_removed: bool = False,
) -> xr.Dataset:
    """Sterodynamic sea level: dynamic sea level without its ocean mean, plus global-mean thermosteric sea level.

    Parameters
    ----------
    dynamic : DataArray (time, lat, lon) or (time, site)
        Dynamic sea level in a unit of length, positive = rise. A grid is regular, global and cell-centred, NaN on land at all
        times; a time without any value is a gap.
    global_thermosteric : DataArray (time)
        In a unit of length, at the same times.
    ocean : DataArray (lat, lon), optional
        Ocean fraction on the same cells; by default a cell with values is all ocean.
    mean_removed : bool
        Say True for sites: their ocean mean cannot be known from them and must have been taken off. Not for grids.

    Returns
    -------
    Dataset
        ``sterodynamic`` with the dimensions of ``dynamic``, ``global_thermosteric`` (time) and, for grids, ``removed_mean`` (time),
        all in mm.

    Raises
    ------
    InputError, UnitsError, GridError
        If dimensions, times, units, cells or the ocean do not fit, or sites come without ``mean_removed``.

    Source
    ------
    Gregory et al. 2019, Surveys in Geophysics 40.
    """
    gridded = isinstance(dynamic, xr.DataArray) and set(dynamic.dims) == {"time", "lat", "lon"}
    if not gridded and not (isinstance(dynamic, xr.DataArray) and set(dynamic.dims) == {"time", "site"}):
        found = dynamic.dims if isinstance(dynamic, xr.DataArray) else type(dynamic).__name__
        raise InputError(f"dynamic: must be a DataArray (time, lat, lon) or (time, site), got {found}.")
    if gridded == mean_removed:
        raise InputError(
            "mean_removed: must be True for sites once their model's ocean mean was taken off, and is False for grids, "
            f"whose mean is taken off here; got {mean_removed} for dimensions {dynamic.dims}."
        )
    world = _series(global_thermosteric, dynamic)
    _, factor = vocabulary.require(dynamic.attrs, ("mm",), argument="dynamic")
    order = ("time", "lat", "lon") if gridded else ("time", "site")
    field = dynamic.transpose(*order)
    if np.isinf(field.values).any():
        raise InputError("dynamic: must be finite, or NaN where there is no value, got infinity.")
    out = xr.Dataset(coords=field.coords)
    values = np.asarray(field.values, dtype=np.float64) * factor
    if gridded:
        _, share = _wet(field, ocean, "dynamic")
        mean = _ocean_mean(values, share)
        values = values - mean[:, None, None]
        out["removed_mean"] = ("time", mean, {"units": "mm", "long_name": "ocean mean taken off dynamic sea level"})
    values += world.reshape((-1, *(1,) * (len(order) - 1)))
    words = {"units": "mm", "long_name": "sterodynamic sea level", "comment": "positive = rise"}
    out["sterodynamic"] = (order, values, words)
    out["global_thermosteric"] = ("time", world, {"units": "mm", "long_name": "global-mean thermosteric sea level"})
    return out


def _series(mean: xr.DataArray, field: xr.DataArray) -> Array:
    """Millimetres (time,) at the times of the field."""
    if not isinstance(mean, xr.DataArray) or mean.dims != ("time",):
        raise InputError(
            "global_thermosteric: must be a DataArray (time), such as thermosteric of global_thermosteric()."
        )
    _, factor = vocabulary.require(mean.attrs, ("mm",), argument="global_thermosteric")
    if any("time" not in part.coords for part in (mean, field)) or not mean.indexes["time"].equals(
        field.indexes["time"]
    ):
        raise InputError(
            "global_thermosteric: must have the times of dynamic, one by one. Select or interpolate first."
        )
    return np.asarray(mean.values, dtype=np.float64) * factor


def _wet(field: xr.DataArray, ocean: xr.DataArray | None, argument: str) -> tuple[Grid, Array]:
    """Grid of a field (..., lat, lon), and weight times ocean fraction of its cells with values; the same cells at all times."""
    grid = grid_of(field, argument=argument)
    held = np.isfinite(field.values).reshape((-1, grid.nlat, grid.nlon))
    some = held.any(axis=(1, 2))
    if not some.any():
        raise InputError(f"{argument}: holds no value at all.")
    wet = held[int(np.argmax(some))]
    other = np.flatnonzero(some & (held != wet).any(axis=(1, 2)))
    if other.size:
        raise InputError(
            f"{argument}: field {other[0]} has {int(held[other[0]].sum())} cells with values, another {int(wet.sum())}; "
            "their means would not compare. Keep the cells that always have one."
        )
    share = grid.quadrature_weights * wet
    if ocean is not None:
        if not isinstance(ocean, xr.DataArray) or set(ocean.dims) != {"lat", "lon"}:
            raise InputError("ocean: must be a DataArray (lat, lon) of ocean fractions. Use ocean_fraction(spacing).")
        if not grid_of(ocean, argument="ocean").matches(grid):
            raise GridError(f"ocean: must have the cells of {argument}, in the same order. Make it for that grid.")
        fraction = ocean.transpose("lat", "lon").values
        if not ((fraction >= 0.0) & (fraction <= 1.0)).all():
            raise GridError("ocean: fractions must lie between 0 and 1 everywhere.")
        share = share * fraction
    if not share.sum() > 0.0:
        raise InputError(f"ocean: is 0 wherever {argument} has a value. Check the order of its latitudes.")
    return grid, share


def _ocean_mean(values: Array, share: Array) -> Array:
    """Mean (...) over the cells with a share; NaN where all are NaN."""
    chosen = share > 0.0
    return np.asarray(values[..., chosen] @ share[chosen] / share.sum(), dtype=np.float64)


def distances_from(place: tuple[float, float], others: tuple[Array, Array]) -> Array:
    """Great-circle distances (...) in km from a place (latitude, longitude in degrees) to others of any shape."""
    lat, lon = np.deg2rad(others[0]), np.deg2rad(others[1])
    own = np.deg2rad(place[0]), np.deg2rad(place[1])
    half = np.sin((lat - own[0]) / 2.0) ** 2 + np.cos(own[0]) * np.cos(lat) * np.sin((lon - own[1]) / 2.0) ** 2
    return np.asarray(2.0 * np.arcsin(np.sqrt(np.clip(half, 0.0, 1.0))) * SPHERE_RADIUS.value / 1e3)


def values_at_sites(grid: xr.DataArray, sites: pd.DataFrame, *, radius_km: float = 100.0) -> xr.Dataset:
    """Values of a gridded field at coasts, from the cells around each that hold values.

    Parameters
    ----------
    grid : DataArray (..., lat, lon)
        On any latitudes and longitudes in degrees, global or not; NaN on land.
    sites : DataFrame
        Columns site, lat, lon, as of ``read_sites``.
    radius_km : float
        The value is the mean, weighted by area, of the cells whose centres are no farther than this; of the nearest cell up to
        300 km where there is none. Only cells count that have a value at every time at which any has one. Land between is not seen.

    Returns
    -------
    Dataset (..., site)
        ``value`` in the field's unit; ``cells`` (site), how many; ``distance`` (site), km to the nearest of them; ``rule`` (site),
        ``mean within 100 km`` or ``nearest cell``, empty without; ``reason`` (site), why a value is NaN, else empty.

    Raises
    ------
    InputError, SiteError
        If field, sites or radius cannot be used.
    """
    table = check_sites(sites)
    allowed = f"a number of km, 0 to {FARTHEST_CELL:g}"
    radius = real_number(radius_km, argument="radius_km", allowed=allowed, low=0.0, high=FARTHEST_CELL)
    field, places = _placed(grid)
    values = np.asarray(field.values, dtype=np.float64).reshape((-1, places[0].size))
    held = np.isfinite(values)
    wet = np.flatnonzero(held[held.any(axis=1)].all(axis=0)) if held.any() else np.empty(0, dtype=np.int64)
    lead = field.dims[:-2]
    out = np.full((values.shape[0], len(table)), np.nan)
    cells, nearest = np.zeros(len(table), dtype=np.int64), np.full(len(table), np.nan)
    rule, reason = (np.full(len(table), "", dtype=object) for _ in range(2))
    for row, place in enumerate(zip(table["lat"], table["lon"], strict=True)):
        away = distances_from(place, (places[0][wet], places[1][wet]))
        if not away.size or away.min() > FARTHEST_CELL:
            far = f"the nearest is {away.min():.0f} km away" if away.size else "there is none"
            reason[row] = f"no cell with values within {FARTHEST_CELL:g} km: {far}"
            continue
        chosen = np.flatnonzero(away <= radius)
        rule[row] = f"mean within {radius:g} km" if chosen.size else "nearest cell"
        chosen = chosen if chosen.size else np.array([np.argmin(away)])
        area = np.cos(np.deg2rad(places[0][wet[chosen]]))
        out[:, row] = values[:, wet[chosen]] @ area / area.sum()
        cells[row], nearest[row] = chosen.size, away[chosen].min()
    labels = {k: v for k, v in field.coords.items() if set(v.dims) <= set(lead)}
    shape = (*field.shape[:-2], len(table))
    return _at_sites(table, (lead, labels), out.reshape(shape), grid.attrs).assign(
        cells=("site", cells, {"units": "1", "long_name": "cells that make the value"}),
        distance=("site", nearest, {"units": "km", "long_name": "distance to the nearest cell used"}),
        rule=("site", rule, {"long_name": "how the value was made"}),
        reason=("site", reason, {"long_name": "why there is no value"}),
    )


def _placed(grid: xr.DataArray) -> tuple[xr.DataArray, tuple[Array, Array]]:
    """Field (..., lat, lon), and latitude and longitude (cell,) of its cells."""
    named = isinstance(grid, xr.DataArray) and {"lat", "lon"} <= set(grid.dims) and {"lat", "lon"} <= set(grid.coords)
    if not named:
        raise InputError("grid: must be a DataArray (..., lat, lon) with both coordinates in degrees.")
    lat, lon = (np.asarray(grid[name].values, dtype=np.float64) for name in ("lat", "lon"))
    if not (np.abs(lat) <= 90.0).all() or not (np.abs(lon) <= 360.0).all():
        raise InputError("grid: lat must lie between -90 and 90 and lon between -360 and 360 degrees.")
    latitude, longitude = np.meshgrid(lat, lon, indexing="ij")
    return grid.transpose(..., "lat", "lon"), (latitude.ravel(), longitude.ravel())


def _at_sites(
    table: pd.DataFrame, lead: tuple[tuple[Any, ...], dict[Any, Any]], values: Array, attrs: dict[Any, Any]
) -> xr.Dataset:
    places = {"lat": ("site", table["lat"]), "lon": ("site", table["lon"])}
    out = xr.Dataset(coords={**lead[1], "site": table["site"].to_numpy(dtype=object), **places})
    out["value"] = ((*lead[0], "site"), values, attrs)
    return out


def load_of_bottom_pressure(
    field: xr.DataArray, *, ocean: xr.DataArray | None = None, zero_mean: bool = False
) -> xr.DataArray:
    """Surface load of an anomaly of the pressure on the sea floor, or of the air, for ``solve_fingerprints``.

    Parameters
    ----------
    field : DataArray (..., lat, lon)
        Pressure anomaly in Pa, hPa or another unit of pressure, or mass in kg m-2; positive = more mass. On a regular global grid,
        NaN on land.
    ocean : DataArray (lat, lon), optional
        Ocean fraction on the same cells, which the load is multiplied by; by default a cell with values carries it whole.
    zero_mean : bool
        Take off the mean over the ocean (of ``ocean``, else of the cells with values), so that the load carries no net mass.

    Returns
    -------
    DataArray (..., lat, lon)
        kg m-2, 0 where the field has no value: pressure over 9.80665 m s-2.

    Raises
    ------
    InputError, UnitsError, GridError
        If grid, unit or ocean cannot be used, cells with values change, values are no anomalies (above 500 hPa), or with
        ``zero_mean`` nothing says where the ocean is.
    """
    if not isinstance(field, xr.DataArray):
        raise InputError(f"field: must be a DataArray (..., lat, lon), got {type(field).__name__}.")
    unit, factor = vocabulary.require(field.attrs, ("kg m-2", "Pa"), argument="field")
    scale = factor if unit == "kg m-2" else factor / STANDARD_GRAVITY.value
    ordered = field.transpose(..., "lat", "lon")
    grid, share = _wet(ordered, ocean, "field")
    values = np.asarray(ordered.values, dtype=np.float64) * scale
    largest = float(np.nanmax(np.abs(values))) * STANDARD_GRAVITY.value
    if largest > _WIDEST_PRESSURE:
        raise InputError(
            f"field: reaches {largest / 100.0:.0f} hPa, more than an anomaly has. Take off its mean over time first."
        )
    empty = np.isnan(values).all(axis=(-2, -1))
    if empty.any():
        raise InputError(f"field: field {int(np.flatnonzero(empty.ravel())[0])} has no value. Drop empty times first.")
    if zero_mean and ocean is None and not np.isnan(values).any():
        raise InputError(
            "ocean: must be passed with zero_mean, or the field be NaN on land, to know where the ocean is."
        )
    if zero_mean:
        values = values - _ocean_mean(values, share)[..., None, None]
    load = np.nan_to_num(values) * (share / grid.quadrature_weights)
    attrs = {"units": "kg m-2", "long_name": "surface load of pressure", "comment": "positive = mass added"}
    return ordered.copy(data=load).assign_attrs(attrs).rename("surface_load")


def ratio_to_barystatic(prepared: Prepared, level: xr.DataArray, load: xr.DataArray) -> xr.DataArray:
    """Relative sea level of a load over its barystatic value; NaN for a load that carries no net mass.

    Parameters
    ----------
    prepared : Prepared
        What the level was solved with.
    level : DataArray (..., lat, lon) or (..., site)
        In m, solved for a load in kg m-2.
    load : DataArray (..., lat, lon)
        That load.

    Returns
    -------
    DataArray
        Dimensions of ``level``, no unit; finite or NaN. A net mass below 1e-9 of the mass moved is rounding, hence none.

    Raises
    ------
    InputError, UnitsError, GridError
        If the load's grid or the units do not fit.
    """
    if not isinstance(level, xr.DataArray) or not isinstance(load, xr.DataArray):
        raise InputError("level, load: must be DataArrays, of solve_fingerprints and what it was solved for.")
    _, metres = vocabulary.require(level.attrs, ("m",), argument="level")
    _, scale = vocabulary.require(load.attrs, ("kg m-2",), argument="load")
    weights = xr.DataArray(grid_of(load, argument="load").quadrature_weights, dims=("lat", "lon"))
    weights = weights * (SPHERE_RADIUS.value**2 * scale)
    mass, moved = (part.drop_vars(("lat", "lon")).transpose(..., "lat", "lon") for part in (load, abs(load)))
    net, size = (mass * weights).sum(("lat", "lon")), (moved * weights).sum(("lat", "lon"))
    mean = 1e-3 * prepared.barystatic_per_gigatonne * net * 1e-12
    ratio = (level * metres) / mean.where(abs(net) > _NO_MASS * size)
    return ratio.assign_attrs(units="1", long_name="relative sea level over its barystatic value")
