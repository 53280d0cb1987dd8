"""Outlines of spherical caps, poles and date line included."""

import geopandas as gpd
import numpy as np
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from massfingerprint.arguments import real_number, whole_number
from massfingerprint.constants import SPHERE_RADIUS
from massfingerprint.errors import RegionError
from massfingerprint.files.outlines import polygon_of_ring, region_table

_LARGEST_DISC = 10000.0  # km; a wider one would hold both poles


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
    outline = cap(lat, lon, radius_km, vertices=vertices, label=label)
    note = f"disc of {radius_km:g} km round {lat:g}, {lon:g} (latitude, longitude) on the sphere"
    return region_table([name.strip()], [outline], notes=[note])


def cap(lat: float, lon: float, radius_km: float, *, vertices: int = 360, label: str = "disc") -> BaseGeometry:
    """Outline of a spherical cap, unchecked; arguments as for `disc`."""
    radius = radius_km * 1000.0 / SPHERE_RADIUS.value
    longitudes, latitudes = _circle(float(lat), float(lon), radius=radius, vertices=vertices)
    pole = 1 if lat >= 0.0 else -1
    return polygon_of_ring(
        longitudes, latitudes, poles=(pole,) if 90.0 - abs(lat) < np.rad2deg(radius) else (), label=label
    )


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
