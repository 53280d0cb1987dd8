"""Spherical-harmonic transforms on arrays: analysis, synthesis, coefficient layouts.

Inside, a real field is held as complex orthonormal coefficients a_lm (m >= 0, Condon-Shortley phase), ordered by order, then
degree (the layout of ducc0). At the rim the same field is held as real coefficients (2, n): C and S of the real orthonormal
functions without that phase.  Source: ducc0 documentation; relation of the two derived from f = sum_m>0 2 Re(a_lm Y_lm).
"""

from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Any

import ducc0
import numpy as np
from numpy.typing import NDArray

from massfingerprint import options

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
Index = NDArray[np.int64]


def coefficient_count(max_degree: int) -> int:
    """Number of (degree, order >= 0) pairs up to ``max_degree``."""
    return (max_degree + 1) * (max_degree + 2) // 2


def degree_of_count(count: int) -> int:
    """Highest degree of a triangle of ``count`` coefficients."""
    return round((float(np.sqrt(8.0 * count + 1.0)) - 3.0) / 2.0)


@lru_cache(maxsize=16)
def degrees_and_orders(max_degree: int) -> tuple[Index, Index]:
    """Degree and order of each coefficient (n,), read-only."""
    order = np.repeat(np.arange(max_degree + 1), np.arange(max_degree + 1, 0, -1))
    degree = np.concatenate([np.arange(m, max_degree + 1) for m in range(max_degree + 1)])
    for values in (degree, order):
        values.setflags(write=False)
    return degree, order


def index_of(degree: Any, order: Any, max_degree: int) -> Any:
    """Position of (degree, order), whole numbers or arrays of them, in a triangle up to ``max_degree``."""
    return order * (2 * max_degree + 1 - order) // 2 + degree


def resized(coefficients: NDArray, max_degree: int) -> NDArray:
    """Return (..., n) coefficients cut at, or padded with zeros to, ``max_degree``."""
    held = degree_of_count(coefficients.shape[-1])
    if held == max_degree:
        return coefficients.copy()
    shared = min(held, max_degree)
    degree, order = degrees_and_orders(shared)
    out = np.zeros((*coefficients.shape[:-1], coefficient_count(max_degree)), dtype=coefficients.dtype)
    target = order * (2 * max_degree + 1 - order) // 2 + degree
    source = order * (2 * held + 1 - order) // 2 + degree
    out[..., target] = coefficients[..., source]
    return out


def _phase(max_degree: int) -> Array:
    order = degrees_and_orders(max_degree)[1]
    return np.where(order == 0, 1.0, np.sqrt(2.0) * (1.0 - 2.0 * (order % 2)))


def real_from_complex(coefficients: Complex) -> Array:
    """Return the real pair (..., 2, n) of (..., n) complex coefficients."""
    phase = _phase(degree_of_count(coefficients.shape[-1]))
    return np.stack([phase * coefficients.real, -phase * coefficients.imag + 0.0], axis=-2)


def complex_from_real(pairs: NDArray) -> Complex:
    """Return the complex coefficients (..., n) of a real pair (..., 2, n); the sine part of order 0 is ignored."""
    max_degree = degree_of_count(pairs.shape[-1])
    phase, order = _phase(max_degree), degrees_and_orders(max_degree)[1]
    return (pairs[..., 0, :] - 1j * np.where(order == 0, 0.0, pairs[..., 1, :])) / phase


def analyse(rings: Array, max_degree: int, first_azimuth: float) -> Complex:
    """Coefficients (..., n) of fields (..., nlat, nlon) on cell-centred rings, north first and eastward.

    The transform is always taken to the highest degree the rings carry and then cut: taken to a lower degree, the library's
    quadrature lets the degrees above leak into those below.
    """
    lead, (nlat, nlon) = rings.shape[:-2], rings.shape[-2:]
    full = nlat - 1
    degree, order = degrees_and_orders(max_degree)
    kept = order * (2 * full + 1 - order) // 2 + degree
    fields = rings.reshape((-1, nlat, nlon))
    out = np.empty((fields.shape[0], kept.size), dtype=np.complex128)
    for field, row in zip(fields, out, strict=True):
        row[:] = ducc0.sht.analysis_2d(
            map=field[None],
            spin=0,
            lmax=full,
            mmax=max_degree,
            geometry="F1",
            phi0=first_azimuth,
            nthreads=options.threads(),
        )[0, kept]
    return out.reshape((*lead, -1))


