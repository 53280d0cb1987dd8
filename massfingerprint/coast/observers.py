"""What an observing system sees of the true mean rise: a satellite between two latitudes, any mask, gauges, the open ocean.

A satellite measures against the Earth's centre, so it misses the sinking of the sea floor under the water that was added; a gauge
rides on its land. Neither samples the whole ocean. With S relative sea level, U the sea floor's motion, e the barystatic rise:

    seen from above / e = <S + U> / e = 1 + (<S> / e - 1) + <U> / e        sampling, ocean floor

The mean over the whole ocean is the inner product with the ocean the solver uses, so that <S> is e to rounding. Over a band of
latitude the zonal mean of a product of two band-limited fields is a polynomial in sin(latitude): Gauss-Legendre nodes in the band
integrate it exactly, without any edge of cells; the ocean is analysed again for it, to twice the degree of the solution as the
solver does, because the solver keeps no more degrees than it solves. A mask is analysed as the solver analyses its ocean.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import ducc0
import geopandas as gpd
import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.arguments import real_number
from massfingerprint.errors import GridError, InputError, SiteError
from massfingerprint.sealevel.nearfield import add_near_field, near_field, smoothed
from massfingerprint.sealevel.sites import at_sites
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import Grid, grid_of
from massfingerprint.sphere.harmonics import check_finite
from massfingerprint.sphere.points import check_sites, distance_between

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
_FIELDS = ("relative_sea_level", "sea_surface", "bedrock_up")
_SAME_OCEAN = 1e-9  # of coefficients of order 1: the same numbers analysed twice
_SAME_CELLS = 1e-3  # of a cell, as for grids
_RIPPLE = (
    2.0  # ocean in a belt as the solver sees it over that of its cells, either way; beyond, the cut series makes it up
)


@dataclass(frozen=True, kw_only=True)
class View:
    """What is looked at; several limits hold together.

    Parameters
    ----------
    south, north : float
        Latitudes in degrees between which the ocean is seen.
    mask : DataArray (lat, lon), optional
        Share of each cell that is seen, 0 to 1, on the ocean's cells in any order.
    away_from_land : float
        km: only cells whose centre is farther from land than this are seen.
    gauges : DataFrame, optional
        Columns site, lat, lon, and ``weight`` (0 or more) where the gauges do not count equally: points instead of an area; the
        other limits must not be given then.
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


def check_views(views: Mapping[str, View], ocean: xr.DataArray) -> None:
    """Refuse views that :func:`observed_means` could not use, before anything is solved for them.

    Parameters
    ----------
    views : mapping of name to View
        At least one.
    ocean : DataArray (lat, lon)
        Ocean fraction.

    Raises
    ------
    InputError, GridError, SiteError
        If there is no view, or latitudes, distance, mask or gauges of one cannot be used.
    """
    if not isinstance(views, Mapping) or not views:
        raise InputError("views: name at least one, such as {'whole ocean': View()}.")
    grid = grid_of(ocean, argument="ocean")
    for name, view in views.items():
        if not isinstance(view, View):
            raise InputError(
                f"views: {name!r} must be a View, got {type(view).__name__}. Write View(south=-66, north=66)."
            )
        _check_view(name, view, grid)


