"""Load and tide Love numbers as labelled tables: the shipped one, or computed afresh."""

from functools import lru_cache

import numpy as np
import xarray as xr

from massfingerprint.arguments import one_of, whole_number
from massfingerprint.bundled import open_bundled
from massfingerprint.constants import GRAVITATIONAL_CONSTANT
from massfingerprint.earth._by_degree import numbers_by_degree, tail
from massfingerprint.earth._radial import surface_numbers
from massfingerprint.earth.layers import EarthModel
from massfingerprint.earth.models import MODELS
from massfingerprint.errors import InputError

_SHIPPED = "prem"
_MEANING = {
    "h_load": "load Love number h', vertical",
    "l_load": "load Love number l', horizontal",
    "k_load": "load Love number k', potential",
    "h_tide": "tidal Love number h, vertical",
    "l_tide": "tidal Love number l, horizontal",
    "k_tide": "tidal Love number k, potential",
}


HIGHEST_DEGREE = 40_000  # half a kilometre on the ground


def compute_love_numbers(
    model: EarthModel, max_degree: int, *, refinement: float = 1.0, every_degree: bool = False
) -> xr.Dataset:
    """Integrate the radial equations of an Earth model.

    Parameters
    ----------
    model : EarthModel
        Shells with a solid surface.
    max_degree : int
        1 to 40000.
    refinement : float
        Factor on the number of steps.
    every_degree : bool
        Integrate each degree by itself: the plain way, some ten times slower.

    Returns
    -------
    Dataset (degree)
        As :func:`love_numbers`.

    Raises
    ------
    InputError
        If the degree cannot be used.
    """
    _checked_degree(max_degree)
    if every_degree:
        numbers = surface_numbers(model, max_degree, refinement=refinement)
    else:
        limits = tuple(half_space_limits(model).values())
        numbers = numbers_by_degree(model, max_degree, limits=limits, refinement=refinement)
    variables = {
        name: ("degree", getattr(numbers, name), {"units": "1", "long_name": meaning})
        for name, meaning in _MEANING.items()
    }
    return xr.Dataset(
        variables,
        coords={"degree": ("degree", np.arange(max_degree + 1), {"long_name": "spherical-harmonic degree"})},
        attrs={
            "reference_frame": "CE",
            "radius": model.radius,
            "mean_density": model.mean_density,
            "surface_gravity": model.surface_gravity,
            "source": f"{model.source}; radial equations integrated by massfingerprint",
            **half_space_limits(model),
        },
    )


def _checked_degree(max_degree: int) -> int:
    degree = whole_number(max_degree, argument="max_degree", lowest=1)
    if degree > HIGHEST_DEGREE:
        raise InputError(f"max_degree: at most {HIGHEST_DEGREE} (half a kilometre), got {degree}.")
    return degree


def extend_love_numbers(love: xr.Dataset, max_degree: int) -> xr.Dataset:
    """Continue a table beyond its end by the law of a half-space.

    Parameters
    ----------
    love : Dataset (degree)
        As :func:`love_numbers`, with the attributes ``h_load_limit``, ``l_load_limit``, ``k_load_limit``.
    max_degree : int
        At most 40000; a table that reaches it is returned as it is.

    Returns
    -------
    Dataset (degree)
        h', n l' and n k' go to their limits as 1/n, joined without a step (Farrell 1972). From degree 4096 of PREM the values are
        within 1e-6 of integrated ones, from 2048 within 5e-3.

    Raises
    ------
    InputError
        If the degree cannot be used or the table has no limits.
    """
    last = int(love["degree"][-1])
    if _checked_degree(max_degree) <= last:
        return love
    names = tuple(f"{name}_limit" for name in ("h_load", "l_load", "k_load"))
    if any(name not in love.attrs for name in names):
        raise InputError(
            f"love: has no {names[0]}, so it cannot be continued beyond degree {last}. Ask for fewer degrees."
        )
    table = np.stack([love[name].values for name in _MEANING])
    rest = tail(table, max_degree, tuple(float(love.attrs[name]) for name in names))
    whole = np.concatenate([table, rest], axis=1)
    degree = ("degree", np.arange(max_degree + 1), love["degree"].attrs)
    variables = {name: ("degree", row, love[name].attrs) for name, row in zip(_MEANING, whole, strict=True)}
    return xr.Dataset(variables, coords={"degree": degree}, attrs=love.attrs)


def half_space_limits(model: EarthModel) -> dict[str, float]:
    """Limits of h', l l' and l k' at high degree, from the top of an Earth model; dimensionless, as attributes of its table.

    Source
    ------
    Farrell 1972: -g^2 (lambda + 2 mu)/(4 pi G mu (lambda + mu)), g^2/(4 pi G (lambda + mu)), -rho g a/(2 mu).
    """
    top, surface = len(model.layers) - 1, np.asarray(model.radius)
    lame, shear = (float(value) for value in model.moduli(top, surface))
    density, gravity = float(model.density(top, surface)), model.surface_gravity
    scale = gravity**2 / (4.0 * np.pi * GRAVITATIONAL_CONSTANT.value)
    return {
        "h_load_limit": -scale * (lame + 2.0 * shear) / (shear * (lame + shear)),
        "l_load_limit": scale / (lame + shear),
        "k_load_limit": -density * gravity * model.radius / (2.0 * shear),
    }


def love_numbers(model: str = "prem", *, max_degree: int = 1024, recompute: bool = False) -> xr.Dataset:
    """Load and tide Love numbers of a built-in Earth.

    Parameters
    ----------
    model : str
        Name of a built-in Earth (``earth.models.MODELS``); ``"prem"``: isotropic (Voigt), 1 s, the ocean replaced by upper crust
        to 6371 km.
    max_degree : int
        Highest degree, 1 to 40000. The shipped table of PREM ends at 2048; all else is computed, in half a second.
    recompute : bool
        Integrate the radial equations at every degree instead, the plain way (seconds).

    Returns
    -------
    Dataset (degree)
        Dimensionless ``h_load l_load k_load h_tide l_tide k_tide``, degree from 0, degree 1 in CE. The tide columns are 0 at
        degrees 0 and 1; k' and l' are 0 at degree 0. Attributes: ``reference_frame``, ``radius`` [m], ``mean_density``
        [kg m-3], ``surface_gravity`` [m s-2], ``source``.

    Raises
    ------
    InputError
        If the model is unknown or the degree is not a whole number of 1 or more.
    """
    one_of(model, tuple(MODELS), argument="earth", kind="Earth named")
    _checked_degree(max_degree)
    if model == _SHIPPED and not recompute:
        shipped = open_bundled(f"love_numbers_{model}.nc")
        if max_degree < shipped.sizes["degree"]:
            return shipped.isel(degree=slice(0, max_degree + 1)).assign_attrs(half_space_limits(MODELS[model].make()))
    if recompute:
        return compute_love_numbers(MODELS[model].make(), max_degree, every_degree=True)
    return _computed(model, max_degree).copy(deep=True)


@lru_cache(maxsize=16)
def _computed(model: str, max_degree: int) -> xr.Dataset:
    return compute_love_numbers(MODELS[model].make(), max_degree)
