"""What a budget adds up: series at sites, and how their errors go together in time, between sites and with each other.

A budget only ever needs the covariance of weighted sums over time. A component of the user's own has one error model, and errors
that its sites share or do not. Mass sources have the covariance of their ledger: the same ice drives every site, and sources may be
correlated.
"""

from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import one_of
from massfingerprint.errors import InputError, UnitsError, nearest_names
from massfingerprint.mass.covariance import COMPONENTS, component_covariance, cross_covariance, source_correlation
from massfingerprint.mass.ledger import check_ledger
from massfingerprint.mass.rates import DAYS_PER_YEAR, check_windows

Array = NDArray[np.float64]
Times = NDArray[np.datetime64]


class Errors(Protocol):
    """How the errors of one or several components go together."""

    def cross(self, first: str, second: str, weights: Array, others: Array) -> Array:
        """Covariance (site, site), mm2 times the weights' units, of sums over time with weights (site, time) of two components."""
        ...


@dataclass(frozen=True, eq=False)
class Component:
    """One term of a budget.

    Parameters
    ----------
    time : (ntime,) datetime64 array
        Ascending.
    sites : tuple of str
        Where.
    values : (nsite, ntime) array
        Relative sea level in mm, positive = rise; NaN where there is none.
    name : str
        What the errors call it.
    errors : Errors
        Components with the same object have related errors.
    """

    time: Times
    sites: tuple[str, ...]
    values: Array = field(repr=False)
    name: str
    errors: Errors = field(repr=False)


@dataclass(frozen=True, eq=False)
class _OwnErrors:
    """Errors of one component: sigma (site, time) of one model, shared by all sites or each its own."""

    sigma: Array
    elapsed: Array
    model: str
    shared: bool

    def cross(self, first: str, second: str, weights: Array, others: Array) -> Array:
        """As the protocol says; there is one component only."""
        del first, second
        count = len(self.sigma)
        out = np.zeros((count, count))
        for i in range(count):
            for j in range(count) if self.shared else (i,):
                matrix = component_covariance(self.model, self.sigma[i], self.sigma[j], self.elapsed)
                out[i, j] = weights[i] @ matrix @ others[j]
        return out


@dataclass(frozen=True, eq=False)
class _MassErrors:
    """Errors of mass sources: those of the ledger, times mm per gigatonne (source, site)."""

    ledger: xr.Dataset
    per_gigatonne: Array

    def cross(self, first: str, second: str, weights: Array, others: Array) -> Array:
        """As the protocol says."""
        if first != second and source_correlation(self.ledger, first, second) == 0.0:
            return np.zeros((len(weights), len(others)))
        names = [str(name) for name in self.ledger["source"].values]
        matrix = np.nan_to_num(cross_covariance(self.ledger, first, second).values)
        rows = weights * self.per_gigatonne[names.index(first)][:, None]
        columns = others * self.per_gigatonne[names.index(second)][:, None]
        return rows @ matrix @ columns.T


def component(
    series: xr.DataArray, sigma: xr.DataArray, *, error_model: str, shared_between_sites: bool = False
) -> Component:
    """A term of a budget from a series and its standard uncertainty.

    Parameters
    ----------
    series : DataArray (time, site)
        Relative sea level, mm, m or another unit of length in ``attrs["units"]`` (mm if there is none), NaN where there is none.
    sigma : DataArray (time, site)
        1 sigma, same unit and coordinates.
    error_model : str
        ``independent``, ``systematic`` or ``random_walk`` (from the first time on), as for mass records.
    shared_between_sites : bool
        Whether all sites have one and the same error, scaled by their sigmas; else each its own.

    Returns
    -------
    Component
        Ready for ``budget``.

    Raises
    ------
    InputError, UnitsError
        If dimensions, coordinates, units or the error model cannot be used.
    """
    one_of(error_model, COMPONENTS, argument="error_model", kind="error model")
    tables = [_table(part, name) for part, name in ((series, "series"), (sigma, "sigma"))]
    (values, scale), (spread, other) = tables
    if not values.indexes["time"].equals(spread.indexes["time"]) or list(values["site"].values) != list(
        spread["site"].values
    ):
        raise InputError("sigma: must have the times and sites of the series. Make both from one table.")
    held = spread.transpose("site", "time").values * other
    if (held < 0.0).any() or (np.isfinite(values.transpose("site", "time").values) & ~np.isfinite(held)).any():
        raise InputError("sigma: must be 0 or more wherever the series has a value.")
    time = values["time"].values.astype("datetime64[ns]")
    elapsed = (time - time[0]) / np.timedelta64(1, "D") + 1.0  # the walk starts before the first time
    errors = _OwnErrors(np.nan_to_num(held), elapsed, error_model, bool(shared_between_sites))
    sites = tuple(str(name) for name in values["site"].values)
    return Component(time, sites, values.transpose("site", "time").values * scale, "own", errors)


