"""Spherical-harmonic coefficients of labelled fields, and their exchange with other conventions.

Real coefficients have dimensions (..., part, coefficient): part is cos or sin, ``degree`` and ``order`` are coordinates of
``coefficient``, and field = sum of (C cos(m lon) + S sin(m lon)) times real orthonormal functions on the unit sphere, without
Condon-Shortley phase; S of order 0 is 0.  Gravity coefficients are fully normalised (4 pi), without the phase:
sqrt(4 pi) times a gravity coefficient is the orthonormal one (IERS Conventions (2010), ch. 6, normalisation).
"""

from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.arguments import whole_number
from massfingerprint.errors import GridError, InputError
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import Grid, grid_of

if TYPE_CHECKING:
    from pyshtools import SHCoeffs


def check_finite(field: xr.DataArray, *, argument: str) -> None:
    """Raise GridError if a field (..., lat, lon) does not hold real numbers, or where the first one is NaN or infinite."""
    if field.dtype.kind not in "fiub":
        raise GridError(f"{argument}: must hold real numbers, got {field.dtype}. Convert it first.")
    bad = ~np.isfinite(field.values)
    if not bad.any():
        return
    first = np.unravel_index(int(bad.argmax()), bad.shape)
    place = ", ".join(
        f"{dim} {field[dim].values[position] if dim in field.coords else position}"
        for dim, position in zip(field.dims, first, strict=True)
    )
    raise GridError(
        f"{argument}: {int(bad.sum())} values are not finite, the first at {place}. Fill or remove them first."
    )


def labelled(pairs: NDArray[np.float64], dims: tuple[Any, ...], coords: dict[Any, Any]) -> xr.DataArray:
    """Label real coefficients (..., 2, n) with leading dimensions ``dims``."""
    degree, order = _transform.degrees_and_orders(_transform.degree_of_count(pairs.shape[-1]))
    return xr.DataArray(
        pairs,
        dims=(*dims, "part", "coefficient"),
        coords={
            **coords,
            "part": ["cos", "sin"],
            "degree": ("coefficient", degree),
            "order": ("coefficient", order),
        },
    )


def max_degree_of(coefficients: xr.DataArray) -> int:
    """Highest degree held; raises InputError if the layout is not the one of this package."""
    if coefficients.dims[-2:] != ("part", "coefficient") or coefficients.sizes["part"] != 2:
        raise InputError(f"coefficients: last dimensions must be (part, coefficient), got {coefficients.dims}.")
    count = coefficients.sizes["coefficient"]
    max_degree = _transform.degree_of_count(count)
    if _transform.coefficient_count(max_degree) != count:
        raise InputError(
            f"coefficients: {count} pairs are not a whole triangle of degrees. Pass all orders of each degree."
        )
    degree, order = _transform.degrees_and_orders(max_degree)
    for name, expected in (("degree", degree), ("order", order)):
        if name not in coefficients.coords or not np.array_equal(coefficients[name].values, expected):
            raise InputError(f"coefficients: coordinate '{name}' must run order by order as analyse() gives it.")
    return max_degree


def analyse(field: xr.DataArray, *, max_degree: int | None = None) -> xr.DataArray:
    """Real spherical-harmonic coefficients of a gridded field.

    Parameters
    ----------
    field : DataArray (..., lat, lon)
        On a regular global cell-centred grid, either longitude convention, either orientation, any float type.
    max_degree : int, optional
        At most the band limit of the grid, min(nlat - 1, (nlon - 1) // 2), which is the default.

    Returns
    -------
    DataArray (..., part, coefficient)
        In the unit of the field.

    Raises
    ------
    GridError
        If the grid is not regular, a value is not finite or ``max_degree`` is beyond the band limit.
    """
    grid = grid_of(field)
    name = str(field.name or "field")
    limit = grid.band_limit if max_degree is None else whole_number(max_degree, argument="max_degree", lowest=0)
    if limit > grid.band_limit:
        raise GridError(
            f"max_degree: a grid of {grid.nlat} x {grid.nlon} cells determines at most {grid.band_limit}, got {limit}."
        )
    check_finite(field, argument=name)
    field = field.transpose(..., "lat", "lon")
    alm = _transform.analyse(grid.to_rings(field.values), limit, grid.first_azimuth)
    lead = field.dims[:-2]
    coords = {key: value for key, value in field.coords.items() if set(value.dims) <= set(lead)}
    return labelled(_transform.real_from_complex(alm), lead, coords)


