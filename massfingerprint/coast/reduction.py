"""How the values of a gauge become a rate: weights on the epochs used, for whatever is set beside it, and their noise.

Gauges are reduced by generalised least squares under their own noise, with the cycles, steps and tide asked for. Another observed
series, such as a global mean, has equal weights and the errors it came with. Last minus first is the other estimator: the mean of
the last twelve months minus that of the first twelve, of the months of the year that both hold; steps fitted beside the trend are
taken off.
"""

from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.arguments import one_of
from massfingerprint.coast import _noise
from massfingerprint.coast._epochs import DAYS_PER_YEAR, slope_weights
from massfingerprint.coast._errors import covariance
from massfingerprint.coast.components import Component
from massfingerprint.coast.gauge_corrections import nodal_tide
from massfingerprint.coast.gauge_trend import checked, choose, fitted
from massfingerprint.coast.trend_model import TrendModel, design_of, kept_series, step_dates, steps_of
from massfingerprint.errors import InputError

Array = NDArray[np.float64]
Times = NDArray[np.datetime64]
ESTIMATORS = ("least squares", "last minus first")
_YEAR = np.timedelta64(365, "D")
_FEW = "too few values that all terms share"


@dataclass(frozen=True)
class Reduced:
    """Weights (n,) in yr-1 on the epochs used, years between, variance of the noise and its model; or why there are none."""

    weights: Array = field(default_factory=lambda: np.empty(0))
    years: float = np.nan
    variance: float = np.nan
    noise: str = ""
    reason: str = ""


class Reducer(Protocol):
    """What was observed, and how it is reduced."""

    @property
    def seen(self) -> Component:
        """Values (site, time) in mm."""
        ...

    def reduce(self, row: int, used: NDArray[np.bool_]) -> Reduced:
        """Weights of one site from the epochs used (ntime,)."""
        ...

    def covariance(self, weights: Array, variances: Array) -> Array:
        """Covariance (site, site) of the rates with weights (site, time); ``variances`` (site,) as ``reduce`` gave them."""
        ...


def reducer(
    observed: Component | xr.Dataset, *, estimator: str, model: TrendModel | None, noise: str, criterion: str = "BIC"
) -> Reducer:
    """The way a budget reduces what was observed.

    Parameters
    ----------
    observed : Component or Dataset (gauge, time)
        A series with errors of its own, or gauges of ``read_gauges``.
    estimator : str
        One of ``ESTIMATORS``.
    model : TrendModel, optional
        What is fitted beside level and rate; for gauges ``TrendModel()`` by default, else nothing.
    noise, criterion : str
        As for ``gauge_trend``.

    Returns
    -------
    Reducer

    Raises
    ------
    InputError
        If a choice cannot be used.
    """
    one_of(estimator, ESTIMATORS, argument="estimator", kind="estimator")
    if isinstance(observed, Component):
        model = model or TrendModel(seasonal=False)
        if model.acceleration or model.nodal != "none" or model.steps:
            raise InputError(
                "model: only a yearly cycle can be fitted beside a series that is no gauge's. Leave it out."
            )
        if model.seasonal and estimator == ESTIMATORS[1]:
            raise InputError("model: 'last minus first' fits no yearly cycle. Use 'least squares'.")
        return _Given(observed, estimator, model.seasonal)
    model = checked(observed, model or TrendModel(), noise, criterion)
    return _Gauges(_as_component(observed, model), observed, estimator, model, (noise, criterion))


def _as_component(levels: xr.Dataset, model: TrendModel) -> Component:
    values = levels["level"].transpose("gauge", "time").values.astype(np.float64)
    if model.nodal == "equilibrium":
        values = values - nodal_tide(levels).transpose("gauge", "time").values
    names = tuple(str(name) for name in levels["gauge"].values)
    return Component(levels["time"].values.astype("datetime64[ns]"), names, values, "observed", ())


