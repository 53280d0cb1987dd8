"""Love numbers by another route, for comparison: other variables, another integrator, one degree at a time.

Displacements U, V, tractions R, S, the potential F and Q = F' - 4 pi G rho U, against radius itself; in the fluid core the
second-order equation of the potential, F'' + 2 F'/r - (n(n+1)/r^2 + 4 pi G rho'/g) F = 0, in F and F'.
Units: radius, mean density and surface gravity 1, so 4 pi G = 3. Only the coefficients of the material come from the package.
Source: Dahlen 1974, Geophys. J. 36:363 for the fluid; Alterman, Jarosch & Pekeris 1959 for the solid (from memory).
"""

from functools import partial

import numpy as np
from scipy.integrate import solve_ivp

from massfingerprint.earth.prem import prem


class Scaled:
    """A model in these units: per shell density, enclosed mass over 4 pi, speed polynomials, eta, factors on the moduli."""

    def __init__(self, model):
        self.model = model
        self.shells = [self._shell(layer) for layer in range(len(model.layers))]

    def _shell(self, layer):
        model, shell = self.model, self.model.layers[layer]
        # polynomials count radii in the model's unit radius
        stretch = model.radius / (model.unit_radius or model.radius)
        pressure = model.mean_density * model.surface_gravity * model.radius
        density = [c * stretch**i / model.mean_density for i, c in enumerate(shell.density)]
        inner = shell.inner / model.radius
        below = float(model.enclosed_mass(layer, np.array(shell.inner))) / model.mass / 3.0
        below -= sum(c * inner ** (i + 3) / (i + 3) for i, c in enumerate(density))
        unit = (model.mean_density / pressure) ** 0.5
        speeds = {k: [c * stretch**i * unit for i, c in enumerate(v)] for k, v in shell.elastic.items() if k != "eta"}
        eta = shell.elastic.get("eta")
        return density, below, speeds, eta and [c * stretch**i for i, c in enumerate(eta)], shell.factors


def _value(coefficients, r):
    total = 0.0
    for c in reversed(coefficients):
        total = total * r + c
    return total


PREM = Scaled(prem())


def material(earth, layer, r):
    """Density, gravity and Lame parameters at one radius, in plain floats for speed."""
    density, below, speeds, eta, (on_bulk, on_shear) = earth.shells[layer]
    rho = _value(density, r)
    g = 3.0 * (below + sum(c * r ** (i + 3) / (i + 3) for i, c in enumerate(density))) / r**2
    square = {name: rho * _value(c, r) ** 2 for name, c in speeds.items()}
    if eta is None:
        bulk, mu = on_bulk * (square["p"] - 4 * square["s"] / 3), on_shear * square["s"]
        return rho, g, bulk - 2 * mu / 3, mu
    a, c, el, n = square["ph"], square["pv"], square["sv"], square["sh"]
    f = _value(eta, r) * (a - 2 * el)
    mu = (a + c - 2 * f + 5 * n + 6 * el) / 15
    bulk, mu = on_bulk * (4 * a + c + 4 * f - 4 * n) / 9, on_shear * mu
    return rho, g, bulk - 2 * mu / 3, mu


def solid_system(earth, layer, n, r):
    rho, g, lam, mu = material(earth, layer, r)
    beta, big, inv = lam + 2 * mu, n * (n + 1), 1 / r
    stiff, weight = 4 * mu * (3 * lam + 2 * mu) / beta * inv**2, rho * g * inv
    return np.array(
        [
            [-2 * lam / beta * inv, big * lam / beta * inv, 1 / beta, 0, 0, 0],
            [-inv, inv, 0, 1 / mu, 0, 0],
            [stiff - 4 * weight, big * (weight - stiff / 2), -4 * mu / beta * inv, big * inv, 0, -rho],
            [
                weight - stiff / 2,
                (4 * big * (lam + mu) / beta - 2) * mu * inv**2,
                -lam / beta * inv,
                -3 * inv,
                -rho * inv,
                0,
            ],
            [3 * rho, 0, 0, 0, 0, 1],
            [0, -3 * rho * big * inv, 0, 0, big * inv**2, -2 * inv],
        ]
    )


