"""The named regions on three maps: Greenland's sectors, Antarctica's sectors, and the glacier regions of the world."""

import io
import os

import cartopy.crs as ccrs
import geopandas as gpd
from cartopy.mpl.geoaxes import GeoAxes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.patheffects import withStroke
from shapely.geometry import Point

from massfingerprint.bundled import open_bundled
from massfingerprint.errors import RegionError
from massfingerprint.files.atomic import write_binary

_DEGREES = ccrs.PlateCarree()
# muted, after the qualitative schemes of Paul Tol for colour blindness; lines and labels tell neighbours apart as well
_PALETTE = ("#88ccee", "#ddcc77", "#cc6677", "#44aa99", "#999933", "#aa4499", "#6699cc", "#bb8855", "#9988cc")
_LAND, _SHELF, _SEA, _INK = "#ece9e2", "#dde6ea", "#ffffff", "#222222"
_SHEETS = ("greenland", "east_antarctica", "west_antarctica", "antarctic_peninsula")

# where a label stands (longitude, latitude); regions that are not here are labelled at a point inside
_SPOTS = {
    "greenland_north": (-50.0, 79.6),
    "greenland_northeast": (-31.0, 77.6),
    "greenland_east": (-33.0, 72.0),
    "greenland_southeast": (-32.0, 62.6),
    "greenland_southwest": (-55.5, 64.3),
    "greenland_west": (-46.5, 70.4),
    "greenland_northwest": (-54.0, 75.8),
    "antarctic_peninsula_graham": (-67.5, -63.1),
    "antarctic_peninsula_palmer": (-65.5, -72.8),
    "west_antarctica_bellingshausen": (-97.2, -67.0),
    "west_antarctica_amundsen": (-107.0, -77.0),
    "west_antarctica_marie_byrd": (-134.0, -72.0),
    "west_antarctica_siple": (-135.0, -81.0),
    "west_antarctica_ronne": (-84.0, -80.0),
    "east_antarctica_filchner": (5.0, -83.5),
    "east_antarctica_dronning_maud": (12.0, -73.5),
    "east_antarctica_transantarctic": (150.0, -81.0),
    "glaciers_01": (-157.0, 65.5),
    "glaciers_02": (-112.0, 46.0),
    "glaciers_03": (-104.0, 79.5),
    "glaciers_04": (-95.0, 68.0),
    "glaciers_05": (-41.0, 74.0),
    "glaciers_06": (-28.0, 62.5),
    "glaciers_07": (8.0, 75.5),
    "glaciers_08": (9.0, 66.5),
    "glaciers_09": (78.0, 79.5),
    "glaciers_10": (128.0, 66.0),
    "glaciers_11": (3.0, 45.5),
    "glaciers_12": (45.0, 38.5),
    "glaciers_13": (107.5, 41.0),
    "glaciers_14": (66.0, 33.0),
    "glaciers_15": (93.0, 23.0),
    "glaciers_16": (-87.0, -9.0),
    "glaciers_17": (-82.0, -45.0),
    "glaciers_18": (171.0, -38.0),
    "glaciers_19": (-50.0, -56.0),
}


def region_map(regions: gpd.GeoDataFrame) -> Figure:
    """Draw the named regions.

    Parameters
    ----------
    regions : GeoDataFrame
        The table of ``regions(*region_names())``: columns ``source``, ``parent``, ``geometry`` (degrees).

    Returns
    -------
    matplotlib.figure.Figure
        Three panels; every region that has ice and no sectors of its own is filled and labelled once.

    Raises
    ------
    RegionError
        If a column is missing.
    """
    missing = [column for column in ("source", "parent", "geometry") if column not in regions]
    if missing:
        raise RegionError(f"regions: lacks column {', '.join(missing)}. Pass regions(*region_names()).")
    figure = Figure(figsize=(9.0, 10.2), facecolor=_SEA)
    FigureCanvasAgg(figure)
    greenland = _panel(figure, (0.02, 0.46, 0.36, 0.50), ccrs.Stereographic(90.0, -42.0), "Greenland: greenland_...")
    greenland.set_extent((-880e3, 930e3, -3480e3, -680e3), crs=greenland.projection)
    antarctica = _panel(
        figure,
        (0.39, 0.46, 0.60, 0.50),
        ccrs.SouthPolarStereo(),
        "Antarctica: east_antarctica_..., west_antarctica_..., antarctic_peninsula_...",
    )
    antarctica.set_extent((-3100e3, 3100e3, -2750e3, 2750e3), crs=antarctica.projection)
    world = _panel(figure, (0.02, 0.01, 0.96, 0.41), _DEGREES, "Glacier regions: glaciers_01 to glaciers_19")
    world.set_extent((-180.0, 180.0, -79.0, 85.0), crs=_DEGREES)
    _background(greenland, antarctica, world)
    leaves = regions[~regions["source"].isin(set(regions["parent"]) - {""}) & ~regions.geometry.is_empty]
    names = leaves["source"].astype(str)
    _fill(greenland, leaves[names.str.startswith("greenland")], outline=0.3)
    _fill(antarctica, leaves[names.str.contains("antarctic")], outline=0.3)
    # glaciers are specks on a map of the world: a broad outline in their own colour keeps them in sight
    _fill(world, leaves[names.str.startswith("glaciers")], outline=1.6)
    return figure


