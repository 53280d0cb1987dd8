"""The named regions as the bundled boundary files describe them, and how an outline comes from rings, divides and discs.

``region_boundaries.geojson`` holds three kinds of feature. A *domain* is a ring round a region of its own. A *divide* is a line
that cuts the region it names. A *part* is what its parent's cut leaves around one or more points, so siblings cannot overlap and
together are their parent. ``glacier_discs.geojson`` holds discs at ranges that the glaciated outlines leave out.
"""

from dataclasses import dataclass
from functools import cache

import geopandas as gpd
import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import MultiPolygon
from shapely.geometry.base import BaseGeometry

from massfingerprint.bundled import open_bundled
from massfingerprint.files.outlines import polygons_only
from massfingerprint.load.discs import cap

_BOUNDARIES = "region_boundaries.geojson"
_DISCS = "glacier_discs.geojson"
_GLACIATED = "glaciated_areas_50m.geojson.gz"
_LATTICE_END = -89.99  # the glaciated outlines are stored to 1/120 degree and stop at -89.9917

_TAKEN = {
    "ice": "Natural Earth glaciated areas 1:50m",
    "detached": "Natural Earth glaciated areas 1:50m without the sheet",
    "discs": "",
    "nothing": "no ice",
}


@dataclass(frozen=True)
class NamedRegion:
    """One row of the catalogue.

    ``shape`` is the ring of a domain, or the points that a part holds; ``takes`` says what counts inside: the glaciated outlines
    (ice), those without the largest (detached), only discs, or nothing.
    """

    name: str
    title: str
    parent: str
    kind: str
    takes: str
    approximate: bool
    note: str
    shape: BaseGeometry

    @property
    def source_note(self) -> str:
        """What the outline is made of, for the table of regions."""
        steps = [_TAKEN[self.takes]] if _TAKEN[self.takes] else []
        if self.kind == "part":
            steps.append("cut by divides drawn by hand for this package")
        elif self.takes in ("ice", "detached"):
            steps.append("picked by a ring drawn by hand")
        if _discs_of(self.name):
            steps.append(f"{len(_discs_of(self.name))} discs drawn by hand")
        return f"{self.title}: {', '.join(steps)}; {self.note}"


@cache
def catalogue() -> dict[str, NamedRegion]:
    """Every named region, in the order of the boundary file."""
    table = open_bundled(_BOUNDARIES)
    rows = table[table["kind"] != "divide"]
    return {
        row["name"]: NamedRegion(
            name=row["name"],
            title=row["title"],
            parent=row["parent"],
            kind=row["kind"],
            takes=row["takes"],
            approximate=bool(row["approximate"]),
            note=row["note"],
            shape=row["geometry"],
        )
        for _, row in rows.iterrows()
    }


@cache
def outline(name: str) -> BaseGeometry:
    """Outline of a named region, degrees; empty where the region has no ice."""
    row = catalogue()[name]
    if row.takes == "nothing":
        return MultiPolygon()
    shapes: list[BaseGeometry] = []
    if row.takes in ("ice", "detached"):
        piece = _piece(name)
        inside = _glaciated()[shapely.intersects(_glaciated(), piece)]
        if row.takes == "detached":
            inside = np.delete(inside, shapely.area(inside).argmax())
        shapes.extend(shapely.intersection(inside, piece))
    discs = _discs_of(name)
    # a child must not reach beyond its parent
    shapes.extend(shapely.intersection(discs, outline(row.parent)) if row.parent else discs)
    return polygons_only(shapely.union_all(shapes))


@cache
def _piece(name: str) -> BaseGeometry:
    """The ring of a domain, or the pieces of the parent's piece that hold a part's points."""
    row = catalogue()[name]
    if row.kind == "domain":
        return row.shape
    whole = _piece(row.parent)
    table = open_bundled(_BOUNDARIES)
    divides = table.geometry[table["cuts"] == row.parent]
    pieces = shapely.get_parts(shapely.polygonize([shapely.union_all([whole.boundary, *divides])]))
    return shapely.union_all(pieces[shapely.intersects(pieces, row.shape)])


def _discs_of(name: str) -> list[BaseGeometry]:
    table = _discs()
    rows = table[table["region"] == name]
    return [cap(point.y, point.x, radius) for point, radius in zip(rows.geometry, rows["radius_km"], strict=True)]


@cache
def _discs() -> gpd.GeoDataFrame:
    return open_bundled(_DISCS)


@cache
def _glaciated() -> NDArray[np.object_]:
    """Glaciated outlines; two of the stored ones touch themselves and are mended at that point."""
    shapes = shapely.make_valid(open_bundled(_GLACIATED).geometry.to_numpy())
    return shapely.transform(shapes, _reach_pole)


def _reach_pole(points: NDArray[np.float64]) -> NDArray[np.float64]:
    latitudes = np.where(points[:, 1] < _LATTICE_END, -90.0, points[:, 1])
    return np.column_stack([points[:, 0], latitudes])
