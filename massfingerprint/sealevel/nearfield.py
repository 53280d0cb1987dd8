"""Values at sites beside the ice: what the degrees beyond the solution add, from the outline of the load itself.

A site value from coefficients lacks the degrees above those of the solution, and knows the load only through cells. Both are
mended by exchanging the direct elastic effect of the gridded load, up to the degree of the solution, for that of the outline with
all degrees: the integral of the Green's function over the outline. In rings round the site the integrand, sin(psi) G(psi) times the
angle that lies inside the outline, is finite even where the site stands on the ice. The water that follows, the uniform part and
the rotation stay those of the solver; their missing degrees matter little, water beside the ice moves by a small part of the load.
"""

from dataclasses import dataclass
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import shapely
import xarray as xr
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from massfingerprint import vocabulary
from massfingerprint.arguments import real_number
from massfingerprint.constants import SPHERE_RADIUS
from massfingerprint.earth.frames import check_frame
from massfingerprint.earth.green import point_response_table
from massfingerprint.earth.response import degree_factors
from massfingerprint.errors import InputError
from massfingerprint.files.outlines import outlines_of
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import grid_of
from massfingerprint.sphere.points import check_sites

Array = NDArray[np.float64]
NEAR_FIELDS = ("relative_sea_level", "sea_surface", "bedrock_up", "bedrock_north", "bedrock_east")
_DIRECT = ("relative_sea_level", "bedrock_up")
_SIDEWAYS = "bedrock_horizontal"
WITHIN = 300.0  # km
_RINGS, _TURNS = 400, 360
_EARTH_KM = SPHERE_RADIUS.value / 1e3


@dataclass(frozen=True)
class _View:
    """An outline seen from a site: distances and azimuths (radians) between which it lies, how far its edge is and how coarse."""

    nearest: float
    farthest: float
    first_azimuth: float
    span: float
    edge: float
    coarseness: float
    inside: bool


