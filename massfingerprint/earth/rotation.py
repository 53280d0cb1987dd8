"""How the Earth's rotation answers a surface load, and what the changed rotation does to the sea.

The inertia is that of the surface load alone; the factor 1 + k'_2 enters once. With co-latitude theta:
I13 = -a^4 int L sin cos cos(lon), I23 likewise with sin(lon), I33 the degree-2 part;
m1 + i m2 = (1 + k'_2)(I13 + i I23) / ((C - (A+B)/2)(1 - k_2/k_s)),  m3 = -(1 + k'_2) I33 / C;
Lambda = Omega^2 a^2 [-(m1 cos lon + m2 sin lon) sin cos - (2/3) m3 P2].
Source: linearised Liouville equations below the Chandler frequency, Munk & MacDonald 1960; Mitrovica et al. 2005 (from memory).
"""

from dataclasses import dataclass

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import constants

Array = NDArray[np.float64]
_TESSERAL = np.sqrt(4.0 * np.pi / 15.0)  # sin cos cos(lon) = _TESSERAL * orthonormal function of degree 2, order 1
_ZONAL = np.sqrt(4.0 * np.pi / 5.0)  # P2 = _ZONAL * orthonormal function of degree 2, order 0


@dataclass(frozen=True)
class RotationConstants:
    """What the answer of the rotation depends on, besides the Love numbers.

    Parameters
    ----------
    secular_love_number : float
        k_s: how far the figure follows the axis in the end; from the observed flattening, or from a hydrostatic Earth.
    polar_moment : float
        C in kg m2.
    moment_excess : float
        C - (A + B)/2 in kg m2.
    rotation_rate : float
        Omega in rad s-1.
    """

    secular_love_number: float = constants.SECULAR_LOVE_NUMBER.value
    polar_moment: float = constants.POLAR_MOMENT_OF_INERTIA.value
    moment_excess: float = constants.MOMENT_OF_INERTIA_EXCESS.value
    rotation_rate: float = constants.ROTATION_RATE.value


OBSERVED = RotationConstants()


def rotation_vector(load: Array, love: xr.Dataset, rotation: RotationConstants = OBSERVED) -> Array:
    """Change of the rotation vector caused by a load.

    Parameters
    ----------
    load : (..., 2, 3) array
        Degree-2 real orthonormal coefficients of the whole surface load (ice and ocean), kg m-2: part cos, sin; order 0, 1, 2.
    love : Dataset
        Love numbers.
    rotation : RotationConstants
        Moments of inertia and the like.

    Returns
    -------
    (..., 3) array
        m1, m2 (rad, towards 0 E and 90 E) and m3 (relative change of the rotation rate).
    """
    k_load, k_tide = float(love["k_load"][2]), float(love["k_tide"][2])
    fourth = float(love.attrs["radius"]) ** 4
    inertia = -fourth * _TESSERAL * load[..., :, 1]
    axial = -2.0 / 3.0 * fourth * _ZONAL * load[..., 0, 0]
    amplification = (1.0 + k_load) / (rotation.moment_excess * (1.0 - k_tide / rotation.secular_love_number))
    rate = -(1.0 + k_load) * axial / rotation.polar_moment
    return np.concatenate([amplification * inertia, rate[..., None]], axis=-1)


def centrifugal_factors(love: xr.Dataset, rotation: RotationConstants = OBSERVED) -> tuple[float, float]:
    """Centrifugal potential over gravity, Lambda / g, per load coefficient of degree 2: orders 0 and 1; m per (kg m-2)."""
    zonal, tesseral = np.zeros((2, 3)), np.zeros((2, 3))
    zonal[0, 0] = tesseral[0, 1] = 1.0
    m3 = rotation_vector(zonal, love, rotation)[2]
    m1 = rotation_vector(tesseral, love, rotation)[0]
    scale = (rotation.rotation_rate * float(love.attrs["radius"])) ** 2 / float(love.attrs["surface_gravity"])
    return -2.0 / 3.0 * scale * _ZONAL * float(m3), -scale * _TESSERAL * float(m1)


def polar_motion(vector: Array) -> tuple[Array, Array]:
    """Polar motion x_p and y_p in mas (IERS: y_p towards 90 W) of rotation vectors (..., 3)."""
    scale = constants.MILLIARCSECONDS_PER_RADIAN.value
    return vector[..., 0] * scale, -vector[..., 1] * scale


def length_of_day_change(vector: Array) -> Array:
    """Change of the length of day in ms of rotation vectors (..., 3); positive = longer."""
    return -vector[..., 2] * constants.SECONDS_PER_DAY.value * 1e3
