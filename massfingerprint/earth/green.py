"""Elastic Green's functions: the answer of the Earth at an angular distance from a point load, all degrees summed.

G(psi) = 1/(4 pi a^2) sum_l 3 w_l/rho_e P_l(cos psi), w_l = 1 + k'_l - h'_l for relative sea level, h'_l for the bedrock, 1 + k'_l
for the geoid. Beside the load the series converges slowly or not at all. Beyond the degrees of the table, w_l is taken as
w_inf + b/l: h' goes to its half-space limit, l k' to a constant, and b joins the table without a step. These two parts are summed
in closed form to infinity (Kummer's device), only what differs from them, within the table, term by term:

    sum_{l>=1} P_l = 1/(2 s) - 1,    sum_{l>=1} P_l / l = -ln(s (1 + s)),    s = sin(psi/2)

Horizontally the Earth moves along the great circle through the load, by 1/(4 pi a^2) sum_l 3 l'_l/rho_e dP_l/dpsi away from it;
l l'_l goes to its limit, and the sum of dP_l/dpsi / l is the derivative of the second closed form.

Source: Farrell 1972, Rev. Geophys. 10:761; the closed sums follow from the generating function of the Legendre polynomials.
"""

import numpy as np
import xarray as xr
from numpy.polynomial import legendre
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from massfingerprint.constants import KILOGRAMS_PER_GIGATONNE
from massfingerprint.earth.response import degree_factors
from massfingerprint.errors import InputError

Array = NDArray[np.float64]
LEAST_DEGREE = 2048  # there PREM's h' is within 0.2 % of its limit
_NODES = 2500
_FURTHER = 4  # times the end of the table: where the 1/l^2 of the horizontal motion no longer matters
_NEAREST = 1e-6  # radians, 6 m


def point_response(love: xr.Dataset, field: str, angle: Array, *, reference_frame: str = "CM") -> Array:
    """Elastic response to one gigatonne added at a point, without water and without rotation.

    Parameters
    ----------
    love : Dataset (degree)
        Love numbers to degree 2048 or more; with the attribute ``h_load_limit`` their tail is that of its half-space.
    field : str
        ``relative_sea_level``, ``geoid``, ``bedrock_up`` or ``bedrock_horizontal``: away from the load.
    angle : array
        Angular distance in radians, more than 0.
    reference_frame : str
        Of degree 1 of geoid and bedrock.

    Returns
    -------
    array
        m per Gt added, same shape; degree 0 is left out.

    Raises
    ------
    InputError
        If the table ends too early.
    """
    last = int(love["degree"][-1])
    if last < LEAST_DEGREE:
        raise InputError(
            f"love: beside the load degrees to {LEAST_DEGREE} are needed, got {last}. Use love_numbers(max_degree=2048)."
        )
    if field == "bedrock_horizontal":
        return _away(love, angle, reference_frame) * _per_gigatonne(love)
    degree = love["degree"].values
    terms = degree_factors(love, field, reference_frame=reference_frame) * (2.0 * degree + 1.0)  # 3 w_l / rho_e
    limit = 3.0 * _limit(love, field, last) / float(love.attrs["mean_density"])
    slope = last * (terms[-1] - limit)
    rest = terms - limit - slope / np.maximum(degree, 1)
    rest[0] = 0.0
    sine = np.sin(0.5 * np.asarray(angle, dtype=np.float64))
    whole = limit * (0.5 / sine - 1.0) - slope * np.log(sine * (1.0 + sine)) + legendre.legval(np.cos(angle), rest)
    return whole * _per_gigatonne(love)


def _per_gigatonne(love: xr.Dataset) -> float:
    return KILOGRAMS_PER_GIGATONNE.value / (4.0 * np.pi * float(love.attrs["radius"]) ** 2)


def _away(love: xr.Dataset, angle: Array, frame: str) -> Array:
    """Sum of 3 l'/rho_e dP_l/dpsi, m3 kg-1."""
    degree = love["degree"].values
    last = int(degree[-1])
    terms = degree_factors(love, "bedrock_horizontal", reference_frame=frame) * (2.0 * degree + 1.0)
    sideways = float(love.attrs.get("l_load_limit", last * love["l_load"].values[last]))
    limit = 3.0 * sideways / float(love.attrs["mean_density"])
    beyond = np.arange(last + 1.0, _FURTHER * last + 1.0)
    slope = last**2 * (terms[-1] - limit / last)
    rest = np.concatenate([terms - limit / np.maximum(degree, 1), slope / beyond**2])
    rest[0] = 0.0
    angle = np.asarray(angle, dtype=np.float64)
    sine = np.sin(0.5 * angle)
    closed = -0.5 * np.cos(0.5 * angle) * (1.0 + 2.0 * sine) / (sine * (1.0 + sine))
    return limit * closed - np.sin(angle) * legendre.legval(np.cos(angle), legendre.legder(rest))


def _limit(love: xr.Dataset, field: str, last: int) -> float:
    """w_inf of a field; the last h' of the table where no limit is known."""
    vertical = float(love.attrs.get("h_load_limit", love["h_load"].values[last]))
    return {"relative_sea_level": 1.0 - vertical, "geoid": 1.0, "bedrock_up": vertical}[field]


def point_response_table(love: xr.Dataset, field: str, *, reference_frame: str = "CM") -> CubicSpline:
    """Spline over ln(angle) of sin(angle) times :func:`point_response`: smooth and finite down to the load."""
    angle = np.geomspace(_NEAREST, np.pi - 1e-6, _NODES)
    values = np.sin(angle) * point_response(love, field, angle, reference_frame=reference_frame)
    return CubicSpline(np.log(angle), values)
