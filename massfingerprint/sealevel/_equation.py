"""The sea-level equation for one load, on arrays of coefficients.

    S = sum_lm T_lm L_lm Y_lm + c,    L = I + rho_w P(O S),    rho_w int(O S) = - int(I)

T holds the elastic response and, at degree 2, the rotational feedback; P cuts the product at the degree of the solution; c is
uniform and follows from mass. The state stays spectral, the product is formed on Gauss-Legendre rings fine enough to be exact
for the band-limited ocean, so the discrete operator is self-adjoint.  Source: Farrell & Clark 1976, GJRAS 46:647.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfingerprint.sphere._transform import GaussLegendreRings, inner_product

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
_DIVERGED = 1e6  # growth of the answer over its first round that no convergent iteration shows
_ROOT = np.sqrt(4.0 * np.pi)  # degree-0 coefficient of the constant 1


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
        return self.water_density * self.rings.analyse(self.ocean_on_rings * self.rings.synthesise(sea_level))

    def sea_level(self, load: Complex, ice_mass: float) -> tuple[Complex, float]:
        """S (n,) in m of a whole load, and its uniform part c in m, from the mass of ice (integral over the unit sphere)."""
        shape = self.response * load
        ocean_area = self.ocean[0].real * _ROOT
        uniform = (-ice_mass / self.water_density - inner_product(self.ocean, shape)) / ocean_area
        shape[0] += uniform * _ROOT
        return shape, uniform


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


def _norm(coefficients: Complex) -> float:
    return float(np.sqrt(inner_product(coefficients, coefficients)))


def solve(operator: Operator, ice: Complex, *, tolerance: float, max_rounds: int = 100) -> Solution:
    """Solve the equation for one ice load by plain iteration.

    Parameters
    ----------
    operator : Operator
        The prepared problem.
    ice : (n,) complex array
        Coefficients of the ice load, kg m-2.
    tolerance : float
        On the relative residual.
    max_rounds : int
        Where to give up.

    Returns
    -------
    Solution
        Converged or not; an iteration whose answer grows without bound is stopped early.
    """
    ice_mass = float(ice[0].real) * _ROOT
    barystatic = -ice_mass / (operator.water_density * operator.ocean[0].real * _ROOT)
    load = ice + operator.water_density * barystatic * operator.ocean
    sea_level, uniform = operator.sea_level(load, ice_mass)
    residual, rounds, first = np.inf, 0, 0.0
    while rounds < max_rounds and residual > tolerance:
        load = ice + operator.ocean_load(sea_level)
        following, uniform = operator.sea_level(load, ice_mass)
        size = _norm(following)
        residual = _norm(following - sea_level) / size if size > 0.0 else 0.0
        sea_level, rounds = following, rounds + 1
        first = first or size
        if not size <= _DIVERGED * first:
            break
    weight = _norm(ice)
    unbalanced = abs(float(load[0].real)) / weight if weight > 0.0 else abs(float(load[0].real))
    return Solution(load, uniform, rounds, residual, unbalanced, bool(residual <= tolerance))
