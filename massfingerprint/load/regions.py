"""Where mass is lost: named regions that come with the package, discs, and outlines of the user's own.

A named region is the bundled glaciated outlines within its domain, cut by our own divides. Published drainage basins are not
bundled, so these are approximate and say so; bring outlines of your own with `read_regions` where the border matters.
"""

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache

import geopandas as gpd
import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import Point, Polygon, box
from shapely.geometry.base import BaseGeometry

from massfingerprint.arguments import real_number, whole_number
from massfingerprint.bundled import open_bundled
from massfingerprint.constants import SPHERE_RADIUS
from massfingerprint.errors import RegionError, nearest_names
from massfingerprint.files.outlines import polygon_of_ring, polygons_only, read_regions, region_table

__all__ = ["disc", "read_regions", "regions"]

_GLACIATED = "glaciated_areas_50m.geojson.gz"
_DIVIDES = {"antarctica": "antarctic_divides.geojson"}
_LATTICE_END = -89.99  # the glaciated outlines are stored to 1/120 degree and stop at -89.9917
_LARGEST_DISC = 10000.0  # km; a wider one would hold both poles

_DOMAINS = {
    "antarctica": box(-180.0, -90.0, 180.0, -60.0),
    # down the middle of Nares Strait, Baffin Bay, Davis Strait, Denmark Strait and the Fram Strait
    "greenland": Polygon(
        (
            *((-58, 83.0), (-61, 82.0), (-64.5, 81.3), (-67, 80.6), (-70.5, 79.6), (-73.5, 78.5), (-75.5, 77.0)),
            *((-72, 75.0), (-62, 72.0), (-58, 67.0), (-53, 59.0), (-43, 58.0), (-36, 63.0), (-26, 67.5)),
            *((-15, 70.0), (-5, 77.0), (-5, 84.5), (-45, 84.5)),
        )
    ),
}


@dataclass(frozen=True)
class _Region:
    """One row of the table: the piece of a domain, after cutting by the divides, that holds a point."""

    parent: str
    domain: str
    holds: tuple[float, float]
    note: str


_REGIONS = {
    "greenland": _Region("", "greenland", (-40.0, 72.0), "the ice sheet with its peripheral glaciers"),
    "east_antarctica": _Region(
        "antarctica", "antarctica", (90.0, -80.0), "with the Transantarctic Mountains and the Foundation Ice Stream"
    ),
    "west_antarctica": _Region(
        "antarctica", "antarctica", (-120.0, -80.0), "with the Evans Ice Stream, Berkner and Roosevelt islands"
    ),
    "antarctic_peninsula": _Region(
        "antarctica",
        "antarctica",
        (-64.0, -70.0),
        "with Alexander Island and the South Shetlands, north of the Evans basin",
    ),
}


def regions(*names: str) -> gpd.GeoDataFrame:
    """Outlines of named mass sources that come with the package.

    Parameters
    ----------
    *names : str
        ``greenland``, ``east_antarctica``, ``west_antarctica``, ``antarctic_peninsula``; none: all of them.

    Returns
    -------
    GeoDataFrame
        One row a name, in the order asked for: ``source``, ``geometry`` (EPSG:4326, degrees), ``parent`` (the larger
        region it is a part of, or empty), ``approximate`` (True: the divides are drawn by hand), ``source_note``.
        Antarctica's three do not overlap and together are its glaciated areas without the ice shelves.

    Raises
    ------
    RegionError
        If a name is unknown or asked for twice.

    Source
    ------
    Natural Earth glaciated areas 1:50m; divides of this package (entries in ``bundled/source.toml``).
    """
    wanted = list(names) or list(_REGIONS)
    for name in wanted:
        if name not in _REGIONS:
            raise RegionError(f"regions: no region is called {name!r}. {nearest_names(str(name), list(_REGIONS))}")
    repeated = sorted({name for name in wanted if wanted.count(name) > 1})
    if repeated:
        raise RegionError(f"regions: {', '.join(map(repr, repeated))} is asked for more than once. Name each once.")
    rows = [_REGIONS[name] for name in wanted]
    return region_table(
        wanted,
        [_outline(name) for name in wanted],
        notes=[f"Natural Earth glaciated areas 1:50m, {_cut_note(row)}; {row.note}" for row in rows],
        parents=[row.parent for row in rows],
        approximate=True,
    )


