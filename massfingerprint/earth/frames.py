"""Frames of degree 1: centre of mass of the solid Earth (CE), of the whole system (CM), of the surface figure (CF), and two more.

[h'_1, l'_1, 1 + k'_1] in a frame are the values in CE minus alpha. Source: Blewitt 2003, JGR 108(B2):2103 (formula from memory).
"""

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.arguments import one_of
from massfingerprint.sphere._transform import degree_of_count, index_of

FRAMES = ("CE", "CM", "CF", "CL", "CH")


def check_frame(frame: str, *, argument: str = "reference_frame") -> str:
    """Return a known frame name, or raise InputError offering the known ones."""
    return one_of(frame, FRAMES, argument=argument, kind="frame")


def degree_one_shift(h_load: float, l_load: float, frame: str) -> float:
    """Alpha of a frame from the degree-1 load Love numbers in CE; dimensionless."""
    shifts = {"CE": 0.0, "CM": 1.0, "CL": l_load, "CH": h_load, "CF": (h_load + 2.0 * l_load) / 3.0}
    return shifts[check_frame(frame)]


def in_frame(love: xr.Dataset, frame: str) -> xr.Dataset:
    """Love numbers with degree 1 expressed in another frame.

    Parameters
    ----------
    love : Dataset (degree)
        As ``love_numbers`` returns it, in any frame.
    frame : str
        ``CE``, ``CM``, ``CF``, ``CL`` (no horizontal degree-1 motion of the surface) or ``CH`` (no vertical one).

    Returns
    -------
    Dataset
        A copy; only degree 1 and ``attrs["reference_frame"]`` differ.

    Raises
    ------
    InputError
        If the frame is not known.

    Source
    ------
    Blewitt 2003, JGR 108(B2):2103 (formula from memory).
    """
    check_frame(frame, argument="frame")
    out = love.copy(deep=True)
    if out.sizes["degree"] < 2:
        out.attrs["reference_frame"] = frame
        return out
    held = -float(love["k_load"][1])  # k'_1 is 0 in CE by definition of CE
    h_load, l_load = float(love["h_load"][1]) + held, float(love["l_load"][1]) + held
    alpha = degree_one_shift(h_load, l_load, frame)
    for name, value in (("h_load", h_load), ("l_load", l_load), ("k_load", 0.0)):
        out[name][1] = value - alpha
    out.attrs["reference_frame"] = frame
    return out


def geocentre_motion(load: NDArray[np.float64], love: xr.Dataset, frame: str) -> NDArray[np.float64]:
    """Displacement of the centre of mass of the Earth with its load, as seen in a frame.

    Parameters
    ----------
    load : (..., 2, n) array
        Real orthonormal coefficients of the surface load, kg m-2.
    love : Dataset
        Love numbers of the Earth, any frame.
    frame : str
        Origin of the coordinates; in ``CM`` the motion is 0.

    Returns
    -------
    (..., 3) array
        x (0 N 0 E), y (0 N 90 E), z (north) in m for a load in kg m-2.

    Source
    ------
    Centre of mass of a thin shell: sum of r dm / M in CE, times 1 + k'_1 of the frame (Blewitt 2003, from memory).
    """
    table = in_frame(love, frame)
    zonal, tesseral = (index_of(1, order, degree_of_count(load.shape[-1])) for order in (0, 1))
    vector = np.stack([load[..., 0, tesseral], load[..., 1, tesseral], load[..., 0, zonal]], axis=-1)
    # integral of a unit-vector component times its orthonormal function is sqrt(4 pi / 3); M = 4/3 pi a^3 rho
    scale = np.sqrt(4.0 * np.pi / 3.0) * 3.0 / (4.0 * np.pi * love.attrs["mean_density"])
    return vector * scale * (1.0 + float(table["k_load"][1]))
