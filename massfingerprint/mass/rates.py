"""Rates, means and differences of a ledger over windows, each with the standard uncertainty that its covariance gives.

Every one of them is a linear combination of cumulative values, x -> sum of w(t) x(t); its variance is w C w. The rate is the slope
of a weighted least-squares line: weights 1/s^2 of the independent errors where every epoch of the window has them, else equal.
The weights set the estimator only; the uncertainty comes from the full covariance, whatever the weights.
"""

from collections.abc import Mapping
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.errors import InputError
from massfingerprint.mass.covariance import component_sigmas, covariance, cross_covariance, source_correlation

Array = NDArray[np.float64]
DAYS_PER_YEAR = 365.25
# Smallest singular value of the normalised columns: below, epochs such as yearly ones cannot tell a yearly cycle from the level
_DISTINCT = 1e-3
_ESTIMATORS = ("least squares", "last minus first")


def check_windows(windows: Mapping[str, Any]) -> dict[str, tuple[np.datetime64, np.datetime64]]:
    """Return windows as name -> (start, end) in datetime64, both ends included.

    Raises
    ------
    InputError
        If there is none, a date cannot be read, or an end is not after its start.
    """
    if not isinstance(windows, Mapping) or not windows:
        raise InputError("windows: must be a mapping of name -> (start, end) with at least one window.")
    out = {}
    for name, pair in windows.items():
        try:
            start, end = (np.datetime64(value, "ns") for value in pair)
        except (TypeError, ValueError) as error:
            raise InputError(f"windows: {name!r} must be (start, end) as ISO dates, got {pair!r}.") from error
        if not end > start:
            raise InputError(f"windows: {name!r} must end after it starts, got {pair[0]} to {pair[1]}.")
        out[str(name)] = (start, end)
    return out


def _years(time: NDArray[np.datetime64]) -> Array:
    """Years of 365.25 days since the middle of the epochs (ntime,)."""
    days = (time - time[0]) / np.timedelta64(1, "D")
    return (days - 0.5 * (days[0] + days[-1])) / DAYS_PER_YEAR


def _design(years: Array, acceleration: bool, seasonal: bool) -> Array:
    """Columns (ntime, nparameter): level, slope, then half the squared time, then a yearly cosine and sine."""
    columns = [np.ones_like(years), years]
    if acceleration:
        columns.append(0.5 * years**2)
    if seasonal:
        columns += [np.cos(2.0 * np.pi * years), np.sin(2.0 * np.pi * years)]
    return np.stack(columns, axis=1)


def _estimator(design: Array, sigma: Array) -> Array:
    """Rows (nparameter, ntime) that take values to parameters by weighted least squares."""
    weight = 1.0 / sigma if (sigma > 0.0).all() else np.ones_like(sigma)
    return np.linalg.pinv(design * weight[:, None]) * weight


def rate_weights(
    ledger: xr.Dataset,
    span: tuple[np.datetime64, np.datetime64],
    *,
    acceleration: bool = False,
    seasonal: bool = False,
    estimator: str = "least squares",
) -> dict[str, Array | None]:
    """Weights per source that take cumulative values to a rate (and an acceleration) over one window.

    Parameters
    ----------
    ledger : Dataset (source, time)
        Cumulative mass change.
    span : pair of datetime64
        Window, both ends included.
    acceleration, seasonal, estimator
        As for :func:`rates`.

    Returns
    -------
    dict of source to (1 or 2, ntime) array
        yr-1 (and yr-2); None where a source has too few values in the window.

    Raises
    ------
    InputError
        If the choices do not go together.
    """
    choices = _checked_choices(acceleration, seasonal, estimator)
    names = [str(name) for name in ledger["source"].values]
    inside = _inside(ledger, span)
    return {name: _slope_weights(ledger, name, inside, choices) for name in names}


def difference_weights(ledger: xr.Dataset, span: tuple[np.datetime64, np.datetime64]) -> dict[str, Array | None]:
    """Weights (ntime,) per source: +1 at its last and -1 at its first value in a window; None with fewer than two values."""
    finite = np.isfinite(ledger["mass_change"].transpose("source", "time").values) & _inside(ledger, span)
    out: dict[str, Array | None] = {}
    for name, held in zip(ledger["source"].values, finite, strict=True):
        places = np.flatnonzero(held)
        weights = np.zeros(held.size)
        if places.size >= 2:
            weights[places[0]], weights[places[-1]] = -1.0, 1.0
        out[str(name)] = weights if places.size >= 2 else None
    return out


