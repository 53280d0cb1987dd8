"""What an observing system sees of the true mean rise: a satellite between two latitudes, any mask, gauges, the open ocean.

A satellite measures against the Earth's centre, so it misses the sinking of the sea floor under the water that was added; a gauge
rides on its land. Neither samples the whole ocean. With S relative sea level, U the sea floor's motion, e the barystatic rise:

    seen from above / e = <S + U> / e = 1 + (<S> / e - 1) + <U> / e        sampling, ocean floor

The mean over the whole ocean is the inner product with the ocean the solver uses, so that <S> is e to rounding. Over a band of
latitude the zonal mean of a product of two band-limited fields is a polynomial in sin(latitude): Gauss-Legendre nodes in the band
integrate it exactly, without any edge of cells. A mask is analysed as the solver analyses its ocean.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import ducc0
import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.arguments import real_number
from massfingerprint.errors import GridError, InputError
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import Grid, grid_of
from massfingerprint.sphere.harmonics import check_finite
from massfingerprint.sphere.points import check_sites, distance_between, values_at

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
_FIELDS = ("relative_sea_level", "sea_surface", "bedrock_up")


@dataclass(frozen=True, kw_only=True)
class View:
    """What is looked at; several limits hold together.

    Parameters
    ----------
    south, north : float
        Latitudes in degrees between which the ocean is seen.
    mask : DataArray (lat, lon), optional
        Share of each cell that is seen, 0 to 1, on the ocean's grid.
    away_from_land : float
        km: only cells whose centre is farther from land than this are seen.
    gauges : DataFrame, optional
        Columns site, lat, lon: points instead of an area; the other limits must not be given then.
    """

    south: float = -90.0
    north: float = 90.0
    mask: xr.DataArray | None = None
    away_from_land: float = 0.0
    gauges: pd.DataFrame | None = None

    @property
    def by_cells(self) -> bool:
        """Whether what is seen is told cell by cell."""
        return self.mask is not None or self.away_from_land > 0.0


def observed_means(
    prepared: Prepared, ocean: xr.DataArray, patterns: xr.Dataset, views: Mapping[str, View]
) -> xr.Dataset:
    """Mean of each field over each view, and how it compares with the true mean.

    Parameters
    ----------
    prepared : Prepared
        What the patterns were solved with.
    ocean : DataArray (lat, lon)
        The ocean fraction it was prepared from.
    patterns : Dataset (source, ...)
        From ``solve_fingerprints`` with ``relative_sea_level``, ``sea_surface`` and ``bedrock_up``, load in kg m-2 Gt-1.
    views : mapping of name to View
        ``View()`` is the whole ocean.

    Returns
    -------
    Dataset (view, source)
        ``relative_sea_level``, ``sea_surface``, ``bedrock_up``: means in mm Gt-1 per gigatonne added; ``barystatic`` () in mm Gt-1;
        ``ratio_sea_surface`` and ``ratio_relative_sea_level``: seen from above and by gauges, over the true mean;
        ``sampling`` and ``ocean_floor``: their parts, ratio_sea_surface = 1 + sampling + ocean_floor;
        ``seen_area`` (view) in m2, NaN for gauges. The frame is that of the patterns.

    Raises
    ------
    InputError, GridError, SiteError
        If patterns or ocean do not fit, or a view cannot be used or sees nothing.
    """
    grid, coefficients = _checked(prepared, ocean, patterns, views)
    lead = patterns["relative_sea_level_coefficients"].dims[:-2]
    table = np.empty((len(views), len(_FIELDS), *coefficients.shape[1:-1]))
    area = np.full(len(views), np.nan)
    eye = _Eye(prepared, ocean, grid, coefficients)
    for row, (name, view) in enumerate(views.items()):
        if view.gauges is not None:
            table[row] = _at_gauges(patterns, view)
            continue
        table[row], area[row] = eye.means(name, view)
    return _dataset(prepared, patterns, list(views), table, area, lead)


@dataclass(frozen=True)
class _Eye:
    """The fields (field, ..., n) as coefficients, and the ocean they are averaged over."""

    prepared: Prepared
    ocean: xr.DataArray
    grid: Grid
    coefficients: Complex

    def means(self, name: str, view: View) -> tuple[Array, float]:
        """Means (field, ...) and the area in m2."""
        square = float(self.prepared.love.attrs["radius"]) ** 2
        if view.by_cells:
            seen = self._cells(view)
        elif (view.south, view.north) == (-90.0, 90.0):
            seen = self.prepared.operator.ocean
        else:
            sums, whole = self._band(view.south, view.north)
            _refuse_nothing(name, whole)
            return sums / whole, whole * square
        whole = float(seen[0].real) * np.sqrt(4.0 * np.pi)
        _refuse_nothing(name, whole)
        return _inner(self.coefficients, seen) / whole, whole * square

    def _cells(self, view: View) -> Complex:
        """Coefficients of the ocean seen in each cell, as the solver analyses its ocean."""
        share = self.ocean.transpose("lat", "lon").values.astype(np.float64)
        if view.mask is not None:
            share = share * view.mask.transpose("lat", "lon").values
        if view.away_from_land > 0.0:
            share = share * (self._distance_from_land() > view.away_from_land)
        latitude = self.ocean["lat"].values[:, None]
        half = 90.0 / self.grid.nlat
        low, high = np.clip([latitude - half, latitude + half], view.south, view.north)
        sines = [np.sin(np.deg2rad(edge)) for edge in (low, high, latitude - half, latitude + half)]
        share = share * (sines[1] - sines[0]) / (sines[3] - sines[2])
        rings = self.grid.to_rings(share)
        return _transform.analyse(rings, min(self.grid.band_limit, self.prepared.max_degree), self.grid.first_azimuth)

    def _distance_from_land(self) -> Array:
        """Kilometres from each cell's centre to the nearest centre of a cell that is mostly land; infinite without land."""
        latitude, longitude = np.meshgrid(self.ocean["lat"], self.ocean["lon"], indexing="ij")
        land = self.ocean.transpose("lat", "lon").values < 0.5
        out = np.full(land.shape, np.inf)
        if land.any():
            sea = ~land
            out[sea] = distance_between((latitude[sea], longitude[sea]), (latitude[land], longitude[land]))
            out[land] = 0.0
        return out

    def _band(self, south: float, north: float) -> tuple[Array, float]:
        """Integrals over the unit sphere of each field (field, ...) and of 1, over the ocean between two latitudes."""
        highest = self.prepared.max_degree
        level = min(self.grid.band_limit, 2 * highest)
        rings = self.grid.to_rings(self.ocean.transpose("lat", "lon").values)
        ocean = _transform.analyse(rings, level, self.grid.first_azimuth)
        sines = np.sin(np.deg2rad([south, north]))
        nodes, weights = np.polynomial.legendre.leggauss((highest + level) // 2 + 1)
        colatitude = np.arccos(0.5 * (sines.sum() + (sines[1] - sines[0]) * nodes))
        cells = int(ducc0.fft.good_size(highest + level + 1, True))
        seen = _transform.synthesise_on(ocean, colatitude, cells)
        seen *= (0.5 * (sines[1] - sines[0]) * weights * 2.0 * np.pi / cells)[:, None]
        flat = self.coefficients.reshape((-1, self.coefficients.shape[-1]))
        sums = [float(np.sum(_transform.synthesise_on(row, colatitude, cells) * seen)) for row in flat]
        return np.array(sums).reshape(self.coefficients.shape[:-1]), float(seen.sum())


def _inner(fields: Complex, seen: Complex) -> Array:
    """Integrals over the unit sphere of fields (..., n) times what is seen (m,), of any degree."""
    degree = _transform.degree_of_count(fields.shape[-1])
    other = _transform.resized(seen, degree)
    flat = fields.reshape((-1, fields.shape[-1]))
    return np.array([_transform.inner_product(row, other) for row in flat]).reshape(fields.shape[:-1])


def _refuse_nothing(name: str, whole: float) -> None:
    if not whole > 1e-9:
        raise InputError(f"views: {name!r} sees no ocean. Widen its latitudes or its mask, or come nearer to land.")


def _at_gauges(patterns: xr.Dataset, view: View) -> Array:
    sites = check_sites(view.gauges, argument="gauges") if view.gauges is not None else pd.DataFrame()
    return np.stack([values_at(patterns[f"{name}_coefficients"], sites).mean(axis=-1) for name in _FIELDS])


def _checked(
    prepared: Prepared, ocean: xr.DataArray, patterns: xr.Dataset, views: Mapping[str, View]
) -> tuple[Grid, Complex]:
    """Grid of the ocean and coefficients (field, ..., n) of the patterns, once all is sound."""
    if not isinstance(prepared, Prepared):
        raise InputError(f"prepared: must come from prepare_solver, got {type(prepared).__name__}.")
    grid = grid_of(ocean, argument="ocean")
    if (grid.nlat, grid.nlon) != (prepared.grid.nlat, prepared.grid.nlon):
        held = f"{prepared.grid.nlat} x {prepared.grid.nlon}"
        raise GridError(
            f"ocean: has {grid.nlat} x {grid.nlon} cells, the solver {held}. Pass the ocean it was prepared from."
        )
    missing = [name for name in _FIELDS if f"{name}_coefficients" not in patterns]
    if missing:
        raise InputError(f"patterns: holds no {missing[0]}_coefficients. Solve with outputs={_FIELDS}.")
    for name in _FIELDS:
        if patterns[f"{name}_coefficients"].attrs.get("units") != "mm Gt-1":
            raise InputError(f"patterns: {name} must be in mm Gt-1. Solve with a load in kg m-2 Gt-1.")
    if not views:
        raise InputError("views: name at least one, such as {'whole ocean': View()}.")
    for name, view in views.items():
        _check_view(name, view, ocean)
    pairs = np.stack([patterns[f"{n}_coefficients"].transpose(..., "part", "coefficient").values for n in _FIELDS])
    return grid, _transform.complex_from_real(pairs)


def _check_view(name: str, view: View, ocean: xr.DataArray) -> None:
    for side, value in (("south", view.south), ("north", view.north)):
        real_number(value, argument=f"{side} of {name!r}", allowed="a latitude from -90 to 90", low=-90.0, high=90.0)
    if not view.south < view.north:
        raise InputError(f"views: {name!r} must have south below north, got {view.south:g} and {view.north:g}.")
    allowed = "a distance from 0 to 3000 km"
    real_number(view.away_from_land, argument=f"away_from_land of {name!r}", allowed=allowed, low=0.0, high=3000.0)
    if view.gauges is not None:
        if view.by_cells or (view.south, view.north) != (-90.0, 90.0):
            raise InputError(f"views: {name!r} has gauges and an area. Give each a view of its own.")
        check_sites(view.gauges, argument="gauges")
    if view.mask is None:
        return
    mask = view.mask
    if set(mask.dims) != {"lat", "lon"} or any(
        mask.sizes[dim] != ocean.sizes[dim] or not np.allclose(mask[dim], ocean[dim]) for dim in ("lat", "lon")
    ):
        raise GridError(
            f"mask of {name!r}: must have the ocean's own lat and lon. Interpolate it onto that grid first."
        )
    check_finite(mask, argument=f"mask of {name!r}")
    low, high = float(mask.min()), float(mask.max())
    if low < 0.0 or high > 1.0:
        raise GridError(f"mask of {name!r}: shares must lie between 0 and 1, got {low:g} to {high:g}.")


def _dataset(
    prepared: Prepared, patterns: xr.Dataset, names: list[str], table: Array, area: Array, lead: tuple[object, ...]
) -> xr.Dataset:
    held = patterns["relative_sea_level_coefficients"]
    coords = {key: value for key, value in held.coords.items() if set(value.dims) <= set(lead)}
    out = xr.Dataset(coords={"view": np.array(names, dtype=object), **coords})
    true = prepared.barystatic_per_gigatonne
    words = {
        "relative_sea_level": "relative sea level",
        "sea_surface": "geocentric sea level",
        "bedrock_up": "sea floor, up",
    }
    for column, (name, meaning) in enumerate(words.items()):
        attrs = {"units": "mm Gt-1", "long_name": f"mean {meaning} over what is seen, per gigatonne added"}
        out[name] = (("view", *map(str, lead)), table[:, column], attrs)
    parts = {
        "ratio_sea_surface": (out["sea_surface"] / true, "seen from above, over the true mean"),
        "ratio_relative_sea_level": (out["relative_sea_level"] / true, "seen by gauges, over the true mean"),
        "sampling": (out["relative_sea_level"] / true - 1.0, "part of the ratio: not the whole ocean is seen"),
        "ocean_floor": (out["bedrock_up"] / true, "part of the ratio: the sea floor moves"),
    }
    for name, (values, meaning) in parts.items():
        out[name] = values.assign_attrs(units="1", long_name=meaning)
    out["barystatic"] = ((), true, {"units": "mm Gt-1", "long_name": "true mean per gigatonne added"})
    out["seen_area"] = ("view", area, {"units": "m2", "long_name": "ocean area that is seen"})
    return out.assign_attrs(reference_frame=patterns.attrs.get("reference_frame", ""))
