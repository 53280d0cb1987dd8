"""Steric sea level: how much taller a column of water stands because it is warmer or fresher than a reference.

Sea water is that of TEOS-10 (gsw, 75-term polynomial of McDougall & Barker 2011, Roquet et al. 2015). At every depth the column is
compared with the reference at the same depth and pressure:

    total = int -(rho(S, T) - rho0) / rho0 dz,    rho0 = rho(S0, T0),    from the surface to a depth; positive = expanded = rise
    thermosteric: S0 in place of S,    halosteric: T0 in place of T,    remainder = total - thermosteric - halosteric

The remainder is second order in the changes: that fresh and salty water expand differently. Absolute salinity and conservative
temperature are straight lines between levels, on which the integral is taken with three Gauss nodes.
"""

from dataclasses import dataclass

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import one_of, real_number
from massfingerprint.coast._profiles import DEEPEST, ROWS, Columns, columns_of, depths_of, reach, row_of
from massfingerprint.coast.dynamic import distances_from
from massfingerprint.constants import GIGATONNES_PER_MILLIMETRE, Constant
from massfingerprint.errors import InputError
from massfingerprint.sphere.points import check_sites

Array = NDArray[np.float64]
EXPANSION_EFFICIENCY = Constant(0.1210, "m YJ-1", 0.0014, "IPCC AR6 WG1, 9.2.4.1")
OCEAN_VOLUME = Constant(1.332e18, "m3", 0.0, "Charette & Smith 2010: 1.332e9 km3")
MEAN_DENSITY = Constant(1035.0, "kg m-3", 2.0, "sea water over all depths, rounded (from memory)")
HEAT_CAPACITY = Constant(3991.86795711963, "J kg-1 K-1", 0.0, "TEOS-10, of conservative temperature")
PARTS = ("thermosteric", "halosteric", "total", "remainder")
_SHELF = (
    "Steric height over a shelf alone underestimates the change at its coast: the column is short, and water that expands over "
    "the deep ocean moves mass onto the shelf. It is a part of the change there, not the whole."
)
_PERIODS = {"year": "datetime64[Y]", "month": "datetime64[M]"}
_MEANINGS = {
    "thermosteric": "change in steric height by temperature",
    "halosteric": "change in steric height by salinity",
    "total": "change in steric height",
    "remainder": "total less thermosteric and halosteric, second order",
}


def steric_height(
    profiles: xr.Dataset,
    *,
    to_depth: float,
    reference: str | xr.Dataset = "mean",
    salinity: str | None = None,
    temperature: str | None = None,
) -> xr.Dataset:
    """Change in steric height of each profile against a reference profile.

    Parameters
    ----------
    profiles : Dataset (profile or time, depth)
        ``salinity``, ``temperature`` [degC or K], coordinate ``depth`` in m, positive down, ascending; ``lat``, ``lon`` in degrees,
        one each or per row. NaN is a gap, bridged by a straight line between the profile's own levels.
    to_depth : float
        m below the surface to integrate to. Values there lie on the line between the levels beside it; the first level is
        extended to the surface.
    reference : "mean" or Dataset (depth)
        The mean of all profiles that reach ``to_depth``, or one profile as above, which must reach it.
    salinity : str, optional
        ``practical`` (no unit) or ``absolute`` (g kg-1); by default what the CF standard name says. A reference Dataset may say
        its own by its standard names.
    temperature : str, optional
        ``in situ``, ``potential`` (to the surface) or ``conservative``; by default what the CF standard name says.

    Returns
    -------
    Dataset (profile or time)
        ``thermosteric``, ``halosteric``, ``total``, ``remainder`` in mm, positive = expanded, a rise of sea level;
        ``depth_reached``, ``first_level`` and ``largest_gap`` (between levels, to ``to_depth``) in m; ``reason``, why a row is NaN
        (too short, begins deeper than 30 m, nothing held), else empty.

    Raises
    ------
    InputError, UnitsError
        If dimensions, coordinates, kinds, units or ranges cannot be used, or nothing reaches ``to_depth`` to make a reference.

    Source
    ------
    IOC, SCOR & IAPSO 2010 (TEOS-10).
    """
    deepest = real_number(to_depth, argument="to_depth", allowed="a depth in m, 1 to 12000", low=1.0, high=DEEPEST)
    told = {"salinity": salinity, "temperature": temperature}
    rows = row_of(profiles, "profiles")
    columns = columns_of(profiles, rows, told, "profiles")
    account = reach(columns, deepest)
    usable = np.array([not why for why in account["reason"]])
    nodes, weights = _nodes(columns, reference, deepest)
    salt, heat = (np.full((usable.size, nodes.size), np.nan) for _ in range(2))
    for row in np.flatnonzero(usable):
        salt[row], heat[row] = columns.at(int(row), nodes)
    if isinstance(reference, xr.Dataset):
        base = _given_reference(reference, told, deepest).at(0, nodes)
    else:
        one_of(reference, ("mean",), argument="reference", kind="reference profile")
        if not usable.any():
            raise InputError(f"profiles: none can be used to {deepest:g} m. The first: {account['reason'][0]}.")
        base = salt[usable].mean(axis=0), heat[usable].mean(axis=0)
    parts = _integrals((salt, heat), base, (nodes, columns.lat), weights)
    coords = {k: v for k, v in profiles.coords.items() if set(v.dims) <= {rows}}
    out = xr.Dataset(coords={**coords, "lat": (rows, columns.lat), "lon": (rows, columns.lon)})
    for name, values in parts.items():
        out[name] = (rows, values, {"units": "mm", "long_name": _MEANINGS[name]})
    for name, values in account.items():
        unit = {} if name == "reason" else {"units": "m"}
        out[name] = (rows, values, {**unit, "long_name": _ABOUT[name]})
    return out.assign_attrs(
        to_depth=deepest,
        reference="given" if isinstance(reference, xr.Dataset) else f"mean of the {int(usable.sum())} that can be used",
        comment="Integral of -(rho - rho0)/rho0 from the surface; positive = expanded. The first level reaches to the surface.",
        equation_of_state="TEOS-10, 75 terms",
    )


