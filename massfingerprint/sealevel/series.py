"""Patterns times the mass record: sea level in time, and its rate over windows, with the uncertainty of the mass.

A value is the sum over sources of pattern times mass change, so its variance is that of a weighted sum of the ledger: all error
models and correlations of ``mass.covariance`` hold here too. The error of a pattern itself is not in it.
"""

from collections.abc import Mapping
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.errors import InputError, UnitsError, nearest_names
from massfingerprint.mass.covariance import total_sigma
from massfingerprint.mass.ledger import check_ledger
from massfingerprint.mass.rates import check_windows, combination_covariance, rate_weights
from massfingerprint.sealevel.fingerprints import FIELDS
from massfingerprint.vocabulary import VARIABLES

Array = NDArray[np.float64]


def _fields(patterns: xr.Dataset, ledger: xr.Dataset, names: tuple[str, ...]) -> dict[str, xr.DataArray]:
    """Fields (source, ...) per gigatonne, their sources in the order of the ledger."""
    if not isinstance(patterns, xr.Dataset):
        raise InputError(
            f"patterns: must be a Dataset, got {type(patterns).__name__}. Use solve_fingerprints, at_sites."
        )
    found = {name: patterns[name] for name in names if name in patterns}
    if not found:
        held = ", ".join(str(name) for name in patterns.data_vars) or "nothing"
        raise InputError(f"patterns: holds none of {', '.join(names)}, only {held}.")
    wanted = [str(name) for name in ledger["source"].values]
    for name, field in found.items():
        if "source" not in field.dims or "source" not in field.coords:
            raise InputError(f"patterns: {name} has no named dimension 'source', only {field.dims}.")
        wanted_unit, got = VARIABLES[name].per_gigatonne, field.attrs.get("units")
        if got != wanted_unit:
            raise UnitsError(
                f"patterns: {name} must be in {wanted_unit}, got {got!r}. Solve with a load in kg m-2 Gt-1."
            )
        known = [str(source) for source in field["source"].values]
        for source in wanted:
            if source not in known:
                raise InputError(f"patterns: none for {source!r} of the ledger. {nearest_names(source, known)}")
        for source in known:
            if source not in wanted:
                raise InputError(f"ledger: no mass for {source!r} of the patterns. {nearest_names(source, wanted)}")
        order = [known.index(source) for source in wanted]
        found[name] = field.isel(source=order).transpose("source", ...)
    return found


def sea_level_series(
    patterns: xr.Dataset, ledger: xr.Dataset, *, keep_source: bool | None = None, fields: tuple[str, ...] = FIELDS
) -> xr.Dataset:
    """Sea level (and the other fields) in time that a mass record makes.

    Parameters
    ----------
    patterns : Dataset (source, site) or (source, lat, lon)
        Fields per gigatonne added, from ``at_sites`` or ``solve_fingerprints``; the same sources as the ledger.
    ledger : Dataset (source, time)
        Cumulative mass change in Gt, negative = loss.
    keep_source : bool, optional
        Whether each source's own part is returned as well; by default for sites, not for grids.
    fields : tuple of str
        Which of the variables of the patterns, those of ``solve_fingerprints`` by default.

    Returns
    -------
    Dataset
        ``<name>_total``, ``<name>_total_sigma`` (time, site) or (time, lat, lon) in mm (gravity nm s-2) since the ledger's
        reference epoch, positive = rise or uplift, NaN at times at which a source has no value; with sources kept ``<name>``,
        ``<name>_sigma`` (time, source, ...). Sigmas are 1 sigma of the mass record.

    Raises
    ------
    InputError, UnitsError
        If the patterns are not per gigatonne, or their sources differ from the ledger's.
    """
    ledger = check_ledger(ledger)
    found = _fields(patterns, ledger, fields)
    mass = ledger["mass_change"].transpose("time", "source").values
    sigma = ledger["mass_change_sigma"].transpose("time", "source").values
    out = xr.Dataset(coords={"time": ledger["time"].values, "source": ledger["source"].values})
    whole = np.isfinite(mass).all(axis=1)
    for name, field in found.items():
        lead, shape = field.dims[1:], field.shape[1:]
        out = out.assign_coords({key: value for key, value in field.coords.items() if set(value.dims) <= set(lead)})
        per_gt = field.values.reshape(mass.shape[1], -1)
        total = np.where(whole[:, None], np.nan_to_num(mass) @ per_gt + 0.0, np.nan)
        spread = total_sigma(ledger, per_gt)
        for label, values in ((f"{name}_total", total), (f"{name}_total_sigma", spread)):
            out[label] = (("time", *lead), values.reshape(-1, *shape), _attributes(name, field, label))
        if keep_source or (keep_source is None and "site" in lead):
            for label, values in (
                (name, mass[:, :, None] * per_gt + 0.0),
                (f"{name}_sigma", sigma[:, :, None] * abs(per_gt)),
            ):
                out[label] = (
                    ("time", "source", *lead),
                    values.reshape(*mass.shape, *shape),
                    _attributes(name, field, label),
                )
    return out.assign_attrs({**patterns.attrs, "reference_epoch": ledger.attrs.get("reference_epoch", "")})


