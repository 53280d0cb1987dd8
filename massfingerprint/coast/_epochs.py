"""Epochs of a station against those of a mass record: linear interpolation within it, and the slope over them."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Times = NDArray[np.datetime64]
DAYS_PER_YEAR = 365.25
HOLE_STEPS = 3.0  # usual steps of a record between two values beyond which nothing is interpolated between them
_MONTH = DAYS_PER_YEAR / 12.0
_DAY = np.timedelta64(1, "D")
_ROOM = 1e-6  # of the usual step
# Smallest singular value of the normalised columns: below, the epochs cannot tell a yearly cycle from level and slope
_DISTINCT = 1e-3


@dataclass(frozen=True)
class Between:
    """Where epochs (n,) stand in a record (ntime,): values are (1 - ``share``) x[``lower``] + ``share`` x[``upper``].

    ``held`` tells which epochs have a value, ``inside`` which lie within the record, in one of its holes or not.
    """

    lower: NDArray[np.intp]
    upper: NDArray[np.intp]
    share: Array
    held: NDArray[np.bool_]
    inside: NDArray[np.bool_]

    def spread(self, weights: Array, count: int) -> Array:
        """Weights on the record (count,) that weights (n,) on the epochs amount to; 0 where an epoch has no value."""
        kept = np.where(self.held, weights, 0.0)
        ends = ((self.lower, kept * (1.0 - self.share)), (self.upper, kept * self.share))
        return np.sum([np.bincount(at, part, count) for at, part in ends], axis=0)

    def values(self, record: Array) -> Array:
        """Values (n,) of a record (ntime,); NaN where there is none."""
        out = (1.0 - self.share) * record[self.lower] + self.share * record[self.upper]
        return np.where(self.held, out, np.nan)


def between(time: Times, has_value: NDArray[np.bool_], epochs: Times) -> Between:
    """Place epochs (n,) between the epochs of a record that has values at some of its times (ntime,), at one at least."""
    held = np.flatnonzero(has_value)
    own = time[held]
    after = np.clip(np.searchsorted(own, epochs, side="left"), 0, own.size - 1)
    before = np.where(own[after] == epochs, after, np.maximum(after - 1, 0))
    step = (own[after] - own[before]) / _DAY
    usual = float(np.median(np.diff(own) / _DAY)) if own.size > 1 else 0.0
    inside = (epochs >= own[0]) & (epochs <= own[-1])
    found = inside & (step <= HOLE_STEPS * usual * (1.0 + _ROOM))
    share = np.where(found, (epochs - own[before]) / _DAY / np.where(step > 0.0, step, 1.0), 0.0)
    return Between(held[before], held[after], share, found, inside)


def monthly(start: np.datetime64, end: np.datetime64) -> Times:
    """Evenly spaced epochs from start to end, both included, about a month apart."""
    steps = max(1, round(float((end - start) / _DAY) / _MONTH))
    length = (end - start).astype("timedelta64[ns]").astype(np.int64)
    out: Times = start + np.round(np.linspace(0.0, 1.0, steps + 1) * length).astype("timedelta64[ns]")
    return out


def design(epochs: Times, *, seasonal: bool) -> Array:
    """Columns (n, 2 or 4) of level, slope per year and a yearly cosine and sine, time counted from the middle of the epochs."""
    days = (epochs - epochs[0]) / _DAY
    years = (days - 0.5 * days[-1]) / DAYS_PER_YEAR
    columns = [np.ones_like(years), years]
    if seasonal:
        columns += [np.cos(2.0 * np.pi * years), np.sin(2.0 * np.pi * years)]
    return np.stack(columns, axis=1)


def slope_weights(epochs: Times, sigma: Array | None, *, seasonal: bool) -> Array | None:
    """Weights (n,) in yr-1 that take values at epochs to the slope of a weighted least-squares line.

    Parameters
    ----------
    epochs : array (n,)
        Ascending.
    sigma : array (n,), optional
        Standard uncertainties, more than 0; equal weights without.
    seasonal : bool
        Whether a yearly cycle is fitted beside level and slope.

    Returns
    -------
    array (n,) or None
        None where the epochs are too few, or do not tell slope and cycle apart.
    """
    if epochs.size < 2 + 2 * seasonal:
        return None
    columns = design(epochs, seasonal=seasonal)
    if np.linalg.svd(columns / np.linalg.norm(columns, axis=0), compute_uv=False)[-1] < _DISTINCT:
        return None
    weight = np.ones(epochs.size) if sigma is None else sigma.min() / sigma
    slope: Array = (np.linalg.pinv(columns * weight[:, None]) * weight)[1]
    return slope
