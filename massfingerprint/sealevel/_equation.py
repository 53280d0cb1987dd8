"""The sea-level equation for one load, on arrays of coefficients.

    S = sum_lm T_lm L_lm Y_lm + c,    L = I + rho_w P(O S),    rho_w int(O S) = - int(I)

T holds the elastic response and, at degree 2, the rotational feedback; P cuts the product at the degree of the solution; c is
uniform and follows from mass. The state stays spectral, the product is formed on Gauss-Legendre rings fine enough to be exact
for the band-limited ocean, so the discrete operator is self-adjoint.  Source: Farrell & Clark 1976, GJRAS 46:647.

One round forms one product. What it leaves (the residual) is corrected on the low degrees, where rounds contract least, by
``_levels``; the states so far are combined to the smallest residual (Anderson 1965, J. ACM 12:547; here linear, so it is exact).
"""

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from massfingerprint.sphere._transform import GaussLegendreRings, inner_product

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
_ROOT = np.sqrt(4.0 * np.pi)  # degree-0 coefficient of the constant 1
_KEPT = 3  # states combined; older ones add nothing once the low degrees are corrected
MAX_ROUNDS = 40


@dataclass(frozen=True)
class Operator:
    """What is the same for every load.

    Parameters
    ----------
    rings : GaussLegendreRings
        Where the product with the ocean is formed.
    ocean_on_rings : (nring, ncell) array
        Ocean fraction, band-limited.
    ocean : (n,) complex array
        Its coefficients up to the degree of the solution.
    response : (n,) array
        T, 0 at degree 0; m per (kg m-2).
    water_density : float
        kg m-3.
    """

    rings: GaussLegendreRings
    ocean_on_rings: Array
    ocean: Complex
    response: Array
    water_density: float

    def ocean_load(self, sea_level: Complex) -> Complex:
        """Coefficients (n,) of rho_w P(O S), kg m-2."""
        field = self.rings.synthesise(sea_level)
        field *= self.ocean_on_rings
        out = self.rings.analyse(field)
        out *= self.water_density
        return out

    def sea_level(self, load: Complex, ice_mass: float) -> tuple[Complex, float]:
        """S (n,) in m of a whole load, and its uniform part c in m, from the mass of ice (integral over the unit sphere)."""
        shape = self.response * load
        ocean_area = self.ocean[0].real * _ROOT
        uniform = (-ice_mass / self.water_density - inner_product(self.ocean, shape)) / ocean_area
        shape[0] += uniform * _ROOT
        return shape, uniform

    def homogeneous(self, sea_level: Complex) -> Complex:
        """What one round makes of a sea level (n,) when there is no ice."""
        return self.sea_level(self.ocean_load(sea_level), 0.0)[0]


class Correction(Protocol):
    """Takes a residual (n,) to an approximate error of the state (n,), linearly."""

    def __call__(self, residual: Complex) -> Complex:
        """Approximate error of the state that left this residual."""
        ...


@dataclass(frozen=True)
class Solution:
    """Answer and account of one solve.

    Parameters
    ----------
    load : (n,) complex array
        Ice and ocean load, kg m-2.
    uniform : float
        c in m.
    rounds : int
        Products with the ocean formed.
    residual : float
        ||T L(S) + c - S|| / ||S|| of the last state that was put through the equation; the answer is one round further.
    mass_residual : float
        Mass that the last ocean load leaves unbalanced, relative to the ice load, by quadrature on the rings.
    converged : bool
        Whether the residual reached the tolerance.
    """

    load: Complex
    uniform: float
    rounds: int
    residual: float
    mass_residual: float
    converged: bool


@dataclass
class _State:
    """A sea level, the load it makes, and what the equation leaves of it."""

    sea_level: Complex
    load: Complex
    residual: Complex


def _norm(coefficients: Complex) -> float:
    return float(np.sqrt(inner_product(coefficients, coefficients)))


def solve(
    operator: Operator, ice: Complex, *, tolerance: float, correction: Correction, max_rounds: int | None = None
) -> Solution:
    """Solve the equation for one ice load.

    Parameters
    ----------
    operator : Operator
        The prepared problem.
    ice : (n,) complex array
        Coefficients of the ice load, kg m-2.
    tolerance : float
        On the relative residual.
    correction : callable
        From a residual to an approximate error of the state; with the identity the iteration is plain.
    max_rounds : int, optional
        Where to give up, ``MAX_ROUNDS`` by default.

    Returns
    -------
    Solution
        Converged or not.
    """
    ice_mass = float(ice[0].real) * _ROOT
    sea_level, residual = np.zeros_like(ice), operator.sea_level(ice, ice_mass)[0]
    kept: list[_State] = []
    weights, relative, rounds = np.ones(1), np.inf, 0
    while rounds < (max_rounds or MAX_ROUNDS) and relative > tolerance:
        sea_level = sea_level + correction(residual)
        load = operator.ocean_load(sea_level)
        load += ice
        left, _ = operator.sea_level(load, ice_mass)
        size = _norm(left)
        left -= sea_level
        kept = [*kept[1 - _KEPT :], _State(sea_level, load, left)]
        weights, rounds = _smallest([state.residual for state in kept]), rounds + 1
        sea_level = _sum(weights, [state.sea_level for state in kept])
        residual = _sum(weights, [state.residual for state in kept])
        relative = _norm(residual) / size if size > 0.0 else 0.0
    load = _sum(weights, [state.load for state in kept])
    _, uniform = operator.sea_level(load, ice_mass)
    weight = _norm(ice)
    unbalanced = abs(float(load[0].real)) / weight if weight > 0.0 else abs(float(load[0].real))
    return Solution(load, uniform, rounds, relative, unbalanced, bool(relative <= tolerance))


def _smallest(residuals: list[Complex]) -> Array:
    """Weights, adding to 1, of the combination of states whose residual is smallest; the last state alone while there are few."""
    last = residuals[-1]
    alone = np.append(np.zeros(len(residuals) - 1), 1.0)
    steps = [residual - last for residual in residuals[:-1]]
    sizes = np.array([_norm(step) for step in steps])
    if len(steps) < _KEPT - 1 or not (sizes > 0.0).all():
        return alone
    gram = np.array([[inner_product(a, b) for b in steps] for a in steps]) / np.outer(sizes, sizes)
    right = np.array([-inner_product(a, last) for a in steps]) / sizes
    others = np.linalg.lstsq(gram, right, rcond=1e-12)[0] / sizes
    return np.append(others, 1.0 - others.sum())


def _sum(weights: Array, parts: list[Complex]) -> Complex:
    """Weighted sum of states, by their differences from the last: weights add to 1."""
    if len(parts) == 1:
        return parts[0]
    out = parts[-1].copy()
    for weight, part in zip(weights[:-1], parts[:-1], strict=True):
        step = part - parts[-1]
        step *= weight
        out += step
    return out
