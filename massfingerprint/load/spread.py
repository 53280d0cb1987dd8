"""One gigatonne spread over each mass source: the share of every cell the outline covers, clipped to land."""

from collections.abc import Mapping

import geopandas as gpd
import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.constants import KILOGRAMS_PER_GIGATONNE, SPHERE_RADIUS
from massfingerprint.coverage import cell_areas, cell_coverage
from massfingerprint.errors import GridError, InputError, RegionError, nearest_names
from massfingerprint.files.outlines import outlines_of
from massfingerprint.sphere.grids import Grid, grid_of

Array = NDArray[np.float64]
_FRACTION_ROOM = 1e-6  # of float32 fractions rounded beyond 0 or 1
_DRY = 1e-6  # share of an outline's area: less land than this is rounding of the ocean fraction, not land

Weights = xr.DataArray | Mapping[str, xr.DataArray]


def spread_mass(
    regions: gpd.GeoDataFrame, grid: xr.DataArray, *, weights: Weights | None = None, allow_ocean: bool = False
) -> xr.DataArray:
    """Spread one gigatonne added over each region.

    The share of a cell is the smaller of the fraction the outline covers (exact on the sphere, edges straight in longitude
    and latitude) and the fraction that is land; times the weight, if any; normalised with the quadrature of the grid.

    Parameters
    ----------
    regions : GeoDataFrame
        Columns ``source`` and geometry, from `regions`, `read_regions` or `disc`.
    grid : DataArray (lat, lon)
        Ocean fraction, 0 to 1, on a regular global grid in either order and longitude convention: its cells are used, and
        1 minus it is the land.
    weights : DataArray (lat, lon) or (source, lat, lon), or mapping of source to DataArray (lat, lon), optional
        Relative thickness change on the same cells, 0 or more, any unit. Sources a mapping leaves out are uniform.
    allow_ocean : bool
        Spread over the whole outline, land or not.

    Returns
    -------
    DataArray (source, lat, lon)
        Surface load, kg m-2 Gt-1, positive; each source integrates to 1 Gt under ``Grid.quadrature_weights`` on the
        sphere of 6371 km. On the coordinates of ``grid``, with ``land_share(source)``.

    Raises
    ------
    GridError
        If the grid is not regular and global, or its values are not fractions.
    RegionError
        If an outline cannot be used, or lies in the open ocean and ``allow_ocean`` is False.
    InputError
        If weights are missing, negative, on other cells, or zero all over a region.
    """
    cells, ocean = _ocean_of(grid)
    outlines = outlines_of(regions)
    relative = _weights_by_source(weights, list(outlines), cells)
    areas = cell_areas(cells.latitude_edges, cells.longitude_edges)
    loads = np.empty((len(outlines), cells.nlat, cells.nlon))
    counted = np.empty(len(outlines))
    for row, (name, outline) in enumerate(outlines.items()):
        covered = cell_coverage(outline, cells.latitude_edges, cells.longitude_edges)
        share = covered if allow_ocean else np.minimum(covered, 1.0 - ocean)
        counted[row] = np.sum(share * areas) / np.sum(covered * areas)
        if counted[row] < _DRY:
            raise RegionError(
                f"region {name!r}: lies in the open ocean, no cell under it has land. "
                "Move it, or pass allow_ocean=True to put mass on water."
            )
        loads[row] = _one_gigatonne(share, relative.get(name), cells=cells, label=name)
    return _labelled(loads, list(outlines), grid=grid, land_share=counted)


def _one_gigatonne(share: Array, relative: Array | None, *, cells: Grid, label: str) -> Array:
    density = share if relative is None else share * (relative / max(float(relative.max()), np.finfo(float).tiny))
    total = float(np.sum(density * cells.quadrature_weights))
    if total <= 0.0:
        raise InputError(f"weights: are zero all over region {label!r}. Give it a weight above zero on some land.")
    return density * (KILOGRAMS_PER_GIGATONNE.value / (total * SPHERE_RADIUS.value**2))


