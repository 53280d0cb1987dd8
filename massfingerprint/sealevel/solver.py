"""Prepare the sea-level equation once for an ocean and an Earth; solve it for many loads."""

from dataclasses import dataclass, field

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.arguments import real_number, whole_number
from massfingerprint.constants import FRESH_WATER_DENSITY, KILOGRAMS_PER_GIGATONNE
from massfingerprint.earth.response import coefficient_factors
from massfingerprint.earth.rotation import OBSERVED, RotationConstants
from massfingerprint.errors import GridError, InputError
from massfingerprint.sealevel._equation import Correction, Operator
from massfingerprint.sealevel._levels import corrections
from massfingerprint.sphere import _transform
from massfingerprint.sphere._transform import inner_product
from massfingerprint.sphere.grids import Grid, grid_of
from massfingerprint.sphere.harmonics import check_finite

_FRACTION_TOLERANCE = 1e-6  # room for float32 storage of 0 and 1


@dataclass(frozen=True, eq=False)
class Prepared:
    """A sea-level problem ready for loads; nothing in it changes.

    Parameters
    ----------
    grid : Grid
        Cells of the ocean fraction.
    love : Dataset
        Love numbers used, degrees 0 to ``max_degree``.
    max_degree : int
        Degree of the solution.
    rotation : bool
        Whether the rotational feedback is on.
    water_density : float
        Of the water that melt adds to the mean, kg m-3.
    ocean_area : float
        m2: 4 pi a^2 times the degree-0 mean of the ocean fraction.
    operator : Operator
        The arrays of the equation.
    correction : Correction
        What speeds its solution up.
    long_love : Dataset
        All Love numbers that were given, for values beside the load.
    redistributed_density : float
        Of the water that moves from coast to coast, kg m-3; that of the operator.
    rotation_constants : RotationConstants
        Moments of inertia and the like.
    """

    grid: Grid
    love: xr.Dataset = field(repr=False)
    max_degree: int
    rotation: bool
    water_density: float
    ocean_area: float
    operator: Operator = field(repr=False)
    correction: Correction = field(repr=False)
    long_love: xr.Dataset = field(repr=False)
    redistributed_density: float
    rotation_constants: RotationConstants

    @property
    def turning(self) -> RotationConstants | bool:
        """The constants of the rotation, or False where it takes no part."""
        return self.rotation_constants if self.rotation else False

    @property
    def _surplus(self) -> float:
        """By how much redistributed water is heavier than melt, relative."""
        return self.redistributed_density / self.water_density - 1.0

    def with_melt(self, ice: NDArray[np.complex128]) -> NDArray[np.complex128]:
        """Load (n,) whose answer in the operator's one density is that of ``ice`` in two.

        Melt spreads as its mean e with ``water_density``, the rest S - e is redistributed water: rho_w O e + rho_s O (S - e)
        = rho_s O S + (rho_s / rho_w - 1) O M / int(O), M the ice's integral. Its RSL averages to -M / (rho_w int(O)).
        """
        if self._surplus == 0.0:
            return ice
        ocean = self.operator.ocean
        return ice + self._surplus * float(ice[0].real / ocean[0].real) * ocean

    def with_melt_adjoint(self, kernel: NDArray[np.complex128]) -> NDArray[np.complex128]:
        """Kernel (n,) of the one-density problem made that of the two: the adjoint of :meth:`with_melt`."""
        if self._surplus == 0.0:
            return kernel
        ocean, out = self.operator.ocean, kernel.copy()
        out[0] += self._surplus * inner_product(kernel, ocean) / float(ocean[0].real)
        return out

    @property
    def gigatonnes_per_millimetre(self) -> float:
        """Mass of fresh water (1000 kg m-3 by convention) that raises this ocean by 1 mm on average, Gt mm-1."""
        return self.ocean_area * FRESH_WATER_DENSITY.value * 1e-3 / KILOGRAMS_PER_GIGATONNE.value

    @property
    def barystatic_per_gigatonne(self) -> float:
        """Mean rise of this ocean for one gigatonne added to the land, mm Gt-1 (negative)."""
        return -1.0 / self.gigatonnes_per_millimetre


def _check_ocean(ocean: xr.DataArray) -> Grid:
    if not isinstance(ocean, xr.DataArray):
        raise InputError(
            f"ocean: must be a DataArray (lat, lon), got {type(ocean).__name__}. Use ocean_fraction(0.25)."
        )
    if set(ocean.dims) != {"lat", "lon"}:
        raise GridError(f"ocean: must have the dimensions lat and lon, got {ocean.dims}. Select one field first.")
    grid = grid_of(ocean, argument="ocean")
    check_finite(ocean, argument="ocean")
    low, high = float(ocean.min()), float(ocean.max())
    if low < -_FRACTION_TOLERANCE or high > 1.0 + _FRACTION_TOLERANCE:
        raise GridError(
            f"ocean: fractions must lie between 0 and 1, got {low:g} to {high:g}. Divide percentages by 100."
        )
    if high <= _FRACTION_TOLERANCE:
        raise GridError("ocean: there is no water anywhere (no fraction above 0). Pass 1 where there is sea.")
    return grid


