"""Fingerprints at named sites, with what is known about the truncation of each value."""

from collections.abc import Iterator
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.errors import InputError
from massfingerprint.sphere.grids import Grid, grid_of
from massfingerprint.sphere.harmonics import max_degree_of
from massfingerprint.sphere.points import check_sites, distance_to_cells, gradients_at, values_at

Array = NDArray[np.float64]
RESOLVED_BEYOND = 100.0  # km from the load; nearer, the missing degrees carry too much of the value


def taper(degree: NDArray, max_degree: int) -> Array:
    """Weights per degree: 1 up to half of ``max_degree``, then half a cosine down to 0 just above ``max_degree``."""
    half = max_degree // 2
    phase = np.clip((degree - half) / (max_degree + 1.0 - half), 0.0, 1.0)
    return 0.5 * (1.0 + np.cos(np.pi * phase))


def at_sites(patterns: xr.Dataset, sites: pd.DataFrame) -> xr.Dataset:
    """Evaluate fields at sites from their coefficients, exact at the coordinates.

    Parameters
    ----------
    patterns : Dataset
        From ``solve_fingerprints``: every ``<name>_coefficients`` (..., part, coefficient) in it is evaluated.
    sites : DataFrame
        Columns site, lat, lon, as ``read_sites`` returns them.

    Returns
    -------
    Dataset (..., site)
        ``<name>`` in the unit of the pattern (``bedrock_north`` and ``bedrock_east`` of ``bedrock_horizontal_coefficients``);
        ``<name>_truncation``: the value minus the value from degrees up to half the
        highest one, signed; ``<name>_tapered``: the value with a smooth taper on the upper half of the degrees. Where the
        patterns know their load, ``distance_to_load`` in km and ``resolved``: 1 beyond 100 km from it, else 0.

    Raises
    ------
    InputError
        If the patterns hold no coefficients.
    SiteError
        If the sites cannot be used.
    """
    names = [str(n).removesuffix("_coefficients") for n in patterns.data_vars if str(n).endswith("_coefficients")]
    if not names:
        held = ", ".join(str(name) for name in patterns.data_vars) or "nothing"
        raise InputError(
            f"patterns: holds no '<name>_coefficients', only {held}. Pass what solve_fingerprints returned."
        )
    table = check_sites(sites)
    coords = {
        "site": table["site"].to_numpy(dtype=object),
        "lat": ("site", table["lat"].to_numpy(), {"units": "degrees_north"}),
        "lon": ("site", table["lon"].to_numpy(), {"units": "degrees_east"}),
    }
    out = xr.Dataset(coords=coords, attrs=dict(patterns.attrs))
    for name in names:
        for label, values in _evaluated(name, patterns[f"{name}_coefficients"], table):
            out[label] = values
    if "load_extent" in patterns:
        distance = _distance(patterns["load_extent"], table)
        out["distance_to_load"] = distance
        flag = (distance > RESOLVED_BEYOND).astype(np.int8)
        out["resolved"] = flag.assign_attrs(long_name=f"1 beyond {RESOLVED_BEYOND:g} km from the load", units="1")
    return out


_PARTS = {"bedrock_horizontal": ("bedrock_north", "bedrock_east")}


def _evaluated(name: str, coefficients: xr.DataArray, sites: pd.DataFrame) -> Iterator[tuple[str, xr.DataArray]]:
    """Fields at sites of one set of coefficients: the field itself, or the parts of its gradient."""
    max_degree = max_degree_of(coefficients)
    degree, parts = coefficients["degree"], _PARTS.get(name, (name,))
    ends = xr.DataArray(taper(degree.values, max_degree), dims="coefficient")

    def here(rows: xr.DataArray) -> Array:
        return np.moveaxis(gradients_at(rows, sites), -2, 0) if name in _PARTS else values_at(rows, sites)[None]

    whole, tapered = here(coefficients), here(coefficients * ends)
    lower = here(coefficients * (degree <= max_degree // 2))
    words = {
        "": (whole, "at the site"),
        "_truncation": (whole - lower, f"value minus the value from degrees up to {max_degree // 2}"),
        "_tapered": (tapered, f"with a taper from degree {max_degree // 2} to {max_degree}"),
    }
    lead: tuple[Any, ...] = coefficients.dims[:-2]
    coords = {key: value for key, value in coefficients.coords.items() if set(value.dims) <= set(lead)}
    for suffix, (values, meaning) in words.items():
        for part, row in zip(parts, values, strict=True):
            attrs = {"units": coefficients.attrs.get("units", "1"), "long_name": f"{part.replace('_', ' ')}, {meaning}"}
            yield f"{part}{suffix}", xr.DataArray(row, dims=(*lead, "site"), coords=coords, attrs=attrs)


def _distance(extent: xr.DataArray, sites: pd.DataFrame) -> xr.DataArray:
    grid: Grid = grid_of(extent)
    extent = extent.transpose(..., "lat", "lon")
    lead, shape = extent.dims[:-2], extent.shape[:-2]
    masks = extent.values.reshape((-1, grid.nlat, grid.nlon))
    values = np.array([distance_to_cells(mask, grid, sites) for mask in masks]).reshape((*shape, len(sites)))
    coords = {key: value for key, value in extent.coords.items() if set(value.dims) <= set(lead)}
    attrs = {"units": "km", "long_name": "distance to the nearest cell that carries load, never overstated"}
    return xr.DataArray(values, dims=(*lead, "site"), coords=coords, attrs=attrs)
