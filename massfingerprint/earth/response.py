"""What each degree of a surface load does to the geoid, the bedrock, the sea and the gravity field.

With L the whole load (kg m-2) in real orthonormal coefficients, every field is a factor per degree and order times L:
geoid 3 (1 + k') / (rho_e (2l+1)) + (1 + k_2) Lambda/g, bedrock the same with h' and h_2, relative sea level the difference;
fully normalised gravity coefficients take k_2 alone: a satellite does not feel the direct centrifugal term.
"""

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.earth.frames import in_frame
from massfingerprint.earth.rotation import centrifugal_factors
from massfingerprint.errors import InputError

Array = NDArray[np.float64]
_LOVE = {
    "relative_sea_level": lambda t: 1.0 + t["k_load"].values - t["h_load"].values,
    "geoid": lambda t: 1.0 + t["k_load"].values,
    "bedrock_up": lambda t: t["h_load"].values,
    "gravity": lambda t: 1.0 + t["k_load"].values,
}
_TIDE = {
    "relative_sea_level": lambda h, k: 1.0 + k - h,
    "geoid": lambda h, k: 1.0 + k,
    "bedrock_up": lambda h, k: h,
    "gravity": lambda h, k: k,
}


def degree_factors(love: xr.Dataset, field: str, *, reference_frame: str = "CM") -> Array:
    """Response per degree (ndegree,) of a field to a load, rotation left out; m per (kg m-2).

    Parameters
    ----------
    love : Dataset (degree)
        Love numbers, any frame.
    field : str
        ``relative_sea_level``, ``geoid``, ``bedrock_up`` or ``gravity`` (equivalent to the geoid here).
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
    if field not in _LOVE:
        raise InputError(f"field: no response for {field!r}. Known: {', '.join(_LOVE)}.")
    table = in_frame(love, reference_frame)
    degree = table["degree"].values
    factors = 3.0 * _LOVE[field](table) / (love.attrs["mean_density"] * (2.0 * degree + 1.0))
    factors[0] = 0.0
    return factors


def rotational_factors(love: xr.Dataset, field: str) -> tuple[float, float]:
    """Response of a field to the rotation that a degree-2 load causes, orders 0 and 1; m per (kg m-2)."""
    h_tide, k_tide = float(love["h_tide"][2]), float(love["k_tide"][2])
    tide = _TIDE[field](h_tide, k_tide)
    zonal, tesseral = centrifugal_factors(love)
    return tide * zonal, tide * tesseral


def coefficient_factors(
    love: xr.Dataset, field: str, degree: NDArray, order: NDArray, *, rotation: bool = True, reference_frame: str = "CM"
) -> Array:
    """Response (n,) per coefficient of given degree and order, the rotational feedback included; m per (kg m-2)."""
    factors = degree_factors(love, field, reference_frame=reference_frame)[degree]
    if rotation:
        zonal, tesseral = rotational_factors(love, field)
        factors[(degree == 2) & (order == 0)] += zonal
        factors[(degree == 2) & (order == 1)] += tesseral
    return factors


def gravity_coefficients(
    load: xr.DataArray, love: xr.Dataset, *, rotation: bool = True, reference_frame: str = "CM"
) -> Array:
    """Change of the fully normalised gravity (Stokes) coefficients caused by a whole surface load.

    Parameters
    ----------
    load : DataArray (part, coefficient)
        Real orthonormal coefficients of ice and ocean together, kg m-2.
    love : Dataset
        Love numbers at least to the degree of the load.
    rotation : bool
        Add the deformation by the changed rotation.
    reference_frame : str
        Frame of degree 1.

    Returns
    -------
    (2, degree, order) array
        Dimensionless, reference radius the sphere's.
    """
    degree, order = load["degree"].values, load["order"].values
    factors = coefficient_factors(love, "gravity", degree, order, rotation=rotation, reference_frame=reference_frame)
    scaled = load.values * factors / (love.attrs["radius"] * np.sqrt(4.0 * np.pi))
    square = np.zeros((2, degree.max() + 1, degree.max() + 1))
    square[:, degree, order] = scaled
    return square
