"""Layered spherical Earth models: density and elastic moduli as functions of radius, from whatever describes them."""

import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from massfingerprint.arguments import real_number
from massfingerprint.constants import GRAVITATIONAL_CONSTANT, SPHERE_RADIUS
from massfingerprint.errors import InputError

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Layer:
    """One spherical shell; each property is a polynomial in x = radius / the model's unit radius, lowest power first.

    Parameters
    ----------
    inner, outer : float
        Radii in m.
    density : tuple of float
        kg m-3.
    elastic : dict
        Wave speeds in m s-1 as polynomials, ``p`` and ``s``, or ``pv ph sv sh`` and the dimensionless ``eta``; or moduli in Pa:
        ``rigidity`` and ``bulk``, or ``rigidity`` and ``first_lame``.
    q_shear, q_bulk : float or None
        Quality factors of shear and compression; None = no loss.
    viscosity : float or None
        Pa s; carried for readers of the model, the elastic answer does not use it.
    factors : (float, float)
        On the bulk modulus and the rigidity, for another period than that of the description.
    """

    inner: float
    outer: float
    density: tuple[float, ...]
    elastic: Mapping[str, tuple[float, ...]] = field(hash=False)
    q_shear: float | None = None
    q_bulk: float | None = None
    viscosity: float | None = None
    factors: tuple[float, float] = (1.0, 1.0)

    @property
    def fluid(self) -> bool:
        """Whether the shell carries no shear."""
        return all(not any(self.elastic.get(name, ())) for name in ("s", "sv", "sh", "rigidity"))


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
    unit_radius : float, optional
        m, what the polynomials count radii in; the surface radius by default.
    """

    name: str
    layers: tuple[Layer, ...]
    source: str
    unit_radius: float | None = None

    @property
    def radius(self) -> float:
        """Surface radius in m."""
        return self.layers[-1].outer

    @property
    def _unit(self) -> float:
        return self.radius if self.unit_radius is None else self.unit_radius

    def density(self, layer: int, radius: Array) -> Array:
        """Density (same shape as ``radius``), kg m-3, of one shell at radii in m."""
        return _polynomial(self.layers[layer].density, radius / self._unit)

    def moduli(self, layer: int, radius: Array) -> tuple[Array, Array]:
        """First Lame parameter and rigidity of one shell at radii in m; Pa, isotropic (Voigt) average where needed.

        Source: Voigt average, Dziewonski & Anderson 1981, eq. (from memory):
        kappa = (4A + C + 4F - 4N)/9, mu = (A + C - 2F + 5N + 6L)/15.
        """
        shell, x = self.layers[layer], radius / self._unit
        first, rigidity = _described(shell, x)
        if shell.factors == (1.0, 1.0):
            return first, rigidity
        on_bulk, on_rigidity = shell.factors
        bulk, rigidity = on_bulk * (first + 2.0 / 3.0 * rigidity), on_rigidity * rigidity
        return bulk - 2.0 / 3.0 * rigidity, rigidity

    def wave_speeds(self, layer: int, radius: Array) -> tuple[Array, Array]:
        """Isotropic P and S speeds of one shell, m s-1."""
        first, rigidity = self.moduli(layer, radius)
        density = self.density(layer, radius)
        return np.sqrt((first + 2.0 * rigidity) / density), np.sqrt(rigidity / density)

    def _shell_integral(self, layer: int, radius: Array, power: int) -> Array:
        shell, a = self.layers[layer], self._unit
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


def _described(shell: Layer, x: Array) -> tuple[Array, Array]:
    """First Lame parameter and rigidity, Pa, as the shell is described."""
    given = shell.elastic
    if "rigidity" in given:
        rigidity = _polynomial(given["rigidity"], x)
        if "first_lame" in given:
            return _polynomial(given["first_lame"], x), rigidity
        return _polynomial(given["bulk"], x) - 2.0 / 3.0 * rigidity, rigidity
    density = _polynomial(shell.density, x)
    square = {name: density * _polynomial(c, x) ** 2 for name, c in given.items() if name != "eta"}
    if "p" in square:
        return square["p"] - 2.0 * square["s"], square["s"]
    a, c, el, n = square["ph"], square["pv"], square["sv"], square["sh"]
    f = _polynomial(given["eta"], x) * (a - 2.0 * el)
    bulk = (4.0 * a + c + 4.0 * f - 4.0 * n) / 9.0
    rigidity = (a + c - 2.0 * f + 5.0 * n + 6.0 * el) / 15.0
    return bulk - 2.0 / 3.0 * rigidity, rigidity


def at_period(model: EarthModel, period: float, *, reference_period: float = 1.0) -> EarthModel:
    """The model as waves or loads of another period see it, softened by its quality factors.

    Parameters
    ----------
    model : EarthModel
        With ``q_shear`` and ``q_bulk`` in its shells.
    period, reference_period : float
        s, of the answer and of the model as it is described; 0.1 to 100000.

    Returns
    -------
    EarthModel
        Moduli times (1 - ln(T/T0) / (pi Q))^2, named after the period.

    Raises
    ------
    InputError
        If the period is out of range or no shell has a quality factor.

    Source
    ------
    Absorption band of constant Q: Dziewonski & Anderson 1981, section 6 (speeds times 1 - ln T/(pi Q)), from memory.
    """
    real_number(period, argument="period", allowed="0.1 to 100000 s", low=0.1, high=1e5)
    if period == reference_period:
        return model
    if all(shell.q_shear is None and shell.q_bulk is None for shell in model.layers):
        raise InputError(
            f"period: {model.name} has no quality factors, so it is the same at {period:g} s. Leave it out."
        )
    turns = math.log(period / reference_period) / math.pi

    def factor(quality: float | None) -> float:
        return 1.0 if quality is None else (1.0 - turns / quality) ** 2

    shells = tuple(replace(shell, factors=(factor(shell.q_bulk), factor(shell.q_shear))) for shell in model.layers)
    words = f"{model.source.replace(', 1 s,', ',')}, at {period:g} s by its Q"
    return replace(model, name=f"{model.name}_{period:g}s", layers=shells, source=words)


def _polynomial(coefficients: Array | tuple[float, ...], x: Array) -> Array:
    return np.asarray(np.polynomial.polynomial.polyval(x, np.asarray(coefficients, dtype=np.float64)), dtype=np.float64)


def homogeneous(density: float, rigidity: float, first_lame: float, radius: float = SPHERE_RADIUS.value) -> EarthModel:
    """Uniform sphere: density kg m-3, rigidity and first Lame parameter Pa, radius m.

    A first Lame parameter many orders above the rigidity makes it incompressible for all practical purposes.
    """
    speeds = {"p": (math.sqrt((first_lame + 2.0 * rigidity) / density),), "s": (math.sqrt(rigidity / density),)}
    return EarthModel("homogeneous", (Layer(0.0, radius, (density,), speeds),), "uniform sphere")