_ABOUT = {
    "depth_reached": "deepest level with salinity and temperature",
    "first_level": "shallowest level with salinity and temperature, extended to the surface",
    "largest_gap": "largest distance between levels used",
    "reason": "why there is no value",
}


def _nodes(columns: Columns, reference: str | xr.Dataset, deepest: float) -> tuple[Array, Array]:
    """Depths and weights in m: three Gauss nodes between neighbours among all levels, surface and deepest."""
    other = depths_of(reference, "reference") if isinstance(reference, xr.Dataset) else np.empty(0)
    inner = np.concatenate([columns.depth, other])
    edges = np.unique(np.concatenate([[0.0, deepest], inner[inner < deepest]]))
    nodes, weights = np.polynomial.legendre.leggauss(3)
    half = 0.5 * np.diff(edges)[:, None]
    return (edges[:-1, None] + half * (1.0 + nodes)).ravel(), (half * weights).ravel()


def _integrals(
    water: tuple[Array, Array], base: tuple[Array, Array], place: tuple[Array, Array], weights: Array
) -> dict[str, Array]:
    """The parts (row,) in mm of salinity and temperature (row, node) against a base (node,)."""
    import gsw  # noqa: PLC0415  only where sea water is asked for

    pressure = gsw.p_from_z(-place[0][None, :], place[1][:, None])
    density = gsw.rho(base[0], base[1], pressure)

    def height(salt: Array, heat: Array) -> Array:
        return 1e3 * ((1.0 - gsw.rho(salt, heat, pressure) / density) @ weights)

    thermosteric, halosteric, total = height(base[0], water[1]), height(water[0], base[1]), height(*water)
    return dict(zip(PARTS, (thermosteric, halosteric, total, total - thermosteric - halosteric), strict=True))


def _given_reference(reference: xr.Dataset, told: dict[str, str | None], deepest: float) -> Columns:
    """The one row of a reference profile, which must be usable."""
    if {"salinity", "temperature"} <= set(reference) and not set(ROWS) & set(reference["salinity"].dims):
        reference = reference.expand_dims("profile")
    columns = columns_of(reference, row_of(reference, "reference"), told, "reference")
    if columns.lat.size != 1:
        raise InputError(f"reference: must be one profile, got {columns.lat.size}. Select or average one.")
    why = reach(columns, deepest)["reason"][0]
    if why:
        raise InputError(f"reference: {why}. Give one that can be used to to_depth, or a smaller to_depth.")
    return columns


