"""What an Earth model is like, in numbers with the Earth's own beside them and in lines for people."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from massfingerprint.constants import (
    EARTH_MASS,
    GRAVITATIONAL_CONSTANT,
    MEAN_MOMENT_OF_INERTIA,
    SPHERE_RADIUS,
)
from massfingerprint.earth.layers import EarthModel

Array = NDArray[np.float64]
_LOOKS = 17  # radii of a shell at which its density is compared with what lies below


class Quantity(NamedTuple):
    """One number of a model.

    Parameters
    ----------
    quantity : str
        What it is, in words.
    value : float
        Of the model, in ``unit``.
    unit : str
        CF unit.
    earth : float or None
        The Earth's own value in the same unit, None where there is none to compare with.
    """

    quantity: str
    value: float
    unit: str
    earth: float | None


def totals(model: EarthModel) -> list[Quantity]:
    """Mass, mean density, surface gravity, moment of inertia and moment factor of a model beside the Earth's.

    Parameters
    ----------
    model : EarthModel
        Shells from the centre to the surface.

    Returns
    -------
    list of Quantity
        SI; the moment factor is I / (M a^2), dimensionless. The Earth is taken as a sphere of 6371 km.

    Source
    ------
    ``constants.EARTH_MASS``, ``constants.MEAN_MOMENT_OF_INERTIA``.
    """
    mass, moment, radius = EARTH_MASS.value, MEAN_MOMENT_OF_INERTIA.value, SPHERE_RADIUS.value
    factor = model.moment_of_inertia / (model.mass * model.radius**2)
    gravity = GRAVITATIONAL_CONSTANT.value * mass / radius**2
    return [
        Quantity("mass", model.mass, "kg", mass),
        Quantity("mean density", model.mean_density, "kg m-3", mass / (4.0 / 3.0 * np.pi * radius**3)),
        Quantity("surface gravity", model.surface_gravity, "m s-2", gravity),
        Quantity("moment of inertia", model.moment_of_inertia, "kg m2", moment),
        Quantity("moment factor", factor, "1", moment / (mass * radius**2)),
    ]


def describe(model: EarthModel) -> list[Quantity]:
    """Everything a model says in single numbers.

    Parameters
    ----------
    model : EarthModel
        Shells from the centre to the surface.

    Returns
    -------
    list of Quantity
        Surface radius, number of shells, :func:`totals`, and bottom and top of each fluid region.
    """
    out = [
        Quantity("surface radius", model.radius, "m", SPHERE_RADIUS.value),
        Quantity("shells", float(len(model.layers)), "1", None),
        *totals(model),
    ]
    for bottom, top in fluid_regions(model):
        out += [Quantity("bottom of fluid", bottom, "m", None), Quantity("top of fluid", top, "m", None)]
    return out


def fluid_regions(model: EarthModel) -> list[tuple[float, float]]:
    """Bottom and top radius in m of each fluid region, from the centre outwards; touching fluid shells are one region."""
    out: list[tuple[float, float]] = []
    for shell in (shell for shell in model.layers if shell.fluid):
        joined = bool(out) and out[-1][1] == shell.inner
        out[-1:] = [(out[-1][0], shell.outer)] if joined else [*out[-1:], (shell.inner, shell.outer)]
    return out


def density_inversions(model: EarthModel) -> list[tuple[float, float]]:
    """Bottom and top radius in m of each stretch in which density grows outwards; equal where it jumps up at a boundary."""
    out: list[tuple[float, float]] = []
    below = np.inf
    for number, shell in enumerate(model.layers):
        radius = np.linspace(shell.inner, shell.outer, _LOOKS)
        density = model.density(number, radius)
        if density[0] > below * (1.0 + 1e-9):
            out.append((shell.inner, shell.inner))
        rising = np.flatnonzero(np.diff(density) > 1e-9 * density[:-1])
        for first in rising:
            joined = bool(out) and out[-1][1] == radius[first]
            bottom = out.pop()[0] if joined else float(radius[first])
            out.append((bottom, float(radius[first + 1])))
        below = float(density[-1])
    return out


def report(model: EarthModel) -> list[str]:
    """Lines for people: fluid regions, mass and moment against the Earth's, density that grows outwards."""
    lines = [f"{model.name}: {len(model.layers)} shells to {model.radius / 1e3:g} km"]
    regions = fluid_regions(model)
    lines += [f"fluid from {bottom / 1e3:g} to {top / 1e3:g} km radius" for bottom, top in regions]
    lines += [] if regions else ["no fluid region"]
    for name, value, unit, earth in totals(model):
        if name in ("mass", "moment of inertia", "moment factor") and earth is not None:
            words = f"{name} {value:.5g}" + ("" if unit == "1" else f" {unit}")
            lines.append(f"{words}, {100.0 * (value / earth - 1.0):+.2f} % against the Earth's {earth:.5g}")
    for bottom, top in density_inversions(model):
        where = f"at {bottom / 1e3:g} km" if bottom == top else f"from {bottom / 1e3:g} to {top / 1e3:g} km"
        lines.append(f"density grows outwards {where}")
    return lines
