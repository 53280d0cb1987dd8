"""What moves the level at a tide gauge without any change in the ocean's mass or heat: air pressure and the nodal tide.

Air pressure: the sea yields by 9.94 mm for each hPa that the local pressure lies above the mean over the ocean at that time; the
mean itself only compresses the water (Wunsch & Stammer 1997, from memory). A level is corrected by taking the yield off.

Nodal tide: the plane of the Moon's orbit turns once in 18.6 years. In equilibrium, with the Earth's yielding 1 + k - h = 0.69, it
moves the sea against the land by 12.2 mm (3/2 sin2(lat) - 1/2) cos N, N the longitude of the ascending node: amplitude 27.9 mm of
Cartwright & Edden (1973) in their normalisation sqrt(5/4 pi) is 17.6 mm, times 0.69 (from memory). N = 0 in June 2006: the Moon
then goes farthest from the equator and draws least water to it. The water's mass stays, so the mean over the ocean is taken off.
"""

from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import real_number
from massfingerprint.errors import InputError, SiteError

Array = NDArray[np.float64]
YIELD = -9.94  # mm of sea level per hPa of air pressure
NODAL_PERIOD = 18.6129  # years: 360 degrees over the rate of the node below
_NODAL_AMPLITUDE = 12.2  # mm
_NODE_AT_2000, _NODE_PER_DAY = 125.0445, -0.0529538  # degrees at 2000-01-01 12:00, Meeus 1998 (from memory)
# Mean of 3/2 sin2(lat) - 1/2 over the bundled ocean; a test holds it there
OCEAN_MEAN_OF_NODAL_TIDE = -0.0327
_PRESSURES = (800.0, 1100.0)  # hPa


def inverse_barometer(
    level: xr.DataArray, pressure: xr.DataArray, *, ocean_mean_pressure: xr.DataArray | float
) -> xr.DataArray:
    """Take the yield of the sea to air pressure off the level.

    Parameters
    ----------
    level : DataArray (gauge, time)
        A length; positive = sea higher against the land.
    pressure : DataArray (gauge, time)
        At the gauges, over the same means as the level; hPa or any unit of pressure.
    ocean_mean_pressure : DataArray (time) or float
        Mean over the whole ocean at each time, a unit of pressure; or one number in hPa, if it shall be held constant, which
        leaves the common change of some hPa over a year in the level. Nothing is assumed for it.

    Returns
    -------
    DataArray (gauge, time)
        mm: level + 9.94 mm/hPa x (pressure - ocean mean); NaN where any of the three is missing. Attribute
        ``epochs_without_pressure``: how many values of the level that makes gaps of.

    Raises
    ------
    InputError, UnitsError
        If units, dimensions or numbers cannot be used, or the three have no epoch in common.
    """
    if not isinstance(level, xr.DataArray) or set(level.dims) != {"gauge", "time"}:
        raise InputError("level: must be a DataArray (gauge, time). Pass the variable level of read_gauges.")
    _, factor = vocabulary.require(level.attrs, ("mm",), argument="level")
    local = _pressure(pressure, "pressure", {"gauge", "time"})
    missing = [str(name) for name in level["gauge"].values if name not in local["gauge"].values]
    if missing:
        raise SiteError(f"pressure: has no gauge {missing[0]!r}. Add it, or leave the gauge out.")
    if isinstance(ocean_mean_pressure, xr.DataArray):
        mean: Any = _pressure(ocean_mean_pressure, "ocean_mean_pressure", {"time"}).reindex(time=level["time"])
    else:
        words = f"a DataArray (time) or a number from {_PRESSURES[0]:g} to {_PRESSURES[1]:g} hPa"
        low, high = _PRESSURES
        mean = real_number(ocean_mean_pressure, argument="ocean_mean_pressure", allowed=words, low=low, high=high)
    excess = local.reindex(gauge=level["gauge"], time=level["time"]) - mean
    out = (level * factor - YIELD * excess).transpose(*level.dims)
    lost = int((level.notnull() & out.isnull()).sum())
    if lost and not out.notnull().any():
        raise InputError("pressure: has no epoch in common with level and ocean mean. Are all at the same middles?")
    held = {"units": "mm", "inverse_barometer": "removed", "epochs_without_pressure": lost}
    return out.rename(level.name).assign_attrs({**level.attrs, **held})


def _pressure(values: xr.DataArray, argument: str, dims: set[str]) -> xr.DataArray:
    """Pressure in hPa, checked."""
    if not isinstance(values, xr.DataArray) or set(values.dims) != dims:
        raise InputError(f"{argument}: must be a DataArray ({', '.join(sorted(dims))}).")
    _, factor = vocabulary.require(values.attrs, ("hPa",), argument=argument)
    out = values * factor
    low, high = float(out.min()), float(out.max())
    if low < _PRESSURES[0] or high > _PRESSURES[1]:
        raise InputError(
            f"{argument}: must lie between {_PRESSURES[0]:g} and {_PRESSURES[1]:g} hPa, got {low:g} to {high:g}. Check the unit."
        )
    return out


def node(time: NDArray[np.datetime64]) -> Array:
    """Longitude (ntime,) of the Moon's ascending node in radians; decreases, once round in 18.6 years."""
    days = (time - np.datetime64("2000-01-01T12:00", "ns")) / np.timedelta64(1, "D")
    return np.deg2rad(_NODE_AT_2000 + _NODE_PER_DAY * days)


def nodal_tide(levels: xr.Dataset) -> xr.DataArray:
    """Equilibrium nodal tide at gauges, in relative sea level, the mean over the ocean taken off.

    Parameters
    ----------
    levels : Dataset
        Coordinates ``time``, and ``lat`` (gauge) in degrees, known for all.

    Returns
    -------
    DataArray (gauge, time)
        mm, positive = sea higher against the land.

    Raises
    ------
    SiteError
        If the latitude of a gauge is not known.
    """
    lat = np.asarray(levels["lat"].values, dtype=np.float64)
    unknown = np.flatnonzero(np.isnan(lat))
    if unknown.size:
        name = str(levels["gauge"].values[unknown[0]])
        raise SiteError(f"lat: of gauge {name!r} is not known, the nodal tide needs it. Give lat, or use nodal='none'.")
    shape = 1.5 * np.sin(np.deg2rad(lat)) ** 2 - 0.5 - OCEAN_MEAN_OF_NODAL_TIDE
    values = _NODAL_AMPLITUDE * shape[:, None] * np.cos(node(levels["time"].values))[None]
    coords = {"gauge": levels["gauge"].values, "time": levels["time"].values}
    words = {
        "units": "mm",
        "long_name": "nodal tide in equilibrium",
        "comment": "positive = sea higher against the land",
    }
    return xr.DataArray(values, coords=coords, dims=("gauge", "time"), name="nodal_tide", attrs=words)