def write_region_map(regions: gpd.GeoDataFrame, path: str | os.PathLike[str], *, dpi: int = 150) -> None:
    """Draw the named regions into a PNG file, whole or not at all.

    Parameters
    ----------
    regions : GeoDataFrame
        As for `region_map`.
    path : path
        Target; its folder must exist.
    dpi : int
        Dots per inch of the 9 by 10.2 inch page.

    Raises
    ------
    RegionError
        If a column is missing.
    MissingFileError
        If the folder does not exist.
    """
    buffer = io.BytesIO()
    region_map(regions).savefig(buffer, format="png", dpi=dpi, metadata={"Software": None})
    write_binary(buffer.getvalue(), path)


def _panel(
    figure: Figure, place: tuple[float, float, float, float], projection: ccrs.Projection, title: str
) -> GeoAxes:
    axes = figure.add_axes(place, projection=projection)
    axes.set_title(title, fontsize=10, loc="left", color=_INK)
    axes.spines["geo"].set(linewidth=0.5, edgecolor="#999999")
    return axes


def _background(greenland: GeoAxes, antarctica: GeoAxes, world: GeoAxes) -> None:
    near, far = open_bundled("land_50m.geojson.gz").geometry, open_bundled("land_110m.geojson.gz").geometry
    for axes, land in ((greenland, near.cx[-90:10, 55:90]), (antarctica, near.cx[:, -90:-55]), (world, far)):
        axes.add_geometries(land, crs=_DEGREES, facecolor=_LAND, edgecolor="none")
    shelves = open_bundled("ice_shelves_50m.geojson.gz").geometry.make_valid()
    antarctica.add_geometries(shelves, crs=_DEGREES, facecolor=_SHELF, edgecolor="none")
    table = open_bundled("region_boundaries.geojson")
    divides = table.geometry[table["kind"] == "divide"]
    for axes, lines in ((greenland, divides.cx[:, 55:90]), (antarctica, divides.cx[:, -90:-55])):
        axes.add_geometries(lines, crs=_DEGREES, facecolor="none", edgecolor=_INK, linewidth=0.7, zorder=3)
    rings = table[(table["kind"] == "domain") & table["name"].str.startswith("glaciers") & (table["takes"] == "ice")]
    world.add_geometries(rings.geometry, crs=_DEGREES, facecolor="none", edgecolor="#888888", linewidth=0.5)


def _fill(axes: GeoAxes, leaves: gpd.GeoDataFrame, *, outline: float) -> None:
    """Fill each region and label it with the part of its name that its panel does not already say."""
    for number, row in enumerate(leaves.itertuples()):
        colour = _PALETTE[number % len(_PALETTE)]
        axes.add_geometries([row.geometry], crs=_DEGREES, facecolor=colour, edgecolor=colour, linewidth=outline)
        _label(axes, str(row.source), row.geometry.representative_point())


def _label(axes: GeoAxes, name: str, inside: Point) -> None:
    longitude, latitude = _SPOTS.get(name, (inside.x, inside.y))
    axes.text(
        longitude,
        latitude,
        _short(name),
        transform=_DEGREES,
        fontsize=8,
        color=_INK,
        ha="center",
        va="center",
        path_effects=[withStroke(linewidth=2.0, foreground="white")],
    )


def _short(name: str) -> str:
    sheet = next((sheet for sheet in _SHEETS if name.startswith(f"{sheet}_")), "glaciers")
    return name.removeprefix(f"{sheet}_")
