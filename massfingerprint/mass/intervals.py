"""Uncertainty intervals in and out: half-widths and bounds to a standard uncertainty and back, never mixed silently.

Inside the package an uncertainty is a standard uncertainty (1 sigma) of a Gaussian. IPCC's *likely* is read as the central 66 % and
*very likely* as the central 90 % (Mastrandrea et al. 2010, guidance note: at least 66 %, at least 90 %; from memory).
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from massfingerprint.arguments import one_of
from massfingerprint.errors import InputError

Array = NDArray[np.float64]

# Half-width of the central interval in standard deviations: the normal quantile of (1 + p) / 2.
_FACTORS = {
    "1 sigma": 1.0,
    "2 sigma": 2.0,
    "66 %": 0.9541652531461944,
    "90 %": 1.6448536269514722,
    "95 %": 1.959963984540054,
}
_IPCC = {"likely": "66 %", "very likely": "90 %"}
INTERVALS = (*_FACTORS, *_IPCC)


def interval_factor(interval: str, *, argument: str = "interval") -> float:
    """Half-width of a named central interval in standard uncertainties.

    Parameters
    ----------
    interval : str
        ``1 sigma``, ``2 sigma``, ``66 %``, ``90 %``, ``95 %``, ``likely`` (66 %) or ``very likely`` (90 %).
    argument : str
        What to call it in an error.

    Raises
    ------
    InputError
        If the interval is not known.
    """
    name = one_of(interval, INTERVALS, argument=argument, kind="interval")
    return _FACTORS[_IPCC.get(name, name)]


def _checked(values: ArrayLike, argument: str) -> Array:
    array = np.asarray(values, dtype=np.float64)
    if (array < 0.0).any():
        raise InputError(f"{argument}: must be 0 or more, got {array.min():g}. Give the half-width of the interval.")
    return array


def to_sigma(half_width: ArrayLike, interval: str) -> Array:
    """Standard uncertainty of a symmetric interval's half-width, same unit and shape; NaN stays NaN.

    Raises
    ------
    InputError
        If a half-width is negative or the interval is not known.
    """
    return _checked(half_width, "half_width") / interval_factor(interval)


def from_sigma(sigma: ArrayLike, interval: str) -> Array:
    """Half-width of a named interval from a standard uncertainty, same unit and shape; NaN stays NaN.

    Raises
    ------
    InputError
        If a sigma is negative or the interval is not known.
    """
    return _checked(sigma, "sigma") * interval_factor(interval)


def sigma_of_bounds(central: ArrayLike, lower: ArrayLike, upper: ArrayLike, interval: str) -> Array:
    """Standard uncertainty of an interval given by its bounds, symmetric or not.

    Rule for asymmetric bounds: half the distance between the bounds over the interval's factor; the central value is kept
    as published. It keeps the width of the interval; the skewness is lost.

    Parameters
    ----------
    central, lower, upper : array-like
        Same unit; lower <= central <= upper.
    interval : str
        Which interval the bounds mark.

    Raises
    ------
    InputError
        If the bounds are not in order or the interval is not known.
    """
    middle, low, high = (np.asarray(v, dtype=np.float64) for v in (central, lower, upper))
    wrong = ~((low <= middle) & (middle <= high)) & ~(np.isnan(low) | np.isnan(middle) | np.isnan(high))
    if wrong.any():
        first = np.argmax(wrong)
        found = ", ".join(f"{np.broadcast_to(v, wrong.shape).flat[first]:g}" for v in (low, middle, high))
        raise InputError(f"bounds: must be in the order lower, central, upper, got {found}. Swap them.")
    return (high - low) / (2.0 * interval_factor(interval))


def shown(parts: dict[str, float], total: float, *, decimals: int) -> tuple[dict[str, str], str, str]:
    """Round parts and their total for people, and say so where the rounded parts do not add up.

    Parameters
    ----------
    parts : dict of str to float
        Values by name.
    total : float
        Their sum, unrounded.
    decimals : int
        Decimals to show.

    Returns
    -------
    (dict, str, str)
        Parts and total as text, and a footnote: empty if the rounded parts add to the rounded total.

    Raises
    ------
    InputError
        If the total is not the sum of the parts.
    """
    missed = abs(sum(parts.values()) - total)
    if missed > 1e-9 * max(1.0, *(abs(v) for v in parts.values())):
        raise InputError(f"total: must be the sum of the parts, {sum(parts.values()):g}, got {total:g}.")
    text = {name: f"{round(value, decimals) + 0.0:.{decimals}f}" for name, value in parts.items()}
    whole = f"{round(total, decimals) + 0.0:.{decimals}f}"
    unit = 10**decimals
    adds = sum(round(float(value) * unit) for value in text.values()) == round(float(whole) * unit)
    return text, whole, "" if adds else "Parts do not add to the total because each is rounded on its own."