def shelf_mean(
    heights: xr.Dataset, sites: pd.DataFrame, *, radius_km: float = 100.0, period: str | None = None
) -> xr.Dataset:
    """Mean steric change of the profiles around each gauge.

    Parameters
    ----------
    heights : Dataset (profile)
        From :func:`steric_height`.
    sites : DataFrame
        Columns site, lat, lon.
    radius_km : float
        Profiles no farther than this from the gauge count, each alike.
    period : str, optional
        ``year`` or ``month``: one mean for each calendar period in which any profile was taken; needs a coordinate ``time``
        (profile). By default all profiles make one mean.

    Returns
    -------
    Dataset (site) or (site, time)
        ``thermosteric``, ``halosteric``, ``total``, ``remainder`` in mm, times the middles of periods; ``total_spread``, standard
        deviation (n - 1) of the profiles, NaN for one alone: profiles close by err together, so it is no sigma of the mean;
        ``profiles``, how many; ``reason``, why a value is NaN. ``attrs["comment"]`` says what a shelf cannot show.

    Raises
    ------
    InputError, SiteError
        If heights, sites, radius or period cannot be used.
    """
    table = check_sites(sites)
    allowed = "a positive number of km, at most 20000"
    radius = real_number(radius_km, argument="radius_km", allowed=allowed, low=1e-3, high=2e4)
    if (
        not isinstance(heights, xr.Dataset)
        or not {*PARTS, "reason"} <= set(heights)
        or heights["total"].dims != ("profile",)
    ):
        raise InputError(
            "heights: must be a Dataset (profile) from steric_height. A series (time) is one place already."
        )
    group, middles = _groups(heights, period)
    count = max(1, middles.size)
    names = [*PARTS, "total_spread"]
    means = {name: np.full((len(table), count), np.nan) for name in names}
    held = np.zeros((len(table), count), dtype=np.int64)
    usable = np.isfinite(heights["total"].values)
    places = heights["lat"].values, heights["lon"].values
    for row, (lat, lon) in enumerate(zip(table["lat"], table["lon"], strict=True)):
        near = usable & (distances_from((lat, lon), places) <= radius)
        for column in range(count):
            chosen = near & (group == column)
            held[row, column] = chosen.sum()
            if not held[row, column]:
                continue
            for name in PARTS:
                means[name][row, column] = heights[name].values[chosen].mean()
            if held[row, column] > 1:
                means["total_spread"][row, column] = heights["total"].values[chosen].std(ddof=1)
    reason = np.where(held > 0, "", f"no usable profile within {radius:g} km").astype(object)
    return _of_shelf(table, middles, {**means, "profiles": held, "reason": reason}, (heights, radius))


def _groups(heights: xr.Dataset, period: str | None) -> tuple[NDArray[np.int64], NDArray[np.datetime64]]:
    """Number of the period of each profile, and the middles of the periods; without periods all are 0 and there is none."""
    if period is None:
        return np.zeros(heights.sizes["profile"], dtype=np.int64), np.empty(0, dtype="datetime64[ns]")
    one_of(period, tuple(_PERIODS), argument="period", kind="period")
    if "time" not in heights.coords or heights["time"].dtype.kind != "M" or np.isnat(heights["time"].values).any():
        raise InputError(
            "heights: need a coordinate time (profile) of dates to be averaged by period. Set it on the profiles."
        )
    starts, group = np.unique(heights["time"].values.astype(_PERIODS[period]), return_inverse=True)
    first, end = (edge.astype("datetime64[ns]") for edge in (starts, starts + 1))
    return group, first + (end - first) // 2


def _of_shelf(
    table: pd.DataFrame, middles: NDArray[np.datetime64], values: dict[str, NDArray], made: tuple[xr.Dataset, float]
) -> xr.Dataset:
    """Label means (site, period)."""
    heights, radius = made
    dims = ("site", "time") if middles.size else ("site",)
    coords = {
        "site": table["site"].to_numpy(dtype=object),
        "lat": ("site", table["lat"]),
        "lon": ("site", table["lon"]),
    }
    out = xr.Dataset(coords={**coords, **({"time": middles} if middles.size else {})})
    words = {
        **{name: (f"mean {_MEANINGS[name]}", "mm") for name in PARTS},
        "total_spread": ("standard deviation of the profiles", "mm"),
        "profiles": ("number of profiles", "1"),
    }
    for name, array in values.items():
        meaning, unit = words.get(name, ("why there is no value", ""))
        attrs = {"long_name": meaning} | ({"units": unit} if unit else {})
        out[name] = (dims, array if middles.size else array[:, 0], attrs)
    return out.assign_attrs(
        heights.attrs | {"radius_km": radius, "comment": f"{heights.attrs.get('comment', '')} {_SHELF}"}
    )


