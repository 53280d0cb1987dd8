"""Regular global cell-centred grids: what they are, how they are recognised, their quadrature.

A gridded field is point values at cell centres. Its only integral is the quadrature of the spherical-harmonic transform:
ring weights that make the degree-0 coefficient exact (Fejer's first rule), not cell areas; the two differ by 13 % on a polar ring.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.errors import GridError

Array = NDArray[np.float64]
_PLACE_TOLERANCE = 1e-3  # of a cell: room for float32 coordinates, far below anything that moves a coast


@dataclass(frozen=True, eq=False)
class Grid:
    """A regular global cell-centred grid as the user holds it.

    Parameters
    ----------
    latitudes : (nlat,) array, degrees
        Cell centres, from one pole to the other in either order, half a cell away from the poles.
    longitudes : (nlon,) array, degrees
        Cell centres once round the globe, evenly spaced, eastward or westward, starting anywhere.

    Source
    ------
    Conventions of this package; quadrature weights: Fejer 1933, as implemented in ducc0.
    """

    latitudes: Array
    longitudes: Array

    @property
    def nlat(self) -> int:
        """Number of rings."""
        return self.latitudes.size

    @property
    def nlon(self) -> int:
        """Number of cells on a ring."""
        return self.longitudes.size

    @property
    def south_first(self) -> bool:
        """Whether latitude ascends."""
        return bool(self.latitudes[0] < self.latitudes[-1])

    @property
    def westward(self) -> bool:
        """Whether longitude descends."""
        return bool((self.longitudes[1] - self.longitudes[0] + 180.0) % 360.0 < 180.0)

    @property
    def band_limit(self) -> int:
        """Highest degree whose coefficients the grid determines, all orders included."""
        return min(self.nlat - 1, (self.nlon - 1) // 2)

    @property
    def first_azimuth(self) -> float:
        """Longitude of the first cell in radians, in [0, 2 pi)."""
        start = self.longitudes[-1] if self.westward else self.longitudes[0]
        return float(np.deg2rad(start % 360.0))

    @cached_property
    def ring_weights(self) -> Array:
        """Quadrature weights of one cell of each ring (nlat,), steradian; times nlon they sum to 4 pi."""
        from ducc0.sht import get_gridweights  # noqa: PLC0415  kept off the path of a plain import

        weights = get_gridweights("F1", self.nlat) / self.nlon
        return weights * (4.0 * np.pi / (weights.sum() * self.nlon))

    @property
    def quadrature_weights(self) -> Array:
        """Quadrature weights (nlat, nlon), steradian, in the order of this grid; they sum to 4 pi."""
        return np.broadcast_to(self.ring_weights[:, None], (self.nlat, self.nlon)).copy()

    @property
    def latitude_edges(self) -> Array:
        """Cell edges (nlat + 1,), degrees, in the order of this grid."""
        edges = np.linspace(-90.0, 90.0, self.nlat + 1)
        return edges if self.south_first else edges[::-1]

    @property
    def longitude_edges(self) -> Array:
        """Cell edges (nlon + 1,), degrees, continuous from the first cell, in the order of this grid."""
        step = (-360.0 if self.westward else 360.0) / self.nlon
        return self.longitudes[0] + step * (np.arange(self.nlon + 1) - 0.5)

    def matches(self, other: "Grid") -> bool:
        """Whether both grids have the same cells in the same order (a whole turn of longitude aside)."""
        if (self.nlat, self.nlon) != (other.nlat, other.nlon):
            return False
        turn = (self.longitudes - other.longitudes + 180.0) % 360.0 - 180.0
        return bool(
            np.abs(self.latitudes - other.latitudes).max() < _PLACE_TOLERANCE * 180.0 / self.nlat
            and np.abs(turn).max() < _PLACE_TOLERANCE * 360.0 / self.nlon
        )

    def to_rings(self, values: NDArray) -> Array:
        """Return (..., nlat, nlon) values as float64, north first and eastward (the order of the transforms)."""
        ordered = values[..., ::-1, :] if self.south_first else values
        ordered = ordered[..., ::-1] if self.westward else ordered
        return np.ascontiguousarray(ordered, dtype=np.float64)

    def from_rings(self, values: Array) -> Array:
        """Return (..., nlat, nlon) values, north first and eastward, in the order of this grid."""
        ordered = values[..., ::-1, :] if self.south_first else values
        return ordered[..., ::-1] if self.westward else ordered


def regular_grid(spacing: float) -> Grid:
    """Grid of square cells with latitude ascending and longitude 0 to 360.

    Parameters
    ----------
    spacing : float
        Degrees; 180 must be a whole multiple of it.

    Raises
    ------
    GridError
        If the spacing is not positive or does not divide 180.
    """
    number = isinstance(spacing, int | float | np.integer | np.floating) and not isinstance(spacing, bool)
    rings = 180.0 / spacing if number and 0.0 < spacing <= 180.0 else 0.0
    count = round(rings) if np.isfinite(rings) else 0
    if count < 1 or abs(rings - count) > 1e-9 * count:
        raise GridError(
            f"spacing: must be a positive number of degrees that divides 180, got {spacing!r}. Try 0.25, 0.5 or 1."
        )
    step = 180.0 / count
    latitudes = -90.0 + step * (np.arange(count) + 0.5)
    longitudes = step * (np.arange(2 * count) + 0.5)
    return Grid(latitudes.astype(np.float64), longitudes.astype(np.float64))


def grid_of(field: xr.DataArray, *, argument: str | None = None) -> Grid:
    """Recognise the regular global cell-centred grid of a labelled field.

    Parameters
    ----------
    field : DataArray (..., lat, lon)
        With one-dimensional coordinates ``lat`` and ``lon`` in degrees.
    argument : str, optional
        What to call the field in an error; its own name otherwise.

    Returns
    -------
    Grid
        In the order of the field.

    Raises
    ------
    GridError
        If ``lat`` or ``lon`` is missing, uneven, not global or not cell-centred.
    """
    name = argument or str(field.name or "field")
    for axis in ("lat", "lon"):
        if axis not in field.dims or axis not in field.coords:
            raise GridError(
                f"{name}: needs a dimension coordinate '{axis}' in degrees, got dimensions {tuple(field.dims)}."
            )
    for axis in ("lat", "lon"):
        if field[axis].dtype.kind not in "fiu":
            raise GridError(f"{name}: {axis} must hold degrees as numbers, got {field[axis].dtype}.")
    latitudes = np.asarray(field["lat"].values, dtype=np.float64)
    longitudes = np.asarray(field["lon"].values, dtype=np.float64)
    _check_latitudes(latitudes, name)
    _check_longitudes(longitudes, name)
    return Grid(latitudes, longitudes)


def _check_latitudes(latitudes: Array, name: str) -> None:
    count = latitudes.size
    if count < 2 or not np.isfinite(latitudes).all():
        raise GridError(f"{name}: lat needs at least 2 finite values, got {latitudes.tolist()[:4]}.")
    expected = -90.0 + 180.0 / count * (np.arange(count) + 0.5)
    ordered = latitudes if latitudes[0] < latitudes[-1] else latitudes[::-1]
    if np.abs(ordered - expected).max() > _PLACE_TOLERANCE * 180.0 / count:
        raise GridError(
            f"{name}: lat must be the {count} evenly spaced cell centres from {expected[0]:g} to {expected[-1]:g}, "
            f"got {ordered[0]:g} to {ordered[-1]:g} (smallest step {np.diff(ordered).min():g}). Regrid to cell centres first."
        )


def _check_longitudes(longitudes: Array, name: str) -> None:
    count = longitudes.size
    if count < 4 or not np.isfinite(longitudes).all():
        raise GridError(f"{name}: lon needs at least 4 finite values, got {longitudes.tolist()[:4]}.")
    steps = (np.diff(longitudes) + 180.0) % 360.0 - 180.0
    sign = 1.0 if steps[0] > 0 else -1.0
    turn = longitudes[0] + sign * 360.0 / count * np.arange(count)
    off = np.abs((longitudes - turn + 180.0) % 360.0 - 180.0).max()
    if off > _PLACE_TOLERANCE * 360.0 / count:
        raise GridError(
            f"{name}: lon must be {count} evenly spaced values once round the globe (step {360.0 / count:g}), "
            f"got {longitudes[0]:g} to {longitudes[-1]:g} with steps {steps.min():g} to {steps.max():g}. "
            "Drop a repeated last column or regrid first."
        )
