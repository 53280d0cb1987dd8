"""How much of each grid cell an outline covers, exactly, on the sphere (arrays and shapely geometries only).

The covered area is a sum over the edges of the outline (Green's theorem): an edge from (lon0, lat0) to (lon1, lat1), straight
in the longitude-latitude plane, sweeps the integral of lon d(sin lat) to its west. Cut at every line of the grid, each piece
belongs to one cell, and the integral of a piece has a closed form, so no edge is densified and nothing is approximated.
"""

from typing import NamedTuple

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

Array = NDArray[np.float64]
_SEAM = 1e-9  # degrees: a grid line this close to the date line is the date line
_NOISE = 1e-12  # of the best-covered cell: what rounding leaves in a cell that an edge only touches


class _Edges(NamedTuple):
    """Directed edges: ends in degrees, and +1 where the outline lies west of an edge that runs north, else -1."""

    lon0: Array
    lat0: Array
    lon1: Array
    lat1: Array
    sign: Array


def sphere_area(geometry: BaseGeometry) -> float:
    """Area of a polygonal outline on the unit sphere.

    Parameters
    ----------
    geometry : Polygon or MultiPolygon
        Degrees, within -180 to 180, edges straight in the longitude-latitude plane.

    Returns
    -------
    float
        Steradian, 0 or more; exact to rounding.
    """
    edges = _edges(geometry)
    middle = 0.5 * (edges.lon0 + edges.lon1)
    return float(np.deg2rad(np.sum(edges.sign * _swept(edges, middle)[1])))


def cell_areas(latitude_edges: Array, longitude_edges: Array) -> Array:
    """Area of every cell (nlat, nlon) on the unit sphere, steradian, from edges in degrees in either order."""
    heights = np.abs(np.diff(np.sin(np.deg2rad(latitude_edges))))
    return heights[:, None] * np.deg2rad(np.abs(np.diff(longitude_edges)))


def cell_coverage(geometry: BaseGeometry, latitude_edges: Array, longitude_edges: Array) -> Array:
    """Fraction of every cell's area that an outline covers.

    Parameters
    ----------
    geometry : Polygon or MultiPolygon
        Valid, degrees, within -180 to 180, edges straight in the longitude-latitude plane.
    latitude_edges : (nlat + 1,) array
        Degrees, in either order.
    longitude_edges : (nlon + 1,) array
        Degrees, evenly once round the globe, eastward or westward, starting anywhere.

    Returns
    -------
    (nlat, nlon) array
        0 to 1, in the order of the edges.
    """
    south_first = latitude_edges[0] < latitude_edges[-1]
    rows = latitude_edges if south_first else latitude_edges[::-1]
    columns, owner = _columns(longitude_edges)
    area = _covered_area(_edges(geometry), rows, columns)
    cells = np.zeros((rows.size - 1, longitude_edges.size - 1))
    np.add.at(cells.T, owner, area.T)
    width = 360.0 / cells.shape[1]
    cells /= width * np.diff(np.sin(np.deg2rad(rows)))[:, None]
    cells[cells < _NOISE * cells.max(initial=0.0)] = 0.0
    cells = np.minimum(cells, 1.0)
    return cells if south_first else cells[::-1]


def _columns(longitude_edges: Array) -> tuple[Array, NDArray[np.intp]]:
    """Breaks from -180 to 180, and for each interval the cell of the user's grid it belongs to."""
    turned = np.sort((longitude_edges[:-1] + 180.0) % 360.0 - 180.0)
    inner = turned[(turned > -180.0 + _SEAM) & (turned < 180.0 - _SEAM)]
    breaks = np.concatenate([[-180.0], inner, [180.0]])
    count = longitude_edges.size - 1
    step = (longitude_edges[-1] - longitude_edges[0]) / count
    middle = 0.5 * (breaks[:-1] + breaks[1:])
    return breaks, np.floor((middle - longitude_edges[0]) / step % count).astype(np.intp) % count


def _edges(geometry: BaseGeometry) -> _Edges:
    rings, owner = shapely.get_rings(shapely.get_parts(geometry), return_index=True)
    is_shell = np.diff(owner, prepend=-1) > 0
    sign = np.where(shapely.is_ccw(rings) == is_shell, 1.0, -1.0)
    points, ring = shapely.get_coordinates(rings, return_index=True)
    same = ring[:-1] == ring[1:]
    start, end = points[:-1][same], points[1:][same]
    return _Edges(start[:, 0], start[:, 1], end[:, 0], end[:, 1], sign[ring[:-1][same]])