@dataclass(frozen=True)
class _Given:
    """A series with errors of its own, equal weights."""

    seen: Component
    estimator: str
    seasonal: bool

    def reduce(self, row: int, used: NDArray[np.bool_]) -> Reduced:
        """As the protocol says."""
        del row
        epochs = self.seen.time[used]
        if self.estimator == ESTIMATORS[1]:
            weights, years = difference_weights(epochs)
        else:
            weights, years = slope_weights(epochs, None, seasonal=self.seasonal), years_of(epochs)
        return Reduced(reason=_FEW) if weights is None else Reduced(weights, years)

    def covariance(self, weights: Array, variances: Array) -> Array:
        """As the protocol says."""
        del variances
        return covariance(self.seen.parts, self.seen.parts, weights, weights)


@dataclass(frozen=True)
class _Gauges:
    """Gauges, each with its own noise, independent of each other."""

    seen: Component
    levels: xr.Dataset
    estimator: str
    model: TrendModel
    choice: tuple[str, str]

    def reduce(self, row: int, used: NDArray[np.bool_]) -> Reduced:
        """As the protocol says; too few or unsuitable epochs are a reason."""
        held = self.levels.isel(gauge=[row])
        values = np.where(used, self.seen.values[row], np.nan)
        held = held.assign(level=(("gauge", "time"), values[None], held["level"].attrs))
        shifts = step_dates(self.model.steps, self.seen.sites[row])
        try:
            series = kept_series(held, 0, None)
            inside = shifts[(shifts > series.time[0]) & (shifts <= series.time[-1])]
            steps = steps_of(inside, series.name, series)
            design = design_of(series, self.model, steps)
            fits = fitted(series, design, series.values, self.choice[0])
        except InputError as error:  # what cannot be reduced keeps its reason in the table
            return Reduced(reason=str(error))
        fit = fits[choose(fits, self.choice[1])]
        if self.estimator == ESTIMATORS[0]:
            return Reduced(fit.rows[1], years_of(series.time), float(fit.covariance[1, 1]), fit.model)
        weights, years = difference_weights(series.time)
        if weights is None:
            return Reduced(reason=_FEW)
        first = 2 + self.model.acceleration
        for place in range(first, first + steps.size):
            weights = weights - (weights @ design[:, place]) * fit.rows[place]
        return Reduced(weights, years, _noise.variance_of(fit, series.index, weights), fit.model)

    def covariance(self, weights: Array, variances: Array) -> Array:
        """As the protocol says."""
        return np.diag(np.where(weights.any(axis=1), variances, 0.0))


def years_of(epochs: Times) -> float:
    """Years from the first to the last epoch."""
    return float((epochs[-1] - epochs[0]) / np.timedelta64(1, "D")) / DAYS_PER_YEAR if epochs.size else np.nan


def difference_weights(epochs: Times) -> tuple[Array | None, float]:
    """Weights (n,) in yr-1 of last minus first, and the years between both; None where there is no such pair.

    Parameters
    ----------
    epochs : (n,) datetime64 array
        Ascending.

    Returns
    -------
    (array (n,) or None, float)
        The mean of the last twelve months minus that of the first twelve, of the calendar months both have; of yearly values the
        last minus the first.
    """
    if epochs.size < 2:
        return None, np.nan
    early, late = epochs - epochs[0] < _YEAR, epochs[-1] - epochs < _YEAR
    if (early & late).any():
        return None, np.nan
    if early.sum() > 1 or late.sum() > 1:
        month = epochs.astype("datetime64[M]").astype(np.int64) % 12
        shared = np.intersect1d(month[early], month[late])
        early, late = early & np.isin(month, shared), late & np.isin(month, shared)
        if not shared.size:
            return None, np.nan
    days = (epochs - epochs[0]) / np.timedelta64(1, "D")
    weights = late / late.sum() - early / early.sum()
    years = float(weights @ days) / DAYS_PER_YEAR
    return weights / years, years