def adjoint_analyse(coefficients: Complex, shape: tuple[int, int], first_azimuth: float) -> Array:
    """Weights (..., nlat, nlon) on cell-centred rings whose plain sum with a field is the inner product with its analysis.

    For a field f and coefficients (..., n): sum(f * weights) = inner_product(analyse(f, their degree), coefficients).
    """
    lead, (nlat, nlon) = coefficients.shape[:-1], shape
    max_degree, full = degree_of_count(coefficients.shape[-1]), nlat - 1
    rows = resized(coefficients.reshape((-1, coefficients.shape[-1])), full)
    out = np.empty((rows.shape[0], nlat, nlon))
    for row, weights in zip(rows, out, strict=True):
        ducc0.sht.adjoint_analysis_2d(
            alm=row[None, : _orders_up_to(full, max_degree)],
            map=weights[None],
            spin=0,
            lmax=full,
            mmax=max_degree,
            geometry="F1",
            phi0=first_azimuth,
            nthreads=options.threads(),
        )
    return out.reshape((*lead, nlat, nlon))


def _orders_up_to(degree: int, order: int) -> int:
    """How many coefficients of a triangle up to ``degree`` have orders up to ``order``."""
    return index_of(degree, min(order, degree), degree) + 1


def synthesise(coefficients: Complex, shape: tuple[int, int], first_azimuth: float) -> Array:
    """Fields (..., nlat, nlon) on cell-centred rings, north first and eastward, of coefficients (..., n)."""
    lead = coefficients.shape[:-1]
    rows = np.ascontiguousarray(coefficients.reshape((-1, coefficients.shape[-1])), dtype=np.complex128)
    out = np.empty((rows.shape[0], *shape))
    for row, field in zip(rows, out, strict=True):
        ducc0.sht.synthesis_2d(
            alm=row[None],
            map=field[None],
            spin=0,
            lmax=degree_of_count(row.size),
            geometry="F1",
            phi0=first_azimuth,
            nthreads=options.threads(),
        )
    return out.reshape((*lead, *shape))


def gradient(coefficients: Complex, shape: tuple[int, int], first_azimuth: float) -> Array:
    """Surface gradient on the unit sphere (2, nlat, nlon), north and east, of a field (n,); rings as in :func:`synthesise`."""
    out = np.empty((2, *shape))
    ducc0.sht.synthesis_2d(
        alm=np.ascontiguousarray(coefficients, dtype=np.complex128)[None],
        map=out,
        spin=1,
        lmax=degree_of_count(coefficients.size),
        geometry="F1",
        phi0=first_azimuth,
        mode="DERIV1",
        nthreads=options.threads(),
    )
    out[0] *= -1.0  # the library's first component is along the co-latitude
    return out


def _as_rings(colatitude: Array, azimuth: Array) -> dict[str, Any]:
    """Points as rings of one cell each, for the library."""
    count = colatitude.size
    return {
        "theta": np.ascontiguousarray(colatitude, dtype=np.float64),
        "phi0": np.ascontiguousarray(azimuth, dtype=np.float64),
        "nphi": np.ones(count, dtype=np.uint64),
        "ringstart": np.arange(count, dtype=np.uint64),
    }


def gradient_at(coefficients: Complex, colatitude: Array, azimuth: Array) -> Array:
    """Surface gradient (..., 2, npoint), north and east, of fields (..., n) at points (radians)."""
    lead, count = coefficients.shape[:-1], colatitude.size
    rows = np.ascontiguousarray(coefficients.reshape((-1, 1, coefficients.shape[-1])), dtype=np.complex128)
    if count == 0 or rows.shape[0] == 0:
        return np.zeros((*lead, 2, count))
    values = ducc0.sht.synthesis(
        alm=rows,
        **_as_rings(colatitude, azimuth),
        spin=1,
        lmax=degree_of_count(coefficients.shape[-1]),
        mode="DERIV1",
        nthreads=options.threads(),
    )
    values[:, 0] *= -1.0
    return values.reshape((*lead, 2, count))


