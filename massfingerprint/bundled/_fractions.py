"""Exact shares of the cells of a global grid that polygons cover on the sphere."""

from collections.abc import Iterable

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import Polygon
from shapely.geometry.polygon import orient

from massfingerprint.errors import InputError

Array = NDArray[np.float64]
# Polygons that overlap, or a ring wound the wrong way, miss by whole cells; rounding stays below 1e-10.
_ALLOWED_EXCESS = 1e-6


def cell_fractions(polygons: Iterable[Polygon], spacing: float) -> Array:
    """Share of each cell's area on the sphere that polygons cover.

    Each edge is straight in longitude and latitude; the area between it and the western border of its cell is the
    closed form of the integral of longitude over sin(latitude), so nothing is sampled.

    Parameters
    ----------
    polygons : iterable of shapely.Polygon
        Without overlap, within longitudes -180..180, degrees.
    spacing : float
        Cell size, degrees; divides 180.

    Returns
    -------
    numpy.ndarray
        (180/spacing, 360/spacing), latitudes ascending from -90, longitudes from -180; 0 to 1.

    Raises
    ------
    InputError
        Polygons overlap or leave the globe.
    """
    starts, stops = _edges(polygons)
    for axis in (0, 1):
        starts, stops = _split(starts, stops, axis, spacing)
    rows, columns = round(180 / spacing), round(360 / spacing)
    middle = (starts + stops) / 2
    column = np.clip(np.floor((middle[:, 0] + 180) / spacing).astype(int), 0, columns - 1)
    row = np.clip(np.floor((middle[:, 1] + 90) / spacing).astype(int), 0, rows - 1)
    rise, west_area = _integrals(starts, stops, column * spacing - 180)
    cell, cells = row * columns + column, rows * columns
    crossed = np.bincount(cell, rise, cells).reshape(rows, columns)
    partial = np.bincount(cell, west_area, cells).reshape(rows, columns)
    east_of_cell = np.cumsum(crossed[:, ::-1], axis=1)[:, ::-1] - crossed
    width = np.radians(spacing)
    height = 2 * np.cos(np.radians(np.arange(rows) * spacing - 90 + spacing / 2)) * np.sin(width / 2)
    return _checked((partial + width * east_of_cell) / (width * height[:, None]))


def united(polygons: Iterable[Polygon]) -> list[Polygon]:
    """Unite polygons so that none overlap; what encloses no area is left out.

    Parameters
    ----------
    polygons : iterable of shapely.Polygon
        May overlap, cross or touch themselves.

    Returns
    -------
    list of shapely.Polygon
        Valid, without overlap; edges as given, straight in longitude and latitude.
    """
    areas = [part for polygon in polygons for part in shapely.get_parts(shapely.make_valid(polygon))]
    return list(shapely.get_parts(shapely.union_all([part for part in areas if shapely.get_dimensions(part) == 2])))


def _edges(polygons: Iterable[Polygon]) -> tuple[Array, Array]:
    rings = [ring for polygon in polygons for ring in _wound(polygon)]
    starts = np.concatenate([ring[:-1] for ring in rings] or [np.zeros((0, 2))])
    stops = np.concatenate([ring[1:] for ring in rings] or [np.zeros((0, 2))])
    if not (np.abs(starts) <= [180, 90]).all():
        raise InputError("polygons: a vertex lies outside longitudes -180..180 or latitudes -90..90. Cut them first.")
    return starts, stops


def _wound(polygon: Polygon) -> list[Array]:
    wound = orient(polygon)
    return [shapely.get_coordinates(ring) for ring in (wound.exterior, *wound.interiors)]


def _split(starts: Array, stops: Array, axis: int, spacing: float) -> tuple[Array, Array]:
    """Cut edges wherever they cross a grid line of one axis."""
    first_line = np.floor(np.minimum(starts, stops)[:, axis] / spacing) + 1
    last_line = np.ceil(np.maximum(starts, stops)[:, axis] / spacing) - 1
    pieces = np.maximum(last_line - first_line + 1, 0).astype(int) + 1
    edge = np.repeat(np.arange(len(starts)), pieces)
    step = np.arange(len(edge)) - np.repeat(np.cumsum(pieces) - pieces, pieces)
    rising = (stops >= starts)[edge, axis]
    line = np.where(rising, first_line[edge] + step, last_line[edge] - step) * spacing
    length = (stops - starts)[edge]
    last = step == pieces[edge] - 1
    along = np.divide(line - starts[edge, axis], length[:, axis], out=np.ones(len(edge)), where=~last)
    cut_stops = starts[edge] + along[:, None] * length
    cut_stops[:, axis] = line
    cut_stops[last] = stops[edge][last]
    cut_starts = np.concatenate([starts[:1], cut_stops[:-1]])
    cut_starts[step == 0] = starts
    return cut_starts, cut_stops


def _integrals(starts: Array, stops: Array, west: Array) -> tuple[Array, Array]:
    """Rise in sin(latitude) of each piece, and the area between it and its cell's western border, radians."""
    middle = np.radians((starts + stops) / 2)
    half_lon, half_lat = np.radians((stops - starts) / 2).T
    rise = 2 * np.cos(middle[:, 1]) * np.sin(half_lat)
    # (sin h - h cos h) / h as a series, because the difference cancels; the next term is below 1e-12 for cells of 20
    # degrees and less, and no piece is longer than a cell.
    h2 = half_lat**2
    bend = -2 * half_lon * np.sin(middle[:, 1]) * h2 / 3 * (1 - h2 / 10 * (1 - h2 / 28 * (1 - h2 / 54)))
    return rise, (middle[:, 0] - np.radians(west)) * rise + bend


def _checked(fractions: Array) -> Array:
    if fractions.min() < -_ALLOWED_EXCESS or fractions.max() > 1 + _ALLOWED_EXCESS:
        raise InputError(
            f"polygons: they cover between {fractions.min():.4g} and {fractions.max():.4g} of a cell. "
            "Overlapping polygons must be united first."
        )
    return np.clip(fractions, 0, 1)
