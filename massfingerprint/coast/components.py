"""What a budget adds up: series at sites, what kind of term they are, and how their errors go together.

A term of the user's own has one error model, and errors that its sites share or do not. Mass sources have the covariance of their
ledger: the same ice drives every site, and sources may be correlated.
"""

from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import one_of
from massfingerprint.coast._errors import MassErrors, OwnErrors, Part, RateErrors, same
from massfingerprint.coast.land_motion import KINDS
from massfingerprint.errors import InputError, UnitsError, nearest_names
from massfingerprint.mass.barystatic import check_factor
from massfingerprint.mass.covariance import COMPONENTS
from massfingerprint.mass.ledger import check_ledger
from massfingerprint.mass.rates import DAYS_PER_YEAR

Array = NDArray[np.float64]
Times = NDArray[np.datetime64]
# As wide as nanoseconds can be told apart in one number; monthly records of gauges start later
ALWAYS = np.array(["1800-01-01", "2090-01-01"], dtype="datetime64[ns]")
_ELAPSED = np.array([0.0, (ALWAYS[1] - ALWAYS[0]) / np.timedelta64(1, "D") / DAYS_PER_YEAR])
OCEAN = "steric and dynamic"
MASS_KINDS = {"relative_sea_level": "mass, relative sea level", "sea_surface": "mass, sea surface"}


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
        Its part of relative sea level in mm, positive = rise; NaN where there is none.
    kind : str
        A key of ``land_motion.KINDS``; kinds of path A and B do not go together.
    parts : tuple of Part
        Its errors; those of one family are related.
    world_mean : (ntime,) array or None
        The mean of the term over the whole ocean in mm, where it has one.
    """

    time: Times
    sites: tuple[str, ...]
    values: Array = field(repr=False)
    kind: str
    parts: tuple[Part, ...] = field(repr=False)
    world_mean: Array | None = field(default=None, repr=False)

    def at(self, sites: tuple[str, ...]) -> "Component":
        """The same at other sites, in their order; NaN without error where it has none.

        Parameters
        ----------
        sites : tuple of str
            Any names.

        Returns
        -------
        Component
            With one row for each of them.
        """
        if sites == self.sites:
            return self
        rows = np.array([self.sites.index(name) if name in self.sites else -1 for name in sites])
        values = np.where((rows >= 0)[:, None], self.values[rows], np.nan)
        parts = tuple(_placed(part, rows, len(self.sites)) for part in self.parts)
        return replace(self, sites=sites, values=values, parts=parts)


def _placed(part: Part, rows: NDArray[np.intp], count: int) -> Part:
    """A part at other sites; rows of rows where it was moved before."""
    if part.rows is not None:
        rows, count = np.where(rows >= 0, part.rows[rows], -1), part.count
    return replace(part, rows=rows, count=count)


def component(
    series: xr.DataArray,
    sigma: xr.DataArray,
    *,
    error_model: str,
    kind: str = OCEAN,
    shared_between_sites: bool = False,
    world_mean: xr.DataArray | None = None,
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
    kind : str
        What it is, a key of ``land_motion.KINDS``.
    shared_between_sites : bool
        Whether all sites have one and the same error, scaled by their sigmas; else each its own.
    world_mean : DataArray (time), optional
        Its mean over the whole ocean at the same times, such as global-mean thermosteric sea level.

    Returns
    -------
    Component
        Ready for ``budget``.

    Raises
    ------
    InputError, UnitsError
        If dimensions, coordinates, units, the kind or the error model cannot be used.
    """
    one_of(error_model, COMPONENTS, argument="error_model", kind="error model")
    one_of(kind, tuple(KINDS), argument="kind", kind="kind of term")
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
    errors = OwnErrors(np.nan_to_num(held), elapsed, error_model, bool(shared_between_sites))
    sites = tuple(str(name) for name in values["site"].values)
    mean = None if world_mean is None else _world_mean(world_mean, values)
    rows = values.transpose("site", "time").values * scale
    return Component(time, sites, rows, kind, (Part(errors, "", same),), mean)


def _world_mean(mean: xr.DataArray, values: xr.DataArray) -> Array:
    if not isinstance(mean, xr.DataArray) or mean.dims != ("time",) or "time" not in mean.coords:
        raise InputError("world_mean: must be a DataArray (time) with its coordinate, in a unit of length.")
    _, factor = vocabulary.require({"units": mean.attrs.get("units", "mm")}, ("mm",), argument="world_mean")
    if not mean.indexes["time"].equals(values.indexes["time"]):
        raise InputError("world_mean: must have the times of the series.")
    return np.asarray(mean.values * factor, dtype=np.float64)


def rate_component(
    rates: xr.DataArray, sigma: xr.DataArray, *, kind: str = "residual land motion", shared_between_sites: bool = False
) -> Component:
    """A term that changes at a constant rate, such as land motion.

    Parameters
    ----------
    rates, sigma : DataArray (site)
        Its part of relative sea level in mm yr-1 (of land motion minus the uplift), and 1 sigma; NaN where there is none.
    kind : str
        What it is, a key of ``land_motion.KINDS``.
    shared_between_sites : bool
        Whether all sites have one and the same error, scaled by their sigmas.

    Returns
    -------
    Component
        One error for all times: the sigma of its rate over any epochs is ``sigma``. It is taken to hold for as long as any gauge.

    Raises
    ------
    InputError
        If rates and sigmas do not go together.
    """
    one_of(kind, tuple(KINDS), argument="kind", kind="kind of term")
    for part, name in ((rates, "rates"), (sigma, "sigma")):
        if not isinstance(part, xr.DataArray) or part.dims != ("site",) or np.isinf(part.values).any():
            raise InputError(f"{name}: must be a DataArray (site) of numbers, mm yr-1.")
    lacking = np.isfinite(rates.values) & ~np.isfinite(sigma.values)
    if list(rates["site"].values) != list(sigma["site"].values) or (sigma.values < 0.0).any() or lacking.any():
        raise InputError("sigma: must have the sites of the rates, 0 or more.")
    spread = np.nan_to_num(sigma.values)
    related = np.outer(spread, spread) if shared_between_sites else np.diag(spread**2)
    family = RateErrors(("own",), related[None, :, None, :])
    sites = tuple(str(name) for name in rates["site"].values)
    return constant(sites, rates.values, kind, (Part(family, "own", over_years),))