def synthesise_on(coefficients: Complex, colatitude: Array, count: int) -> Array:
    """Field (nring, count) of coefficients (n,) on rings of ``count`` even cells at any co-latitudes (radians), from azimuth 0."""
    rings = colatitude.size
    values = ducc0.sht.synthesis(
        alm=np.ascontiguousarray(coefficients, dtype=np.complex128)[None],
        theta=np.ascontiguousarray(colatitude, dtype=np.float64),
        phi0=np.zeros(rings),
        nphi=np.full(rings, count, dtype=np.uint64),
        ringstart=np.arange(rings, dtype=np.uint64) * count,
        spin=0,
        lmax=degree_of_count(coefficients.size),
        nthreads=options.threads(),
    )
    return values.reshape((rings, count))


def synthesise_at(coefficients: Complex, colatitude: Array, azimuth: Array) -> Array:
    """Values (..., npoint) at points (radians): each point is a ring of one cell, so Legendre functions are exact."""
    lead = coefficients.shape[:-1]
    rows = np.ascontiguousarray(coefficients.reshape((-1, 1, coefficients.shape[-1])), dtype=np.complex128)
    count = colatitude.size
    if count == 0 or rows.shape[0] == 0:
        return np.zeros((*lead, count))
    values = ducc0.sht.synthesis(
        alm=rows,
        **_as_rings(colatitude, azimuth),
        spin=0,
        lmax=degree_of_count(coefficients.shape[-1]),
        nthreads=options.threads(),
    )
    return values.reshape((*lead, count))


def point_coefficients(colatitude: float, azimuth: float, max_degree: int) -> Complex:
    """Coefficients (n,) of a unit mass at a point (radians) on the unit sphere: the adjoint of evaluating there."""
    return ducc0.sht.adjoint_synthesis(
        map=np.ones((1, 1)),
        theta=np.array([colatitude]),
        phi0=np.array([azimuth]),
        nphi=np.ones(1, dtype=np.uint64),
        ringstart=np.zeros(1, dtype=np.uint64),
        spin=0,
        lmax=max_degree,
        nthreads=1,
    )[0]


@dataclass(frozen=True)
class GaussLegendreRings:
    """Rings on which synthesis and analysis up to ``max_degree`` are adjoint under the quadrature weights.

    Parameters
    ----------
    max_degree : int
        Degree of the coefficients taken and given.
    factor_degree : int
        Degree of a factor that fields are multiplied with on the rings; the product is then analysed without aliasing.
    """

    max_degree: int
    factor_degree: int

    @cached_property
    def shape(self) -> tuple[int, int]:
        """Rings and cells per ring that make the quadrature of two fields times the factor exact."""
        total = 2 * self.max_degree + self.factor_degree
        return total // 2 + 1, ducc0.fft.good_size(total + 1, True)

    @cached_property
    def _ring_weights(self) -> Array:
        return ducc0.sht.get_gridweights("GL", self.shape[0]) / self.shape[1]

    def synthesise(self, coefficients: Complex) -> Array:
        """Field (nring, ncell) of coefficients (n,) of any degree."""
        return ducc0.sht.synthesis_2d(
            alm=coefficients[None],
            spin=0,
            lmax=degree_of_count(coefficients.size),
            geometry="GL",
            ntheta=self.shape[0],
            nphi=self.shape[1],
            nthreads=options.threads(),
        )[0]

    def analyse(self, field: Array) -> Complex:
        """Coefficients (n,) up to ``max_degree`` of a field (nring, ncell)."""
        return ducc0.sht.adjoint_synthesis_2d(
            map=field[None],
            spin=0,
            lmax=self.max_degree,
            geometry="GL",
            ringfactor=self._ring_weights,
            nthreads=options.threads(),
        )[0]


def inner_product(first: Complex, second: Complex) -> float:
    """Integral over the unit sphere of the product of two real fields given by coefficients (n,) of one degree."""
    zonal = degree_of_count(first.size) + 1
    one, two = (np.ascontiguousarray(c).view(np.float64) for c in (first, second))
    # not BLAS: its threads go on spinning after the call and take the processors from the transforms
    whole, low = (np.einsum("i,i->", one[:end], two[:end]) for end in (None, 2 * zonal))
    return float(2.0 * whole - low)
