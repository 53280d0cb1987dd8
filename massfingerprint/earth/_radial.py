"""The radial equations of a layered, self-gravitating elastic sphere at rest, for many degrees at once; arrays only.

Variables of Takeuchi & Saito (1972), static, with y6 = dy5/dr - 4 pi G rho y1 + (n+1) y5 / r, so that y6 vanishes outside for a
potential of the body's own. The fluid core is static: only y5 and y7 = y6 + (4 pi G / g) y2 remain, carried through it
(Saito 1974; Chinnery 1975). Degree 0 is radial and compressible everywhere.

Units: surface radius, mean density and surface gravity are 1, hence 4 pi G = 3. The independent variable is log radius; with
n' = max(n, 1) the columns are (y1, r y2 / n', n' y3, r y4, y5, r y6 / n'), of equal size at any degree. Steps are Gauss
collocation (implicit Runge-Kutta of order 10), columns are made orthonormal after each step, and degrees start where what lies
deeper no longer reaches the surface.
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfingerprint.earth.layers import EarthModel

Array = NDArray[np.float64]

_STAGES = 5
_CENTRE = 1e-3  # start radius: what is left out is (1e-3)^(2n+1) of the surface values
_REACH = 21.0  # n * log(a/r) below which the start vector is forgotten: exp(-2 * 21) = 6e-19
_SMOOTH_STEP = 0.1  # largest step in log radius, set by how fast the material changes
_WINDOW = 1.25  # degrees of one batch lie within this ratio, so that they share step counts


@dataclass(frozen=True)
class SurfaceNumbers:
    """Dimensionless load and tide Love numbers (ndegree,) each, and the unused third condition at degree 1."""

    h_load: Array
    l_load: Array
    k_load: Array
    h_tide: Array
    l_tide: Array
    k_tide: Array
    degree_one_defect: float


class _Material:
    """Dimensionless density, gravity and moduli of one shell at log radii."""

    def __init__(self, model: EarthModel) -> None:
        self._model = model
        self._gravity = model.surface_gravity
        self._pressure = model.mean_density * model.surface_gravity * model.radius

    def at(self, layer: int, log_radius: Array) -> tuple[Array, Array, Array, Array, Array]:
        model = self._model
        radius = model.radius * np.exp(log_radius)
        first, rigidity = model.moduli(layer, radius)
        density = model.density(layer, radius) / model.mean_density
        gravity = model.gravity(layer, radius) / self._gravity
        return radius / model.radius, density, gravity, first / self._pressure, rigidity / self._pressure


def _gauss_tableau(stages: int) -> tuple[Array, Array, Array]:
    """Butcher tableau (a, b, c) of Gauss collocation; source: Hairer, Norsett & Wanner (1993), II.7."""
    nodes, weights = np.polynomial.legendre.leggauss(stages)
    c, b = 0.5 * (nodes + 1.0), 0.5 * weights
    powers = np.arange(stages)
    vandermonde = c[:, None] ** powers
    integrals = c[:, None] ** (powers + 1) / (powers + 1)
    a = np.linalg.solve(vandermonde.T, integrals.T).T
    return a.astype(np.float64), b, c


_A, _B, _C = _gauss_tableau(_STAGES)


def _solid_matrix(n: Array, material: tuple[Array, ...]) -> Array:
    """System (..., 6, 6) in a solid; ``n`` broadcasts against the material arrays."""
    r, rho, g, lam, mu = material
    beta = lam + 2.0 * mu
    q, s, n1, big = lam / beta, mu / beta, np.maximum(n, 1.0), n * (n + 1.0)
    kappa = mu * (3.0 * q + 2.0 * s)
    weight = rho * g * r
    m = np.zeros((*np.broadcast_shapes(n.shape, r.shape), 6, 6))
    m[..., 0, 0], m[..., 0, 1], m[..., 0, 2] = -2.0 * q, n1 / beta, big * q / n1
    m[..., 1, 0] = (-4.0 * weight + 4.0 * kappa) / n1
    m[..., 1, 1] = 1.0 - 4.0 * s
    m[..., 1, 2] = big / n1**2 * (weight - 2.0 * kappa)
    m[..., 1, 3] = big / n1
    m[..., 1, 4], m[..., 1, 5] = rho * r * (n + 1.0) / n1, -rho * r
    m[..., 2, 0], m[..., 2, 2], m[..., 2, 3] = -n1, 1.0, n1 / mu
    m[..., 3, 0], m[..., 3, 1] = weight - 2.0 * kappa, -q * n1
    m[..., 3, 2] = 2.0 * mu / n1 * (q * (2.0 * big - 1.0) + 2.0 * s * (big - 1.0))
    m[..., 3, 3], m[..., 3, 4] = -2.0, -rho * r
    m[..., 4, 0], m[..., 4, 4], m[..., 4, 5] = 3.0 * rho * r, -(n + 1.0), n1
    m[..., 5, 0], m[..., 5, 2], m[..., 5, 5] = 3.0 * rho * r * (n + 1.0) / n1, -3.0 * rho * r * big / n1**2, n
    return m


def _fluid_matrix(n: Array, material: tuple[Array, ...]) -> Array:
    """System (..., 2, 2) for (y5, r y7 / n') in a static fluid."""
    r, rho, g, _, _ = material
    ratio, n1 = 3.0 * rho * r / g, np.maximum(n, 1.0)
    m = np.zeros((*np.broadcast_shapes(n.shape, r.shape), 2, 2))
    m[..., 0, 0], m[..., 0, 1] = ratio - n - 1.0, n1
    m[..., 1, 0], m[..., 1, 1] = 2.0 * (n - 1.0) / n1 * ratio, n - ratio
    return m


def _radial_matrix(material: tuple[Array, ...]) -> Array:
    """System (..., 2, 2) for (y1, r y2) at degree 0."""
    r, rho, g, lam, mu = material
    beta = lam + 2.0 * mu
    m = np.zeros((*r.shape, 2, 2))
    m[..., 0, 0], m[..., 0, 1] = -2.0 * lam / beta, 1.0 / beta
    m[..., 1, 0] = -4.0 * rho * g * r + 4.0 * mu * (3.0 * lam + 2.0 * mu) / beta
    m[..., 1, 1] = 1.0 - 4.0 * mu / beta
    return m


def _step(matrices: Array, step: Array, columns: Array) -> Array:
    """One collocation step: matrices (m, stage, d, d), step (m,), columns (m, d, c) -> (m, d, c)."""
    count, stages, d, _ = matrices.shape
    system = -step[:, None, None, None, None] * _A[None, :, None, :, None] * matrices[:, :, :, None, :]
    system = system.reshape(count, stages * d, stages * d)
    diagonal = np.arange(stages * d)
    system[:, diagonal, diagonal] += 1.0
    right = np.einsum("msij,mjc->msic", matrices, columns).reshape(count, stages * d, -1)
    slopes = np.linalg.solve(system, right).reshape(count, stages, d, -1)
    return columns + step[:, None, None] * np.einsum("s,msic->mic", _B, slopes)


def _solid_start(n: Array, material: tuple[Array, ...]) -> Array:
    """Regular columns (m, 6, 3) of a small uniform sphere without gravity, leading order in radius.

    Displacements r^(n-1) (a gradient) and r^(n+1), and the potential r^n; the second follows from the equilibrium equations.
    """
    _, _, _, lam, mu = material
    beta = lam + 2.0 * mu
    q, s, big = lam / beta, mu / beta, n * (n + 1.0)
    kappa = mu * (3.0 * q + 2.0 * s)
    columns = np.zeros((n.size, 6, 3))
    columns[:, 0, 0], columns[:, 2, 0] = 1.0, 1.0
    columns[:, 1, 0], columns[:, 3, 0] = 2.0 * mu * (n - 1.0) / n, 2.0 * mu * (n - 1.0) / n
    # y1 = u, y3 = 1, both r^(n+1): fourth equation with r y4 = mu (u + n) and r y2 = beta (n+1) u + lam (2 u - big)
    on_u = mu * (n + 3.0) + 2.0 * kappa + q * (beta * (n + 1.0) + 2.0 * lam)
    rest = 2.0 * mu * (q * (2.0 * big - 1.0) + 2.0 * s * (big - 1.0)) + q * lam * big - mu * n * (n + 3.0)
    u = rest / on_u
    columns[:, 0, 1], columns[:, 2, 1] = u, n
    columns[:, 1, 1] = (beta * (n + 1.0) * u + lam * (2.0 * u - big)) / n
    columns[:, 3, 1] = mu * (u + n)
    columns[:, 4, 2], columns[:, 5, 2] = 1.0, (2.0 * n + 1.0) / n
    return columns


def _fluid_start(n: Array) -> Array:
    columns = np.zeros((n.size, 2, 1))
    columns[:, 0, 0], columns[:, 1, 0] = 1.0, 2.0 * (n - 1.0) / n
    return columns


def _solid_to_fluid(n: Array, columns: Array, material: tuple[Array, ...]) -> Array:
    """Combine solid columns (m, 6, 3) into the one (m, 2, 1) that meets the fluid: no shear, pressure of the fluid."""
    r, rho, g, _, _ = material
    scale = (rho * r / n)[:, None]
    pressure = columns[:, 1] - scale * (g[:, None] * columns[:, 0] - columns[:, 4])
    mix = np.cross(columns[:, 3], pressure)
    y = np.einsum("mic,mc->mi", columns, mix)
    out = np.stack([y[:, 4], y[:, 5] + 3.0 / g * y[:, 1]], axis=1)[:, :, None]
    return out / np.linalg.norm(out, axis=1, keepdims=True)


def _fluid_to_solid(n: Array, columns: Array, material: tuple[Array, ...]) -> Array:
    """Open the fluid solution (m, 2, 1) into three solid columns: its own, a radial and a tangential slip."""
    r, rho, g, _, _ = material
    y5, y7, load = columns[:, 0, 0], columns[:, 1, 0], rho * r / n
    out = np.zeros((n.size, 6, 3))
    out[:, 4, 0], out[:, 1, 0], out[:, 5, 0] = y5, -load * y5, y7 + 3.0 / g * load * y5
    out[:, 0, 1], out[:, 1, 1], out[:, 5, 1] = 1.0, load * g, -3.0 * load
    out[:, 2, 2] = 1.0
    return out


def _batches(degrees: Array, window: float) -> Iterator[NDArray[np.int64]]:
    """Positions of degrees that lie within a ratio of each other (``degrees`` ascending, 1 or more)."""
    first = 0
    while first < degrees.size:
        last = int(np.searchsorted(degrees, max(degrees[first] * window, degrees[first] + 1.0), side="left"))
        yield np.arange(first, last, dtype=np.int64)
        first = last


def _cross_layer(model: EarthModel, layer: int, n: Array, start: Array, columns: Array, refinement: float) -> Array:
    """Carry columns (m, d, c) from log radius ``start`` (m,) to the top of one shell."""
    material = _Material(model)
    shell = model.layers[layer]
    span = np.log(shell.outer / model.radius) - start
    fastest = max(float((n * span).max()) / 0.7, float(span.max()) / _SMOOTH_STEP)
    steps = max(int(np.ceil(refinement * fastest)), 2)
    step, degree = span / steps, n[:, None]
    for k in range(steps):
        nodes = start[:, None] + step[:, None] * (k + _C[None, :])
        values = material.at(layer, nodes)
        matrices = _fluid_matrix(degree, values) if shell.fluid else _solid_matrix(degree, values)
        columns = np.linalg.qr(_step(matrices, step, columns))[0]
    return columns


def _integrate(model: EarthModel, n: Array, refinement: float) -> Array:
    """Solid columns (m, 6, 3) at the surface for one batch of degrees."""
    material = _Material(model)
    depth = np.maximum(-_REACH / n, np.log(_CENTRE))
    columns: dict[int, Array] = {}
    for layer, shell in enumerate(model.layers):
        top, bottom = np.log(shell.outer / model.radius), np.log(max(shell.inner / model.radius, _CENTRE))
        started = np.flatnonzero((depth >= bottom) & (depth < top))
        going = np.array(sorted(columns), dtype=int)
        if going.size and model.layers[layer - 1].fluid != shell.fluid:
            _change_phase(model, layer, n, going, columns)
        values = material.at(layer, depth[started])
        fresh = _fluid_start(n[started]) if shell.fluid else _solid_start(n[started], values)
        columns.update(zip(started.tolist(), fresh, strict=True))
        active = np.array(sorted(columns), dtype=int)
        if active.size:
            stacked = np.stack([columns[i] for i in active])
            begin = np.maximum(depth[active], bottom)
            carried = _cross_layer(model, layer, n[active], begin, stacked, refinement)
            columns = dict(zip(active.tolist(), carried, strict=True))
    return np.stack([columns[i] for i in range(n.size)])


def _change_phase(model: EarthModel, layer: int, n: Array, going: NDArray, columns: dict[int, Array]) -> None:
    """Replace the columns of the degrees that cross from solid to fluid or back at the bottom of ``layer``."""
    fluid_layer = layer if model.layers[layer].fluid else layer - 1
    radius = np.full(going.size, np.log(model.layers[layer].inner / model.radius))
    values = _Material(model).at(fluid_layer, radius)
    change = _solid_to_fluid if model.layers[layer].fluid else _fluid_to_solid
    stacked = np.stack([columns[i] for i in going])
    columns.update(zip(going.tolist(), change(n[going], stacked, values), strict=True))


def _surface(n: Array, columns: Array) -> tuple[Array, Array, float]:
    """Surface values (m, 6) under a load and under a tide of unit potential, and the defect at degree 1."""
    conditions = columns[:, [1, 3, 5], :].copy()
    one = n == 1.0
    conditions[one, 2] = columns[one, 4]
    load = np.stack([-(2.0 * n + 1.0) / (3.0 * n), 0.0 * n, (2.0 * n + 1.0) / n], axis=1)
    load[one, 2] = 1.0
    tide = np.stack([0.0 * n, 0.0 * n, (2.0 * n + 1.0) / n], axis=1)
    mix = np.linalg.solve(conditions, np.stack([load, tide], axis=2))
    values = np.einsum("mic,mck->mik", columns, mix)
    defect = float(np.abs(values[one, 5, 0] - 3.0).max()) if one.any() else 0.0
    return values[..., 0], values[..., 1], defect


def _degree_zero(model: EarthModel, refinement: float) -> float:
    """Vertical load Love number of degree 0: uniform compression."""
    material = _Material(model)
    begin = np.array([np.log(_CENTRE)])
    _, _, _, lam, mu = material.at(0, begin)
    columns = np.stack([np.ones(1), 3.0 * lam + 2.0 * mu], axis=1)[:, :, None]
    for layer, shell in enumerate(model.layers):
        span = np.log(shell.outer / model.radius) - begin
        steps = max(int(np.ceil(refinement * 2.0 * span[0] / _SMOOTH_STEP)), 2)
        for k in range(steps):
            nodes = begin[:, None] + span[:, None] / steps * (k + _C[None, :])
            columns = _step(_radial_matrix(material.at(layer, nodes)), span / steps, columns)
            columns = columns / np.linalg.norm(columns, axis=1, keepdims=True)
        begin = begin + span
    return float(-columns[0, 0, 0] / columns[0, 1, 0] / 3.0)


def surface_numbers(
    model: EarthModel, max_degree: int, *, refinement: float = 1.0, window: float = _WINDOW
) -> SurfaceNumbers:
    """Load and tide Love numbers of degrees 0 to ``max_degree``, degree 1 in CE.

    Parameters
    ----------
    model : EarthModel
        Shells; solid at the surface, at the centre solid or fluid.
    max_degree : int
        1 or more.
    refinement : float
        Factor on the number of steps, for convergence tests.
    window : float
        Degrees within this ratio are integrated together, with the steps that the highest of them needs.

    Returns
    -------
    SurfaceNumbers
        Each array (max_degree + 1,); the tide columns are 0 at degrees 0 and 1.
    """
    degrees = np.arange(1.0, max_degree + 1.0)
    table = np.zeros((6, max_degree + 1))
    table[:, 1:], defect = _table(model, degrees, refinement, window)
    table[3:, 1] = 0.0
    table[2, 1] = 0.0
    table[0, 0] = _degree_zero(model, refinement)
    h_load, l_load, k_load, h_tide, l_tide, k_tide = table
    return SurfaceNumbers(h_load, l_load, k_load, h_tide, l_tide, k_tide, defect)


def numbers_at(model: EarthModel, degrees: Array, *, refinement: float = 1.0, window: float = _WINDOW) -> Array:
    """The six numbers (6, n), rows h' l' k' h l k, at ascending degrees (n,) above 1, whole or not."""
    return _table(model, degrees, refinement, window)[0]


def _table(model: EarthModel, degrees: Array, refinement: float, window: float) -> tuple[Array, float]:
    out, defect = np.empty((6, degrees.size)), 0.0
    for batch in _batches(degrees, window):
        n = degrees[batch]
        load, tide, wrong = _surface(n, _integrate(model, n, refinement))
        defect = max(defect, wrong)
        out[:3, batch] = load[:, 0], load[:, 2] / n, load[:, 4] - 1.0
        out[3:, batch] = tide[:, 0], tide[:, 2] / n, tide[:, 4] - 1.0
    return out, defect
