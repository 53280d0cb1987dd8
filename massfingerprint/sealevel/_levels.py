"""Corrections on low degrees: the same equation cut at a lower degree, solved directly at the lowest.

Rounds of the plain iteration contract degree l by about rho_w T_l, 0.2 at degree 2 but below 0.01 from degree 160 on. So what a
round leaves at low degrees is taken out on a coarse copy of the problem, and high degrees are left to the rounds themselves. The
coarse copy is the exact restriction: its product is formed with all ocean degrees that can reach it.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from massfingerprint.sealevel._equation import Correction, Operator
from massfingerprint.sphere import _transform

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

DIRECT_DEGREE, MIDDLE_DEGREE = 16, 160
_SWEEPS = 2  # of the middle level
_WET = 0.6  # between 0 on land and 1 at sea: what a round is taken to return of a high degree, in units of rho_w T


def _damping(operator: Operator) -> Array:
    """Factor (n,) on a residual that allows for what later rounds would return of it."""
    return 1.0 / (1.0 - _WET * operator.water_density * operator.response)


@dataclass(frozen=True)
class Direct:
    """All degrees of a coarse problem at once, by the inverse of its dense matrix (condition about 2); made when first used."""

    operator: Operator

    @cached_property
    def _inverse(self) -> Array:
        count = self._pack(self.operator.ocean).size
        matrix = np.empty((count, count))
        for column in range(count):
            unit = np.zeros(count)
            unit[column] = 1.0
            matrix[:, column] = unit - self._pack(self.operator.homogeneous(self._unpack(unit)))
        return np.asarray(np.linalg.inv(matrix), dtype=np.float64)

    def _pack(self, coefficients: Complex) -> Array:
        """Independent real numbers of coefficients: imaginary parts of order 0 are none."""
        zonal = _transform.degree_of_count(coefficients.size) + 1
        return np.concatenate([coefficients.real, coefficients.imag[zonal:]])

    def _unpack(self, numbers: Array) -> Complex:
        count = self.operator.ocean.size
        out = numbers[:count].astype(np.complex128)
        out.imag[_transform.degree_of_count(count) + 1 :] = numbers[count:]
        return out

    def __call__(self, residual: Complex) -> Complex:
        """Error of the coarse state that left this residual, exact."""
        # not BLAS, whose threads go on spinning and take the processors from the transforms
        return self._unpack(np.einsum("ij,j->i", self._inverse, self._pack(residual)))


@dataclass(frozen=True)
class Lifted:
    """Damped rounds on all degrees, with the low ones corrected by a coarser problem.

    Parameters
    ----------
    operator : Operator
        Problem whose residuals come in.
    below : Correction
        For the low degrees.
    below_degree : int
        How far these go.
    sweeps : int
        1: no product is formed here; each further sweep forms one.
    """

    operator: Operator
    below: Correction
    below_degree: int
    sweeps: int = 1

    @cached_property
    def _factor(self) -> Array:
        return _damping(self.operator)

    @cached_property
    def _low(self) -> NDArray[np.int64]:
        """Places of the low degrees among all."""
        degree, order = _transform.degrees_and_orders(self.below_degree)
        full = _transform.degree_of_count(self.operator.ocean.size)
        return _transform.index_of(degree, order, full)

    def _sweep(self, residual: Complex) -> Complex:
        out = self._factor * residual
        out[self._low] = self.below(residual[self._low])
        return out

    def __call__(self, residual: Complex) -> Complex:
        """Approximate error of the state that left this residual."""
        out = self._sweep(residual)
        for _ in range(self.sweeps - 1):
            out += self._sweep(residual - out + self.operator.homogeneous(out))
        return out


def corrections(operator: Operator, ocean: Complex) -> Correction:
    """Hierarchy for a problem; ``ocean`` (n,) are the coefficients of the ocean fraction to the highest degree that is used."""
    degree = _transform.degree_of_count(operator.ocean.size)
    direct = Direct(coarser(operator, ocean, min(DIRECT_DEGREE, degree)))
    if degree <= DIRECT_DEGREE:
        return direct
    if degree <= 2 * DIRECT_DEGREE:
        return Lifted(operator, direct, DIRECT_DEGREE)
    half = min(MIDDLE_DEGREE, degree // 2)
    middle = coarser(operator, ocean, half)
    return Lifted(operator, Lifted(middle, direct, DIRECT_DEGREE, sweeps=_SWEEPS), half)


def coarser(operator: Operator, ocean: Complex, degree: int) -> Operator:
    """The problem cut at a lower degree, its product exact."""
    reach = min(_transform.degree_of_count(ocean.size), 2 * degree)
    rings = _transform.GaussLegendreRings(degree, reach)
    fraction = _transform.resized(ocean, reach)
    response = _transform.resized(operator.response, degree)
    cut = _transform.resized(ocean, degree)
    return Operator(rings, rings.synthesise(fraction), cut, response, operator.water_density)
