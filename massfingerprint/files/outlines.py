"""Outlines from disk: polygons in any coordinate reference system, made into checked polygons in longitude and latitude.

The result lies within -180 to 180 and has the plain columns source, geometry, parent, approximate, source_note.
"""

import os
from pathlib import Path

import geopandas as gpd
import numpy as np
import pandas as pd
import pyogrio
import shapely
from numpy.typing import NDArray
from pyproj import CRS, Transformer
from pyproj.exceptions import ProjError
from shapely.geometry import Point, Polygon
from shapely.geometry.base import BaseGeometry

from massfingerprint.errors import DamagedFileError, MissingFileError, RegionError, nearest_names
from massfingerprint.files._rings import (
    ToDegrees,
    check_polygon,
    followed,
    join,
    polygon_of_ring,
    polygons_only,
    split_pole_points,
    unite,
)

COLUMNS = ("source", "geometry", "parent", "approximate", "source_note")
"""Columns of every table of regions, in this order."""

_DEGREES = CRS.from_epsg(4326)
_LATITUDE_ROOM = 1e-9  # degrees


def read_regions(path: str | os.PathLike[str], *, name_field: str) -> gpd.GeoDataFrame:
    """Read outlines of mass sources from a file of polygons.

    Edges that are straight in the file's coordinate reference system stay true to a metre. Outlines may cross the date
    line or hold a pole; in geographic coordinates a step of more than 180 degrees of longitude is read as the shorter
    way round. Rows of the same name are united.

    Parameters
    ----------
    path : path
        GeoPackage, GeoJSON or shapefile with one layer of polygons.
    name_field : str
        The field that names the mass sources.

    Returns
    -------
    GeoDataFrame
        One row a name, in the order of the file: ``source``, ``geometry`` (EPSG:4326, degrees, -180 to 180),
        ``parent`` (empty), ``approximate`` (False), ``source_note`` (where it came from and what was done).

    Raises
    ------
    MissingFileError
        If there is no such file.
    DamagedFileError
        If the file cannot be read.
    RegionError
        If the coordinate reference system or the name field is missing, or an outline is empty, not a polygon, without
        area, self-crossing or off the globe; the message names the region.
    """
    file = Path(path)
    frame = _read(file)
    names = _names(frame, name_field, file.name)
    crs = _checked_crs(frame, file.name)
    outlines = [
        outline_on_globe(shape, crs, label=f"region {n!r}") for n, shape in zip(names, frame.geometry, strict=True)
    ]
    rows: dict[str, list[int]] = {}
    for position, name in enumerate(names):
        rows.setdefault(name, []).append(position)
    united = [polygons_only(shapely.union_all([outlines[i] for i in places])) for places in rows.values()]
    notes = [_note(file, crs, [frame.geometry.iloc[i] for i in places]) for places in rows.values()]
    return region_table(list(rows), united, notes=notes)


def region_table(
    names: list[str],
    geometries: list[BaseGeometry],
    *,
    notes: list[str],
    parents: list[str] | None = None,
    approximate: bool | list[bool] = False,
) -> gpd.GeoDataFrame:
    """Lay out a table of regions with the agreed columns.

    Parameters
    ----------
    names : list of str
        Mass sources.
    geometries : list of Polygon or MultiPolygon
        Degrees, EPSG:4326.
    notes : list of str
        Where each outline came from.
    parents : list of str, optional
        The region each is a part of; empty where there is none (the default).
    approximate : bool or list of bool
        Whether the outlines are approximate, one for all or one each.
    """
    data = {
        "source": pd.Series(names, dtype=object),
        "geometry": geometries,
        "parent": pd.Series([""] * len(names) if parents is None else parents, dtype=object),
        "approximate": np.broadcast_to(np.asarray(approximate, dtype=bool), len(names)).copy(),
        "source_note": pd.Series(notes, dtype=object),
    }
    return gpd.GeoDataFrame(data, geometry="geometry", crs="EPSG:4326")[list(COLUMNS)]