def constant(sites: tuple[str, ...], rates: Array, kind: str, parts: tuple[Part, ...]) -> Component:
    """A term of constant rates (site,) in mm yr-1; its parts take weights on two times.

    Parameters
    ----------
    sites : tuple of str
        Where.
    rates : (nsite,) array
        NaN where there is none.
    kind : str
        A key of ``KINDS``.
    parts : tuple of Part
        Errors of the rates; ``over_years`` makes their weights.

    Returns
    -------
    Component
        On the two times of ``ALWAYS``, 0 at the first.
    """
    return Component(ALWAYS, sites, np.outer(rates, _ELAPSED), kind, parts, np.zeros(2))


def over_years(weights: Array) -> Array:
    """What weights (site, 2) on ``ALWAYS`` make of 1 mm a year: (site, 1), 1 for the weights of any rate."""
    return (weights @ _ELAPSED)[:, None]


def mass_components(
    values: xr.Dataset, ledger: xr.Dataset, *, field_name: str = "relative_sea_level", gt_per_mm: float | None = None
) -> dict[str, Component]:
    """One term per mass source: pattern times mass change.

    Parameters
    ----------
    values : Dataset (source, site)
        In mm Gt-1 per gigatonne added, from ``coast_values`` or ``at_sites``; the sources of the ledger.
    ledger : Dataset (source, time)
        Cumulative mass change in Gt, negative = loss.
    field_name : str
        ``relative_sea_level``, or ``sea_surface`` for path B of ``land_motion``.
    gt_per_mm : float, optional
        Gt per mm of the world mean; by default what the values say in ``gigatonnes_per_millimetre``; without both no world mean.

    Returns
    -------
    dict of source to Component
        Their errors are those of the ledger, the same for every site, correlated between sources as the ledger says.

    Raises
    ------
    InputError, UnitsError
        If sources differ or patterns are not per gigatonne.
    """
    return mass_terms(values, ledger, MassErrors(check_ledger(ledger)), field_name=field_name, gt_per_mm=gt_per_mm)


def mass_terms(
    values: xr.Dataset,
    ledger: xr.Dataset,
    errors: MassErrors,
    *,
    field_name: str = "relative_sea_level",
    gt_per_mm: float | None = None,
) -> dict[str, Component]:
    """The same with errors that other terms, such as land motion, share with the ledger."""
    one_of(field_name, tuple(MASS_KINDS), argument="field_name", kind="field of a budget")
    per_gt, sites = patterns_of(values, ledger, field_name)
    factor = values.attrs.get("gigatonnes_per_millimetre") if gt_per_mm is None else gt_per_mm
    mass = ledger["mass_change"].transpose("source", "time").values
    time = ledger["time"].values.astype("datetime64[ns]")
    names = [str(name) for name in ledger["source"].values]
    return {
        source: Component(
            time,
            sites,
            per_gt[row][:, None] * mass[row][None, :],
            MASS_KINDS[field_name],
            (Part(errors, source, _scaled(per_gt[row])),),
            None if factor is None else -mass[row] / check_factor(float(factor)),
        )
        for row, source in enumerate(names)
    }


def _scaled(per_gt: Array) -> Callable[[Array], Array]:
    return lambda weights: weights * per_gt[:, None]


def patterns_of(values: xr.Dataset, ledger: xr.Dataset, name: str) -> tuple[Array, tuple[str, ...]]:
    """Millimetres per gigatonne (source, site) in the order of the ledger's sources, and the sites.

    Parameters
    ----------
    values : Dataset (source, site)
        With ``name`` in mm Gt-1.
    ledger : Dataset (source, time)
        Its sources must be among those of the values.
    name : str
        Field.

    Returns
    -------
    (array (source, site), tuple of str)

    Raises
    ------
    InputError, UnitsError
        If the field, its unit or a source is missing.
    """
    if not isinstance(values, xr.Dataset) or name not in values:
        raise InputError(f"values: hold no {name} (source, site). Use coast_values or at_sites.")
    field_ = values[name].transpose("source", "site")
    if field_.attrs.get("units") != "mm Gt-1":
        raise UnitsError(
            f"values: must be in mm Gt-1, got {field_.attrs.get('units')!r}. Solve with a load in kg m-2 Gt-1."
        )
    known, wanted = ([str(name) for name in data["source"].values] for data in (field_, ledger))
    for source in wanted:
        if source not in known:
            raise InputError(f"values: none for {source!r} of the ledger. {nearest_names(source, known)}")
    rows = np.asarray(field_.values[[known.index(source) for source in wanted]], dtype=np.float64)
    return rows, tuple(str(name) for name in field_["site"].values)


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