def _attributes(name: str, field: xr.DataArray, label: str, per: str = "") -> dict[str, str]:
    unit = VARIABLES[name].per_gigatonne.removesuffix("Gt-1").strip() + per
    words = str(field.attrs.get("long_name", name)).split(", at the site")[0]
    words += ", all mass sources" if "_total" in label else ", by mass source"
    return {
        "units": unit.strip() or "1",
        "long_name": f"{words}{', 1 sigma of the mass record' if label.endswith('_sigma') else ''}",
    }


def sea_level_rates(
    patterns: xr.Dataset,
    ledger: xr.Dataset,
    *,
    windows: Mapping[str, Any],
    seasonal: bool = False,
    fields: tuple[str, ...] = FIELDS,
) -> xr.Dataset:
    """Rate of sea level (and the other fields) over windows that a mass record makes.

    Parameters
    ----------
    patterns : Dataset (source, site) or (source, lat, lon)
        As for :func:`sea_level_series`.
    ledger : Dataset (source, time)
        Cumulative mass change in Gt.
    windows : mapping of name to (start, end)
        As for ``rates``.
    seasonal : bool
        Fit a yearly cycle beside the rate.
    fields : tuple of str
        As for :func:`sea_level_series`.

    Returns
    -------
    Dataset
        ``<name>``, ``<name>_sigma`` (window, source, ...) and ``<name>_total``, ``<name>_total_sigma`` (window, ...) in mm yr-1
        (gravity nm s-2 yr-1);
        NaN where a source has too few values in the window, the total too then.

    Raises
    ------
    InputError, UnitsError
        As for :func:`sea_level_series`, or if a window cannot be used.
    """
    ledger = check_ledger(ledger)
    found, spans = _fields(patterns, ledger, fields), check_windows(windows)
    slopes = [_slopes(ledger, span, seasonal) for span in spans.values()]
    out = xr.Dataset(coords={"window": np.array(list(spans), dtype=object), "source": ledger["source"].values})
    for name, field in found.items():
        lead, shape = field.dims[1:], field.shape[1:]
        out = out.assign_coords({key: value for key, value in field.coords.items() if set(value.dims) <= set(lead)})
        per_gt = field.values.reshape(field.shape[0], -1)
        rate = np.stack([mean[:, None] * per_gt for mean, _ in slopes])
        spread = np.stack([np.sqrt(np.diag(matrix))[:, None] * abs(per_gt) for _, matrix in slopes])
        variance = np.stack([np.einsum("ik,ij,jk->k", per_gt, m, per_gt, optimize=True) for _, m in slopes])
        parts = {name: rate, f"{name}_sigma": spread}
        totals = {f"{name}_total": rate.sum(axis=1), f"{name}_total_sigma": np.sqrt(np.maximum(variance, 0.0))}
        for dims, group in ((("window", "source"), parts), (("window",), totals)):
            for label, values in group.items():
                shaped = values.reshape(*values.shape[:-1], *shape)
                out[label] = ((*dims, *lead), shaped, _attributes(name, field, label, " yr-1"))
    return out.assign_attrs({**patterns.attrs, "seasonal": int(seasonal), "year": "365.25 days"})


def _slopes(ledger: xr.Dataset, span: tuple[Any, Any], seasonal: bool) -> tuple[Array, Array]:
    """Rate (nsource,) in Gt yr-1 and covariance (nsource, nsource); NaN for a source with too few values."""
    weights = {name: None if w is None else w[0] for name, w in rate_weights(ledger, span, seasonal=seasonal).items()}
    lacking = np.array([w is None for w in weights.values()])
    zeros = np.zeros(ledger.sizes["time"])
    filled = {name: zeros if w is None else w for name, w in weights.items()}
    mass = np.nan_to_num(ledger["mass_change"].transpose("source", "time").values)
    rate = np.array([w @ row for w, row in zip(filled.values(), mass, strict=True)])
    matrix = combination_covariance(ledger, filled)
    rate[lacking] = np.nan
    matrix[lacking] = matrix[:, lacking] = np.nan
    return rate, matrix