def _inside(ledger: xr.Dataset, span: tuple[np.datetime64, np.datetime64]) -> NDArray[np.bool_]:
    time = ledger["time"].values
    return (time >= span[0]) & (time <= span[1])


def _slope_weights(ledger: xr.Dataset, source: str, inside: NDArray[np.bool_], choices: dict[str, Any]) -> Array | None:
    """Weights (1 or 2, ntime) of one source; None where it has too few values."""
    held = inside & np.isfinite(ledger["mass_change"].sel(source=source).values)
    out = np.zeros((2 if choices["acceleration"] else 1, held.size))
    time = ledger["time"].values[held]
    if choices["estimator"] == "last minus first":
        if time.size < 2:
            return None
        places = np.flatnonzero(held)
        span = (time[-1] - time[0]) / np.timedelta64(1, "D") / DAYS_PER_YEAR
        out[0, places[0]], out[0, places[-1]] = -1.0 / span, 1.0 / span
        return out
    if time.size < 2 + choices["acceleration"] + 2 * choices["seasonal"]:
        return None
    design = _design(_years(time), choices["acceleration"], choices["seasonal"])
    if np.linalg.svd(design / np.linalg.norm(design, axis=0), compute_uv=False)[-1] < _DISTINCT:
        return None
    sigma = component_sigmas(ledger, source)["independent"][held]
    out[:, held] = _estimator(design, sigma)[1 : 1 + out.shape[0]]
    return out


def combination_sigma(ledger: xr.Dataset, weights: Mapping[str, Array]) -> float:
    """Standard uncertainty in Gt times the weights' unit of the sum over sources and times of w(source, time) x(source, time).

    Parameters
    ----------
    ledger : Dataset (source, time)
        From ``read_ledger``.
    weights : mapping of source to (ntime,) array
        0 where a value takes no part; times without a value must have weight 0.
    """
    return float(np.sqrt(max(combination_covariance(ledger, weights).sum(), 0.0)))


def combination_covariance(ledger: xr.Dataset, weights: Mapping[str, Array]) -> Array:
    """Covariance (nsource, nsource), in Gt2 times the weights' unit squared, of w(source) x(source) summed over time.

    Parameters
    ----------
    ledger : Dataset (source, time)
        From ``read_ledger``.
    weights : mapping of source to (ntime,) array
        As for :func:`combination_sigma`; the order of the mapping is that of rows and columns.
    """
    names = list(weights)
    out = np.zeros((len(names), len(names)))
    for i, first in enumerate(names):
        for j, second in enumerate(names[: i + 1]):
            if first == second or source_correlation(ledger, first, second) != 0.0:
                matrix = np.nan_to_num(cross_covariance(ledger, first, second).values)
                out[i, j] = out[j, i] = float(weights[first] @ matrix @ weights[second])
    return out


def rates(
    ledger: xr.Dataset,
    *,
    windows: Mapping[str, Any],
    acceleration: bool = False,
    seasonal: bool = False,
    estimator: str = "least squares",
) -> xr.Dataset:
    """Mean rate of mass change of each source, and of their total, in each window.

    Parameters
    ----------
    ledger : Dataset (source, time)
        Cumulative mass change, from ``read_ledger``.
    windows : mapping of name to (start, end)
        ISO dates or datetime64; epochs at both ends belong to the window.
    acceleration : bool
        Fit a quadratic; the rate is then that at the middle of the source's epochs in the window.
    seasonal : bool
        Fit a yearly cycle as well.
    estimator : str
        ``"least squares"`` (slope of the fit) or ``"last minus first"`` (difference over time).

    Returns
    -------
    Dataset (window, source)
        ``rate``, ``rate_sigma`` [Gt yr-1], negative = loss; with acceleration ``acceleration``, ``acceleration_sigma``
        [Gt yr-2]; ``total_rate``, ``total_rate_sigma`` (window); NaN where a source has too few values in the window. A year
        is 365.25 days.

    Raises
    ------
    InputError
        If a window or a choice cannot be used, or no source has enough values in a window.
    """
    choices = _checked_choices(acceleration, seasonal, estimator)
    spans = check_windows(windows)
    names = [str(name) for name in ledger["source"].values]
    values = np.full((len(spans), len(names), 4), np.nan)
    totals = np.full((len(spans), 2), np.nan)
    mass = np.nan_to_num(ledger["mass_change"].transpose("source", "time").values)
    for i, (window, span) in enumerate(spans.items()):
        weights = rate_weights(ledger, span, **choices)
        usable = {name: w for name, w in weights.items() if w is not None}
        if not usable:
            start, end = (str(value)[:10] for value in span)
            raise InputError(f"windows: no source has enough values in {window!r} ({start} to {end}). Widen it.")
        for name, w in usable.items():
            j = names.index(name)
            matrix = np.nan_to_num(covariance(ledger, name).values)
            spread = np.sqrt(np.maximum(np.einsum("pt,tu,pu->p", w, matrix, w), 0.0))
            values[i, j, : 2 * len(w)] = np.stack([w @ mass[j], spread], axis=1).ravel()
        if len(usable) == len(names):
            slopes = {name: w[0] for name, w in usable.items()}
            totals[i] = values[i, :, 0].sum(), combination_sigma(ledger, slopes)
    return _labelled(values, totals, list(spans), ledger, choices)


