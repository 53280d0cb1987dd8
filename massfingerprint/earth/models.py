"""The built-in Earths: name, what it is, how it is made."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

from massfingerprint.arguments import one_of
from massfingerprint.constants import SPHERE_RADIUS
from massfingerprint.earth.layers import EarthModel, Layer, at_period, homogeneous
from massfingerprint.earth.prem import prem
from massfingerprint.errors import InputError

_STIFF = 1e10  # first Lame parameter over rigidity: incompressible to 1e-10, and still far from rounding


@dataclass(frozen=True)
class BuiltIn:
    """One built-in Earth.

    Parameters
    ----------
    make : callable
        Returns the model.
    about : str
        One line.
    """

    make: Callable[[], EarthModel]
    about: str


def uniform_earth() -> EarthModel:
    """Uniform incompressible sphere with the mean density of the Earth and a rigidity of 1.45e11 Pa, about the mantle's mean."""
    return homogeneous(5514.0, 1.45e11, 1.45e11 * _STIFF)


def five_layer() -> EarthModel:
    """Fluid core, four incompressible shells; the elastic part of a benchmark for viscous Earths.

    Source
    ------
    Spada et al. 2011, GJI 185:106 (parameters from memory).
    """
    radii = (0.0, 3480e3, 5701e3, 5951e3, 6301e3, SPHERE_RADIUS.value)
    density = (10750.0, 4978.0, 3871.0, 3438.0, 3037.0)
    rigidity = (0.0, 2.2834e11, 1.0549e11, 0.70363e11, 0.50605e11)
    viscosity = (0.0, 2e21, 1e21, 1e21, float("inf"))
    shells = tuple(
        Layer(
            radii[i],
            radii[i + 1],
            (density[i],),
            {"rigidity": (rigidity[i],), "first_lame": (_STIFF * (rigidity[i] or 1e11),)},
            viscosity=viscosity[i],
        )
        for i in range(5)
    )
    return EarthModel("five_layer", shells, "five incompressible layers (Spada et al. 2011, from memory), elastic part")


MODELS: Mapping[str, BuiltIn] = {
    "prem": BuiltIn(prem, "PREM, isotropic, 1 s, the ocean replaced by upper crust (default)"),
    "prem_200s": BuiltIn(lambda: prem(period=200.0), "the same at 200 s, softer by its quality factors"),
    "prem_oceanic": BuiltIn(lambda: prem(crust="oceanic"), "PREM with an oceanic crust of 6.5 km"),
    "prem_continental": BuiltIn(lambda: prem(crust="continental"), "PREM with the continental crust of ak135, 35 km"),
    "prem_no_crust": BuiltIn(lambda: prem(crust="none"), "PREM without crust, its uppermost mantle up to 6371 km"),
    "prem_as_published": BuiltIn(
        lambda: prem(crust="as published"), "PREM with nothing replaced, the ocean left off: surface at 6368 km"
    ),
    "homogeneous": BuiltIn(uniform_earth, "uniform incompressible sphere, 5514 kg m-3, 1.45e11 Pa: for checks"),
    "five_layer": BuiltIn(five_layer, "fluid core and four incompressible shells (Spada et al. 2011): for checks"),
}


def earth_model(name: str, *, period: float | None = None) -> EarthModel:
    """A built-in Earth.

    Parameters
    ----------
    name : str
        A key of ``MODELS``.
    period : float, optional
        s; for ``prem``, whose crust is kept.

    Returns
    -------
    EarthModel
        Shells from the centre to the surface.

    Raises
    ------
    InputError
        If there is no such Earth, or it has no quality factors for another period.
    """
    one_of(name, tuple(MODELS), argument="earth", kind="Earth named")
    if period is None:
        return MODELS[name].make()
    if name == "prem":
        return prem(period=period)
    if name.startswith("prem_"):
        raise InputError(f"period: only prem has one, got {period:g} with {name!r}. Use 'prem', or leave it out.")
    return at_period(MODELS[name].make(), period)
