"""Love numbers of every degree from few integrations: they are smooth in the logarithm of the degree; arrays only.

The radial equations hold for any real degree. Up to 64 every degree is integrated; above, each octave at the Chebyshev points of
log degree, and the degrees between follow from the polynomial through them (of h', n l', n k', n h, n^2 l, n^2 k: all of one size).
Beyond 4096 the numbers go to those of a half-space as 1/n (Farrell 1972), joined without a step; where the last octave does not
follow that law yet, a thin layer at the surface still matters and the integration goes on.
"""

from dataclasses import astuple

import numpy as np
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

from massfingerprint.earth._radial import SurfaceNumbers, numbers_at, surface_numbers
from massfingerprint.earth.layers import EarthModel

Array = NDArray[np.float64]
EVERY_DEGREE_TO = 64
INTEGRATED_TO = 4096
_TOGETHER = 2.0  # ratio of degrees that are integrated together: fewer, wider steps of the machine
_POINTS = 16  # of an octave: with 12 the error is that of the integration already
_POWERS = np.array([0, 1, 1, 1, 2, 2])[:, None]  # h', l', k', h, l, k times n to these powers stay of one size
_LAW_HOLDS = 5e-3  # of h' over the last octave; its error at twice the degree is then below 1e-5


def numbers_by_degree(
    model: EarthModel, max_degree: int, *, limits: tuple[float, ...], refinement: float = 1.0
) -> SurfaceNumbers:
    """Load and tide Love numbers of all degrees from 0 to ``max_degree``, as ``surface_numbers``.

    Parameters
    ----------
    model : EarthModel
        Shells with a solid surface.
    max_degree : int
        1 or more.
    limits : tuple of three floats
        Half-space limits of h', n l' and n k'.
    refinement : float
        Factor on the number of steps.
    """
    start = surface_numbers(model, min(max_degree, EVERY_DEGREE_TO), refinement=refinement, window=_TOGETHER)
    table = np.zeros((6, max_degree + 1))
    *rows, defect = astuple(start)
    table[:, : len(rows[0])] = rows
    first = EVERY_DEGREE_TO
    while first < max_degree:
        if first >= INTEGRATED_TO and _law_holds(table[:, : first + 1], limits):
            table[:, first + 1 :] = tail(table[:, : first + 1], max_degree, limits)
            break
        last = min(2 * first, max(max_degree, first + 1))
        table[:, first + 1 : last + 1] = _octave(model, first, last, refinement)
        first = last
    h_load, l_load, k_load, h_tide, l_tide, k_tide = table
    return SurfaceNumbers(h_load, l_load, k_load, h_tide, l_tide, k_tide, defect)


def _octave(model: EarthModel, first: int, last: int, refinement: float) -> Array:
    """Numbers (6, n) of the degrees after ``first`` up to ``last``, at most twice as high."""
    nodes = np.sort(np.cos(np.pi * (np.arange(_POINTS) + 0.5) / _POINTS))
    low, high = np.log(first), np.log(last)
    at = np.exp(0.5 * (low + high) + 0.5 * (high - low) * nodes)
    degree = np.arange(first + 1.0, last + 1.0)
    if degree.size <= _POINTS:
        return numbers_at(model, degree, refinement=refinement)
    scaled = numbers_at(model, at, refinement=refinement, window=_TOGETHER) * at**_POWERS
    series = np.linalg.solve(chebyshev.chebvander(nodes, _POINTS - 1), scaled.T)
    where = (2.0 * np.log(degree) - low - high) / (high - low)
    return np.asarray(chebyshev.chebval(where, series) / degree**_POWERS, dtype=np.float64)


def _law_holds(table: Array, limits: tuple[float, ...]) -> bool:
    """Whether the tail that joins at the end of a table already describes h' half-way there."""
    last = table.shape[1] - 1
    half = last // 2
    step = last * (table[0, last] - limits[0])
    return bool(abs(limits[0] + step / half - table[0, half]) <= _LAW_HOLDS * abs(table[0, half]))


def tail(table: Array, max_degree: int, limits: tuple[float, ...]) -> Array:
    """Numbers (6, n) of the degrees after the end of a table (6, last + 1) up to ``max_degree``.

    h', n l' and n k' go to their limits as 1/n; n h follows from k = k' + h with n^2 k constant, n^2 l is constant, too.
    """
    last = table.shape[1] - 1
    degree = np.arange(last + 1.0, max_degree + 1.0)
    out = np.empty((6, degree.size))
    for row, limit in enumerate(limits):
        power = _POWERS[row, 0]
        step = last * (table[row, last] * last**power - limit)
        out[row] = (limit + step / degree) / degree**power
    out[4:] = table[4:, [last]] * (last / degree) ** 2
    out[3] = out[5] - out[2]
    return out
