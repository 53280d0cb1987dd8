"""What a ledger says in a table: change and rate of each source and of the total, in gigatonnes and millimetres."""

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.constants import GIGATONNES_PER_MILLIMETRE
from massfingerprint.mass.barystatic import AR6_GIGATONNES_PER_MILLIMETRE, check_factor, ocean_reaching_fraction
from massfingerprint.mass.intervals import from_sigma, interval_factor
from massfingerprint.mass.rates import check_windows, combination_sigma, difference_weights, rate_weights

TOTAL = "total"


def whole_record(ledger: xr.Dataset) -> dict[str, tuple[str, str]]:
    """The window from the first to the last time of a ledger."""
    first, last = (str(ledger["time"].values[i])[:10] for i in (0, -1))
    return {"whole record": (first, last)}


def summarise(
    ledger: xr.Dataset,
    *,
    windows: Mapping[str, Any] | None = None,
    interval: str = "1 sigma",
    gt_per_mm: float = GIGATONNES_PER_MILLIMETRE.value,
    **choices: Any,
) -> pd.DataFrame:
    """Change and rate of every source and of their total in each window.

    Parameters
    ----------
    ledger : Dataset (source, time)
        Cumulative mass change in Gt, negative = loss.
    windows : mapping of name to (start, end), optional
        As for ``rates``; the whole record by default.
    interval : str
        What the half-widths stand for: ``1 sigma``, ``90 %``, ``95 %``, ``likely``, ``very likely``.
    gt_per_mm : float
        Gigatonnes per millimetre; the same in AR6's 362.5 stands beside it.
    **choices
        ``acceleration``, ``seasonal``, ``estimator`` as for ``rates``.

    Returns
    -------
    DataFrame
        One row per window and source, the total last: ``window source first last values``, ``change rate`` in Gt and Gt/yr,
        ``sea_level sea_level_ar6`` in mm, ``sea_level_rate sea_level_rate_ar6`` in mm/yr (positive = rise), each with
        ``..._half_width`` of the interval. NaN where a source has too few values; the total needs all sources.

    Raises
    ------
    InputError
        If a window, the interval, the factor or a choice cannot be used.
    """
    interval_factor(interval)
    factors = {"": check_factor(gt_per_mm), "_ar6": AR6_GIGATONNES_PER_MILLIMETRE}
    share = {
        str(n): float(v) for n, v in zip(ledger["source"].values, ocean_reaching_fraction(ledger).values, strict=True)
    }
    rows = []
    for window, span in check_windows(windows or whole_record(ledger)).items():
        changes = difference_weights(ledger, span)
        slopes = {name: None if w is None else w[0] for name, w in rate_weights(ledger, span, **choices).items()}
        for source in [*share, TOTAL]:
            row: dict[str, Any] = {"window": window, "source": source, **_extent(ledger, source, span)}
            for words, weights in (("change", changes), ("rate", slopes)):
                chosen = weights if source == TOTAL else {source: weights[source]}
                row |= _value(ledger, words, chosen, interval)
                row |= _sea_level(
                    ledger, "sea_level" + ("_rate" if words == "rate" else ""), chosen, (share, factors, interval)
                )
            rows.append(row)
    return pd.DataFrame(rows)


def _extent(ledger: xr.Dataset, source: str, span: tuple[np.datetime64, np.datetime64]) -> dict[str, Any]:
    """First and last value of a source in a window and their number; of the total: the times that all sources have."""
    finite = np.isfinite(ledger["mass_change"].transpose("source", "time").values)
    names = [str(name) for name in ledger["source"].values]
    held = finite.all(axis=0) if source == TOTAL else finite[names.index(source)]
    time = ledger["time"].values
    inside = time[held & (time >= span[0]) & (time <= span[1])]
    if not inside.size:
        return {"first": "", "last": "", "values": 0}
    return {"first": str(inside[0])[:10], "last": str(inside[-1])[:10], "values": int(inside.size)}


def _combined(ledger: xr.Dataset, weights: Mapping[str, np.ndarray | None]) -> tuple[float, float]:
    """Sum over sources of weights times mass, and its standard uncertainty; NaN if any source has no weights."""
    usable = {name: w for name, w in weights.items() if w is not None}
    if len(usable) < len(weights):
        return np.nan, np.nan
    mass = np.nan_to_num(ledger["mass_change"].transpose("source", "time").values)
    names = [str(name) for name in ledger["source"].values]
    return float(sum(w @ mass[names.index(name)] for name, w in usable.items())), combination_sigma(ledger, usable)


def _value(ledger: xr.Dataset, name: str, weights: Mapping[str, Any], interval: str) -> dict[str, float]:
    value, sigma = _combined(ledger, weights)
    return {name: value, f"{name}_half_width": float(from_sigma(sigma, interval))}


def _sea_level(
    ledger: xr.Dataset, name: str, weights: Mapping[str, Any], settings: tuple[dict[str, float], dict[str, float], str]
) -> dict[str, float]:
    share, factors, interval = settings
    scaled = {source: None if w is None else -share[source] * w for source, w in weights.items()}
    value, sigma = _combined(ledger, scaled)
    out = {}
    for suffix, factor in factors.items():
        out[f"{name}{suffix}"] = value / factor + 0.0
        out[f"{name}{suffix}_half_width"] = float(from_sigma(sigma, interval)) / factor
    return out


def sentence(table: pd.DataFrame, *, interval: str, gt_per_mm: float) -> str:
    """One sentence about the total of the first window, ready to paste."""
    row = table[table["source"] == TOTAL].iloc[0]
    count = table.loc[table["window"] == row["window"], "source"].nunique() - 1
    if not np.isfinite(row["change"]):
        return "The sources do not share the window, so no total is given."
    verb, size = ("lost", -row["change"]) if row["change"] < 0 else ("gained", row["change"])
    sources = "the mass source" if count == 1 else f"the {count} mass sources together"
    change = (
        f"Between {row['first']} and {row['last']} {sources} {verb} {size:.0f} +- {row['change_half_width']:.0f} Gt ({interval}), "
        f"{row['sea_level']:+.1f} +- {row['sea_level_half_width']:.1f} mm of global-mean (barystatic) sea level at {gt_per_mm:g} "
        "Gt per mm"
    )
    if not np.isfinite(row["rate"]):
        return f"{change}; there are too few values for a rate."
    return (
        f"{change}; the mean rate is {row['rate']:+.0f} +- {row['rate_half_width']:.0f} Gt/yr, "
        f"{row['sea_level_rate']:+.3f} +- {row['sea_level_rate_half_width']:.3f} mm/yr."
    )
