"""Rings of longitudes and latitudes made into polygons of the map from -180 to 180, date line and poles included.

A ring may cross the date line, run from 0 to 360 or go round a pole. It is first unrolled so that no step jumps by a turn;
a ring that gains a turn encloses a pole and is closed along it; the result is cut at the date line.
"""

from collections.abc import Callable
from typing import Protocol

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import MultiPolygon, Polygon, box
from shapely.geometry.base import BaseGeometry

from massfingerprint.errors import RegionError

Array = NDArray[np.float64]
_AT_POLE = 90.0 - 1e-9  # degrees: a tenth of a millimetre
_NEAR_POLE = 90.0 - 1e-3  # degrees: a hundred metres
_WHOLE_TURN = 1e-9  # degrees
_LATTICE = 2.0**-40  # degrees: a ten-thousandth of a millimetre
_THINNEST = 1e-14  # width over length of an outline: what rounding leaves of a line
_EDGE_TOLERANCE = (
    1.0  # metres between a straight edge of the file and the stored one: below any published outline's error
)
_ROUNDS = 40  # halvings; 23 bring a 5000 km edge below a metre
_METRES_PER_DEGREE = np.pi * 6.371e6 / 180.0
_WORLD = box(-180.0, -90.0, 180.0, 90.0)


class ToDegrees(Protocol):
    """Turns coordinates of a file into longitude and latitude in degrees."""

    def __call__(self, x: Array, y: Array, /) -> tuple[Array, Array]:
        """Return longitudes and latitudes of the same shape."""


def polygon_of_ring(longitudes: Array, latitudes: Array, *, poles: tuple[int, ...] | None, label: str) -> BaseGeometry:
    """Polygon of what one closed ring encloses on the globe.

    Parameters
    ----------
    longitudes, latitudes : (n,) array
        Degrees; the last point repeats the first. A step of more than half a turn is read as the shorter way round.
    poles : tuple of -1 and +1, optional
        The poles inside, if known; unknown: the pole of the hemisphere that holds a ring going round the globe.
    label : str
        What to call the ring in an error.

    Returns
    -------
    Polygon or MultiPolygon
        Degrees, within -180 to 180, with edges along the pole where it is enclosed.

    Raises
    ------
    RegionError
        If the ring crosses itself, has no area, or goes round both hemispheres.
    """
    unrolled = _unrolled(longitudes, latitudes)
    turns = round((unrolled[-1] - unrolled[0]) / 360.0)
    if abs(turns) > 1:
        raise RegionError(f"{label}: its outline winds {abs(turns)} times round the globe. Draw it once round.")
    points = np.column_stack([unrolled, latitudes])
    if turns:
        pole = 90.0 * _enclosed_pole(latitudes, poles, label)
        points = np.vstack([points, [[unrolled[-1], pole], [unrolled[0], pole]], points[:1]])
    else:
        points[-1] = points[0]
    flat = Polygon(points)
    check_polygon(flat, label)
    inside = _cut_at_date_line(flat, label)
    return shapely.difference(_WORLD, inside) if poles and len(poles) == 2 and not turns else inside


def check_polygon(polygon: BaseGeometry, label: str) -> None:
    """Refuse a polygon without area or with crossing edges, and say where."""
    west, south, east, north = polygon.bounds
    # the hull, not the outline: the two halves of a crossed outline can cancel
    if not polygon.convex_hull.area > _THINNEST * max(east - west, north - south) ** 2:
        raise RegionError(f"{label}: its outline has no area. Give a polygon, not a line or a point.")
    if not polygon.is_valid:
        reason = shapely.is_valid_reason(polygon)
        raise RegionError(f"{label}: its outline is not a simple polygon ({reason}). Repair it in the file first.")


