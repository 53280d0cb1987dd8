"""How far a site's value can move if the same mass sat elsewhere within its region."""

import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.errors import InputError
from massfingerprint.sealevel.kernels import point_mass, sea_level_of
from massfingerprint.sealevel.sites import taper
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import grid_of
from massfingerprint.sphere.points import check_sites


def range_within(prepared: Prepared, load: xr.DataArray, sites: pd.DataFrame, *, tolerance: float = 1e-6) -> xr.Dataset:
    """Lowest and highest relative sea level at each site if a source's mass sat in one cell of its region.

    Parameters
    ----------
    prepared : Prepared
        From ``prepare_solver``; degree 256 is plenty, since the range is smoothed by a taper over the upper degrees.
    load : DataArray (source, lat, lon)
        Per gigatonne, from ``spread_mass``: cells that carry load are where the mass may sit.
    sites : DataFrame
        Columns site, lat, lon.
    tolerance : float
        Of the one solve per site.

    Returns
    -------
    Dataset (source, site)
        ``relative_sea_level_lowest``, ``relative_sea_level_highest``: mm Gt-1, per gigatonne added.

    Raises
    ------
    InputError
        If the load has no source dimension or a source carries nothing.
    SiteError
        If the sites cannot be used.
    """
    if not isinstance(load, xr.DataArray) or set(load.dims) != {"source", "lat", "lon"}:
        raise InputError("load: must be a DataArray (source, lat, lon). Use spread_mass(...).")
    table, grid = check_sites(sites), grid_of(load, argument="load")
    carried = load.transpose("source", "lat", "lon").values != 0.0
    for name, cells in zip(load["source"].values, carried, strict=True):
        if not cells.any():
            raise InputError(f"load: source {str(name)!r} carries no mass anywhere.")
    degree, _ = _transform.degrees_and_orders(prepared.max_degree)
    smooth = taper(degree, prepared.max_degree)
    values = np.empty((2, carried.shape[0], len(table)))
    for column, (lat, lon) in enumerate(table[["lat", "lon"]].to_numpy()):
        point = point_mass(prepared, float(lat), float(lon))
        here = smooth * sea_level_of(prepared, point, tolerance=tolerance, label=f"site at {lat:g}, {lon:g}")
        field = grid.from_rings(_transform.synthesise(here, (grid.nlat, grid.nlon), grid.first_azimuth)) * 1e3
        for row, cells in enumerate(carried):
            values[:, row, column] = field[cells].min(), field[cells].max()
    out = xr.Dataset(coords={"source": load["source"], "site": table["site"].to_numpy(dtype=object)})
    for name, part in zip(("lowest", "highest"), values, strict=True):
        attrs = {
            "units": "mm Gt-1",
            "long_name": f"{name} relative sea level if the mass sat in one cell of its region",
        }
        out[f"relative_sea_level_{name}"] = (("source", "site"), part, attrs)
    return out