def outlines_of(frame: gpd.GeoDataFrame, *, argument: str = "regions") -> dict[str, BaseGeometry]:
    """Check a table of regions held in memory and return its outlines by name.

    Parameters
    ----------
    frame : GeoDataFrame
        With the columns ``source`` and the geometry, in any coordinate reference system.
    argument : str
        What to call the table in an error.

    Returns
    -------
    dict of str to Polygon or MultiPolygon
        Degrees, -180 to 180, as `read_regions` makes them.

    Raises
    ------
    RegionError
        As `read_regions`, and if two rows have the same name or there is no row.
    """
    if not isinstance(frame, gpd.GeoDataFrame) or frame.active_geometry_name is None:
        raise RegionError(
            f"{argument}: must be a GeoDataFrame of outlines, got {type(frame).__name__}. Use regions() or read_regions()."
        )
    names = _names(frame, "source", argument)
    if not names:
        raise RegionError(f"{argument}: holds no outline. Give at least one row.")
    repeated = sorted({name for name in names if names.count(name) > 1})
    if repeated:
        raise RegionError(
            f"{argument}: {', '.join(map(repr, repeated))} stands there more than once. Unite the rows first."
        )
    crs = _checked_crs(frame, argument)
    return {
        name: outline_on_globe(shape, crs, label=f"region {name!r}")
        for name, shape in zip(names, frame.geometry, strict=True)
    }


def outline_on_globe(geometry: BaseGeometry | None, crs: CRS, *, label: str) -> BaseGeometry:
    """Bring one outline to longitude and latitude, within -180 to 180.

    Parameters
    ----------
    geometry : Polygon or MultiPolygon
        In ``crs``, x or longitude first.
    crs : pyproj.CRS
        Its coordinate reference system.
    label : str
        What to call it in an error.

    Returns
    -------
    Polygon or MultiPolygon
        Valid, degrees, EPSG:4326, edges straight in the longitude-latitude plane, with edges along a pole it holds.

    Raises
    ------
    RegionError
        If it is empty, not a polygon, without area, self-crossing or off the globe.
    """
    flat = _checked_shape(geometry, label)
    if crs.is_geographic:
        _check_latitudes(flat, crs, label)
        if _is_wgs84(crs) and _is_plain(flat):
            check_polygon(flat, label)
            return flat
    else:
        check_polygon(flat, label)
    to_degrees = _transform(crs, label)
    parts = [_polygon_on_globe(part, crs, to_degrees, label) for part in shapely.get_parts(flat)]
    together = unite(parts, label)
    check_polygon(together, label)
    return together


def _read(file: Path) -> gpd.GeoDataFrame:
    if not file.exists():
        raise MissingFileError(f"{file}: there is no such file. Check the path; it is taken from the current folder.")
    try:
        layers = [str(name) for name, kind in pyogrio.list_layers(file) if kind is not None]
        if len(layers) != 1:
            found = f"{len(layers)} ({', '.join(layers)})" if layers else "none"
            raise RegionError(
                f"{file.name}: must hold one layer of polygons, got {found}. Save that layer to its own file."
            )
        frame = pyogrio.read_dataframe(file, layer=layers[0], on_invalid="ignore")
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError, UnicodeDecodeError) as error:
        reason = str(error).splitlines()[0].rstrip(".")
        raise DamagedFileError(
            f"{file.name}: cannot be read as outlines ({reason}). Give a GeoPackage, GeoJSON or shapefile."
        ) from error
    if frame.empty:
        raise RegionError(f"{file.name}: holds no outline. Give at least one polygon.")
    return frame


def _names(frame: gpd.GeoDataFrame, name_field: str, where: str) -> list[str]:
    fields = [str(column) for column in frame.columns if column != frame.active_geometry_name]
    if name_field not in fields:
        offer = nearest_names(str(name_field), fields) if fields else "It has no fields at all."
        raise RegionError(f"{where}: has no field {name_field!r} to name the regions. {offer}")
    names: list[str] = []
    for row, value in enumerate(frame[name_field].tolist(), start=1):
        name = "" if pd.isna(value) else str(value).strip()
        if not name:
            raise RegionError(f"{where}: row {row} has no name in field {name_field!r}. Name it or take the row out.")
        names.append(name)
    return names


def _checked_crs(frame: gpd.GeoDataFrame, where: str) -> CRS:
    crs = frame.crs
    if crs is None or not (crs.is_geographic or crs.is_projected):
        raise RegionError(
            f"{where}: does not say its coordinate reference system (CRS). Save it with one, for instance EPSG:4326 for "
            "longitude and latitude; a shapefile needs its .prj file beside it."
        )
    return CRS(crs)