def synthesise(coefficients: xr.DataArray, grid: Grid) -> xr.DataArray:
    """Field on a grid from real coefficients.

    Parameters
    ----------
    coefficients : DataArray (..., part, coefficient)
        As :func:`analyse` returns them, any degree.
    grid : Grid
        Where to evaluate: point values at the cell centres.

    Returns
    -------
    DataArray (..., lat, lon)
        In the unit of the coefficients.

    Raises
    ------
    InputError
        If the coefficients are not laid out as this package does.
    """
    max_degree_of(coefficients)
    alm = _transform.complex_from_real(np.asarray(coefficients.values, dtype=np.float64))
    rings = _transform.synthesise(alm, (grid.nlat, grid.nlon), grid.first_azimuth)
    lead = coefficients.dims[:-2]
    coords = {key: value for key, value in coefficients.coords.items() if set(value.dims) <= set(lead)}
    return xr.DataArray(
        grid.from_rings(rings),
        dims=(*lead, "lat", "lon"),
        coords={**coords, "lat": grid.latitudes, "lon": grid.longitudes},
    )


def gradient(coefficients: xr.DataArray, grid: Grid) -> tuple[xr.DataArray, xr.DataArray]:
    """Surface gradient on the unit sphere, north and east, of a field given by real coefficients.

    Parameters
    ----------
    coefficients : DataArray (..., part, coefficient)
        As :func:`analyse` returns them.
    grid : Grid
        Where to evaluate.

    Returns
    -------
    (DataArray, DataArray), each (..., lat, lon)
        In the unit of the coefficients.

    Raises
    ------
    InputError
        If the coefficients are not laid out as this package does.
    """
    max_degree_of(coefficients)
    alm = _transform.complex_from_real(np.asarray(coefficients.values, dtype=np.float64))
    lead, shape = coefficients.dims[:-2], (grid.nlat, grid.nlon)
    rows = alm.reshape((-1, alm.shape[-1]))
    rings = np.stack([_transform.gradient(row, shape, grid.first_azimuth) for row in rows], axis=1)
    both = grid.from_rings(rings).reshape((2, *alm.shape[:-1], *shape))
    coords = {key: value for key, value in coefficients.coords.items() if set(value.dims) <= set(lead)}
    coords |= {"lat": ("lat", grid.latitudes), "lon": ("lon", grid.longitudes)}
    north, east = (xr.DataArray(part, dims=(*lead, "lat", "lon"), coords=coords) for part in both)
    return north, east


def _to_square(coefficients: xr.DataArray, scale: float) -> NDArray[np.float64]:
    if coefficients.ndim != 2:
        raise InputError(f"coefficients: one field at a time, got dimensions {coefficients.dims}. Select one first.")
    max_degree = max_degree_of(coefficients)
    degree, order = _transform.degrees_and_orders(max_degree)
    square = np.zeros((2, max_degree + 1, max_degree + 1))
    square[:, degree, order] = np.asarray(coefficients.values, dtype=np.float64) * scale
    square[1, :, 0] = 0.0
    return square


def _from_square(square: NDArray, scale: float) -> xr.DataArray:
    square = np.asarray(square)
    if np.iscomplexobj(square) or square.ndim != 3 or square.shape[0] != 2 or square.shape[1] != square.shape[2]:
        raise InputError(
            f"coefficients: must be real with shape (2, degrees, degrees), got {square.dtype} {square.shape}."
        )
    degree, order = _transform.degrees_and_orders(square.shape[1] - 1)
    pairs = square[:, degree, order].astype(np.float64) * scale
    pairs[1, order == 0] = 0.0
    return labelled(pairs, (), {})


def to_gravity(coefficients: xr.DataArray) -> NDArray[np.float64]:
    """Fully normalised gravity coefficients (2, degree, order) of one field (part, coefficient); unit unchanged."""
    return _to_square(coefficients, 1.0 / np.sqrt(4.0 * np.pi))


def from_gravity(square: NDArray) -> xr.DataArray:
    """Real orthonormal coefficients (part, coefficient) of fully normalised gravity coefficients (2, degree, order)."""
    return _from_square(square, np.sqrt(4.0 * np.pi))


def to_shcoeffs(coefficients: xr.DataArray) -> "SHCoeffs":
    """Orthonormal pyshtools SHCoeffs, no Condon-Shortley phase, of one field (part, coefficient); unit unchanged."""
    from pyshtools import SHCoeffs  # noqa: PLC0415  takes seconds to import

    return SHCoeffs.from_array(_to_square(coefficients, 1.0), normalization="ortho", csphase=1)


def from_shcoeffs(shcoeffs: "SHCoeffs") -> xr.DataArray:
    """Real orthonormal coefficients (part, coefficient) of real pyshtools SHCoeffs of any normalisation and phase.

    Raises
    ------
    InputError
        If the SHCoeffs are complex.
    """
    if shcoeffs.kind != "real":
        raise InputError("shcoeffs: must be of kind 'real', got 'complex'. Convert with shcoeffs.convert(kind='real').")
    return _from_square(shcoeffs.to_array(normalization="ortho", csphase=1), 1.0)