def _swept(edges: _Edges, offset: Array) -> tuple[Array, Array]:
    """Integrals of d(sin lat) and of (lon - mean lon + offset) d(sin lat) along each edge, in 1 and degrees.

    With h half the latitude span and m the middle: 2 sin h cos m, and for the slanted part
    -(lon1 - lon0) sin m (sin h / h - cos h).
    """
    half = np.deg2rad(0.5 * (edges.lat1 - edges.lat0))
    middle = np.deg2rad(0.5 * (edges.lat1 + edges.lat0))
    rise = 2.0 * np.sin(half) * np.cos(middle)
    # the difference below cancels for short edges, where its series is exact to rounding
    short = np.abs(half) < 0.02
    safe = np.where(short, 1.0, half)
    square = half**2
    slant = np.where(short, square / 3 - square**2 / 30 + square**3 / 840, np.sin(safe) / safe - np.cos(safe))
    return rise, offset * rise - (edges.lon1 - edges.lon0) * np.sin(middle) * slant


def _covered_area(edges: _Edges, rows: Array, columns: Array) -> Array:
    """Covered area (rows - 1, columns - 1) in degrees times 1 of the (longitude, sin latitude) plane."""
    pieces = _cut(edges, rows, columns)
    shape = rows.size - 1, columns.size - 1
    middle = 0.5 * (pieces.lon0 + pieces.lon1)
    column = np.clip(np.searchsorted(columns, middle, side="right") - 1, 0, shape[1] - 1)
    row = np.clip(np.searchsorted(rows, 0.5 * (pieces.lat0 + pieces.lat1), side="right") - 1, 0, shape[0] - 1)
    rise, moment = _swept(pieces, middle - columns[column])

    def per_cell(values: Array | None) -> Array:
        cell = row * shape[1] + column
        return np.bincount(cell, weights=values, minlength=shape[0] * shape[1]).reshape(shape).astype(np.float64)

    cover = per_cell(pieces.sign * rise)
    to_the_east = np.cumsum(cover[:, ::-1], axis=1)[:, ::-1] - cover
    heights = np.diff(np.sin(np.deg2rad(rows)))[:, None]
    widths = np.diff(columns)
    # a cell no edge enters is wholly in or out: rounding to 0 or 1 keeps stray 1e-16 off the far side of the globe
    crossed = per_cell(None) > 0
    share = np.where(crossed, to_the_east / heights, np.round(to_the_east / heights))
    area = widths * heights * share + per_cell(pieces.sign * moment)
    return np.clip(area, 0.0, widths * heights)


def _cut(edges: _Edges, rows: Array, columns: Array) -> _Edges:
    """Cut every edge where it crosses a grid line."""
    count = edges.lon0.size
    by_column = _crossings(edges.lon0, edges.lon1, columns)
    by_row = _crossings(edges.lat0, edges.lat1, rows)
    every = np.arange(count)
    edge = np.concatenate([every, every, by_column[0], by_row[0]])
    at = np.concatenate([np.zeros(count), np.ones(count), by_column[1], by_row[1]])
    order = np.lexsort((at, edge))
    edge, at = edge[order], at[order]
    inside = edge[:-1] == edge[1:]
    owner, start, end = edge[:-1][inside], at[:-1][inside], at[1:][inside]

    def along(first: Array, last: Array, part: Array) -> Array:
        return (1.0 - part) * first[owner] + part * last[owner]

    return _Edges(
        along(edges.lon0, edges.lon1, start),
        along(edges.lat0, edges.lat1, start),
        along(edges.lon0, edges.lon1, end),
        along(edges.lat0, edges.lat1, end),
        edges.sign[owner],
    )


def _crossings(first: Array, last: Array, lines: Array) -> tuple[NDArray[np.intp], Array]:
    """Which edge crosses a line, and where along it (0 to 1)."""
    low = np.searchsorted(lines, np.minimum(first, last), side="right")
    high = np.searchsorted(lines, np.maximum(first, last), side="left")
    number = np.maximum(high - low, 0)
    edge = np.repeat(np.arange(first.size), number)
    nth = np.arange(edge.size) - np.repeat(np.cumsum(number) - number, number)
    crossed = lines[low[edge] + nth]
    return edge, (crossed - first[edge]) / (last[edge] - first[edge])
