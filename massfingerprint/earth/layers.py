"""Layered spherical Earth models: density and elastic moduli as functions of radius.

PREM after Dziewonski & Anderson (1981), Phys. Earth Planet. Inter. 25:297, Table 1 (polynomials, from memory, held against the
tabulated model of a seismology package by the tests). Between 24.4 and 220 km depth the isotropic (Voigt) average of the
transversely isotropic moduli is taken, at the reference period of 1 s. The ocean is replaced by the upper crust.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from massfingerprint.constants import GRAVITATIONAL_CONSTANT, SPHERE_RADIUS

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Layer:
    """One spherical shell; each property is a polynomial in x = radius / surface radius, lowest power first.

    Parameters
    ----------
    inner, outer : float
        Radii in m.
    density : tuple of float
        kg m-3.
    speeds : dict
        Wave speeds in m s-1 as polynomials: ``p`` and ``s``, or ``pv ph sv sh`` and the dimensionless ``eta``.
    """

    inner: float
    outer: float
    density: tuple[float, ...]
    speeds: Mapping[str, tuple[float, ...]] = field(hash=False)

    @property
    def fluid(self) -> bool:
        """Whether the shell carries no shear."""
        return all(not any(self.speeds.get(name, ())) for name in ("s", "sv", "sh"))


@dataclass(frozen=True)
class EarthModel:
    """Shells from the centre to the surface.

    Parameters
    ----------
    name : str
        Plain name.
    layers : tuple of Layer
        From the centre outwards, without gaps.
    source : str
        Publication and choices made.
    """

    name: str
    layers: tuple[Layer, ...]
    source: str

    @property
    def radius(self) -> float:
        """Surface radius in m."""
        return self.layers[-1].outer

    def density(self, layer: int, radius: Array) -> Array:
        """Density (same shape as ``radius``), kg m-3, of one shell at radii in m."""
        return _polynomial(self.layers[layer].density, radius / self.radius)

    def moduli(self, layer: int, radius: Array) -> tuple[Array, Array]:
        """First Lame parameter and rigidity of one shell at radii in m; Pa, isotropic (Voigt) average where needed.

        Source: Voigt average, Dziewonski & Anderson 1981, eq. (from memory):
        kappa = (4A + C + 4F - 4N)/9, mu = (A + C - 2F + 5N + 6L)/15.
        """
        shell, x = self.layers[layer], radius / self.radius
        density = _polynomial(shell.density, x)
        square = {name: density * _polynomial(c, x) ** 2 for name, c in shell.speeds.items() if name != "eta"}
        if "p" in square:
            return square["p"] - 2.0 * square["s"], square["s"]
        a, c, el, n = square["ph"], square["pv"], square["sv"], square["sh"]
        f = _polynomial(shell.speeds["eta"], x) * (a - 2.0 * el)
        bulk = (4.0 * a + c + 4.0 * f - 4.0 * n) / 9.0
        rigidity = (a + c - 2.0 * f + 5.0 * n + 6.0 * el) / 15.0
        return bulk - 2.0 / 3.0 * rigidity, rigidity

    def wave_speeds(self, layer: int, radius: Array) -> tuple[Array, Array]:
        """Isotropic P and S speeds of one shell, m s-1."""
        first, rigidity = self.moduli(layer, radius)
        density = self.density(layer, radius)
        return np.sqrt((first + 2.0 * rigidity) / density), np.sqrt(rigidity / density)

    def _shell_integral(self, layer: int, radius: Array, power: int) -> Array:
        shell, a = self.layers[layer], self.radius
        degrees = np.arange(len(shell.density))
        coefficients = np.zeros(degrees.size + power + 1)
        coefficients[power + 1 :] = np.asarray(shell.density) / (degrees + power + 1)
        return (_polynomial(coefficients, radius / a) - _polynomial(coefficients, np.asarray(shell.inner / a))) * a ** (
            power + 1
        )

    def enclosed_mass(self, layer: int, radius: Array) -> Array:
        """Mass inside radii of one shell, kg: exact integral of the density polynomials."""
        return 4.0 * np.pi * (self._masses_below[layer] + self._shell_integral(layer, np.asarray(radius), 2))

    @cached_property
    def _masses_below(self) -> Array:
        """Mass below each shell over 4 pi, kg."""
        shells = [float(self._shell_integral(i, np.asarray(shell.outer), 2)) for i, shell in enumerate(self.layers)]
        return np.concatenate([[0.0], np.cumsum(shells)[:-1]])

    def gravity(self, layer: int, radius: Array) -> Array:
        """Gravity at radii of one shell, m s-2 (G from CODATA 2018)."""
        return GRAVITATIONAL_CONSTANT.value * self.enclosed_mass(layer, radius) / np.asarray(radius) ** 2

    @property
    def mass(self) -> float:
        """Mass in kg."""
        return float(self.enclosed_mass(len(self.layers) - 1, np.asarray(self.radius)))

    @property
    def mean_density(self) -> float:
        """Mean density in kg m-3."""
        return self.mass / (4.0 / 3.0 * np.pi * self.radius**3)

    @property
    def surface_gravity(self) -> float:
        """Gravity at the surface in m s-2."""
        return GRAVITATIONAL_CONSTANT.value * self.mass / self.radius**2

    @property
    def moment_of_inertia(self) -> float:
        """Moment of inertia about a diameter in kg m2."""
        return (
            8.0
            / 3.0
            * np.pi
            * sum(float(self._shell_integral(i, np.asarray(layer.outer), 4)) for i, layer in enumerate(self.layers))
        )


def _polynomial(coefficients: Array | tuple[float, ...], x: Array) -> Array:
    return np.asarray(np.polynomial.polynomial.polyval(x, np.asarray(coefficients, dtype=np.float64)), dtype=np.float64)


def _shell(inner: float, outer: float, density: tuple[float, ...], **speeds: tuple[float, ...]) -> Layer:
    """Shell from published units: km, g cm-3, km s-1 (``eta`` is dimensionless)."""
    metric = {name: tuple(v * (1.0 if name == "eta" else 1e3) for v in c) for name, c in speeds.items()}
    return Layer(inner * 1e3, outer * 1e3, tuple(1e3 * v for v in density), metric)


_LOWER_MANTLE = (7.9565, -6.4761, 5.5283, -3.0807)
_UPPERMOST_MANTLE = {
    "pv": (0.8317, 7.2180),
    "ph": (3.5908, 4.6172),
    "sv": (5.8582, -1.4678),
    "sh": (-1.0839, 5.7176),
    "eta": (3.3687, -2.4778),
}


def prem() -> EarthModel:
    """PREM, isotropic (Voigt), 1 s, ocean replaced by upper crust to 6371 km."""
    shells = (
        _shell(0.0, 1221.5, (13.0885, 0.0, -8.8381), p=(11.2622, 0.0, -6.3640), s=(3.6678, 0.0, -4.4475)),
        _shell(1221.5, 3480.0, (12.5815, -1.2638, -3.6426, -5.5281), p=(11.0487, -4.0362, 4.8023, -13.5732), s=(0.0,)),
        _shell(
            3480.0, 3630.0, _LOWER_MANTLE, p=(15.3891, -5.3181, 5.5242, -2.5514), s=(6.9254, 1.4672, -2.0834, 0.9783)
        ),
        _shell(
            3630.0,
            5600.0,
            _LOWER_MANTLE,
            p=(24.9520, -40.4673, 51.4832, -26.6419),
            s=(11.1671, -13.7818, 17.4575, -9.2777),
        ),
        _shell(
            5600.0,
            5701.0,
            _LOWER_MANTLE,
            p=(29.2766, -23.6027, 5.5242, -2.5514),
            s=(22.3459, -17.2473, -2.0834, 0.9783),
        ),
        _shell(5701.0, 5771.0, (5.3197, -1.4836), p=(19.0957, -9.8672), s=(9.9839, -4.9324)),
        _shell(5771.0, 5971.0, (11.2494, -8.0298), p=(39.7027, -32.6166), s=(22.3512, -18.5856)),
        _shell(5971.0, 6151.0, (7.1089, -3.8045), p=(20.3926, -12.2569), s=(8.9496, -4.4597)),
        _shell(6151.0, 6346.6, (2.6910, 0.6924), **_UPPERMOST_MANTLE),
        _shell(6346.6, 6356.0, (2.900,), p=(6.800,), s=(3.900,)),
        _shell(6356.0, SPHERE_RADIUS.value / 1e3, (2.600,), p=(5.800,), s=(3.200,)),
    )
    return EarthModel(
        "prem", shells, "PREM (Dziewonski & Anderson 1981), isotropic Voigt average, 1 s, ocean replaced by upper crust"
    )


def homogeneous(density: float, rigidity: float, first_lame: float, radius: float = SPHERE_RADIUS.value) -> EarthModel:
    """Uniform sphere: density kg m-3, rigidity and first Lame parameter Pa, radius m.

    A first Lame parameter many orders above the rigidity makes it incompressible for all practical purposes.
    """
    speeds = {"p": (math.sqrt((first_lame + 2.0 * rigidity) / density),), "s": (math.sqrt(rigidity / density),)}
    return EarthModel("homogeneous", (Layer(0.0, radius, (density,), speeds),), "uniform sphere")
