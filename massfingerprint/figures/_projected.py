"""Projections of the maps, with land and cells projected once and kept, so that a map is drawn in its own coordinates."""

from dataclasses import dataclass
from functools import cache

import cartopy.crs as ccrs
import numpy as np
import shapely
from matplotlib.path import Path
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from massfingerprint.bundled import open_bundled

Array = NDArray[np.float64]
_DEGREES = ccrs.PlateCarree()
CUT = 25.0  # east: the world map is cut through Africa and Europe, no ocean is
_EDGE = 1e-6  # degrees inside the cut, where a longitude has one place only
_SEAM = 2e3  # metres: slits between pieces that the date line parts are closed
_CAP = 50.0  # latitude at which the polar panels end
_FINEST = 6e3  # metres: a tenth of a point or less on the page, finer detail of coasts only costs time


@dataclass(frozen=True)
class View:
    """One projection of the globe, or of a cap of it.

    Parameters
    ----------
    name : str
        ``world``, ``north`` or ``south``.
    first_longitude : float
        Where its cells begin.
    south, north : float
        Latitudes it shows.
    """

    name: str
    first_longitude: float
    south: float
    north: float


VIEWS = {
    "world": View("world", CUT, -90.0, 90.0),
    "north": View("north", 0.0, _CAP, 90.0),
    "south": View("south", 0.0, -90.0, -_CAP),
}


@cache
def projection(name: str) -> ccrs.Projection:
    """Equal-area projection of a view: Equal Earth (Savric et al. 2019), or Lambert's azimuthal one about a pole."""
    if name == "world":
        return ccrs.EqualEarth(central_longitude=CUT - 180.0)
    if name == "north":
        return ccrs.LambertAzimuthalEqualArea(central_longitude=-42.0, central_latitude=90.0)
    return ccrs.LambertAzimuthalEqualArea(central_longitude=0.0, central_latitude=-90.0)


def places(name: str, longitude: Array, latitude: Array) -> tuple[Array, Array]:
    """Projected coordinates of points in degrees, same shapes."""
    points = projection(name).transform_points(_DEGREES, np.asarray(longitude), np.asarray(latitude))
    return points[..., 0], points[..., 1]


@cache
def nodes(name: str, rows: int, columns: int) -> tuple[Array, Array]:
    """Projected nodes (rows + 2, columns + 2) of a view: cell centres, and the edges of the view round them.

    Cells run from its south to its north and from its first longitude eastward.
    """
    view = VIEWS[name]
    height, width = (view.north - view.south) / rows, 360.0 / columns
    latitude = view.south + height * (np.arange(-1, rows + 1) + 0.5)
    latitude[0], latitude[-1] = view.south, view.north
    longitude = view.first_longitude + width * (np.arange(-1, columns + 1) + 0.5)
    longitude[0], longitude[-1] = view.first_longitude + _EDGE, view.first_longitude + 360.0 - _EDGE
    return places(name, *np.meshgrid(longitude, latitude))


def on_nodes(cells: Array) -> Array:
    """Values (rows + 2, columns + 2) on these nodes from cells (rows, columns) that go round the globe."""
    seam = 0.5 * (cells[:, :1] + cells[:, -1:])
    wide = np.concatenate([seam, cells, seam], axis=1)
    return np.concatenate([wide[:1], wide, wide[-1:]], axis=0)


@cache
def boundary(name: str) -> Path:
    """Edge of a view as a closed path."""
    if name == "world":
        return Path(np.asarray(projection(name).boundary.coords)[:, :2])
    view = VIEWS[name]
    edge = view.south if name == "north" else view.north
    around = np.linspace(0.0, 360.0, 361)
    return Path(np.column_stack(places(name, around, np.full(361, edge))))


@cache
def land(name: str) -> Path:
    """Land of a view without Antarctica's ice shelves and with inland seas filled, as one compound path."""
    if name == "world":
        table = open_bundled("land_110m.geojson.gz").geometry.buffer(0.0).difference(_shelves(0.1))
        flat = [projection(name).project_geometry(_filled(piece), _DEGREES) for piece in table if not piece.is_empty]
    else:
        view = VIEWS[name]
        table = open_bundled("land_50m.geojson.gz").geometry.simplify(0.03).buffer(0.0)
        table = table.clip_by_rect(-180.0, view.south, 180.0, view.north)
        if name == "south":
            table = table.difference(_shelves(0.03))
        flat = [_through(name, _filled(piece)) for piece in table if not piece.is_empty]
    whole = shapely.union_all([shapely.make_valid(shape) for shape in flat])
    return _path(whole.buffer(_SEAM).buffer(-_SEAM).simplify(_FINEST))


def _shelves(tolerance: float) -> BaseGeometry:
    return open_bundled("ice_shelves_50m.geojson.gz").geometry.buffer(0.0).union_all().simplify(tolerance).buffer(0.0)


def _filled(shape: BaseGeometry) -> BaseGeometry:
    """A shape without the holes of its polygons."""
    parts = [part for part in shapely.get_parts(shape) if part.geom_type == "Polygon"]
    return shapely.union_all([shapely.Polygon(part.exterior) for part in parts])


def _through(name: str, shape: BaseGeometry) -> BaseGeometry:
    """A shape in degrees, vertex by vertex; good for a cap, where no edge crosses a cut."""
    return shapely.transform(
        shapely.segmentize(shape, 1.0), lambda points: np.column_stack(places(name, points[:, 0], points[:, 1]))
    )


def _path(shape: BaseGeometry) -> Path:
    """Rings of all polygons of a shape as one compound path."""
    polygons = [part for part in shapely.get_parts(shape) if part.geom_type == "Polygon"]
    rings = [ring for polygon in polygons for ring in (polygon.exterior, *polygon.interiors)]
    return Path.make_compound_path(*(Path(np.asarray(ring.coords)[:, :2], closed=True) for ring in rings))