def near_field(
    prepared: Prepared,
    outlines: gpd.GeoDataFrame,
    load: xr.DataArray,
    sites: pd.DataFrame,
    *,
    reference_frame: str = "CM",
    within: float = WITHIN,
) -> xr.Dataset:
    """What has to be added to the values of ``at_sites`` near the ice.

    Parameters
    ----------
    prepared : Prepared
        From ``prepare_solver`` with Love numbers to degree 2048 or more.
    outlines : GeoDataFrame
        Columns source, geometry: the outlines the load was spread over, evenly.
    load : DataArray (source, lat, lon)
        From ``spread_mass`` of these outlines, kg m-2 Gt-1.
    sites : DataFrame
        Columns site, lat, lon.
    reference_frame : str
        Of sea surface and bedrock.
    within : float
        km between site and outline beyond which nothing is added.

    Returns
    -------
    Dataset (source, site)
        ``relative_sea_level``, ``sea_surface``, ``bedrock_up``, ``bedrock_north``, ``bedrock_east``: mm Gt-1 to add, 0 beyond
        ``within``; ``<name>_step``: how far the integral moves with half the rings; ``distance_to_outline`` in km, 0 inside;
        ``near_field`` 1 where something is added;
        ``resolved`` 0 where the outline itself is too coarse: its edge is nearer to the site than the edge's own corners are apart.

    Raises
    ------
    InputError, SiteError
        If the sources of outlines and load differ, a choice cannot be used, or the Love numbers end too early for a site beside
        the ice.
    """
    check_frame(reference_frame)
    real_number(within, argument="within", allowed="a number of km from 0 to 20000", low=0.0, high=20000.0)
    table, shapes = check_sites(sites), outlines_of(outlines)
    if not isinstance(load, xr.DataArray) or [str(n) for n in load["source"].values] != list(shapes):
        raise InputError(
            "load: must have the sources of the outlines, in the same order. Spread it over these outlines."
        )
    values = np.zeros((2, 4, len(shapes), len(table)))  # with all rings and with half of them; four fields
    about = np.zeros((3, len(shapes), len(table)))
    about[2] = 1.0
    tables: dict[str, Any] = {}
    for row, (name, shape) in enumerate(shapes.items()):
        held = None
        shapely.prepare(shape)
        for column, (_, lat, lon) in enumerate(table.itertuples(index=False)):
            view = _seen(shape, float(lat), float(lon))
            about[0, row, column] = view.nearest * _EARTH_KM
            if view.nearest * _EARTH_KM > within:
                continue
            tables = tables or _tables(prepared, reference_frame)
            held = _gridded(prepared, load.sel(source=name), table, reference_frame) if held is None else held
            for half in (0, 1):
                whole = _integrals(shape, view, (float(lat), float(lon)), tables, _RINGS // (half + 1))
                values[half, :, row, column] = 1e3 * (whole - held[:, column])
            about[1:, row, column] = 1.0, float(view.edge > view.coarseness)
    return _dataset(values, about, load, table).assign_attrs(reference_frame=reference_frame, within=within)


def _tables(prepared: Prepared, frame: str) -> dict[str, Any]:
    """Green's functions of the fields that are integrated."""
    names = (*_DIRECT, _SIDEWAYS)
    return {name: point_response_table(prepared.long_love, name, reference_frame=frame) for name in names}


def _gridded(prepared: Prepared, load: xr.DataArray, sites: pd.DataFrame, frame: str) -> Array:
    """Direct elastic effect (field, site) in m per Gt of the load as the solver has it, rotation apart."""
    vocabulary.require(load.attrs, ("kg m-2 Gt-1",), argument="load")
    grid = grid_of(load, argument="load")
    band = min(grid.band_limit, prepared.max_degree)
    ice = _transform.analyse(grid.to_rings(load.transpose("lat", "lon").values), band, grid.first_azimuth)
    degree, _ = _transform.degrees_and_orders(band)
    *rows, sideways = (
        ice * degree_factors(prepared.love, name, reference_frame=frame)[degree] for name in (*_DIRECT, _SIDEWAYS)
    )
    colatitude, azimuth = np.deg2rad(90.0 - sites["lat"].to_numpy()), np.deg2rad(sites["lon"].to_numpy() % 360.0)
    along = _transform.gradient_at(sideways, colatitude, azimuth)
    return np.concatenate([_transform.synthesise_at(np.stack(rows), colatitude, azimuth), along])


def _polar(lat: float, lon: float, latitudes: Array, longitudes: Array) -> tuple[Array, Array]:
    """Angular distance and azimuth (radians) of points from a site, all in degrees."""
    phi, other, step = np.deg2rad(lat), np.deg2rad(latitudes), np.deg2rad(longitudes - lon)
    x = np.cos(phi) * np.sin(other) - np.sin(phi) * np.cos(other) * np.cos(step)
    y = np.cos(other) * np.sin(step)
    z = np.sin(phi) * np.sin(other) + np.cos(phi) * np.cos(other) * np.cos(step)
    return np.arctan2(np.hypot(x, y), z), np.arctan2(y, x)


def _around(lat: float, lon: float, distance: Array, azimuth: Array) -> tuple[Array, Array]:
    """Latitudes and longitudes (degrees, -180 to 180) of points at distances and azimuths from a site."""
    phi = np.deg2rad(lat)
    sine = np.sin(phi) * np.cos(distance) + np.cos(phi) * np.sin(distance) * np.cos(azimuth)
    east = np.sin(azimuth) * np.sin(distance)
    north = np.cos(phi) * np.cos(distance) - np.sin(phi) * np.sin(distance) * np.cos(azimuth)
    longitude = lon + np.rad2deg(np.arctan2(east, north))
    return np.rad2deg(np.arcsin(np.clip(sine, -1.0, 1.0))), (longitude + 180.0) % 360.0 - 180.0


def _seen(shape: BaseGeometry, lat: float, lon: float) -> _View:
    """How an outline lies about a site."""
    corners = shapely.get_coordinates(shape)
    dense = shapely.get_coordinates(shapely.segmentize(shape, 0.1))
    distance, azimuth = _polar(lat, lon, dense[:, 1], dense[:, 0])
    inside = bool(shapely.contains_xy(shape, (lon + 180.0) % 360.0 - 180.0, lat))
    nearest, edge = (0.0 if inside else float(distance.min())), float(distance.min())
    first, span = -np.pi, 2.0 * np.pi
    if not inside:
        ordered = np.sort(azimuth)
        gaps = np.append(np.diff(ordered), ordered[0] + 2.0 * np.pi - ordered[-1])
        widest = int(gaps.argmax())
        first, span = float(ordered[(widest + 1) % ordered.size]), float(2.0 * np.pi - gaps[widest])
    at, _ = _polar(lat, lon, corners[:, 1], corners[:, 0])
    close = int(at.argmin())
    beside = [corners[(close + shift) % len(corners)] for shift in (-1, 1)]
    apart = [float(_polar(corners[close][1], corners[close][0], np.array(b[1]), np.array(b[0]))[0]) for b in beside]
    return _View(nearest, float(distance.max()), first, span, edge, min(apart), inside)


def _integrals(
    shape: BaseGeometry, view: _View, place: tuple[float, float], tables: dict[str, Any], rings: int
) -> Array:
    """Integral (field,) in m of sin(psi) G(psi) over one gigatonne spread evenly within an outline; sideways north and east."""
    # midpoints, denser towards the site: psi grows as the square of the ring's number
    edges = view.nearest + (view.farthest - view.nearest) * np.linspace(0.0, 1.0, rings + 1) ** 2
    middle, width = 0.5 * (edges[1:] + edges[:-1]), np.diff(edges)
    turn = view.first_azimuth + view.span * (np.arange(_TURNS) + 0.5) / _TURNS
    latitude, longitude = _around(*place, middle[:, None], turn[None, :])
    inside = shapely.contains_xy(shape, longitude.ravel(), latitude.ravel()).reshape(latitude.shape)
    angle = inside.mean(axis=1) * view.span * width
    area = float(np.sum(angle * np.sin(middle)))
    at = np.log(middle)
    out = [float(np.sum(angle * tables[name](at))) for name in _DIRECT]
    # a site moves away from the load: against the azimuth at which it lies
    away = tables[_SIDEWAYS](at) * view.span * width
    out += [-float(np.sum((inside * part(turn)).mean(axis=1) * away)) for part in (np.cos, np.sin)]
    return np.array(out) / area


def _dataset(values: Array, about: Array, load: xr.DataArray, sites: pd.DataFrame) -> xr.Dataset:
    level, up, *sideways = values.swapaxes(0, 1)
    parts = dict(zip(NEAR_FIELDS, (level, level + up, up, *sideways), strict=True))
    coords = {"source": load["source"].values, "site": sites["site"].to_numpy(dtype=object)}
    out = xr.Dataset(coords=coords)
    for name, (whole, half) in parts.items():
        words = vocabulary.attributes(name, per_gigatonne=True)["long_name"]
        out[name] = (
            ("source", "site"),
            whole,
            {"units": "mm Gt-1", "long_name": f"{words}, degrees beyond the solution"},
        )
        attrs = {"units": "mm Gt-1", "long_name": f"change of {name.replace('_', ' ')} with half the rings"}
        out[f"{name}_step"] = (("source", "site"), whole - half, attrs)
    words = ("distance to the outline", "1 where the near field is added", "0 where the outline is too coarse")
    for name, value, meaning in zip(("distance_to_outline", "near_field", "resolved"), about, words, strict=True):
        kind = value if name == "distance_to_outline" else value.astype(np.int8)
        out[name] = (("source", "site"), kind, {"units": "km" if kind is value else "1", "long_name": meaning})
    return out


def add_near_field(values: xr.Dataset, near: xr.Dataset) -> xr.Dataset:
    """Site values with the near field in them.

    Parameters
    ----------
    values : Dataset (source, site)
        From ``at_sites``, mm Gt-1.
    near : Dataset (source, site)
        From :func:`near_field` for the same sources and sites, in the same frame.

    Returns
    -------
    Dataset (source, site)
        ``<name>`` and ``<name>_tapered`` complete where the near field was added, ``<name>_truncation`` there the step of the
        integral; ``<name>_near_field`` what was added; ``resolved`` and ``distance_to_load`` by the outline.

    Raises
    ------
    InputError
        If sources, sites or frame differ.
    """
    same = all(list(values[dim].values) == list(near[dim].values) for dim in ("source", "site"))
    if not same or values.attrs.get("reference_frame") != near.attrs.get("reference_frame"):
        raise InputError(
            "near: must be of the same sources, sites and frame as the values. Make both from the same lists."
        )
    out, added = values.copy(), near["near_field"] == 1
    for name in (name for name in NEAR_FIELDS if name in values and name in near):
        part = near[name].transpose(*values[name].dims)
        whole = (values[name] + part).assign_attrs(values[name].attrs)
        out[name] = whole
        for end, inside in (("tapered", whole), ("truncation", near[f"{name}_step"])):
            label = f"{name}_{end}"
            out[label] = values[label].where(~added, inside).assign_attrs(values[label].attrs)
        out[f"{name}_near_field"] = part
    out["near_field"] = near["near_field"]
    words = "1 far from the load or with the near field added, 0 where the outline is too coarse for the site"
    out["resolved"] = xr.where(added, near["resolved"], 1).astype(np.int8).assign_attrs(units="1", long_name=words)
    out["distance_to_load"] = near["distance_to_outline"]
    return out


def smoothed(values: xr.Dataset) -> xr.Dataset:
    """Site values without the ripple of the highest degrees: tapered where no near field completes them.

    Parameters
    ----------
    values : Dataset (source, site)
        From :func:`add_near_field`.

    Returns
    -------
    Dataset (source, site)
        ``<name>`` the tapered or completed value (fields without a near field, as gravity, are tapered everywhere);
        ``<name>_truncation`` the plain value minus the tapered one, or the step of the near field's integral; no
        ``<name>_tapered``.
    """
    out = values
    for name in (str(label).removesuffix("_tapered") for label in values.data_vars if str(label).endswith("_tapered")):
        smooth, plain = values[f"{name}_tapered"], values[name]
        completed = (values["near_field"] == 1) & (name in NEAR_FIELDS)
        change = xr.where(completed, values[f"{name}_truncation"], plain - smooth)
        words = f"{name.replace('_', ' ')}: untapered minus tapered, or the step of the near field's integral"
        out = out.drop_vars(f"{name}_tapered")
        out[name] = smooth.assign_attrs(plain.attrs)
        out[f"{name}_truncation"] = change.assign_attrs(units=plain.attrs["units"], long_name=words)
    return out
