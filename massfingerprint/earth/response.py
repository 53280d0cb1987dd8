"""What each degree of a surface load does to the geoid, the bedrock, the sea and the gravity field.

With L the whole load (kg m-2) in real orthonormal coefficients, every field is a factor per degree and order times L:
geoid 3 (1 + k') / (rho_e (2l+1)) + (1 + k_2) Lambda/g, bedrock the same with h' and h_2, relative sea level the difference;
fully normalised gravity coefficients take k_2 alone: a satellite does not feel the direct centrifugal term. The horizontal motion
is the gradient of a potential with l' and l_2: it has no curl. Gravity at a fixed point just above the load falls off outwards,
(l+1)(1 + k'), against the centrifugal -2 + 3 k_2; the surface moves through it, -2 g u / a.
"""

from collections.abc import Callable

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.earth.frames import in_frame
from massfingerprint.earth.rotation import OBSERVED, RotationConstants, centrifugal_factors
from massfingerprint.errors import InputError

Array = NDArray[np.float64]
_Terms = Callable[[Array, Array, Array, Array], Array]
# per degree n with Love numbers h, s (sideways, l in the literature) and k: response to a load, and to a tide of degree 2;
# gravity in units of g/a
_RESPONSES: dict[str, tuple[_Terms, _Terms]] = {
    "relative_sea_level": (lambda n, h, s, k: 1.0 + k - h, lambda n, h, s, k: 1.0 + k - h),
    "geoid": (lambda n, h, s, k: 1.0 + k, lambda n, h, s, k: 1.0 + k),
    "bedrock_up": (lambda n, h, s, k: h, lambda n, h, s, k: h),
    "bedrock_horizontal": (lambda n, h, s, k: s, lambda n, h, s, k: s),
    "stokes": (lambda n, h, s, k: 1.0 + k, lambda n, h, s, k: k),
    "gravity_fixed": (lambda n, h, s, k: (n + 1.0) * (1.0 + k), lambda n, h, s, k: 3.0 * k - 2.0),
    "gravity_surface": (lambda n, h, s, k: (n + 1.0) * (1.0 + k) - 2.0 * h, lambda n, h, s, k: 3.0 * k - 2.0 - 2.0 * h),
}


def _unit(love: xr.Dataset, field: str) -> float:
    """What turns a height of the geoid, m, into the unit of the field: g/a for gravity."""
    return float(love.attrs["surface_gravity"]) / float(love.attrs["radius"]) if field.startswith("gravity") else 1.0


def degree_factors(love: xr.Dataset, field: str, *, reference_frame: str = "CM") -> Array:
    """Response per degree (ndegree,) of a field to a load, rotation left out; m per (kg m-2), gravity m s-2 per (kg m-2).

    Parameters
    ----------
    love : Dataset (degree)
        Love numbers, any frame.
    field : str
        ``relative_sea_level``, ``geoid``, ``bedrock_up``, ``bedrock_horizontal`` (the potential whose gradient on the unit
        sphere is the motion north and east), ``stokes`` (as the geoid here), ``gravity_fixed`` or ``gravity_surface``.
    reference_frame : str
        Frame of degree 1; relative sea level does not depend on it.

    Returns
    -------
    array
        3 (Love factor) / (rho_e (2l+1)); 0 at degree 0, where a closed mass budget has no load.

    Raises
    ------
    InputError
        If the field or the frame is unknown.
    """
    if field not in _RESPONSES:
        raise InputError(f"field: no response for {field!r}. Known: {', '.join(_RESPONSES)}.")
    table = in_frame(love, reference_frame)
    degree = table["degree"].values
    terms = _RESPONSES[field][0](degree, *(table[name].values for name in ("h_load", "l_load", "k_load")))
    factors = 3.0 * terms / (love.attrs["mean_density"] * (2.0 * degree + 1.0)) * _unit(love, field)
    factors[0] = 0.0
    return factors


def rotational_factors(love: xr.Dataset, field: str, rotation: RotationConstants = OBSERVED) -> tuple[float, float]:
    """Response of a field to the rotation that a degree-2 load causes, orders 0 and 1; units as :func:`degree_factors`."""
    numbers = (np.asarray(float(love[name][2])) for name in ("h_tide", "l_tide", "k_tide"))
    tide = float(_RESPONSES[field][1](np.asarray(2.0), *numbers)) * _unit(love, field)
    zonal, tesseral = centrifugal_factors(love, rotation)
    return tide * zonal, tide * tesseral


def coefficient_factors(
    love: xr.Dataset,
    field: str,
    degree: NDArray,
    order: NDArray,
    *,
    rotation: bool | RotationConstants = True,
    reference_frame: str = "CM",
) -> Array:
    """Response (n,) per coefficient of given degree and order, the rotational feedback included; units likewise."""
    factors = degree_factors(love, field, reference_frame=reference_frame)[degree]
    if rotation is not False:
        held = OBSERVED if rotation is True else rotation
        zonal, tesseral = rotational_factors(love, field, held)
        factors[(degree == 2) & (order == 0)] += zonal
        factors[(degree == 2) & (order == 1)] += tesseral
    return factors


def gravity_coefficients(
    load: xr.DataArray, love: xr.Dataset, *, rotation: bool | RotationConstants = True, reference_frame: str = "CM"
) -> Array:
    """Change of the fully normalised gravity (Stokes) coefficients caused by a whole surface load.

    Parameters
    ----------
    load : DataArray (..., part, coefficient)
        Real orthonormal coefficients of ice and ocean together, kg m-2.
    love : Dataset
        Love numbers at least to the degree of the load.
    rotation : bool or RotationConstants
        Add the deformation by the changed rotation.
    reference_frame : str
        Frame of degree 1.

    Returns
    -------
    (..., 2, degree, order) array
        Dimensionless, reference radius the sphere's.
    """
    degree, order = load["degree"].values, load["order"].values
    factors = coefficient_factors(love, "stokes", degree, order, rotation=rotation, reference_frame=reference_frame)
    load = load.transpose(..., "part", "coefficient")
    scaled = load.values * factors / (love.attrs["radius"] * np.sqrt(4.0 * np.pi))
    square = np.zeros((*scaled.shape[:-1], degree.max() + 1, degree.max() + 1))
    square[..., degree, order] = scaled
    return square
