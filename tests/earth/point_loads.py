"""Point masses as coefficients, by direct sums of scipy's harmonics."""

import numpy as np
import xarray as xr
from scipy.special import sph_harm_y

from massfingerprint.sphere import _transform
from massfingerprint.sphere.harmonics import labelled


def point_load(lat: float, lon: float, max_degree: int, gigatonnes: float = 1.0) -> xr.DataArray:
    """Real coefficients, kg m-2, of a point mass added at a place on the sphere of 6371 km."""
    degree, order = _transform.degrees_and_orders(max_degree)
    y = (
        (-1.0) ** order
        * sph_harm_y(degree, order, np.deg2rad(90 - lat), np.deg2rad(lon))
        * np.where(order, np.sqrt(2), 1)
    )
    return labelled(np.stack([y.real, y.imag]) * gigatonnes * 1e12 / 6.371e6**2, (), {})