def polygons_only(geometry: BaseGeometry) -> BaseGeometry:
    """Drop the points and lines that cutting leaves behind."""
    if geometry.geom_type in ("Polygon", "MultiPolygon"):
        return geometry
    parts = shapely.get_parts(geometry)
    kept = [shapely.get_parts(part) for part in parts if part.geom_type in ("Polygon", "MultiPolygon")]
    return MultiPolygon(list(np.concatenate(kept))) if kept else Polygon()


def join(shell: BaseGeometry, holes: list[BaseGeometry], label: str) -> BaseGeometry:
    """Take holes out of a shell; each hole must lie inside it."""
    if not holes:
        return shell
    result = polygons_only(shapely.difference(shell, shapely.union_all(holes)))
    missing = sum(hole.area for hole in holes) - (shell.area - result.area)
    if abs(missing) > 1e-9 * shell.area:
        raise RegionError(f"{label}: a hole lies outside its outline or overlaps another. Repair it in the file first.")
    return result


def unite(parts: list[BaseGeometry], label: str) -> BaseGeometry:
    """Put the parts of one outline together; they may touch, not overlap."""
    if len(parts) == 1:
        return parts[0]
    together = polygons_only(shapely.union_all(parts))
    area = sum(part.area for part in parts)
    if abs(area - together.area) > 1e-9 * area:
        raise RegionError(f"{label}: its parts overlap on the globe. Keep each piece of ground once.")
    return together


def split_pole_points(longitudes: Array, latitudes: Array) -> tuple[Array, Array]:
    """Give a ring's corner on a pole, whose longitude means nothing, the longitudes of its two neighbours.

    Only where `followed` had to come close to the pole: a cylindrical projection keeps the longitude of such a corner.
    """
    lon, lat = longitudes[:-1], latitudes[:-1]
    at_pole = np.abs(lat) >= _AT_POLE
    near = (np.abs(lat) >= _NEAR_POLE) & ~at_pole
    before, after = np.roll(near, 1), np.roll(near, -1)
    alone = at_pole & ~np.roll(at_pole, 1) & ~np.roll(at_pole, -1) & (before | after)
    times = np.where(alone, 2, 1)
    last = np.cumsum(times) - 1
    lon_out, lat_out = np.repeat(lon, times), np.repeat(lat, times)
    lon_out[last[alone] - 1] = np.roll(lon, 1)[alone]
    lon_out[last[alone]] = np.roll(lon, -1)[alone]
    return np.append(lon_out, lon_out[0]), np.append(lat_out, lat_out[0])


def followed(points: Array, to_degrees: ToDegrees, label: str) -> tuple[Array, Array]:
    """Longitudes and latitudes of a ring, with points added until straight edges of the file stay true to a metre.

    Parameters
    ----------
    points : (n, 2) array
        Coordinates in the file's own reference system.
    to_degrees : callable
        Turns them into longitude and latitude.
    label : str
        What to call the ring in an error.

    Returns
    -------
    longitudes, latitudes : (m,) array
        Degrees, m >= n.

    Raises
    ------
    RegionError
        If a point has no longitude and latitude, or an edge is torn by the projection.
    """
    degrees = _degrees(points, to_degrees, label)
    bent = np.ones(len(points) - 1, dtype=bool)
    for _ in range(_ROUNDS):
        active = np.flatnonzero(bent)
        bent[active] = _deviation(points, degrees, active, lambda p: _degrees(p, to_degrees, label)) > _EDGE_TOLERANCE
        split = np.flatnonzero(bent)
        if not split.size:
            return degrees[:, 0], degrees[:, 1]
        middle = 0.5 * (points[split] + points[split + 1])
        points = np.insert(points, split + 1, middle, axis=0)
        degrees = np.insert(degrees, split + 1, _degrees(middle, to_degrees, label), axis=0)
        bent = np.insert(bent, split, True)
    raise RegionError(f"{label}: an edge is torn by the file's projection. Store the outline in EPSG:4326.")


