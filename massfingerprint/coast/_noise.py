"""Noise of evenly sampled series with gaps: exact Gaussian likelihood of the kept epochs, generalised least squares. Arrays.

Kept epochs have whole numbers (n,), steps of the full grid. Each model gives products with the inverse of their covariance C:

    white       C = 1
    ar1         C = phi^|i-j|: a Markov chain also where epochs are missing, so the inverse is tridiagonal
    arma11      C = w phi^|i-j| + (1 - w) 1, w = r1 / phi, r1 the correlation of neighbours: with Q the inverse of phi^|i-j|
                the inverse is (w + (1 - w) Q)^-1 Q, two tridiagonals
    power_law   spectrum as (2 sin(omega/2))^kappa (Hosking 1981, Biometrika 68, with d = -kappa/2), kappa from -2 to 0

Power-law noise from kappa = -1 down has no variance, but its differences have: with V(h) the variance of x(t+h) - x(t),
C = c - V/2. The constant c drops out of everything, as a level is always fitted. V is a double sum of the correlations of
one-step differences, fractional noise of d - 1.

Likelihood: restricted (REML; Patterson & Thompson 1971, Biometrika 58), of the n - p contrasts free of the p regressors, so
that short records do not make the noise too small; all models of one series have the same contrasts and can be compared.
Degrees of
freedom of the variance of one parameter: 2 over the variance of its logarithm, from the information of the noise parameters at
the maximum (Satterthwaite 1946; Fai & Cornelius 1996, J. Stat. Comput. Simul. 54). Papers are cited from memory.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import linalg, optimize, special

Array = NDArray[np.float64]
Index = NDArray[np.int64]
# Parameters of each model beside the size of the noise, with their bounds
BOUNDS: dict[str, tuple[tuple[float, float], ...]] = {
    "white": (),
    "ar1": ((-0.9, 0.99),),
    "arma11": ((-0.9, 0.99), (-0.95, 0.95)),
    "power_law": ((-2.0, 0.0),),
}
PARAMETERS: dict[str, tuple[str, ...]] = {
    "white": (),
    "ar1": ("ar",),
    "arma11": ("ar", "ma"),
    "power_law": ("spectral_index",),
}
_PER_PARAMETER = 5  # contrasts for each parameter of the noise, below which it is not fitted
_SMALLEST_AR = 1e-3  # of arma11: its w has phi as denominator; closer to 0 nothing can be told from 0
_STEP = {"ar1": 0.02, "arma11": 0.02, "power_law": 0.05}  # of the parameters in differences of the likelihood
_LEAST_FREEDOM = 2.0
_FLAT = 1e-6  # of the information of the size of the noise: below, the likelihood does not tell the parameter
_COARSE = 5  # values of one parameter between which the best is looked for
_ENOUGH = 1e-7  # relative change of the deviance that ends a search: far below the 2 by which models are told apart
_STARTS = ((0.3, 0.0), (0.8, -0.5), (0.95, -0.8), (-0.3, 0.3))


@dataclass(frozen=True)
class Fit:
    """One model fitted to one series.

    ``rows`` (p, n) take the series to the regressors' parameters; ``covariance`` (p, p) is theirs; ``scale`` the standard
    deviation that the unit covariance is multiplied with; ``freedom`` the degrees of freedom of the variance of parameter 1.
    """

    model: str
    theta: Array
    log_likelihood: float
    rows: Array
    covariance: Array
    scale: float
    freedom: float
    aicc: float
    bic: float


@dataclass(frozen=True)
class _Pieces:
    """At given noise parameters, for orthonormal regressors: log determinants, weighted squares, inverse normal matrix, rows."""

    determinants: float
    squares: float
    inverse: Array
    rows: Array


@dataclass(frozen=True)
class _Problem:
    index: Index
    basis: Array
    triangle: Array
    series: Array

    @property
    def contrasts(self) -> int:
        return self.basis.shape[0] - self.basis.shape[1]

    def pieces(self, model: str, theta: Array) -> _Pieces:
        count = self.basis.shape[1]
        columns = np.column_stack([self.basis, self.series])
        products, log_determinant = inverse_times(model, theta, self.index, columns)
        normal = self.basis.T @ products[:, :count]
        inverse = linalg.inv(0.5 * (normal + normal.T))
        rows = inverse @ products[:, :count].T
        residual = self.series - self.basis @ (rows @ self.series)
        squares = float(residual @ (products[:, count] - products[:, :count] @ (rows @ self.series)))
        return _Pieces(log_determinant + float(np.linalg.slogdet(normal)[1]), squares, inverse, rows)

    def deviance(self, model: str, theta: Array) -> float:
        """Minus twice the restricted log-likelihood, the size of the noise at its best."""
        return self.deviance_of(self.pieces(model, theta))

    def deviance_of(self, held: _Pieces) -> float:
        """The same of what is computed already."""
        free = self.contrasts
        return free * (np.log(2.0 * np.pi * held.squares / free) + 1.0) + held.determinants

    def log_variance(self, held: _Pieces) -> float:
        """Logarithm of the variance of parameter 1 over that of the noise."""
        row = linalg.solve_triangular(self.triangle, np.eye(self.triangle.shape[0]))[1]
        return float(np.log(row @ held.inverse @ row))


def fit(model: str, index: Index, design: Array, series: Array) -> Fit | None:
    """Fit one noise model and, with it, the regressors.

    Parameters
    ----------
    model : str
        A key of ``BOUNDS``.
    index : int array (n,)
        Whole numbers of the kept epochs on the grid, ascending.
    design : array (n, p)
        Regressors of full rank, the first one constant; degrees of freedom are those of the second.
    series : array (n,)
        Finite.

    Returns
    -------
    Fit or None
        None where the series is too short for the model's parameters.
    """
    basis, triangle = np.linalg.qr(design)
    problem = _Problem(index, basis, triangle, series)
    free, unknown = problem.contrasts, 1 + len(BOUNDS[model])
    if free < 1 or (unknown > 1 and free < _PER_PARAMETER * unknown):
        return None
    theta = _best(model, problem)
    held = problem.pieces(model, theta)
    deviance = problem.deviance_of(held)
    back = linalg.solve_triangular(triangle, np.eye(triangle.shape[0]))
    variance = held.squares / free
    small = 2.0 * unknown * free / (free - unknown - 1) if free > unknown + 1 else np.inf
    return Fit(
        model=model,
        theta=theta,
        log_likelihood=-0.5 * deviance,
        rows=back @ held.rows,
        covariance=variance * back @ held.inverse @ back.T,
        scale=float(np.sqrt(variance)),
        freedom=_freedom(model, theta, problem, held),
        aicc=deviance + small,
        bic=deviance + unknown * np.log(free),
    )


def _best(model: str, problem: _Problem) -> Array:
    """Noise parameters of the largest restricted likelihood."""
    bounds = BOUNDS[model]
    if not bounds:
        return np.empty(0)
    if len(bounds) == 1:
        coarse = np.linspace(*bounds[0], _COARSE)
        at = int(np.argmin([problem.deviance(model, np.array([value])) for value in coarse]))
        ends = coarse[max(at - 1, 0)], coarse[min(at + 1, coarse.size - 1)]
        found = optimize.minimize_scalar(
            lambda value: problem.deviance(model, np.array([value])),
            bounds=ends,
            method="bounded",
            options={"xatol": 2e-3},
        )
        return np.array([float(found.x)])

    def deviance(theta: Array) -> float:
        return problem.deviance(model, theta)

    low, high = (np.array(ends) for ends in zip(*bounds, strict=True))
    starts = sorted((np.array(start) for start in _STARTS), key=deviance)[:2]
    tried = [
        optimize.minimize(
            deviance, start, bounds=optimize.Bounds(low, high), method="L-BFGS-B", options={"ftol": _ENOUGH}
        )
        for start in starts
    ]
    return np.asarray(min(tried, key=lambda result: float(result.fun)).x, dtype=np.float64)


def _freedom(model: str, theta: Array, problem: _Problem, middle: _Pieces) -> float:
    """Degrees of freedom of the variance of parameter 1, not above the number of contrasts."""
    free = float(problem.contrasts)
    step = _STEP.get(model, 0.0)
    inner = [k for k, (low, high) in enumerate(BOUNDS[model]) if low + step < theta[k] < high - step]
    if not inner:  # at an end nothing is left to be uncertain about
        return free

    def at(*moves: tuple[int, float]) -> Array:
        shifted = theta.copy()
        for k, sign in moves:
            shifted[k] += sign * step
        held = problem.pieces(model, shifted)
        return np.array([held.determinants, held.squares, problem.log_variance(held)])

    variance = middle.squares / free
    centre = np.array([middle.determinants, middle.squares, problem.log_variance(middle)])
    information, gradient = _information(at, inner, (centre, variance, free, step))
    if np.linalg.eigvalsh(information)[0] < _FLAT * free:
        return _LEAST_FREEDOM
    spread = float(gradient @ np.linalg.solve(information, gradient))
    return float(np.clip(2.0 / spread, _LEAST_FREEDOM, free))


def _information(
    at: Callable[..., Array], inner: list[int], known: tuple[Array, float, float, float]
) -> tuple[Array, Array]:
    """Observed information of (log variance, parameters), and the gradient of the log variance of parameter 1."""
    centre, variance, free, step = known
    count = len(inner)
    information, gradient = np.zeros((count + 1, count + 1)), np.ones(count + 1)
    information[0, 0] = 0.5 * free
    weights = np.array([1.0, 1.0 / variance, 0.0])
    pairs = [(at((k, 1.0)), at((k, -1.0))) for k in inner]
    for a, (above, below) in enumerate(pairs, 1):
        slope = (above - below) / (2.0 * step)
        information[0, a] = information[a, 0] = -0.5 * slope[1] / variance
        information[a, a] = 0.5 * weights @ (above - 2.0 * centre + below) / step**2
        gradient[a] = slope[2]
    if count == 2:
        corners = [sign * other * at((0, sign), (1, other)) for sign in (1.0, -1.0) for other in (1.0, -1.0)]
        information[1, 2] = information[2, 1] = 0.5 * weights @ np.sum(corners, axis=0) / (4.0 * step**2)
    return information, gradient


def variance_of(held: Fit, index: Index, weights: Array) -> float:
    """Variance of a weighted sum of the noise; the weights (n,) add to 0 where only differences have a variance."""
    if held.model == "white":
        return float(held.scale**2 * weights @ weights)
    if held.model == "power_law":
        covariance = power_law_covariance(float(held.theta[0]), index)
    else:
        phi = off_zero(float(held.theta[0]))
        covariance = phi ** np.abs(index[:, None] - index[None, :]).astype(np.float64)
        if held.model == "arma11":
            share = arma_share(phi, float(held.theta[1]))
            covariance = share * covariance + (1.0 - share) * np.eye(index.size)
    return float(held.scale**2 * weights @ covariance @ weights)


def arma_share(phi: float, theta: float) -> float:
    """The share w of C = w phi^|i-j| + (1 - w) 1 of arma11; phi is kept off 0, where nothing can be told from it."""
    phi = off_zero(phi)
    return arma_neighbours(phi, theta) / phi


def off_zero(phi: float) -> float:
    """An autoregressive parameter that arma11 can be divided by."""
    return float(np.copysign(_SMALLEST_AR, phi)) if abs(phi) < _SMALLEST_AR else phi


def inverse_times(model: str, theta: Array, index: Index, columns: Array) -> tuple[Array, float]:
    """Product (n, k) of the inverse of the covariance with columns (n, k), and the logarithm of its determinant.

    The covariance of ``power_law`` is known up to a constant, the same for all pairs of epochs.
    """
    if model == "white":
        return columns, 0.0
    if model == "power_law":
        factor = linalg.cho_factor(power_law_covariance(float(theta[0]), index), lower=True, check_finite=False)
        return linalg.cho_solve(factor, columns, check_finite=False), 2.0 * float(np.log(np.diag(factor[0])).sum())
    phi = float(theta[0])
    if model == "arma11":
        phi = off_zero(phi)
    diagonal, beside, log_determinant = _chain(phi, index)
    products = diagonal[:, None] * columns
    products[:-1] += beside[:, None] * columns[1:]
    products[1:] += beside[:, None] * columns[:-1]
    if model == "ar1":
        return products, log_determinant
    share = arma_share(phi, float(theta[1]))
    band = np.zeros((2, index.size))
    band[1] = share + (1.0 - share) * diagonal
    band[0, 1:] = (1.0 - share) * beside
    factor_band = linalg.cholesky_banded(band, check_finite=False)
    log_determinant += 2.0 * float(np.log(factor_band[1]).sum())
    return linalg.cho_solve_banded((factor_band, False), products, check_finite=False), log_determinant


def arma_neighbours(phi: float, theta: float) -> float:
    """Correlation of neighbours of x(t) = phi x(t-1) + e(t) + theta e(t-1) (Box & Jenkins)."""
    return (phi + theta) * (1.0 + phi * theta) / (1.0 + 2.0 * phi * theta + theta**2)


def _chain(phi: float, index: Index) -> tuple[Array, Array, float]:
    """Diagonal (n,) and its neighbour (n-1,) of the inverse of phi^|i-j|, logarithm of the determinant of the matrix."""
    carried = phi ** np.diff(index).astype(np.float64)
    fresh = 1.0 - carried**2
    diagonal = np.ones(index.size)
    diagonal[:-1] += carried**2 / fresh
    diagonal[1:] += 1.0 / fresh - 1.0
    return diagonal, -carried / fresh, float(np.log(fresh).sum())


def power_law_covariance(kappa: float, index: Index) -> Array:
    """Covariance (n, n) of fractional noise with unit innovations, up to a constant that makes it positive definite."""
    variances = difference_variances(kappa, int(index[-1] - index[0]))
    covariance: Array = variances[-1] + 1.0 - 0.5 * variances[np.abs(index[:, None] - index[None, :])]
    return covariance


def difference_variances(kappa: float, longest: int) -> Array:
    """Variance of x(t+h) - x(t) of fractional noise with unit innovations, for h from 0 to ``longest``."""
    own = -0.5 * kappa - 1.0  # d of one-step differences
    lags = np.arange(1, max(longest, 1), dtype=np.float64)
    first = special.gamma(1.0 - 2.0 * own) / special.gamma(1.0 - own) ** 2
    correlations = np.cumprod((lags - 1.0 + own) / (lags - own))
    growth = first * np.concatenate([[1.0], 1.0 + 2.0 * np.cumsum(correlations)])
    return np.concatenate([[0.0], np.cumsum(growth)])[: longest + 1]
