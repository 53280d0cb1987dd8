"""Whether a sum explains what was observed: chi-square of what is left.

A residual closes if its square over its variance is below 3.84, chi-square of one degree of freedom at 95 %; several together with
the full covariance of their residuals.
"""

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray
from scipy import stats

from massfingerprint.errors import InputError

Array = NDArray[np.float64]
CONFIDENCE = 0.95


def chi_squares(residual: Array, variance: Array, judged: NDArray[np.bool_]) -> tuple[Array, NDArray[np.int8]]:
    """Chi-square of each residual, NaN without a variance, and whether it closes: 1, 0, or -1 where it is not judged."""
    values = np.divide(residual**2, variance, out=np.full(residual.size, np.nan), where=variance > 0.0)
    within = (values <= stats.chi2.ppf(CONFIDENCE, 1)).astype(np.int8)
    return values, np.where(judged & np.isfinite(values), within, np.int8(-1)).astype(np.int8)


def chi_square_together(residual: Array, covariance: Array) -> tuple[float, int, int]:
    """Chi-square of residuals (n,) with their covariance (n, n), its degrees of freedom, and whether they close (-1 if n is 0)."""
    rank = int(np.linalg.matrix_rank(covariance, hermitian=True)) if residual.size else 0
    if not rank:
        return np.nan, 0, -1
    value = float(residual @ np.linalg.pinv(covariance, hermitian=True) @ residual)
    return value, rank, int(value <= stats.chi2.ppf(CONFIDENCE, rank))


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