def _deviation(points: Array, degrees: Array, edges: NDArray[np.intp], project: Callable[[Array], Array]) -> Array:
    """Largest distance in metres, at three points of each edge, between the file's edge and the straight one in degrees."""
    worst = np.zeros(edges.size)
    step = degrees[edges + 1] - degrees[edges]
    step[:, 0] = _shorter(step[:, 0])
    for part in (0.25, 0.5, 0.75):
        true = project(points[edges] + part * (points[edges + 1] - points[edges]))
        off = true - (degrees[edges] + part * step)
        east = _shorter(off[:, 0]) * np.cos(np.deg2rad(true[:, 1]))
        worst = np.maximum(worst, _METRES_PER_DEGREE * np.hypot(east, off[:, 1]))
    return worst


def _degrees(points: Array, to_degrees: ToDegrees, label: str) -> Array:
    degrees = np.column_stack(to_degrees(points[:, 0], points[:, 1]))
    lost = np.flatnonzero(~np.isfinite(degrees).all(axis=1))
    if lost.size:
        x, y = points[lost[0]]
        raise RegionError(
            f"{label}: the point ({x:g}, {y:g}) has no longitude and latitude. "
            "Check the file's coordinate reference system."
        )
    return degrees


def _shorter(step: Array) -> Array:
    """Steps of longitude taken the shorter way round; half a turn keeps its sign."""
    return np.where(np.abs(step) <= 180.0, step, (step + 180.0) % 360.0 - 180.0)


def _unrolled(longitudes: Array, latitudes: Array) -> Array:
    given = np.diff(longitudes)
    along_pole = (np.abs(latitudes[:-1]) >= _AT_POLE) & (np.abs(latitudes[1:]) >= _AT_POLE)
    # a box right round the globe has every corner on one meridian: its edges of a whole turn are parallels, not seams
    one_meridian = np.all(np.abs(_shorter(longitudes - longitudes[0]) % 360.0) < _WHOLE_TURN)
    whole = one_meridian & (np.abs(np.abs(given) - 360.0) < _WHOLE_TURN)
    step = np.where(along_pole | whole, given, _shorter(given))
    gained = step.sum()
    if along_pole.any() and abs(gained) > 180.0:
        # longitude means nothing along the pole: that edge takes whatever closes the ring
        step[np.flatnonzero(along_pole)[0]] -= 360.0 * round(gained / 360.0)
    turns = np.concatenate([[0.0], np.cumsum(np.rint((step - given) / 360.0))])
    # on a binary lattice a shift by whole turns is exact, so the two ends of a ring round a pole meet without a gap
    return np.round(longitudes / _LATTICE) * _LATTICE + 360.0 * turns


def _enclosed_pole(latitudes: Array, poles: tuple[int, ...] | None, label: str) -> int:
    if poles and len(poles) == 1:
        return poles[0]
    if latitudes.max() < 0.0:
        return -1
    if latitudes.min() > 0.0:
        return 1
    raise RegionError(
        f"{label}: its outline goes round the globe and reaches both hemispheres, so either pole may be inside. "
        "Add corners at -180 and 180 on the pole that is meant."
    )


def _cut_at_date_line(polygon: Polygon, label: str) -> BaseGeometry:
    west, _, east, _ = polygon.bounds
    first = int(np.floor((west + 180.0 + _WHOLE_TURN) / 360.0))
    last = max(first, int(np.ceil((east - 180.0 - _WHOLE_TURN) / 360.0)))
    if first == last:
        return _moved(polygon, first)
    pieces = []
    for turn in range(first, last + 1):
        window = box(-180.0 + 360.0 * turn, -90.0, 180.0 + 360.0 * turn, 90.0)
        piece = polygons_only(shapely.intersection(polygon, window))
        if piece.area > 0.0:
            pieces.append(_moved(piece, turn))
    return unite(pieces, label)


def _moved(geometry: BaseGeometry, turn: int) -> BaseGeometry:
    def move(points: Array) -> Array:
        return np.column_stack([np.clip(points[:, 0] - 360.0 * turn, -180.0, 180.0), points[:, 1]])

    return shapely.transform(geometry, move)