def rate_component(
    rates: xr.DataArray, sigma: xr.DataArray, *, start: str, end: str, shared_between_sites: bool = False
) -> Component:
    """A term that changes at a constant rate, such as land motion or glacial isostatic adjustment.

    Parameters
    ----------
    rates, sigma : DataArray (site)
        Its part of relative sea level in mm yr-1 (of land motion minus the uplift), and 1 sigma.
    start, end : str
        ISO dates between which it holds.
    shared_between_sites : bool
        Whether all sites have one and the same error, scaled by their sigmas.

    Returns
    -------
    Component
        One error for all times: the sigma of its rate over any epochs is ``sigma``.

    Raises
    ------
    InputError
        If rates and sigmas do not go together or the dates cannot be used.
    """
    for part, name in ((rates, "rates"), (sigma, "sigma")):
        if not isinstance(part, xr.DataArray) or part.dims != ("site",) or not np.isfinite(part.values).all():
            raise InputError(f"{name}: must be a DataArray (site) of finite numbers, mm yr-1.")
    if list(rates["site"].values) != list(sigma["site"].values) or (sigma.values < 0.0).any():
        raise InputError("sigma: must have the sites of the rates, 0 or more.")
    ends = np.array(check_windows({"start, end": (start, end)})["start, end"])
    years = (ends - ends[0]) / np.timedelta64(1, "D") / DAYS_PER_YEAR
    errors = _OwnErrors(np.outer(sigma.values, years), years, "systematic", bool(shared_between_sites))
    sites = tuple(str(name) for name in rates["site"].values)
    return Component(ends, sites, np.outer(rates.values, years), "own", errors)


def mass_components(values: xr.Dataset, ledger: xr.Dataset) -> dict[str, Component]:
    """One term per mass source: pattern times mass change.

    Parameters
    ----------
    values : Dataset (source, site)
        ``relative_sea_level`` in mm Gt-1 per gigatonne added, from ``coast_values`` or ``at_sites``; the sources of the ledger.
    ledger : Dataset (source, time)
        Cumulative mass change in Gt, negative = loss.

    Returns
    -------
    dict of source to Component
        Their errors are those of the ledger, the same for every site, correlated between sources as the ledger says.

    Raises
    ------
    InputError, UnitsError
        If sources differ or patterns are not per gigatonne.
    """
    ledger = check_ledger(ledger)
    if not isinstance(values, xr.Dataset) or "relative_sea_level" not in values:
        raise InputError("values: hold no relative_sea_level (source, site). Use coast_values or at_sites.")
    field_ = values["relative_sea_level"].transpose("source", "site")
    if field_.attrs.get("units") != "mm Gt-1":
        raise UnitsError(
            f"values: must be in mm Gt-1, got {field_.attrs.get('units')!r}. Solve with a load in kg m-2 Gt-1."
        )
    known, wanted = ([str(name) for name in data["source"].values] for data in (field_, ledger))
    for source in wanted:
        if source not in known:
            raise InputError(f"values: none for {source!r} of the ledger. {nearest_names(source, known)}")
    per_gt = field_.values[[known.index(source) for source in wanted]]
    errors, sites = _MassErrors(ledger, per_gt), tuple(str(name) for name in field_["site"].values)
    mass = ledger["mass_change"].transpose("source", "time").values
    time = ledger["time"].values.astype("datetime64[ns]")
    return {
        source: Component(time, sites, per_gt[row][:, None] * mass[row][None, :], source, errors)
        for row, source in enumerate(wanted)
    }


def _table(part: xr.DataArray, argument: str) -> tuple[xr.DataArray, float]:
    """Series with sound coordinates, and the factor to mm."""
    if (
        not isinstance(part, xr.DataArray)
        or set(part.dims) != {"time", "site"}
        or not {"time", "site"} <= set(part.coords)
    ):
        found = part.dims if isinstance(part, xr.DataArray) else type(part).__name__
        raise InputError(f"{argument}: must be a DataArray (time, site) with both coordinates, got {found}.")
    if part.sizes["time"] < 2 or not part.indexes["time"].is_monotonic_increasing or not part.indexes["time"].is_unique:
        raise InputError(f"{argument}: needs two times or more, ascending, each once.")
    _, factor = vocabulary.require({"units": part.attrs.get("units", "mm")}, ("mm",), argument=argument)
    return part, factor