def disc(name: str, lat: float, lon: float, radius_km: float, *, vertices: int = 360) -> gpd.GeoDataFrame:
    """Outline of a spherical cap, poles and date line included.

    Parameters
    ----------
    name : str
        The mass source.
    lat, lon : float
        Centre, degrees.
    radius_km : float
        Along the surface of the sphere of 6371 km; more than 0 and at most 10000.
    vertices : int
        Corners, all on the circle, 12 or more; with 360 the outline has 0.005 % less area than the cap.

    Returns
    -------
    GeoDataFrame
        One row with the columns of `regions`.

    Raises
    ------
    RegionError
        If the name is empty.
    InputError
        If a number is out of range.
    """
    label = f"disc {name!r}"
    if not isinstance(name, str) or not name.strip():
        raise RegionError(f"disc: name must be text that is not empty, got {name!r}.")
    bounds = {"lat": (lat, -90.0, 90.0), "lon": (lon, -360.0, 360.0), "radius_km": (radius_km, 0.0, _LARGEST_DISC)}
    for argument, (value, low, high) in bounds.items():
        allowed = f"a number from {low:g} to {high:g}"
        real_number(value, argument=f"{label}: {argument}", allowed=allowed, low=low, high=high)
    if radius_km == 0.0:
        raise RegionError(f"{label}: radius_km must be more than 0, got {radius_km!r}.")
    whole_number(vertices, argument=f"{label}: vertices", lowest=12)
    radius = radius_km * 1000.0 / SPHERE_RADIUS.value
    longitudes, latitudes = _circle(float(lat), float(lon), radius=radius, vertices=vertices)
    pole = 1 if lat >= 0.0 else -1
    outline = polygon_of_ring(
        longitudes, latitudes, poles=(pole,) if 90.0 - abs(lat) < np.rad2deg(radius) else (), label=label
    )
    note = f"disc of {radius_km:g} km round {lat:g}, {lon:g} (latitude, longitude) on the sphere"
    return region_table([name.strip()], [outline], notes=[note])


def _circle(lat: float, lon: float, *, radius: float, vertices: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Longitudes and latitudes (vertices + 1,) of a circle of angular radius in radians, closed."""
    # a quarter of a step off north, so that no corner falls on a pole, where longitude is undefined
    azimuth = 2.0 * np.pi * (np.arange(vertices) + 0.25) / vertices
    centre = np.deg2rad(lat)
    sine = np.sin(centre) * np.cos(radius) + np.cos(centre) * np.sin(radius) * np.cos(azimuth)
    east = np.sin(azimuth) * np.sin(radius)
    # not 1 - sin(centre) sin(lat): that cancels for a disc of metres
    north = np.cos(centre) * np.cos(radius) - np.sin(centre) * np.sin(radius) * np.cos(azimuth)
    longitudes = lon + np.rad2deg(np.arctan2(east, north))
    latitudes = np.rad2deg(np.arctan2(sine, np.hypot(east, north)))
    return np.append(longitudes, longitudes[0]), np.append(latitudes, latitudes[0])


def _cut_note(row: _Region) -> str:
    return (
        "cut by divides drawn by hand for this package" if row.domain in _DIVIDES else "picked by a ring drawn by hand"
    )


@cache
def _outline(name: str) -> BaseGeometry:
    row = _REGIONS[name]
    domain = _DOMAINS[row.domain]
    pieces: Iterable[BaseGeometry] = [domain]
    if row.domain in _DIVIDES:
        divides = open_bundled(_DIVIDES[row.domain]).geometry
        pieces = shapely.get_parts(shapely.polygonize([shapely.union_all([domain.boundary, *divides])]))
    place = Point(row.holds)
    piece = next(piece for piece in pieces if piece.contains(place))
    return polygons_only(shapely.union_all(shapely.intersection(_glaciated(row.domain), piece)))


@cache
def _glaciated(domain: str) -> NDArray[np.object_]:
    """Glaciated outlines within a domain; two of the stored ones touch themselves and are mended at that point."""
    shapes = shapely.make_valid(open_bundled(_GLACIATED).geometry.to_numpy())
    inside = shapes[shapely.intersects(shapes, _DOMAINS[domain])]
    return shapely.transform(inside, _reach_pole)


def _reach_pole(points: NDArray[np.float64]) -> NDArray[np.float64]:
    latitudes = np.where(points[:, 1] < _LATTICE_END, -90.0, points[:, 1])
    return np.column_stack([points[:, 0], latitudes])
