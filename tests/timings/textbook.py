"""The sea-level equation as a textbook iterates it, with pyshtools on Driscoll-Healy grids: what the solver is timed against.

Start from the barystatic rise, form the product with the ocean on the grid, expand, apply the response, add the uniform part, until
the relative change is below the tolerance. Source: Farrell & Clark 1976, as usually iterated (common practice).
"""

import numpy as np
import pyshtools
from pyshtools.backends import select_preferred_backend

from massfingerprint.earth.response import coefficient_factors


def _square(degree, values):
    """(2, L+1, L+1) of one number per degree and order."""
    out = np.zeros((2, degree + 1, degree + 1))
    degrees, orders = np.tril_indices(degree + 1)
    out[:, degrees, orders] = values(degrees, orders)
    return out


class Textbook:
    """A problem on a grid of 2 L + 2 rings; fully normalised (4 pi) coefficients."""

    def __init__(self, ocean, love, degree, backend, threads):
        select_preferred_backend(backend, nthreads=threads)
        self.degree, self.count = degree, 2 * degree + 2
        rows = -90.0 + 180.0 / self.count * np.arange(self.count, 0, -1)
        columns = 180.0 / self.count * np.arange(2 * self.count)
        self.ocean = ocean.interp(lat=rows, lon=columns, method="nearest", kwargs={"fill_value": "extrapolate"}).values
        self.response = _square(degree, lambda n, m: coefficient_factors(love, "relative_sea_level", n, m))
        self.coefficients = self.expand(self.ocean)

    def expand(self, field):
        return pyshtools.expand.SHExpandDH(field, sampling=2, norm=1, lmax_calc=self.degree)

    def grid(self, coefficients):
        return pyshtools.expand.MakeGridDH(coefficients, sampling=2, norm=1, lmax=self.degree, extend=False)

    def solve(self, ice, *, tolerance, density=1000.0):
        """Coefficients of relative sea level in m for those of a load in kg m-2."""
        barystatic = -ice[0, 0, 0] / (density * self.coefficients[0, 0, 0])
        sea_level = np.zeros_like(ice)
        sea_level[0, 0, 0] = barystatic
        for _ in range(100):
            load = ice + density * self.expand(self.ocean * self.grid(sea_level))
            following = self.response * load
            following[0, 0, 0] = 0.0
            uniform = (-ice[0, 0, 0] / density - np.sum(self.coefficients * following)) / self.coefficients[0, 0, 0]
            following[0, 0, 0] = uniform
            change = np.linalg.norm(following - sea_level) / np.linalg.norm(following)
            sea_level = following
            if change < tolerance:
                break
        return sea_level
