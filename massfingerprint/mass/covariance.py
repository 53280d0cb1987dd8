"""Covariance of a ledger's cumulative mass: the only place where one is built.

Models of the error of x(t), the mass change since the reference epoch, with standard uncertainty s(t):
independent  cov(t, u) = s(t)^2 if t = u, else 0        errors of single epochs, such as noise of a survey
systematic   cov(t, u) = s(t) s(u)                      one error shared by all epochs, such as a density or a rebound model
random walk  cov(t, u) = min(s(t)^2, s(u)^2) on the same side of the reference epoch, 0 across it: cumulated independent rate errors
sum          the sum of the three, each with its own s(t)
Between sources: source_correlation r times the geometric mean, r s_i(t) s_j(u), of the same component; 0 where there is no table.
Source: definitions; the random walk is the covariance of a Wiener process (textbook).
"""

from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.errors import InputError, nearest_names

Array = NDArray[np.float64]
COMPONENTS = ("independent", "systematic", "random_walk")
MODELS = (*COMPONENTS, "sum")


def _row(ledger: xr.Dataset, source: str) -> xr.Dataset:
    if not isinstance(ledger, xr.Dataset) or "mass_change_sigma" not in ledger or "source" not in ledger.coords:
        raise InputError("ledger: must be a ledger Dataset (source, time) with mass_change_sigma. Use read_ledger.")
    known = [str(name) for name in ledger["source"].values]
    if source not in known:
        raise InputError(f"source: no source {source!r} in the ledger. {nearest_names(str(source), known)}")
    return ledger.isel(source=known.index(source))


def component_sigmas(ledger: xr.Dataset, source: str) -> dict[str, Array]:
    """Standard uncertainty (time,) in Gt of each error component of one source; components it does not have are 0.

    Raises
    ------
    InputError
        If the source or its error model is not known, or the components of a sum do not add up.
    """
    row = _row(ledger, source)
    model = str(row["error_model"].item()) if "error_model" in row else "missing"
    whole = row["mass_change_sigma"].values.astype(np.float64)
    if model not in MODELS:
        raise InputError(f"error_model: of {source!r} must be one of {', '.join(MODELS)}, got {model!r}.")
    if model != "sum":
        return {name: whole if name == model else np.where(np.isnan(whole), np.nan, 0.0) for name in COMPONENTS}
    missing = [name for name in COMPONENTS if f"mass_change_sigma_{name}" not in row]
    if missing:
        raise InputError(f"ledger: error_model of {source!r} is 'sum' but mass_change_sigma_{missing[0]} is missing.")
    parts = {name: row[f"mass_change_sigma_{name}"].values.astype(np.float64) for name in COMPONENTS}
    total = np.sqrt(sum(part**2 for part in parts.values()))
    if not np.allclose(total, whole, rtol=1e-6, atol=1e-9, equal_nan=True):
        raise InputError(f"ledger: the squared error components of {source!r} do not add to mass_change_sigma squared.")
    return parts


def _elapsed(ledger: xr.Dataset) -> Array:
    """Days since the reference epoch (time,), signed."""
    epoch = np.datetime64(str(ledger.attrs.get("reference_epoch", ledger["time"].values[0])), "ns")
    return (ledger["time"].values - epoch) / np.timedelta64(1, "D")


def component_covariance(name: str, first: Array, second: Array, elapsed: Array) -> Array:
    """Covariance (time, time) of one component between two sigma series at the same epochs, before any correlation."""
    if name == "independent":
        return np.diag(first * second)
    if name == "systematic":
        return np.outer(first, second)
    together = (np.outer(elapsed, elapsed) > 0.0) | np.eye(elapsed.size, dtype=bool)
    return np.where(together, _walk(first, second), 0.0)


def _walk(first: Array, second: Array) -> Array:
    """Smaller of the products at the two epochs: min(s(t)^2, s(u)^2) for one source."""
    product = first * second
    return np.minimum(product[:, None], product[None, :])