def _check_love(love: xr.Dataset, max_degree: int) -> xr.Dataset:
    wanted = {"h_load", "l_load", "k_load", "h_tide", "k_tide"}
    missing = sorted(wanted - set(love.data_vars)) if isinstance(love, xr.Dataset) else sorted(wanted)
    if missing:
        raise InputError(f"love: lacks {', '.join(missing)}. Use love_numbers('prem', max_degree={max_degree}).")
    for name in ("radius", "mean_density", "surface_gravity"):
        if not np.isfinite(love.attrs.get(name, np.nan)) or love.attrs[name] <= 0.0:
            found = love.attrs.get(name, "none")
            raise InputError(
                f"love: attribute {name} must be a positive number, got {found}. Keep attrs when changing the table."
            )
    needed = max(max_degree, 2)
    degree = love["degree"].values
    if not np.array_equal(degree[: needed + 1], np.arange(needed + 1)):
        found = f"{degree[0]} to {degree[-1]}" if degree.size else "none"
        raise InputError(f"love: degrees 0 to {needed} are needed, got {found}. Ask for max_degree={needed}.")
    table = love.isel(degree=slice(0, needed + 1))
    for name in sorted(wanted):
        if not np.isfinite(table[name].values).all():
            raise InputError(f"love: {name} holds values that are not finite.")
    return table.copy(deep=True)


def _check_stable(response: NDArray[np.float64], density: float) -> None:
    """Refuse water so heavy that its own pull would gather it without bound (the growth of any degree reaches 1)."""
    growth = density * float(response.max())
    if not growth < 1.0:
        limit = density / growth
        raise InputError(
            f"water_density: water of {density:g} kg m-3 would gather without bound on this Earth. Use less than {limit:.0f}."
        )


def _rotation(rotation: bool | RotationConstants) -> tuple[bool, RotationConstants]:
    if isinstance(rotation, RotationConstants):
        if any(not np.isfinite(value) or value <= 0.0 for value in vars(rotation).values()):
            raise InputError(f"rotation: every constant must be a positive number, got {rotation}.")
        return True, rotation
    if not isinstance(rotation, bool | np.bool_):
        raise InputError(f"rotation: must be True, False or RotationConstants, got {rotation!r}.")
    return bool(rotation), OBSERVED


def _densities(melt: float, redistributed: float | None) -> tuple[float, float]:
    """Density of the water that melt adds and of the water that moves, kg m-3."""
    tiny, allowed = float(np.finfo(np.float64).tiny), "a positive number of kg m-3"
    first = real_number(melt, argument="water_density", allowed=allowed, low=tiny)
    if redistributed is None:
        return first, first
    return first, real_number(redistributed, argument="redistributed_density", allowed=allowed, low=tiny)


def prepare_solver(
    ocean: xr.DataArray,
    love: xr.Dataset,
    *,
    max_degree: int,
    rotation: bool | RotationConstants = True,
    water_density: float = 1000.0,
    redistributed_density: float | None = None,
) -> Prepared:
    """Prepare the sea-level equation for one ocean and one Earth.

    Parameters
    ----------
    ocean : DataArray (lat, lon)
        Share of each cell that is sea, 0 to 1, on any regular global cell-centred grid.
    love : Dataset (degree)
        Love numbers at least to ``max_degree``, any frame.
    max_degree : int
        Degree of the solution, 2 or more (1 without rotation); it may exceed the band limit of the ocean's grid.
    rotation : bool or RotationConstants
        Let the load shift the rotation axis, and the shifted axis move the sea; with other constants than the observed ones.
    water_density : float
        Density of the water that melt adds, kg m-3: the mean rise is mass over it and the ocean's area.
    redistributed_density : float, optional
        Density of the water that moves from coast to coast, kg m-3, such as 1027 of sea water; by default the same.

    Returns
    -------
    Prepared
        Frozen; reuse it for any number of loads.

    Raises
    ------
    GridError
        If the ocean's grid is not regular and global, or its values are not fractions, or all 0.
    InputError
        If the degree, the density or the Love numbers cannot be used.
    """
    grid = _check_ocean(ocean)
    turns, constants = _rotation(rotation)
    # the pole is moved by the load's degree 2
    max_degree = whole_number(max_degree, argument="max_degree", lowest=2 if turns else 1)
    melt, density = _densities(water_density, redistributed_density)
    table = _check_love(love, max_degree)
    ocean_degree = min(grid.band_limit, 2 * max_degree)  # higher degrees cannot reach the solution
    fraction = _transform.analyse(grid.to_rings(ocean.transpose("lat", "lon").values), ocean_degree, grid.first_azimuth)
    rings = _transform.GaussLegendreRings(max_degree, ocean_degree)
    degree, order = _transform.degrees_and_orders(max_degree)
    response = coefficient_factors(table, "relative_sea_level", degree, order, rotation=constants if turns else False)
    _check_stable(response, density)
    operator = Operator(rings, rings.synthesise(fraction), _transform.resized(fraction, max_degree), response, density)
    area = float(fraction[0].real * np.sqrt(4.0 * np.pi)) * float(love.attrs["radius"]) ** 2
    return Prepared(
        grid=grid,
        love=table,
        max_degree=max_degree,
        rotation=turns,
        water_density=melt,
        ocean_area=area,
        operator=operator,
        correction=corrections(operator, fraction),
        long_love=love.copy(deep=True),
        redistributed_density=density,
        rotation_constants=constants,
    )
