"""The slow, plain way to solve the equation: rounds from the barystatic rise, nothing corrected, nothing combined."""

import numpy as np

from massfingerprint.sphere._transform import inner_product

ROOT = np.sqrt(4.0 * np.pi)


def plain_iteration(operator, ice, *, tolerance=1e-13, max_rounds=60):
    """Coefficients (n,) of relative sea level in m and the residual of every round, for one ice load in kg m-2."""
    mass = float(ice[0].real) * ROOT
    level = -mass / (operator.water_density * operator.ocean[0].real * ROOT)
    sea_level, _ = operator.sea_level(ice + operator.water_density * level * operator.ocean, mass)
    residuals = []
    while len(residuals) < max_rounds and (not residuals or residuals[-1] > tolerance):
        following, _ = operator.sea_level(ice + operator.ocean_load(sea_level), mass)
        change = following - sea_level
        residuals.append(float(np.sqrt(inner_product(change, change) / inner_product(following, following))))
        sea_level = following
    return sea_level, residuals
