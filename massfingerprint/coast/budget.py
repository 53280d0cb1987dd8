"""What a gauge recorded and what explains it: every term reduced exactly as the gauge is, and whether the sum closes.

One estimator for all: the months of the gauge that every term covers, the same weights, the same regressors. Each rate is a
weighted sum of values, so the rates of the parts add to the rate of their sum to rounding, and every variance is w C w. The
test: the residual closes if its square over its variance is below 3.84, chi-square of one degree of freedom at 95 %; all
sites together with the full covariance of their residuals, since they share the errors of the ice.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from scipy import stats

from massfingerprint.arguments import one_of
from massfingerprint.coast._epochs import between, slope_weights
from massfingerprint.coast.components import Component, Errors
from massfingerprint.errors import InputError
from massfingerprint.mass.rates import DAYS_PER_YEAR, check_windows

Array = NDArray[np.float64]
ESTIMATORS = ("least squares", "last minus first")
CONFIDENCE = 0.95


@dataclass(frozen=True)
class _Reduced:
    """One window: weights of the observed (site, time) and of each term (site, its time), and what was used."""

    observed: Array
    terms: dict[str, Array]
    years: Array
    about: dict[str, list[Any]]


def budget(
    observed: Component,
    components: Mapping[str, Component],
    *,
    windows: Mapping[str, Any],
    estimator: str = "least squares",
    seasonal: bool = False,
) -> xr.Dataset:
    """Rate of each term over each window at each site, what is left, and whether it closes.

    Parameters
    ----------
    observed : Component
        What the gauges recorded.
    components : mapping of name to Component
        Terms of the sum, at the sites of the gauges, in any order of their own; relative sea level all.
    windows : mapping of name to (start, end)
        ISO dates, both ends included.
    estimator : str
        ``"least squares"`` (slope) or ``"last minus first"``.
    seasonal : bool
        Fit a yearly cycle beside the slope.

    Returns
    -------
    Dataset (window, site, component)
        ``rate``, ``rate_sigma`` [mm yr-1], ``value``, ``value_sigma`` [mm] = rate times the years used, ``share`` of the sum of
        the terms; (window, site): ``observed``, ``explained``, ``residual`` with ``_sigma``, ``chi_square``, ``closes`` (1, 0, -1
        without a number), ``dominant``, the term or ``observed`` with the largest variance, ``epochs``, ``first``, ``last``,
        ``covered``, the share of the gauge's values in the window that was used, ``reason`` if there is no number; (window):
        ``chi_square_all``, ``degrees_of_freedom``, ``closes_all``; ``residual_covariance`` (window, site,
        site_other) in mm2 yr-2. A year is 365.25 days.

    Raises
    ------
    InputError
        If sites, windows or choices do not go together.
    """
    one_of(estimator, ESTIMATORS, argument="estimator", kind="estimator")
    if seasonal and estimator != ESTIMATORS[0]:
        raise InputError("seasonal: 'last minus first' fits no yearly cycle. Use 'least squares'.")
    terms = _ordered(observed, components)
    spans = check_windows(windows)
    out = []
    for span in spans.values():
        reduced = _reduce(observed, terms, span, _Choice(estimator, seasonal))
        out.append(_balance(observed, terms, reduced))
    whole = xr.concat(out, dim="window", coords="minimal", compat="override", join="exact")
    return whole.assign_coords(window=np.array(list(spans), dtype=object)).assign_attrs(
        estimator=estimator, seasonal=int(seasonal), confidence=CONFIDENCE, year="365.25 days"
    )


@dataclass(frozen=True)
class _Choice:
    estimator: str
    seasonal: bool

    def weights(self, epochs: NDArray[np.datetime64]) -> Array | None:
        """Weights (n,) in yr-1 that take values at epochs to a rate; None where they are too few."""
        if self.estimator == ESTIMATORS[0]:
            return slope_weights(epochs, None, seasonal=self.seasonal)
        if epochs.size < 2:
            return None
        out = np.zeros(epochs.size)
        out[[0, -1]] = np.array([-1.0, 1.0]) / _years(epochs)
        return out


def _years(epochs: NDArray[np.datetime64]) -> float:
    return float((epochs[-1] - epochs[0]) / np.timedelta64(1, "D")) / DAYS_PER_YEAR


def _ordered(observed: Component, components: Mapping[str, Component]) -> dict[str, Component]:
    """Terms with their sites in the order of the gauges."""
    if not components:
        raise InputError("components: name at least one term.")
    out = {}
    for name, term in components.items():
        if name == "observed":
            raise InputError("components: 'observed' is what the gauge recorded. Give the term another name.")
        missing = [site for site in observed.sites if site not in term.sites]
        if missing:
            raise InputError(f"components: {name!r} has no series at {missing[0]!r}. Add it, or leave the gauge out.")
        if term.sites != observed.sites and not set(term.sites) >= set(observed.sites):
            raise InputError(f"components: {name!r} is at other sites.")
        order = [term.sites.index(site) for site in observed.sites]
        if order != list(range(len(term.sites))):
            raise InputError(
                f"components: {name!r} must have the sites of the gauges in their order: {', '.join(observed.sites)}."
            )
        out[name] = term
    return out


def _reduce(
    observed: Component, terms: dict[str, Component], span: tuple[np.datetime64, np.datetime64], choice: _Choice
) -> _Reduced:
    """Weights of every series at every site for one window; zeros and NaN years where there is no number."""
    count = len(observed.sites)
    weights = np.zeros((count, observed.time.size))
    others = {name: np.zeros((count, term.time.size)) for name, term in terms.items()}
    years = np.full(count, np.nan)
    nothing = np.datetime64("NaT", "ns")
    about: dict[str, list[Any]] = {name: [] for name in ("epochs", "first", "last", "covered", "reason")}
    inside = (observed.time >= span[0]) & (observed.time <= span[1])
    for row in range(count):
        seen = np.flatnonzero(inside & np.isfinite(observed.values[row]))
        places, lacking = {}, ""
        used = np.ones(seen.size, dtype=bool)
        for name, term in terms.items():
            held = np.isfinite(term.values[row])
            if held.any() and seen.size:
                places[name] = between(term.time, held, observed.time[seen])
                used &= places[name].held
            if not held.any() or (name in places and not places[name].held.any()):
                lacking = lacking or name
                used[:] = False
        epochs = observed.time[seen[used]]
        slope = choice.weights(epochs)
        if slope is not None:
            weights[row, seen[used]], years[row] = slope, _years(epochs)
            whole = np.zeros(seen.size)
            whole[used] = slope
            for name, place in places.items():
                others[name][row] = place.spread(whole, terms[name].time.size)
        about["epochs"].append(int(epochs.size))
        about["first"].append(epochs[0] if epochs.size else nothing)
        about["last"].append(epochs[-1] if epochs.size else nothing)
        about["covered"].append(float(used.mean()) if seen.size else 0.0)
        about["reason"].append(_reason(slope, seen.size, lacking))
    return _Reduced(weights, others, years, about)


def _reason(slope: Array | None, seen: int, lacking: str) -> str:
    if slope is not None:
        return ""
    if not seen:
        return "the gauge has no values in the window"
    return f"{lacking} has no values at the gauge's times" if lacking else "too few months that all terms share"


def _balance(observed: Component, terms: dict[str, Component], reduced: _Reduced) -> xr.Dataset:
    """Rates, residual and closure of one window."""
    there = np.isfinite(reduced.years)
    rate = np.stack([_sum(reduced.terms[name], term.values) for name, term in terms.items()], axis=-1)
    seen = _sum(reduced.observed, observed.values)
    own = observed.errors.cross(observed.name, observed.name, reduced.observed, reduced.observed)
    covariances = _covariances(terms, reduced)
    explained = np.sum(list(covariances.values()), axis=0)
    parts = np.stack([np.diag(covariances[name, name]) for name in terms], axis=-1)
    whole = own + explained
    residual = seen - rate.sum(axis=-1)
    variance = np.diag(whole)
    chi_square = np.divide(residual**2, variance, out=np.full(residual.size, np.nan), where=variance > 0.0)
    variances = [np.where(there, np.diag(matrix), np.nan) for matrix in (own, explained, whole)]
    for values in (rate, parts, residual, seen, chi_square):
        values[~there] = np.nan
    names = list(terms)
    largest = np.argmax(np.nan_to_num(np.column_stack([np.diag(own), parts])), axis=1)
    dominant = np.where(there, np.array(["observed", *names], dtype=object)[largest], "")
    limit = stats.chi2.ppf(CONFIDENCE, 1)
    sums = dict(zip(("observed", "explained", "residual"), (seen, rate.sum(axis=-1), residual), strict=True))
    pairs = {name: (values, squares) for (name, values), squares in zip(sums.items(), variances, strict=True)}
    out = xr.Dataset(
        coords={"site": np.array(observed.sites, dtype=object), "component": np.array(names, dtype=object)}
    )
    years = reduced.years[:, None]
    _put(out, ("site", "component"), {"rate": rate, "rate_sigma": np.sqrt(parts)}, "mm yr-1")
    _put(out, ("site", "component"), {"value": rate * years, "value_sigma": np.sqrt(parts) * years}, "mm")
    total = rate.sum(axis=-1, keepdims=True)
    share = np.divide(rate, total, out=np.full(rate.shape, np.nan), where=total != 0.0)
    _put(out, ("site", "component"), {"share": share}, "1")
    for name, (values, squares) in pairs.items():
        _put(out, ("site",), {name: values, f"{name}_sigma": np.sqrt(np.maximum(squares, 0.0))}, "mm yr-1")
    closes = np.where(there & np.isfinite(chi_square), (chi_square <= limit).astype(np.int8), np.int8(-1))
    _put(out, ("site",), {"chi_square": chi_square, "closes": closes.astype(np.int8)}, "1")
    out["dominant"] = ("site", dominant)
    for name, entries in reduced.about.items():
        kinds: dict[str, Any] = {"first": "datetime64[ns]", "last": "datetime64[ns]", "reason": object}
        out[name] = ("site", np.array(entries, dtype=kinds.get(name)))
    return _together(out, residual, whole, there)


def _sum(weights: Array, values: Array) -> Array:
    return np.asarray(np.einsum("kt,kt->k", weights, np.nan_to_num(values)), dtype=np.float64)


def _put(out: xr.Dataset, dims: Sequence[str], values: Mapping[str, Any], unit: str) -> None:
    for name, array in values.items():
        out[name] = (tuple(dims), array, {"units": unit, "long_name": name.replace("_", " ")})


def _covariances(terms: dict[str, Component], reduced: _Reduced) -> dict[tuple[str, str], Array]:
    """Covariance (site, site) of every pair of terms with related errors."""
    out: dict[tuple[str, str], Array] = {}
    for first, one in terms.items():
        for second, two in terms.items():
            if one.errors is two.errors:
                errors: Errors = one.errors
                out[first, second] = errors.cross(one.name, two.name, reduced.terms[first], reduced.terms[second])
    return out


def _together(out: xr.Dataset, residual: Array, whole: Array, there: NDArray[np.bool_]) -> xr.Dataset:
    """All sites at once: chi-square with the full covariance of the residuals."""
    matrix = np.where(np.outer(there, there), whole, np.nan)
    out["residual_covariance"] = (
        ("site", "site_other"),
        matrix,
        {"units": "mm2 yr-2", "long_name": "covariance of the residuals"},
    )
    held = whole[np.ix_(there, there)]
    rank = int(np.linalg.matrix_rank(held, hermitian=True)) if there.any() else 0
    chi_square, closes = np.nan, -1
    if rank:
        chi_square = float(residual[there] @ np.linalg.pinv(held, hermitian=True) @ residual[there])
        closes = int(chi_square <= stats.chi2.ppf(CONFIDENCE, rank))
    out["chi_square_all"] = ((), chi_square, {"units": "1", "long_name": "chi-square of all residuals"})
    out["degrees_of_freedom"] = ((), rank, {"units": "1", "long_name": "its degrees of freedom"})
    out["closes_all"] = ((), np.int8(closes), {"units": "1", "long_name": "1 where all sites close together"})
    return out


def closure(observed: tuple[float, float], parts: Mapping[str, tuple[float, float]]) -> dict[str, float]:
    """Sum of a table of independent terms, what is left of an observed change, and whether it closes.

    Parameters
    ----------
    observed : (float, float)
        Change or rate, and its standard uncertainty.
    parts : mapping of name to (float, float)
        Terms, same unit.

    Returns
    -------
    dict
        ``sum``, ``sum_sigma`` (in quadrature), ``residual``, ``residual_sigma``, ``chi_square``, ``closes`` (1 or 0).

    Raises
    ------
    InputError
        If a value is not finite, a sigma is negative, or there are no terms.
    """
    numbers = np.array([observed, *parts.values()], dtype=np.float64)
    if len(numbers) < 2 or not np.isfinite(numbers).all() or (numbers[:, 1] < 0.0).any():
        raise InputError("parts: at least one term is needed, every value finite, every sigma 0 or more.")
    total, spread = numbers[1:, 0].sum(), float(np.sqrt((numbers[1:, 1] ** 2).sum()))
    residual, sigma = numbers[0, 0] - total, float(np.hypot(numbers[0, 1], spread))
    chi_square = (residual / sigma) ** 2 if sigma > 0.0 else np.nan
    return {
        "sum": float(total),
        "sum_sigma": spread,
        "residual": float(residual),
        "residual_sigma": sigma,
        "chi_square": float(chi_square),
        "closes": float(chi_square <= stats.chi2.ppf(CONFIDENCE, 1)),
    }