def _checked_choices(acceleration: bool, seasonal: bool, estimator: str) -> dict[str, Any]:
    if estimator not in _ESTIMATORS:
        raise InputError(f"estimator: must be {' or '.join(map(repr, _ESTIMATORS))}, got {estimator!r}.")
    if estimator == "last minus first" and (acceleration or seasonal):
        raise InputError(
            "estimator: 'last minus first' has no acceleration and no seasonal cycle. Use 'least squares'."
        )
    return {"acceleration": bool(acceleration), "seasonal": bool(seasonal), "estimator": estimator}


def _labelled(
    values: Array, totals: Array, windows: list[str], ledger: xr.Dataset, choices: dict[str, Any]
) -> xr.Dataset:
    words = {"rate": "Gt yr-1", "rate_sigma": "Gt yr-1", "acceleration": "Gt yr-2", "acceleration_sigma": "Gt yr-2"}
    kept = list(words) if choices["acceleration"] else list(words)[:2]
    out = xr.Dataset(coords={"window": np.array(windows, dtype=object), "source": ledger["source"].values})
    for column, name in enumerate(kept):
        meaning = f"{name.removesuffix('_sigma')} of mass change" + (", 1 sigma" if name.endswith("sigma") else "")
        out[name] = (("window", "source"), values[..., column], {"units": words[name], "long_name": meaning})
    out["total_rate"] = ("window", totals[:, 0], {"units": "Gt yr-1", "long_name": "rate of the sum of all sources"})
    out["total_rate_sigma"] = ("window", totals[:, 1], {"units": "Gt yr-1", "long_name": "its standard uncertainty"})
    return out.assign_attrs(estimator=choices["estimator"], seasonal=int(choices["seasonal"]), year="365.25 days")


def differences(ledger: xr.Dataset, *, windows: Mapping[str, Any]) -> xr.Dataset:
    """Mass change between the first and the last value of each source in each window.

    Parameters
    ----------
    ledger : Dataset (source, time)
        Cumulative mass change.
    windows : mapping of name to (start, end)
        As for :func:`rates`.

    Returns
    -------
    Dataset (window, source)
        ``difference``, ``difference_sigma`` [Gt]; NaN where a source has fewer than two values.
    """
    return _functional(ledger, windows, "difference", difference_weights)


def means(ledger: xr.Dataset, *, windows: Mapping[str, Any]) -> xr.Dataset:
    """Mean of the values of each source in each window: ``mean``, ``mean_sigma`` [Gt] (window, source)."""
    return _functional(ledger, windows, "mean", _mean_weights)


def _mean_weights(ledger: xr.Dataset, span: tuple[np.datetime64, np.datetime64]) -> dict[str, Array | None]:
    held = np.isfinite(ledger["mass_change"].transpose("source", "time").values) & _inside(ledger, span)
    return {str(n): h / h.sum() if h.any() else None for n, h in zip(ledger["source"].values, held, strict=True)}


def _functional(ledger: xr.Dataset, windows: Mapping[str, Any], name: str, weights_of: Any) -> xr.Dataset:
    spans = check_windows(windows)
    mass = np.nan_to_num(ledger["mass_change"].transpose("source", "time").values)
    values = np.full((len(spans), mass.shape[0], 2), np.nan)
    for i, span in enumerate(spans.values()):
        for j, (source, weights) in enumerate(weights_of(ledger, span).items()):
            if weights is not None:
                values[i, j] = weights @ mass[j], combination_sigma(ledger, {source: weights})
    out = xr.Dataset(coords={"window": np.array(list(spans), dtype=object), "source": ledger["source"].values})
    for column, suffix in enumerate(("", "_sigma")):
        attrs = {"units": "Gt", "long_name": f"{name} of mass change{', 1 sigma' if suffix else ''}"}
        out[f"{name}{suffix}"] = (("window", "source"), values[..., column], attrs)
    return out
