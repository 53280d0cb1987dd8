"""Love numbers by another route, for comparison: other variables, another integrator, one degree at a time.

Displacements U, V, tractions R, S, the potential F and Q = F' - 4 pi G rho U, against radius itself; in the fluid core the
second-order equation of the potential, F'' + 2 F'/r - (n(n+1)/r^2 + 4 pi G rho'/g) F = 0, in F and F'.
Units: radius, mean density and surface gravity 1, so 4 pi G = 3. Only the coefficients of the material come from the package.
Source: Dahlen 1974, Geophys. J. 36:363 for the fluid; Alterman, Jarosch & Pekeris 1959 for the solid (from memory).
"""

import numpy as np
from scipy.integrate import solve_ivp

from massfingerprint.earth.prem import prem

MODEL = prem()
PRESSURE = MODEL.mean_density * MODEL.surface_gravity * MODEL.radius


def _scaled(layer):
    """Polynomials of one shell in these units: density, enclosed mass over 4 pi, and the squared-speed polynomials."""
    shell = MODEL.layers[layer]
    density = [c / MODEL.mean_density for c in shell.density]
    inner = shell.inner / MODEL.radius
    below = float(MODEL.enclosed_mass(layer, np.array(shell.inner))) / MODEL.mass / 3.0
    below -= sum(c * inner ** (i + 3) / (i + 3) for i, c in enumerate(density))
    speeds = {
        k: [c * (MODEL.mean_density / PRESSURE) ** 0.5 for c in v] for k, v in shell.elastic.items() if k != "eta"
    }
    return density, below, speeds, shell.elastic.get("eta")


def _value(coefficients, r):
    total = 0.0
    for c in reversed(coefficients):
        total = total * r + c
    return total


LAYERS = [_scaled(layer) for layer in range(len(MODEL.layers))]


def material(layer, r):
    """Density, gravity and Lame parameters at one radius, in plain floats for speed."""
    density, below, speeds, eta = LAYERS[layer]
    rho = _value(density, r)
    g = 3.0 * (below + sum(c * r ** (i + 3) / (i + 3) for i, c in enumerate(density))) / r**2
    square = {name: rho * _value(c, r) ** 2 for name, c in speeds.items()}
    if eta is None:
        return rho, g, square["p"] - 2 * square["s"], square["s"]
    a, c, el, n = square["ph"], square["pv"], square["sv"], square["sh"]
    f = _value(eta, r) * (a - 2 * el)
    mu = (a + c - 2 * f + 5 * n + 6 * el) / 15
    return rho, g, (4 * a + c + 4 * f - 4 * n) / 9 - 2 * mu / 3, mu


def solid_system(layer, n, r):
    rho, g, lam, mu = material(layer, r)
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


def fluid_system(layer, n, r):
    _, g, _, _ = material(layer, r)
    slope = np.polynomial.polynomial.polyder(np.array(MODEL.layers[layer].density))
    gradient = float(np.polynomial.polynomial.polyval(r, slope)) / MODEL.mean_density
    return np.array([[0.0, 1.0], [n * (n + 1) / r**2 + 3 * gradient / g, -2 / r]])


def carry(system, layer, n, columns, start, stop):
    def slope(r, y):
        return (system(layer, n, r) @ y.reshape(columns.shape)).ravel()

    size = np.array([1.0, n] if len(columns) == 2 else [1.0, 1.0 / n, n, n, 1.0, n])[:, None]
    columns = columns / np.abs(columns / size).max(axis=0)
    floor = (1e-13 * size * np.ones(columns.shape)).ravel()
    done = solve_ivp(slope, (start, stop), columns.ravel(), method="DOP853", rtol=1e-11, atol=floor)
    assert done.success, done.message
    return done.y[:, -1].reshape(columns.shape)


def solid_start(n, layer, r):
    """Three columns close to regular; what is wrong with them decays below 1e-13 before the surface."""
    _, _, lam, mu = material(layer, r)
    columns = np.zeros((6, 3))
    columns[:4, 0] = n, 1.0, 2 * mu * n * (n - 1) / r, 2 * mu * (n - 1) / r
    columns[:4, 1] = 0.0, 1.0, -lam * n * (n + 1) / r, mu * n / r
    columns[4:, 2] = 1.0, n / r
    return columns


def into_fluid(n, columns, layer, r):
    rho, g, _, _ = material(layer, r)
    rows = np.array([columns[3], columns[2] - rho * (g * columns[0] - columns[4])])
    mix = np.linalg.svd(rows)[2][-1]
    y = columns @ mix
    return np.array([[y[4]], [y[5] + 3 * rho * y[0]]])


def out_of_fluid(columns, layer, r):
    rho, g, _, _ = material(layer, r)
    f, slope = columns[:, 0]
    out = np.zeros((6, 3))
    out[:, 0] = 0, 0, -rho * f, 0, f, slope
    out[:, 1] = 1, 0, rho * g, 0, 0, -3 * rho
    out[1, 2] = 1
    return out


def surface_columns(n):
    start = max(1e-4, float(np.exp(-20.0 / n)))
    columns = None
    for layer, shell in enumerate(MODEL.layers):
        top, bottom = shell.outer / MODEL.radius, shell.inner / MODEL.radius
        if top <= start:
            continue
        begin = max(bottom, start)
        if columns is None:
            columns = np.array([[1.0], [n / begin]]) if shell.fluid else solid_start(n, layer, begin)
        elif shell.fluid != MODEL.layers[layer - 1].fluid:
            columns = into_fluid(n, columns, layer, begin) if shell.fluid else out_of_fluid(columns, layer - 1, begin)
        columns = carry(fluid_system if shell.fluid else solid_system, layer, n, columns, begin, top)
    return columns


def load_and_tide(n):
    """h', l', k', h, l, k of one degree of PREM; degree 1 in CE (tide meaningless there)."""
    columns = surface_columns(n)
    conditions = np.array([columns[2], columns[3], columns[5] + (n + 1) * columns[4]])
    load, tide = [-(2 * n + 1) / 3, 0.0, 2 * n + 1.0], [0.0, 0.0, 2 * n + 1.0]
    if n == 1:
        conditions[2], load[2] = columns[4], 1.0
    values = []
    for right in (load, tide):
        y = columns @ np.linalg.solve(conditions, np.array(right))
        values += [y[0], y[1], y[4] - 1.0]
    return values