def global_thermosteric(
    heat: xr.DataArray, sigma: xr.DataArray, *, efficiency: Constant = EXPANSION_EFFICIENCY
) -> xr.Dataset:
    """Global-mean thermosteric sea level of the heat that the ocean has taken up.

    Parameters
    ----------
    heat : DataArray (time)
        Heat gained since its own zero, ZJ or J (or convertible) in ``attrs["units"]``; NaN is a gap.
    sigma : DataArray (time)
        1 sigma, same times, with units of its own.
    efficiency : Constant
        Metres of rise per yottajoule and its 1 sigma, one error shared by all times.

    Returns
    -------
    Dataset (time)
        ``thermosteric`` in mm, positive = rise; ``thermosteric_sigma``, 1 sigma, and its parts ``sigma_of_heat`` and
        ``sigma_of_efficiency`` (systematic, in proportion to the value, hence 0 where the heat is), which add in squares.

    Raises
    ------
    InputError, UnitsError
        If dimensions, times, units or the efficiency cannot be used.

    Source
    ------
    IPCC AR6 WG1, 9.2.4.1.
    """
    if not isinstance(efficiency, Constant) or efficiency.unit != "m YJ-1":
        raise InputError(
            "efficiency: must be a Constant in m YJ-1, such as Constant(0.116, 'm YJ-1', 0.011, 'source')."
        )
    warmth, spread = _zettajoules(heat, "heat"), _zettajoules(sigma, "sigma")
    if not heat["time"].equals(sigma["time"]):
        raise InputError("sigma: must have the times of the heat. Make both from one table.")
    if (spread < 0.0).any() or (np.isfinite(warmth) & ~np.isfinite(spread)).any():
        raise InputError("sigma: must be 0 or more wherever the heat has a value.")
    parts = efficiency.value * spread, efficiency.uncertainty * np.abs(warmth)  # m YJ-1 is mm ZJ-1
    words = {
        "thermosteric": (efficiency.value * warmth, "global-mean thermosteric sea level"),
        "thermosteric_sigma": (np.hypot(*parts), "1 sigma of global-mean thermosteric sea level"),
        "sigma_of_heat": (parts[0], "part of the sigma: heat"),
        "sigma_of_efficiency": (parts[1], "part of the sigma: expansion efficiency, one error for all times"),
    }
    variables = {name: ("time", values, {"units": "mm", "long_name": said}) for name, (values, said) in words.items()}
    cite = f"{efficiency.value:g} +- {efficiency.uncertainty:g} {efficiency.unit}, {efficiency.source}"
    return xr.Dataset(variables, coords={"time": heat["time"]}, attrs={"expansion_efficiency": cite})


def _zettajoules(series: xr.DataArray, argument: str) -> Array:
    if not isinstance(series, xr.DataArray) or series.dims != ("time",) or "time" not in series.coords:
        raise InputError(f"{argument}: must be a DataArray (time) with its coordinate, in ZJ or J.")
    _, factor = vocabulary.require(series.attrs, ("ZJ",), argument=argument)
    values = np.asarray(series.values, dtype=np.float64) * factor
    if np.isinf(values).any():
        raise InputError(f"{argument}: must be finite, or NaN for a gap, got infinity.")
    return values


@dataclass(frozen=True, kw_only=True)
class ExpansionCheck:
    """One warming, as a constant expansion coefficient and as the expansion efficiency have it.

    Parameters
    ----------
    constant_coefficient : float
        mm: volume x coefficient x warming over the ocean's area.
    by_efficiency : float
        mm: heat of the same warming times the efficiency.
    error : float
        mm: the first less the second.
    relative_error : float
        Error over the second; NaN without warming.
    """

    constant_coefficient: float
    by_efficiency: float
    error: float
    relative_error: float


def constant_expansion_check(warming: float, *, coefficient: float) -> ExpansionCheck:
    """How far one expansion coefficient for the whole ocean is from its expansion efficiency; a check, not a way.

    Parameters
    ----------
    warming : float
        K, mean over the volume of the ocean (1.332e18 m3).
    coefficient : float
        K-1, taken for all water. The efficiency itself amounts to 1.81e-4 K-1 where heat goes as it has gone.

    Returns
    -------
    ExpansionCheck
        Rise in mm by both, and the error.

    Raises
    ------
    InputError
        If warming or coefficient is not a usable number.

    Source
    ------
    Charette & Smith 2010 (volume, area); TEOS-10 (heat capacity); IPCC AR6 WG1, 9.2.4.1 (efficiency).
    """
    real_number(warming, argument="warming", allowed="a number of K, -50 to 50", low=-50.0, high=50.0)
    allowed = "a number of K-1, -1e-3 to 1e-3"
    real_number(coefficient, argument="coefficient", allowed=allowed, low=-1e-3, high=1e-3)
    area = GIGATONNES_PER_MILLIMETRE.value * 1e9 / 1e-3  # m2: 1 Gt of fresh water is 1e9 m3
    plain = 1e3 * OCEAN_VOLUME.value * coefficient * warming / area
    heat = MEAN_DENSITY.value * HEAT_CAPACITY.value * OCEAN_VOLUME.value * warming * 1e-21
    usual = EXPANSION_EFFICIENCY.value * heat
    error = plain - usual
    return ExpansionCheck(
        constant_coefficient=plain,
        by_efficiency=usual,
        error=error,
        relative_error=error / usual if usual else float("nan"),
    )