def _checked_shape(geometry: BaseGeometry | None, label: str) -> BaseGeometry:
    if geometry is None or geometry.is_empty:
        raise RegionError(f"{label}: has no outline, or one of fewer than three corners. Draw it or take the row out.")
    if geometry.geom_type not in ("Polygon", "MultiPolygon"):
        raise RegionError(f"{label}: must be a polygon, got {geometry.geom_type}. Mass needs an area to lie on.")
    flat = shapely.force_2d(geometry)
    if not np.isfinite(shapely.get_coordinates(flat)).all():
        raise RegionError(f"{label}: its outline has a corner that is not a number. Repair it in the file first.")
    return flat


def _check_latitudes(geometry: BaseGeometry, crs: CRS, label: str) -> None:
    unit = float(crs.axis_info[0].unit_conversion_factor) * 180.0 / np.pi
    latitudes = shapely.get_coordinates(geometry)[:, 1] * unit
    worst = latitudes[np.abs(latitudes).argmax()]
    if abs(worst) > 90.0 + _LATITUDE_ROOM:
        raise RegionError(
            f"{label}: latitude {worst:g} is beyond the pole. Longitude must come first; check the order and the CRS."
        )


def _is_wgs84(crs: CRS) -> bool:
    return crs.equals(_DEGREES, ignore_axis_order=True)


def _is_plain(geometry: BaseGeometry) -> bool:
    """Whether longitudes can be taken as they are: within -180 to 180 and no step that jumps."""
    west, _, east, _ = geometry.bounds
    if west < -180.0 or east > 180.0:
        return False
    points, ring = shapely.get_coordinates(shapely.get_rings(shapely.get_parts(geometry)), return_index=True)
    step = np.abs(np.diff(points[:, 0]))
    polar = np.abs(points[:, 1]) >= 90.0 - _LATITUDE_ROOM
    return not np.any((step > 180.0) & (ring[:-1] == ring[1:]) & ~(polar[:-1] & polar[1:]))


def _transform(crs: CRS, label: str) -> ToDegrees:
    if _is_wgs84(crs):
        return lambda x, y: (x, y)
    try:
        transformer = Transformer.from_crs(crs, _DEGREES, always_xy=True)
    except ProjError as error:
        raise RegionError(
            f"{label}: cannot be brought to longitude and latitude from {crs.name!r}: {error}."
        ) from error
    return transformer.transform


def _polygon_on_globe(polygon: Polygon, crs: CRS, to_degrees: ToDegrees, label: str) -> BaseGeometry:
    shell, *holes = (
        _ring_on_globe(shapely.get_coordinates(ring), crs, to_degrees, label) for ring in shapely.get_rings(polygon)
    )
    return join(shell, holes, label)


def _ring_on_globe(points: NDArray[np.float64], crs: CRS, to_degrees: ToDegrees, label: str) -> BaseGeometry:
    if crs.is_geographic:
        longitudes, latitudes = to_degrees(points[:, 0], points[:, 1])
        return polygon_of_ring(np.asarray(longitudes), np.clip(latitudes, -90.0, 90.0), poles=None, label=label)
    longitudes, latitudes = split_pole_points(*followed(points, to_degrees, label))
    return polygon_of_ring(longitudes, latitudes, poles=_poles_inside(points, crs), label=label)


def _poles_inside(points: NDArray[np.float64], crs: CRS) -> tuple[int, ...]:
    """Which poles lie strictly inside a ring, in the plane of its own reference system."""
    back = Transformer.from_crs(_DEGREES, crs, always_xy=True)
    ring = Polygon(points)
    places = {pole: back.transform(0.0, 90.0 * pole) for pole in (-1, 1)}
    return tuple(p for p, place in places.items() if np.isfinite(place).all() and ring.contains(Point(place)))


def _note(file: Path, crs: CRS, shapes: list[BaseGeometry]) -> str:
    steps = [f"{file.name}, {crs.name}"]
    if len(shapes) > 1:
        steps.append(f"{len(shapes)} rows united")
    if crs.is_geographic and any(not _is_plain(shape) for shape in shapes):
        steps.append("longitudes unrolled, steps beyond 180 degrees read as the shorter way round")
    return "; ".join(steps)
