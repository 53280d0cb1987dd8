"""Mass that does not reach the sea: what a source loses but a lake or an endorheic basin keeps."""

from collections.abc import Mapping

import geopandas as gpd
import numpy as np
import xarray as xr

from massfingerprint.errors import InputError, RegionError, nearest_names
from massfingerprint.load.spread import spread_mass


def retain_on_land(
    load: xr.DataArray, grid: xr.DataArray, *, ocean_reaching_fraction: Mapping[str, float], places: gpd.GeoDataFrame
) -> xr.DataArray:
    """Let part of each source's mass stay on land instead of reaching the sea.

    For every gigatonne added to the source, 1 minus the fraction is taken from its place: what the ice loses there, the place
    gains. The load then integrates to the fraction, so that the solver moves only that much of the ocean.

    Parameters
    ----------
    load : DataArray (source, lat, lon)
        From ``spread_mass``, kg m-2 Gt-1.
    grid : DataArray (lat, lon)
        The ocean fraction it was spread on.
    ocean_reaching_fraction : mapping of source to float
        0 to 1; sources left out reach the sea with all their mass.
    places : GeoDataFrame
        Where the rest stays: one row per source of a fraction below 1, ``source`` naming the mass source. The mass is spread
        evenly over the outline, water or not.

    Returns
    -------
    DataArray (source, lat, lon)
        kg m-2 Gt-1; each source integrates to its fraction. With the coordinate ``ocean_reaching_fraction(source)``.

    Raises
    ------
    InputError
        If a source is unknown or a fraction is not between 0 and 1.
    RegionError
        If a place is missing for a fraction below 1, or cannot be used.
    """
    names = [str(name) for name in load["source"].values]
    fractions = dict.fromkeys(names, 1.0)
    for name, value in ocean_reaching_fraction.items():
        if name not in fractions:
            raise InputError(
                f"ocean_reaching_fraction: no source {name!r} in the load. {nearest_names(str(name), names)}"
            )
        if not 0.0 <= float(value) <= 1.0:
            raise InputError(f"ocean_reaching_fraction: of {name!r} must lie between 0 and 1, got {value!r}.")
        fractions[name] = float(value)
    kept = [name for name, value in fractions.items() if value < 1.0]
    missing = [name for name in kept if name not in set(places["source"])]
    if missing:
        raise RegionError(
            f"places: none for {missing[0]!r}, whose mass does not all reach the sea. Add a row named after it."
        )
    out = load.copy(deep=True)
    if kept:
        held = spread_mass(places[places["source"].isin(kept)], grid, allow_ocean=True)
        for name in kept:
            at = names.index(name)
            out[at] = load[at].values - (1.0 - fractions[name]) * held.sel(source=name).values
    share = np.array([fractions[name] for name in names])
    attrs = {"units": "1", "long_name": "share of the mass that reaches the sea"}
    return out.assign_coords(ocean_reaching_fraction=("source", share, attrs)).assign_attrs(load.attrs)