def covariance(ledger: xr.Dataset, source: str, *, component: str | None = None) -> xr.DataArray:
    """Covariance of the cumulative mass change of one source between all its times.

    Parameters
    ----------
    ledger : Dataset (source, time)
        From ``read_ledger``.
    source : str
        Which source.
    component : str, optional
        ``independent``, ``systematic`` or ``random_walk`` alone; all of them together by default.

    Returns
    -------
    DataArray (time, time_other)
        Gt2; NaN in rows and columns of times at which the source has no value.

    Raises
    ------
    InputError
        If the source, the component or the error model is not known.
    """
    return cross_covariance(ledger, source, source, component=component)


def source_correlation(ledger: xr.Dataset, first: str, second: str) -> float:
    """Correlation of the errors of two sources: 1 for one and the same, else from the ledger's table, else 0."""
    if first == second:
        return 1.0
    if "source_correlation" not in ledger:
        return 0.0
    table = ledger["source_correlation"]
    value = float(table.sel(source=first, source_other=second))
    if not -1.0 <= value <= 1.0:
        raise InputError(f"source_correlation: of {first!r} and {second!r} must lie between -1 and 1, got {value:g}.")
    return value


def cross_covariance(ledger: xr.Dataset, first: str, second: str, *, component: str | None = None) -> xr.DataArray:
    """Covariance (time, time_other) in Gt2 between the cumulative mass change of two sources, as :func:`covariance`."""
    if component is not None and component not in COMPONENTS:
        raise InputError(f"component: no error component {component!r}. {nearest_names(str(component), COMPONENTS)}")
    one, two = component_sigmas(ledger, first), component_sigmas(ledger, second)
    elapsed, scale = _elapsed(ledger), source_correlation(ledger, first, second)
    names = COMPONENTS if component is None else (component,)
    absent = np.isnan(one["independent"])[:, None] | np.isnan(two["independent"])[None, :]
    filled = [{name: np.nan_to_num(part[name]) for name in COMPONENTS} for part in (one, two)]
    total = sum(
        (component_covariance(n, filled[0][n], filled[1][n], elapsed) for n in names), start=np.zeros(absent.shape)
    )
    time = ledger["time"].values
    coords: dict[str, Any] = {"time": time, "time_other": time}
    attrs = {
        "units": "Gt2",
        "long_name": f"covariance of mass change, {first}" + ("" if first == second else f" and {second}"),
    }
    return xr.DataArray(
        np.where(absent, np.nan, scale * total), dims=("time", "time_other"), coords=coords, attrs=attrs
    )


def total_sigma(ledger: xr.Dataset, weights: Array) -> Array:
    """Standard uncertainty of a weighted sum over sources at each time.

    Parameters
    ----------
    ledger : Dataset (source, time)
        From ``read_ledger``; correlations between sources count.
    weights : array (nsource,) or (nsource, n)
        Any unit per Gt; one column for each sum that is wanted.

    Returns
    -------
    array (ntime,) or (ntime, n)
        Gt times the weights' unit; NaN at times at which any source has no value.
    """
    names = [str(name) for name in ledger["source"].values]
    parts = np.stack([np.stack(list(component_sigmas(ledger, name).values())) for name in names])
    whole = np.asarray(np.isfinite(parts).all(axis=(0, 1)))
    related = np.array([[source_correlation(ledger, one, two) for two in names] for one in names])
    # at one time every component's covariance between two sources is the product of their sigmas times the correlation
    held = np.nan_to_num(parts)
    between = np.einsum("ict,ij,jct->tij", held, related, held)
    columns = weights.reshape(len(names), -1)
    variance = np.einsum("ik,tij,jk->tk", columns, between, columns, optimize=True)
    out = np.where(whole[:, None], np.sqrt(np.maximum(variance, 0.0)), np.nan)
    return out[:, 0] if weights.ndim == 1 else out