def fluid_system(earth, layer, n, r):
    _, g, _, _ = material(earth, layer, r)
    slope = np.polynomial.polynomial.polyder(np.array(earth.shells[layer][0]))
    gradient = float(np.polynomial.polynomial.polyval(r, slope))
    return np.array([[0.0, 1.0], [n * (n + 1) / r**2 + 3 * gradient / g, -2 / r]])


def carry(system, n, columns, start, stop):
    def slope(r, y):
        return (system(n, r) @ y.reshape(columns.shape)).ravel()

    size = np.array([1.0, n] if len(columns) == 2 else [1.0, 1.0 / n, n, n, 1.0, n])[:, None]
    columns = columns / np.abs(columns / size).max(axis=0)
    floor = (1e-13 * size * np.ones(columns.shape)).ravel()
    done = solve_ivp(slope, (start, stop), columns.ravel(), method="DOP853", rtol=1e-11, atol=floor)
    assert done.success, done.message
    return done.y[:, -1].reshape(columns.shape)


def solid_start(earth, n, layer, r):
    """Three columns close to regular; what is wrong with them decays below 1e-13 before the surface."""
    _, _, lam, mu = material(earth, layer, r)
    columns = np.zeros((6, 3))
    columns[:4, 0] = n, 1.0, 2 * mu * n * (n - 1) / r, 2 * mu * (n - 1) / r
    columns[:4, 1] = 0.0, 1.0, -lam * n * (n + 1) / r, mu * n / r
    columns[4:, 2] = 1.0, n / r
    return columns


def into_fluid(earth, columns, layer, r):
    rho, g, _, _ = material(earth, layer, r)
    rows = np.array([columns[3], columns[2] - rho * (g * columns[0] - columns[4])])
    mix = np.linalg.svd(rows)[2][-1]
    y = columns @ mix
    return np.array([[y[4]], [y[5] + 3 * rho * y[0]]])


def out_of_fluid(earth, columns, layer, r):
    rho, g, _, _ = material(earth, layer, r)
    f, slope = columns[:, 0]
    out = np.zeros((6, 3))
    out[:, 0] = 0, 0, -rho * f, 0, f, slope
    out[:, 1] = 1, 0, rho * g, 0, 0, -3 * rho
    out[1, 2] = 1
    return out


def surface_columns(earth, n):
    start = max(1e-4, float(np.exp(-20.0 / n)))
    columns, shells = None, earth.model.layers
    for layer, shell in enumerate(shells):
        top, bottom = shell.outer / earth.model.radius, shell.inner / earth.model.radius
        if top <= start:
            continue
        begin = max(bottom, start)
        if columns is None:
            columns = np.array([[1.0], [n / begin]]) if shell.fluid else solid_start(earth, n, layer, begin)
        elif shell.fluid != shells[layer - 1].fluid:
            into = shell.fluid
            columns = (
                into_fluid(earth, columns, layer, begin) if into else out_of_fluid(earth, columns, layer - 1, begin)
            )
        system = fluid_system if shell.fluid else solid_system
        columns = carry(partial(system, earth, layer), n, columns, begin, top)
    return columns


def load_and_tide(n, earth=PREM):
    """h', l', k', h, l, k of one degree, of PREM by default; degree 1 in CE (tide meaningless there)."""
    columns = surface_columns(earth, n)
    conditions = np.array([columns[2], columns[3], columns[5] + (n + 1) * columns[4]])
    load, tide = [-(2 * n + 1) / 3, 0.0, 2 * n + 1.0], [0.0, 0.0, 2 * n + 1.0]
    if n == 1:
        conditions[2], load[2] = columns[4], 1.0
    values = []
    for right in (load, tide):
        y = columns @ np.linalg.solve(conditions, np.array(right))
        values += [y[0], y[1], y[4] - 1.0]
    return values
