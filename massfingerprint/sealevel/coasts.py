"""The values that the commands print at places: near field beside the ice, tapered elsewhere."""

import geopandas as gpd
import pandas as pd
import xarray as xr

from massfingerprint.sealevel.fingerprints import solve_fingerprints
from massfingerprint.sealevel.nearfield import add_near_field, near_field, smoothed
from massfingerprint.sealevel.sites import at_sites
from massfingerprint.sealevel.solver import Prepared


def coast_values(
    prepared: Prepared,
    outlines: gpd.GeoDataFrame,
    load: xr.DataArray,
    sites: pd.DataFrame,
    *,
    outputs: tuple[str, ...] = ("relative_sea_level", "bedrock_up"),
    reference_frame: str = "CM",
) -> xr.Dataset:
    """Solve for every source and read the fields at places.

    Parameters
    ----------
    prepared : Prepared
        From ``prepare_solver`` with Love numbers to degree 2048 or more.
    outlines : GeoDataFrame
        Columns source, geometry.
    load : DataArray (source, lat, lon)
        From ``spread_mass`` of these outlines, kg m-2 Gt-1.
    sites : DataFrame
        Columns site, lat, lon.
    outputs : tuple of str
        Fields of ``solve_fingerprints``.
    reference_frame : str
        Of all but relative sea level.

    Returns
    -------
    Dataset (source, site)
        As ``smoothed`` of ``add_near_field``: ``<name>`` in mm Gt-1 (gravity nm s-2 Gt-1) with the near field within 300 km of the
        outline, tapered elsewhere; ``<name>_truncation``, ``near_field``, ``resolved``, ``distance_to_load``. Attributes as
        ``solve_fingerprints``.

    Raises
    ------
    InputError, SiteError, NotConvergedError
        As the functions this is made of.
    """
    patterns = solve_fingerprints(prepared, load, outputs=outputs, reference_frame=reference_frame)
    near = near_field(prepared, outlines, load, sites, reference_frame=reference_frame)
    return smoothed(add_near_field(at_sites(patterns, sites), near))
