"""How far a site's value can move if the same mass sat elsewhere within its region."""

import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.errors import InputError
from massfingerprint.sealevel.kernels import site_kernels
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import grid_of


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
    return range_of(site_kernels(prepared, sites, tolerance=tolerance, tapered=True), load)


def range_of(kernels: xr.Dataset, load: xr.DataArray) -> xr.Dataset:
    """The same from tapered kernels of the sites; load and errors as for :func:`range_within`."""
    if not isinstance(load, xr.DataArray) or set(load.dims) != {"source", "lat", "lon"}:
        raise InputError("load: must be a DataArray (source, lat, lon). Use spread_mass(...).")
    grid = grid_of(load, argument="load")
    carried = load.transpose("source", "lat", "lon").values != 0.0
    for name, cells in zip(load["source"].values, carried, strict=True):
        if not cells.any():
            raise InputError(f"load: source {str(name)!r} carries no mass anywhere.")
    coefficients = kernels["relative_sea_level_coefficients"].transpose("site", "part", "coefficient")
    values = np.empty((2, carried.shape[0], kernels.sizes["site"]))
    for column, pairs in enumerate(coefficients.values):
        here = _transform.complex_from_real(pairs)
        field = grid.from_rings(_transform.synthesise(here, (grid.nlat, grid.nlon), grid.first_azimuth))
        for row, cells in enumerate(carried):
            values[:, row, column] = field[cells].min(), field[cells].max()
    out = xr.Dataset(coords={"source": load["source"], "site": kernels["site"].values})
    for name, part in zip(("lowest", "highest"), values, strict=True):
        attrs = {
            "units": "mm Gt-1",
            "long_name": f"{name} relative sea level if the mass sat in one cell of its region",
        }
        out[f"relative_sea_level_{name}"] = (("source", "site"), part, attrs)
    return out
