"""What a gauge recorded and what explains it: every term reduced exactly as the gauge is, and whether the sum closes.

One estimator for all: the epochs of the gauge that every term covers, the same weights, the same regressors. Each rate is a
weighted sum of values, so the rates of the parts add to the rate of their sum to rounding, and every variance is w C w. A gauge's
own noise is what its record shows beside its trend; where a term explains part of it, the sigma of the gauge is on the safe side.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.coast._epochs import Between, between
from massfingerprint.coast._errors import covariance
from massfingerprint.coast.closure import CONFIDENCE, chi_square_together, chi_squares
from massfingerprint.coast.components import Component
from massfingerprint.coast.land_motion import check_together
from massfingerprint.coast.reduction import Reduced, Reducer, reducer
from massfingerprint.coast.trend_model import TrendModel
from massfingerprint.errors import InputError, SiteError, nearest_names
from massfingerprint.mass.rates import check_windows

Array = NDArray[np.float64]
WHOLE = "whole record"
_NOTHING = np.datetime64("NaT", "ns")


def budget(
    observed: Component | xr.Dataset,
    components: Mapping[str, Component],
    *,
    windows: Mapping[str, Any] | None = None,
    estimator: str = "least squares",
    model: TrendModel | None = None,
    noise: str = "choose",
) -> xr.Dataset:
    """Rate of each term over each window at each site, what is left, and whether it closes.

    Parameters
    ----------
    observed : Dataset (gauge, time) or Component
        Gauges from ``read_gauges``; or a series with errors of its own, such as a global mean.
    components : mapping of name to Component
        Terms of the sum, found by the names of the gauges. All of path A or all of path B of ``land_motion``.
    windows : mapping of name to (start, end), optional
        ISO dates, both ends included; by default one, of the whole record of each gauge.
    estimator : str
        ``"least squares"`` (slope) or ``"last minus first"`` (twelve months).
    model : TrendModel, optional
        What is fitted beside level and rate; for gauges yearly cycles by default.
    noise : str
        Of gauges, as for ``gauge_trend``.

    Returns
    -------
    Dataset (window, site, component)
        ``rate``, ``rate_sigma``, ``world_mean`` [mm yr-1], ``value``, ``value_sigma`` [mm] = rate times the years used, ``share``
        of the sum of the terms; NaN for a term without values there. (window, site): ``observed``, ``explained``, ``residual``
        with ``_sigma`` [mm yr-1], ``chi_square``, ``closes`` (1, 0, -1 not judged), ``dominant``, the term or ``observed`` with
        the largest variance, ``missing``, names of terms without values, which the sum lacks, ``epochs``, ``first``, ``last``,
        ``years``, ``covered``, the share of the gauge's values in the window that was used, ``limited_by``, the term with
        the fewest, ``noise`` of the gauge, ``reason`` if there is no number; (window, site, time): ``weights`` [yr-1]; (window):
        ``chi_square_all``, ``degrees_of_freedom``, ``closes_all``; ``residual_covariance`` (window, site, site_other)
        in mm2 yr-2; coordinate ``kind`` (component). A year is 365.25 days. What can be explained is ``first`` to ``last``.

    Raises
    ------
    InputError, SiteError
        If choices do not go together, kinds of terms count land motion twice, or a term is at none of the gauges.
    """
    how = reducer(observed, estimator=estimator, model=model, noise=noise)
    seen = how.seen
    terms = _at_gauges(seen, components)
    check_together({name: term.kind for name, term in terms.items()})
    ends = (str(seen.time[0])[:10], str(seen.time[-1] + np.timedelta64(1, "D"))[:10])
    spans = check_windows({WHOLE: ends} if windows is None else windows)
    out = [_balance(how, terms, _reduce(how, terms, span)) for span in spans.values()]
    whole = xr.concat(out, dim="window", coords="minimal", compat="override", join="exact")
    kinds = np.array([term.kind for term in terms.values()], dtype=object)
    whole = whole.assign_coords(window=np.array(list(spans), dtype=object), kind=("component", kinds))
    return whole.assign_attrs(estimator=estimator, confidence=CONFIDENCE, year="365.25 days", unit_of_rates="mm yr-1")


def _at_gauges(seen: Component, components: Mapping[str, Component]) -> dict[str, Component]:
    """Terms with their sites in the order of the gauges."""
    if not components:
        raise InputError("components: name at least one term.")
    if "observed" in components:
        raise InputError("components: 'observed' is what the gauge recorded. Give the term another name.")
    for name, term in components.items():
        if not set(term.sites) & set(seen.sites):
            raise SiteError(
                f"components: {name!r} is at none of the gauges ({', '.join(term.sites[:3])}, ...). "
                f"{nearest_names(term.sites[0], seen.sites)}"
            )
    return {name: term.at(seen.sites) for name, term in components.items()}


@dataclass(frozen=True)
class _Window:
    """One window: weights of the observed (site, time) and of each term (site, its time), and what was used."""

    observed: Array
    variances: Array
    terms: dict[str, Array]
    about: dict[str, list[Any]]

    @property
    def there(self) -> NDArray[np.bool_]:
        """Whether each site has a number."""
        return np.array([reason == "" for reason in self.about["reason"]])

    def lacks(self, name: str) -> NDArray[np.bool_]:
        """Whether a term is missing, for each site."""
        return np.array([name in missing for missing in self.about["missing"]])


def _reduce(how: Reducer, terms: dict[str, Component], span: tuple[np.datetime64, np.datetime64]) -> _Window:
    """Weights of every series at every site for one window; zeros where there is no number."""
    seen = how.seen
    count = len(seen.sites)
    weights, variances = np.zeros((count, seen.time.size)), np.full(count, np.nan)
    others = {name: np.zeros((count, term.time.size)) for name, term in terms.items()}
    about: dict[str, list[Any]] = {name: [] for name in _KINDS_OF_ABOUT}
    for row in range(count):
        held = np.isfinite(seen.values[row]) & (seen.time >= span[0]) & (seen.time <= span[1])
        places = _places(terms, row, seen.time[held])
        found, used = _found(how, row, held, places)
        if not found.reason:
            weights[row, used], variances[row] = found.weights, found.variance
            for name, place in places.items():
                others[name][row] = place.spread(weights[row, held], terms[name].time.size)
        for name, entry in _about(terms, places, seen.time[used], (found, int(held.sum()))).items():
            about[name].append(entry)
    return _Window(weights, variances, others, about)


def _places(terms: dict[str, Component], row: int, epochs: NDArray[np.datetime64]) -> dict[str, Between]:
    """Where the epochs of a gauge stand in each term that has values at some of them."""
    out = {}
    for name, term in terms.items():
        held = np.isfinite(term.values[row])
        if held.any() and epochs.size:
            place = between(term.time, held, epochs)
            if place.held.any():
                out[name] = place
    return out


def _found(
    how: Reducer, row: int, held: NDArray[np.bool_], places: dict[str, Between]
) -> tuple[Reduced, NDArray[np.bool_]]:
    """Reduction of one site, and the epochs (ntime,) it used."""
    if not held.any():
        return Reduced(reason="the gauge has no values in the window"), held
    if not places:
        return Reduced(reason="no term has values at the gauge's times in the window"), np.zeros_like(held)
    used = held.copy()
    used[held] = np.all([place.held for place in places.values()], axis=0)
    if not used.any():
        return Reduced(reason="no time in the window is covered by all terms; leave one out or move the window"), used
    return how.reduce(row, used), used


def _about(
    terms: dict[str, Component], places: dict[str, Between], epochs: NDArray[np.datetime64], what: tuple[Reduced, int]
) -> dict[str, Any]:
    """What is said of one site in one window."""
    found, values = what
    shares = {name: float(place.held.mean()) for name, place in places.items()}
    least = min(shares, key=lambda name: shares[name], default="")
    return {
        "epochs": int(epochs.size),
        "first": epochs[0] if epochs.size else _NOTHING,
        "last": epochs[-1] if epochs.size else _NOTHING,
        "years": found.years,
        "covered": epochs.size / values if values else 0.0,
        "limited_by": least if shares and shares[least] < 1.0 else "",
        "missing": [name for name in terms if name not in places],
        "noise": found.noise,
        "reason": found.reason,
    }


_KINDS_OF_ABOUT: dict[str, Any] = {
    "epochs": np.int64,
    "first": "datetime64[ns]",
    "last": "datetime64[ns]",
    "years": np.float64,
    "covered": np.float64,
    "limited_by": object,
    "missing": object,
    "noise": object,
    "reason": object,
}


def _balance(how: Reducer, terms: dict[str, Component], window: _Window) -> xr.Dataset:
    """Rates, residual and closure of one window."""
    seen, there = how.seen, window.there
    rate = np.stack([_sum(window.terms[name], term.values) for name, term in terms.items()], axis=-1)
    mean = np.stack([_world_mean(term, window.terms[name]) for name, term in terms.items()], axis=-1)
    lacking = np.stack([window.lacks(name) for name in terms], axis=-1)
    found = _sum(window.observed, seen.values)
    own = how.covariance(window.observed, np.nan_to_num(window.variances))
    pairs = _covariances(terms, window)
    explained = np.sum(list(pairs.values()), axis=0)
    parts = np.sqrt(np.maximum(np.stack([np.diag(pairs[name, name]) for name in terms], axis=-1), 0.0))
    total, whole = rate.sum(axis=-1), own + explained
    residual, judged = found - total, there & ~lacking.any(axis=-1)
    names = np.array(["observed", *terms], dtype=object)
    largest = np.argmax(np.column_stack([np.sqrt(np.diag(own)), parts]), axis=1)
    sums = {"observed": (found, own), "explained": (total, explained), "residual": (residual, whole)}
    share = np.divide(rate, total[:, None], out=np.full(rate.shape, np.nan), where=total[:, None] != 0.0)
    out = xr.Dataset(coords={"site": np.array(seen.sites, dtype=object), "component": names[1:], "time": seen.time})
    years = np.array(window.about["years"])[:, None]
    gone = lacking | ~there[:, None]
    for name, (values, unit) in {
        "rate": (rate, "mm yr-1"),
        "rate_sigma": (parts, "mm yr-1"),
        "world_mean": (mean, "mm yr-1"),
        "value": (rate * years, "mm"),
        "value_sigma": (parts * years, "mm"),
        "share": (share, "1"),
    }.items():
        _put(out, ("site", "component"), name, (np.where(gone, np.nan, values), unit))
    for name, (values, matrix) in sums.items():
        _put(out, ("site",), name, (np.where(there, values, np.nan), "mm yr-1"))
        sigma = np.sqrt(np.maximum(np.diag(matrix), 0.0))
        _put(out, ("site",), f"{name}_sigma", (np.where(there, sigma, np.nan), "mm yr-1"))
    out["dominant"] = ("site", np.where(there, names[largest], ""))
    _put(out, ("site", "time"), "weights", (window.observed, "yr-1"))
    return _judge(_tell(out, window), (residual, whole), judged)


def _tell(out: xr.Dataset, window: _Window) -> xr.Dataset:
    """What was used and what is missing, per site."""
    about = {**window.about, "missing": ["; ".join(names) for names in window.about["missing"]]}
    for name, entries in about.items():
        out[name] = ("site", np.array(entries, dtype=_KINDS_OF_ABOUT[name]), {"long_name": name.replace("_", " ")})
    return out


def _judge(out: xr.Dataset, left: tuple[Array, Array], judged: NDArray[np.bool_]) -> xr.Dataset:
    """Chi-square of every residual that has all its terms, alone and together."""
    residual, whole = left
    values, closes = chi_squares(residual, np.diag(whole), judged)
    _put(out, ("site",), "chi_square", (np.where(judged, values, np.nan), "1"))
    _put(out, ("site",), "closes", (closes, "1"))
    value, freedom, together = chi_square_together(residual[judged], whole[np.ix_(judged, judged)])
    out["chi_square_all"] = ((), value, {"units": "1", "long_name": "chi-square of all residuals"})
    out["degrees_of_freedom"] = ((), freedom, {"units": "1", "long_name": "its degrees of freedom"})
    out["closes_all"] = ((), np.int8(together), {"units": "1", "long_name": "1 where all sites close together"})
    matrix = np.where(np.outer(judged, judged), whole, np.nan)
    _put(out, ("site", "site_other"), "residual_covariance", (matrix, "mm2 yr-2"))
    return out


def _sum(weights: Array, values: Array) -> Array:
    return np.asarray(np.einsum("kt,kt->k", weights, np.nan_to_num(values)), dtype=np.float64)


def _world_mean(term: Component, weights: Array) -> Array:
    """Rate (site,) of the mean of a term over the whole ocean, with the weights of each site; NaN where it has none."""
    if term.world_mean is None:
        return np.full(len(weights), np.nan)
    known = np.isfinite(term.world_mean)
    whole = ~(weights[:, ~known] != 0.0).any(axis=1)
    return np.where(whole, weights @ np.nan_to_num(term.world_mean), np.nan)


def _put(out: xr.Dataset, dims: tuple[str, ...], name: str, held: tuple[Any, str]) -> None:
    out[name] = (dims, held[0], {"units": held[1], "long_name": name.replace("_", " ")})


def _covariances(terms: dict[str, Component], window: _Window) -> dict[tuple[str, str], Array]:
    """Covariance (site, site) of every pair of terms."""
    return {
        (first, second): covariance(one.parts, two.parts, window.terms[first], window.terms[second])
        for first, one in terms.items()
        for second, two in terms.items()
    }