def observed_means(
    prepared: Prepared,
    ocean: xr.DataArray,
    patterns: xr.Dataset,
    views: Mapping[str, View],
    *,
    outlines: gpd.GeoDataFrame | None = None,
    load: xr.DataArray | None = None,
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
    outlines : GeoDataFrame, optional
        Columns source, geometry: what the load was spread over, for gauges within 300 km of it. Without, their values lack the
        degrees beyond the solution.
    load : DataArray (source, lat, lon), optional
        The load the patterns were solved for; needed with ``outlines``, which then needs Love numbers to degree 2048.

    Returns
    -------
    Dataset (view, source)
        ``relative_sea_level``, ``sea_surface``, ``bedrock_up``: means in mm Gt-1 per gigatonne added; ``barystatic`` () in mm Gt-1;
        ``ratio_sea_surface`` and ``ratio_relative_sea_level``: seen from above and by gauges, over the true mean;
        ``sampling`` and ``ocean_floor``: their parts, ratio_sea_surface = 1 + sampling + ocean_floor;
        ``seen_area`` (view) in m2, NaN for gauges; ``number_of_gauges`` (view), 0 for areas. Gauges have the values of
        ``coast_values``: near field within 300 km of the outlines, tapered elsewhere. The frame is that of the patterns.

    Raises
    ------
    InputError, GridError, SiteError
        If patterns, ocean or outlines do not fit, or a view cannot be used or sees nothing.
    """
    if (outlines is None) != (load is None):
        raise InputError("outlines, load: must be given together or not at all. Pass what the patterns were made from.")
    eye = _eye(prepared, ocean, patterns, views)
    lead = patterns["relative_sea_level_coefficients"].dims[:-2]
    table = np.empty((len(views), len(_FIELDS), *eye.coefficients.shape[1:-1]))
    area, count = np.full(len(views), np.nan), np.zeros(len(views), dtype=np.int64)
    for row, (name, view) in enumerate(views.items()):
        if view.gauges is None:
            table[row], area[row] = eye.means(name, view)
            continue
        count[row] = len(view.gauges)
        here = _at_gauges(prepared, patterns, view.gauges, outlines, load)
        table[row] = here @ _weights(name, view.gauges)
    out = _dataset(prepared, patterns, list(views), table, tuple(map(str, lead)))
    out["seen_area"] = ("view", area, {"units": "m2", "long_name": "ocean area that is seen"})
    out["number_of_gauges"] = ("view", count, {"units": "1", "long_name": "gauges of the view"})
    return out


@dataclass(frozen=True)
class _Eye:
    """The fields (field, ..., n) as coefficients, and the ocean they are averaged over: cells on rings, coefficients."""

    prepared: Prepared
    grid: Grid
    rings: Array
    ocean: Complex
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
            cells = float((self.rings * self._within(view)).sum() * 2.0 * np.pi / self.grid.nlon)
            _refuse_nothing(name, min(whole, cells))
            if not 1.0 / _RIPPLE < whole / cells < _RIPPLE:
                raise InputError(
                    f"views: degree {self.prepared.max_degree} cannot tell the little ocean in {name!r}. Widen it."
                )
            return sums / whole, whole * square
        whole = float(seen[0].real) * np.sqrt(4.0 * np.pi)
        _refuse_nothing(name, whole)
        return _inner(self.coefficients, seen) / whole, whole * square

    def _within(self, view: View) -> Array:
        """Sine of latitude that each ring (nlat, 1), north first, has between the latitudes of a view."""
        edges = np.linspace(90.0, -90.0, self.grid.nlat + 1)
        sines = np.sin(np.deg2rad(np.clip(edges, view.south, view.north)))
        return -np.diff(sines)[:, None]

    def _cells(self, view: View) -> Complex:
        """Coefficients of the ocean seen in each cell, as the solver analyses its ocean."""
        share = self.rings * self._within(view) / self._within(View())
        if view.mask is not None:
            share *= _on_rings(view.mask, self.grid)
        if view.away_from_land > 0.0:
            share *= self._distance_from_land > view.away_from_land
        degree = min(self.grid.band_limit, self.prepared.max_degree)
        return _transform.analyse(share, degree, self.grid.first_azimuth)

    @cached_property
    def _distance_from_land(self) -> Array:
        """Kilometres (nlat, nlon) from each cell's centre to that of the nearest cell mostly land; infinite without land."""
        grid, land = self.grid, self.rings < 0.5
        latitude, longitude = (
            np.broadcast_to(axis, land.shape)
            for axis in (
                np.sort(grid.latitudes)[::-1][:, None],
                np.rad2deg(grid.first_azimuth) + 360.0 / grid.nlon * np.arange(grid.nlon),
            )
        )
        out = np.where(land, 0.0, np.inf)
        if land.any() and not land.all():
            sea = ~land
            out[sea] = distance_between((latitude[sea], longitude[sea]), (latitude[land], longitude[land]))
        return out

    def _band(self, south: float, north: float) -> tuple[Array, float]:
        """Integrals over the unit sphere of each field (field, ...) and of 1, over the ocean between two latitudes."""
        highest = self.prepared.max_degree
        level = _transform.degree_of_count(self.ocean.size)
        sines = np.sin(np.deg2rad([south, north]))
        nodes, weights = np.polynomial.legendre.leggauss((highest + level) // 2 + 1)
        colatitude = np.arccos(0.5 * (sines.sum() + (sines[1] - sines[0]) * nodes))
        cells = int(ducc0.fft.good_size(highest + level + 1, True))
        seen = _transform.synthesise_on(self.ocean, colatitude, cells)
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


def _at_gauges(
    prepared: Prepared,
    patterns: xr.Dataset,
    gauges: pd.DataFrame,
    outlines: gpd.GeoDataFrame | None,
    load: xr.DataArray | None,
) -> Array:
    """Fields (field, ..., site) as the commands print them: tapered, with the near field where the outlines are known."""
    values = at_sites(patterns[[f"{name}_coefficients" for name in _FIELDS]], gauges)
    if outlines is None or load is None:
        return np.stack([values[f"{name}_tapered"].values for name in _FIELDS])
    frame = patterns.attrs.get("reference_frame", "")
    near = near_field(prepared, outlines, load, gauges, reference_frame=frame)
    complete = smoothed(add_near_field(values, near))
    return np.stack([complete[name].values for name in _FIELDS])


def _weights(name: str, gauges: pd.DataFrame) -> Array:
    """Share (site,) of each gauge in the mean; they sum to 1."""
    if "weight" not in gauges:
        return np.full(len(gauges), 1.0 / len(gauges))
    weights = pd.to_numeric(gauges["weight"], errors="coerce").to_numpy(dtype=np.float64)
    bad = np.flatnonzero(~(np.isfinite(weights) & (weights >= 0.0)))
    if bad.size:
        site, given = gauges["site"].iloc[bad[0]], gauges["weight"].iloc[bad[0]]
        raise SiteError(f"gauges of {name!r}: site {str(site)!r}: weight must be a number of 0 or more, got {given}.")
    if not weights.sum() > 0.0:
        raise SiteError(f"gauges of {name!r}: every weight is 0. Give at least one gauge a weight above 0.")
    return weights / weights.sum()


def _on_rings(mask: xr.DataArray, grid: Grid) -> Array:
    """Mask (nlat, nlon), north first, beginning at the same longitude as the rings of ``grid``."""
    own = grid_of(mask)
    turn = round((own.first_azimuth - grid.first_azimuth) / (2.0 * np.pi) * grid.nlon)
    return np.roll(own.to_rings(mask.transpose("lat", "lon").values), turn, axis=-1)


def _eye(prepared: Prepared, ocean: xr.DataArray, patterns: xr.Dataset, views: Mapping[str, View]) -> _Eye:
    """What the means are made from, once all is sound."""
    if not isinstance(prepared, Prepared):
        raise InputError(f"prepared: must come from prepare_solver, got {type(prepared).__name__}.")
    check_views(views, ocean)
    grid, highest = grid_of(ocean, argument="ocean"), prepared.max_degree
    rings = grid.to_rings(ocean.transpose("lat", "lon").values)
    fraction = _transform.analyse(rings, min(grid.band_limit, 2 * highest), grid.first_azimuth)
    away = np.abs(_transform.resized(fraction, highest) - prepared.operator.ocean).max()
    if (grid.nlat, grid.nlon) != (prepared.grid.nlat, prepared.grid.nlon) or not away < _SAME_OCEAN:
        raise GridError("ocean: is another one than the solver was prepared from. Pass the same DataArray to both.")
    missing = [name for name in _FIELDS if f"{name}_coefficients" not in patterns]
    if missing:
        raise InputError(f"patterns: holds no {missing[0]}_coefficients. Solve with outputs={_FIELDS}.")
    for name in _FIELDS:
        held = patterns[f"{name}_coefficients"]
        if held.attrs.get("units") != "mm Gt-1":
            raise InputError(f"patterns: {name} must be in mm Gt-1. Solve with a load in kg m-2 Gt-1.")
        found = _transform.degree_of_count(held.sizes["coefficient"])
        if found != highest:
            raise InputError(f"patterns: end at degree {found}, the solver at {highest}. Pass what this solver gave.")
    pairs = np.stack([patterns[f"{n}_coefficients"].transpose(..., "part", "coefficient").values for n in _FIELDS])
    return _Eye(prepared, grid, rings, fraction, _transform.complex_from_real(pairs))


def _check_view(name: str, view: View, grid: Grid) -> None:
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
        _weights(name, view.gauges)
    if view.mask is not None:
        _check_mask(name, view.mask, grid)


def _check_mask(name: str, mask: xr.DataArray, grid: Grid) -> None:
    argument = f"mask of {name!r}"
    if not isinstance(mask, xr.DataArray) or set(mask.dims) != {"lat", "lon"}:
        raise GridError(f"{argument}: must be a DataArray (lat, lon). Select one field first.")
    own = grid_of(mask, argument=argument)
    cells = (own.first_azimuth - grid.first_azimuth) / (2.0 * np.pi) * grid.nlon
    if (own.nlat, own.nlon) != (grid.nlat, grid.nlon) or abs(cells - round(cells)) > _SAME_CELLS:
        raise GridError(
            f"{argument}: has {own.nlat} x {own.nlon} cells, the ocean {grid.nlat} x {grid.nlon}; they must have the same "
            "cells. Interpolate it onto the ocean's lat and lon first."
        )
    check_finite(mask, argument=argument)
    low, high = float(mask.min()), float(mask.max())
    if low < 0.0 or high > 1.0:
        raise GridError(f"{argument}: shares must lie between 0 and 1, got {low:g} to {high:g}.")


def _dataset(
    prepared: Prepared, patterns: xr.Dataset, names: list[str], table: Array, lead: tuple[str, ...]
) -> xr.Dataset:
    """Means (view, field, ...) in mm Gt-1 labelled, with the ratios made of them."""
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
        out[name] = (("view", *lead), table[:, column], attrs)
    parts = {
        "ratio_sea_surface": (out["sea_surface"] / true, "seen from above, over the true mean"),
        "ratio_relative_sea_level": (out["relative_sea_level"] / true, "seen by gauges, over the true mean"),
        "sampling": (out["relative_sea_level"] / true - 1.0, "part of the ratio: not the whole ocean is seen"),
        "ocean_floor": (out["bedrock_up"] / true, "part of the ratio: the sea floor moves"),
    }
    for name, (values, meaning) in parts.items():
        out[name] = values.assign_attrs(units="1", long_name=meaning)
    out["barystatic"] = ((), true, {"units": "mm Gt-1", "long_name": "true mean per gigatonne added"})
    return out.assign_attrs(reference_frame=patterns.attrs.get("reference_frame", ""))