def _labelled(loads: Array, names: list[str], *, grid: xr.DataArray, land_share: Array) -> xr.DataArray:
    share_words = "share of the outline's area that counted as land and carries the mass"
    return xr.DataArray(
        loads,
        dims=("source", "lat", "lon"),
        coords={
            "source": ("source", np.array(names, dtype=object)),
            "lat": grid["lat"],
            "lon": grid["lon"],
            "land_share": ("source", land_share, {"units": "1", "long_name": share_words}),
        },
        name="surface_load",
        attrs={"units": "kg m-2 Gt-1", "long_name": "surface load per gigatonne added"},
    )


def _ocean_of(grid: xr.DataArray) -> tuple[Grid, Array]:
    if not isinstance(grid, xr.DataArray) or set(grid.dims) != {"lat", "lon"}:
        what = f"dimensions {tuple(grid.dims)}" if isinstance(grid, xr.DataArray) else type(grid).__name__
        raise GridError(f"grid: must be an ocean-fraction DataArray (lat, lon), got {what}. Use ocean_fraction().")
    cells = grid_of(grid, argument="grid")
    values = np.asarray(grid.transpose("lat", "lon").values, dtype=np.float64)
    low, high = float(values.min()), float(values.max())
    if not (low >= -_FRACTION_ROOM and high <= 1.0 + _FRACTION_ROOM):
        raise GridError(
            f"grid: ocean fractions must lie from 0 to 1, got {low:g} to {high:g}. Fill gaps, divide percent."
        )
    return cells, np.clip(values, 0.0, 1.0)


def _weights_by_source(weights: Weights | None, names: list[str], cells: Grid) -> dict[str, Array]:
    if weights is None:
        return {}
    if isinstance(weights, xr.DataArray):
        if "source" not in weights.dims:
            values = _weight_values(weights, cells, "weights")
            return dict.fromkeys(names, values)
        if "source" not in weights.coords:
            raise InputError("weights: dimension 'source' has no names. Give it a coordinate with the region names.")
        weights = {str(name): weights.isel(source=i) for i, name in enumerate(weights["source"].values.tolist())}
        missing = [name for name in names if name not in weights]
        if missing:
            raise InputError(
                f"weights: none for region {', '.join(map(repr, missing))}. Give every region its weights."
            )
    if not isinstance(weights, Mapping):
        raise InputError(
            f"weights: must be a DataArray or a mapping of source to DataArray, got {type(weights).__name__}."
        )
    unknown = [name for name in weights if name not in names]
    if unknown:
        raise InputError(f"weights: no region is called {unknown[0]!r}. {nearest_names(str(unknown[0]), names)}")
    return {name: _weight_values(field, cells, f"weights of {name!r}") for name, field in weights.items()}


def _weight_values(field: xr.DataArray, cells: Grid, label: str) -> Array:
    if not isinstance(field, xr.DataArray) or set(field.dims) != {"lat", "lon"}:
        what = f"dimensions {tuple(field.dims)}" if isinstance(field, xr.DataArray) else type(field).__name__
        raise InputError(f"{label}: must be a DataArray (lat, lon), got {what}.")
    if not grid_of(field, argument=label).matches(cells):
        raise GridError(
            f"{label}: must lie on the cells of grid, in the same order. Interpolate or reorder them first."
        )
    values = np.asarray(field.transpose("lat", "lon").values, dtype=np.float64)
    if not np.isfinite(values).all():
        raise InputError(
            f"{label}: {np.sum(~np.isfinite(values))} cells are not numbers. Fill them, with 0 outside the region."
        )
    if values.min() < 0.0:
        raise InputError(
            f"{label}: must be 0 or more, got {values.min():g}. They share out one gigatonne; the sign comes from the ledger."
        )
    return values
