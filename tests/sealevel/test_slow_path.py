"""The published fields put back into the full sea-level equation by a second, slow code path.

Nothing of the package is used on the way back: harmonics from scipy, direct sums over a Gauss-Legendre grid of numpy, Love
numbers as plain arrays, the rotation and frame formulas written out again with constants of their own. Only the mean density
of the Earth is taken from the Love-number table, because it belongs to the model. All formulas: DERIVATION below.

DERIVATION
    S = sum_lm T_l L_lm Y_lm + R + c,  L = I + rho_w P(O S),  T_l = 3 (1 + k'_l - h'_l) / (rho_e (2l+1)),  T_0 = 0,
    rho_w int(O S) = -int(I)                                       (Farrell & Clark 1976, GJRAS 46:647)
    I13 = -a^4 int L sin cos cos(lon), I23 with sin(lon), I33 = -(2/3) a^4 int L P2, over the unit sphere,
    m1 + i m2 = (1+k'_2)(I13 + i I23) / ((C - (A+B)/2)(1 - k_2/k_s)),  m3 = -(1+k'_2) I33 / C,
    Lambda = Omega^2 a^2 [-(m1 cos lon + m2 sin lon) sin cos - (2/3) m3 P2],  R = (1 + k_2 - h_2) Lambda / g
                                                                   (Munk & MacDonald 1960, from memory)
    degree 1 in a frame: h' and 1 + k' less alpha, alpha = 0 in CE, 1 in CM, (h'+2l')/3 in CF
                                                                   (Blewitt 2003, JGR 108(B2):2103, from memory)
"""

import itertools
from functools import partial
from typing import NamedTuple

import numpy as np
import pytest
import xarray as xr
from scipy.special import sph_harm_y

from massfingerprint.earth.love import love_numbers
from massfingerprint.sealevel.fingerprints import solve_fingerprints
from massfingerprint.sealevel.solver import prepare_solver

RADIUS = 6.371e6  # m
RATE = 7.292115e-5  # rad s-1, IERS Conventions (2010)
SECULAR = 0.9382  # k_s, observed flattening
POLAR_MOMENT = 8.0365e37  # kg m2, Gross 2007 (from memory)
EXCESS = 2.630e35  # C - (A+B)/2, kg m2, same source
NEWTON = 6.6743e-11  # CODATA 2018
MAS = 180.0 / np.pi * 3600.0 * 1e3  # per radian
DAY = 86400e3  # ms
WATER = 1000.0  # kg m-3

ASKED = 1e-12  # tolerance handed to the solver, relative
ALLOWED = 10.0 * ASKED  # the answer may miss the equation by a few times that, and by rounding
OUTPUTS = ("relative_sea_level", "sea_surface", "geoid", "bedrock_up")


class Case(NamedTuple):
    """One problem; but for the masks, the coefficients of ocean and load are known exactly, without an analysis."""

    rings: int  # of the user's grid; cells are square
    degree: int  # of the solution
    ocean_degree: int
    kind: str


CASES = {
    "smooth ocean": Case(18, 12, 3, "smooth"),
    "rough ocean to the grid's limit": Case(18, 16, 17, "rough"),
    "rough ocean beyond twice the solution's degree": Case(36, 14, 35, "rough"),
    "solution beyond the grid's limit": Case(18, 24, 17, "rough"),
    "random cells of sea, one cell of ice": Case(18, 16, 17, "mask"),
    "the same on finer cells than the solution": Case(36, 12, 35, "mask"),
}


def table(degree):
    """Degree, order and whether sine, of each real harmonic."""
    rows = [(n, m, s) for n in range(degree + 1) for m in range(n + 1) for s in (0, 1) if m > 0 or s == 0]
    return np.array(rows).T


def harmonics(degree, colatitudes, longitudes):
    """Real orthonormal harmonics without Condon-Shortley phase on all crossings, one row each."""
    n, m, s = (column[:, None] for column in table(degree))
    legendre = np.where(m > 0, np.sqrt(2.0) * (-1.0) ** m, 1.0) * sph_harm_y(n, m, colatitudes[None], 0.0).real
    waves = np.where(s == 1, np.sin(m * longitudes[None]), np.cos(m * longitudes[None]))
    return (legendre[:, :, None] * waves[:, None, :]).reshape(n.size, -1)


def rings(degree):
    """Gauss-Legendre colatitudes, longitudes and the weights of their crossings, exact for polynomials of `degree`."""
    x, w = np.polynomial.legendre.leggauss(degree // 2 + 1)
    count = degree + 2
    longitudes = np.arange(count) * 2.0 * np.pi / count
    return np.arccos(x), longitudes, np.repeat(w, count) * 2.0 * np.pi / count


def user_grid(count):
    """Latitudes and longitudes in degrees of a grid of square cells, south first."""
    step = 180.0 / count
    return -90.0 + step * (np.arange(count) + 0.5), step * (np.arange(2 * count) + 0.5)


def field_on(values, count, **attrs):
    lat, lon = user_grid(count)
    return xr.DataArray(values, dims=("lat", "lon"), coords={"lat": lat, "lon": lon}, attrs=attrs)


def synthesis(coefficients, count):
    lat, lon = user_grid(count)
    basis = harmonics(int(np.sqrt(coefficients.size)) - 1, np.deg2rad(90.0 - lat), np.deg2rad(lon))
    return (coefficients @ basis).reshape(count, 2 * count)


def analysis(values, degree):
    """Coefficients of point values: each order is the trigonometric polynomial of colatitude through its rings
    (cosines for even orders, sines for odd ones), integrated with the Legendre functions."""
    count = values.shape[0]
    lat, lon = (np.deg2rad(axis) for axis in user_grid(count))
    own, (fine, _, _) = np.pi / 2.0 - lat, rings(4 * count + 8)
    weight = np.polynomial.legendre.leggauss(fine.size)[1]
    out = []
    for n, m, s in table(degree).T:
        wave = np.sin(m * lon) if s else np.cos(m * lon)
        order = values @ wave * (np.pi / count)
        k, base = (np.arange(1, count + 1), np.sin) if m % 2 else (np.arange(count), np.cos)
        between = base(np.outer(fine, k)) @ np.linalg.solve(base(np.outer(own, k)), order)
        scale = np.sqrt(2.0) * (-1.0) ** m if m else 1.0
        out.append(scale * np.sum(weight * between * sph_harm_y(n, m, fine, 0.0).real))
    return np.array(out)


def ocean_of(case, rng):
    """Fraction on the user's grid, and its coefficients: 0.6 plus waves, or cells of 0 and 1."""
    if case.kind == "mask":
        cells = (rng.random((case.rings, 2 * case.rings)) < 0.6).astype(float)
        return cells, analysis(cells, case.ocean_degree)
    n = table(case.ocean_degree)[0]
    waves = rng.normal(size=n.size) * (np.where(n > 0, 1.0, 0.0) if case.kind == "rough" else (n > 0) / (n + 1.0))
    waves *= 0.4 / np.abs(synthesis(waves, case.rings)).max()
    waves[0] = 0.6 * np.sqrt(4.0 * np.pi)
    return synthesis(waves, case.rings), waves


def load_of(case, rng):
    """Load on the user's grid, kg m-2, and its coefficients: a lump of loss with a ragged rest, or one cell."""
    degree = min(case.rings - 1, case.degree)
    if case.kind == "mask":
        cells = np.zeros((case.rings, 2 * case.rings))
        cells[-case.rings // 8, case.rings // 3] = -1000.0
        return cells, analysis(cells, degree)
    n = table(degree)[0]
    lump = harmonics(degree, np.array([0.4]), np.array([5.4]))[:, 0]  # near 67 N, 51 W
    out = -30.0 * lump * np.exp(-n / 6.0) + rng.normal(size=n.size) / (n + 1.0)
    return synthesis(out, case.rings), out


class Path:
    """The slow path for one case."""

    def __init__(self, case, rotation, seed=20):
        rng = np.random.default_rng(seed)
        self.case, self.rotation = case, rotation
        fraction, self.ocean = ocean_of(case, rng)
        cells, ice = load_of(case, rng)
        self.n, self.m, self.s = table(case.degree)
        self.ice = np.zeros(self.n.size)
        self.ice[: ice.size] = ice
        love = love_numbers(max_degree=case.degree)
        self.h, self.l, self.k, self.h_tide, self.k_tide = (
            love[name].values.copy() for name in ("h_load", "l_load", "k_load", "h_tide", "k_tide")
        )
        self.density = love.attrs["mean_density"]
        self.gravity = 4.0 / 3.0 * np.pi * NEWTON * self.density * RADIUS
        assert love.attrs["reference_frame"] == "CE"
        theta, lam, self.weight = rings(2 * case.degree + case.ocean_degree)
        self.basis = harmonics(case.degree, theta, lam)
        self.sea = self.ocean @ harmonics(case.ocean_degree, theta, lam)
        self.theta, self.lam = (a.ravel() for a in np.meshgrid(theta, lam, indexing="ij"))
        prepared = prepare_solver(
            field_on(fraction, case.rings), love, max_degree=case.degree, rotation=rotation, water_density=WATER
        )
        load = field_on(cells, case.rings, units="kg m-2")
        self.answers = {
            frame: solve_fingerprints(prepared, load, outputs=OUTPUTS, reference_frame=frame, tolerance=ASKED)
            for frame in ("CE", "CM", "CF")
        }

    def published(self, name, frame="CM"):
        """Coefficients of a field as the Dataset holds them, in the order of `table`."""
        held = self.answers[frame][f"{name}_coefficients"]
        where = {
            (int(n), int(m)): i for i, (n, m) in enumerate(zip(held.degree.values, held.order.values, strict=True))
        }
        values = held.transpose("part", "coefficient").values
        return np.array([values[s, where[n, m]] for n, m, s in zip(self.n, self.m, self.s, strict=True)])

    def load(self, sea_level):
        """L = I + rho_w P(O S) by direct quadrature."""
        product = self.sea * (sea_level @ self.basis)
        return self.ice + WATER * self.basis @ (self.weight * product)

    def rotation_vector(self, load):
        """m1, m2, m3 from the inertia integrals of the load, by quadrature."""
        sin, cos = np.sin(self.theta), np.cos(self.theta)
        mass = self.weight * (load @ self.basis)
        i13 = -(RADIUS**4) * np.sum(mass * sin * cos * np.cos(self.lam))
        i23 = -(RADIUS**4) * np.sum(mass * sin * cos * np.sin(self.lam))
        i33 = -2.0 / 3.0 * RADIUS**4 * np.sum(mass * (1.5 * cos**2 - 0.5))
        felt = 1.0 + self.k[2]
        m = felt * (i13 + 1j * i23) / (EXCESS * (1.0 - self.k_tide[2] / SECULAR))
        return m.real, m.imag, -felt * i33 / POLAR_MOMENT

    def centrifugal(self, load):
        """Coefficients of Lambda / g, by quadrature of the potential written in space."""
        if not self.rotation:
            return np.zeros(self.n.size)
        m1, m2, m3 = self.rotation_vector(load)
        sin, cos = np.sin(self.theta), np.cos(self.theta)
        wobble = -(m1 * np.cos(self.lam) + m2 * np.sin(self.lam)) * sin * cos
        potential = (RATE * RADIUS) ** 2 * (wobble - 2.0 / 3.0 * m3 * (1.5 * cos**2 - 0.5))
        return self.basis @ (self.weight * potential) / self.gravity

    def field(self, load, name, frame):
        """Coefficients of a field without its uniform part."""
        alpha = {"CE": 0.0, "CM": 1.0, "CF": (self.h[1] + 2.0 * self.l[1]) / 3.0}[frame]
        h, one_plus_k = self.h.copy(), 1.0 + self.k
        h[1] -= alpha
        one_plus_k[1] -= alpha
        love, tide = {
            "geoid": (one_plus_k, 1.0 + self.k_tide[2]),
            "bedrock_up": (h, self.h_tide[2]),
            "relative_sea_level": (one_plus_k - h, 1.0 + self.k_tide[2] - self.h_tide[2]),
        }[name]
        shape = 3.0 * love[self.n] / (self.density * (2.0 * self.n + 1.0)) * load
        shape[0] = 0.0
        return shape + tide * self.centrifugal(load)

    def uniform(self, load):
        """The constant c that closes the mass, by quadrature."""
        shape = self.field(load, "relative_sea_level", "CE") @ self.basis
        ice_mass = np.sum(self.weight * (self.ice @ self.basis))
        water = np.sum(self.weight * self.sea * shape)
        return (-ice_mass / WATER - water) / np.sum(self.weight * self.sea)

    def residual(self, sea_level):
        """||T L(S) + R + c - S|| / ||S|| over the sphere."""
        load = self.load(sea_level)
        right = self.field(load, "relative_sea_level", "CE")
        right[0] += self.uniform(load) * np.sqrt(4.0 * np.pi)
        return np.linalg.norm(right - sea_level) / np.linalg.norm(sea_level)


@pytest.fixture(scope="module", params=list(itertools.product(CASES, ("rotation on", "rotation off"))), ids=", ".join)
def path(request):
    name, rotation = request.param
    return Path(CASES[name], rotation == "rotation on")


def relative(found, expected):
    return np.linalg.norm(found - expected) / np.linalg.norm(expected)


def test_the_slow_harmonics_are_orthonormal():
    theta, lam, weight = rings(32)
    basis = harmonics(16, theta, lam)
    crossing = (np.sin(theta)[:, None] * np.cos(lam)).ravel()
    np.testing.assert_allclose((basis * weight) @ basis.T, np.eye(17**2), rtol=0, atol=1e-12)  # rounding of 1000 terms
    np.testing.assert_allclose(basis[2], np.sqrt(3 / 4 / np.pi) * crossing, rtol=0, atol=1e-14)


def test_the_published_field_solves_the_equation(path):
    """Residual of the full equation, from the published coefficients alone: 10 x the tolerance asked."""
    assert path.residual(path.published("relative_sea_level")) < ALLOWED
    assert path.answers["CM"]["converged"] == 1


def test_the_published_grid_is_the_direct_sum(path):
    """Grid and coefficients say the same: 1e-12 of the largest value, rounding of some hundred terms."""
    for name in OUTPUTS:
        direct = synthesis(path.published(name), path.case.rings)
        found = path.answers["CM"][name].transpose("lat", "lon").values
        assert np.abs(found - direct).max() < 1e-12 * np.abs(direct).max(), name


@pytest.mark.parametrize("frame", ["CE", "CM", "CF"])
def test_geoid_bedrock_and_sea_surface(path, frame):
    """Each from its own direct sum over the load that the published sea level implies."""
    sea_level = path.published("relative_sea_level", frame)
    load = path.load(sea_level)
    constant = np.zeros(path.n.size)
    constant[0] = path.uniform(load) * np.sqrt(4.0 * np.pi)
    geoid = path.field(load, "geoid", frame)
    assert relative(path.published("geoid", frame), geoid) < ALLOWED
    assert relative(path.published("bedrock_up", frame), path.field(load, "bedrock_up", frame)) < ALLOWED
    assert relative(path.published("sea_surface", frame), geoid + constant) < ALLOWED
    assert relative(sea_level, path.field(load, "relative_sea_level", frame) + constant) < ALLOWED
    assert path.answers[frame].attrs["reference_frame"] == frame


def test_the_frames_differ_where_they_should(path):
    """Degree 1 of the geoid is 0 in CM and not in CE or CF; relative sea level is the same in all (rounding)."""
    first = path.n == 1
    degree_one = {frame: np.abs(path.published("geoid", frame)[first]).max() for frame in path.answers}
    assert degree_one["CM"] < 1e-15 * degree_one["CE"]
    assert abs(degree_one["CF"] / degree_one["CE"] - 1.0) > 0.01  # CF is 2 % from CE (1.094 to 1.067)
    for frame in ("CE", "CF"):
        assert relative(path.published("relative_sea_level", frame), path.published("relative_sea_level")) < 1e-15


def test_mass_is_conserved(path):
    """rho_w int(O S) = -int(I) by quadrature of the published field; the ocean's load and the ice cancel to 1e-12 of the ice."""
    sea_level = path.published("relative_sea_level") @ path.basis
    water = WATER * np.sum(path.weight * path.sea * sea_level)
    ice = np.sum(path.weight * (path.ice @ path.basis))
    assert abs(water + ice) < 1e-12 * abs(ice)


def test_sea_surface_less_geoid_is_the_constant_that_mass_gives(path):
    """Uniform, its value c from mass, to 10 x the tolerance asked; c is not the barystatic value (0.7 % off or more)."""
    answer = path.answers["CM"]
    difference = (answer["sea_surface"] - answer["geoid"]).values
    c = path.uniform(path.load(path.published("relative_sea_level")))
    assert np.abs(difference - c).max() < ALLOWED * np.abs(answer["sea_surface"]).max()
    area = np.sum(path.weight * path.sea)
    barystatic = -np.sum(path.weight * (path.ice @ path.basis)) / (WATER * area)
    assert abs(c / barystatic - 1.0) > 1e-3  # a hundred million times the tolerance


def test_polar_motion_and_length_of_day(path):
    """x_p = m1, y_p = -m2 (IERS: towards 90 W), length of day = -m3 x 86400 s; all 0 with rotation off."""
    answer = path.answers["CM"]
    found = [float(answer[name]) for name in ("polar_motion_x", "polar_motion_y", "length_of_day_change")]
    if not path.rotation:
        assert found == [0.0, 0.0, 0.0]
        return
    m1, m2, m3 = path.rotation_vector(path.load(path.published("relative_sea_level")))
    assert np.hypot(m1, m2) > 0.0
    np.testing.assert_allclose(found, [m1 * MAS, -m2 * MAS, -m3 * DAY], rtol=ALLOWED)


def test_the_gravity_of_the_table_is_that_of_its_density(path):
    """g = 4/3 pi G rho a: 1e-9, the digits in which G and a are given."""
    assert love_numbers(max_degree=2).attrs["surface_gravity"] == pytest.approx(path.gravity, rel=1e-9)


def _nudged(path, sea_level):
    out = sea_level.copy()
    out[7] += 1e-9 * np.linalg.norm(sea_level)
    return out


def _rotation_scaled(path, sea_level, factor):
    plain = path.centrifugal
    path.centrifugal = lambda load: factor * plain(load)
    return sea_level


def _half_attraction(path, sea_level):
    path.load = lambda s: path.ice + 0.5 * WATER * path.basis @ (path.weight * path.sea * (s @ path.basis))
    return sea_level


def _barystatic(path, sea_level):
    ice = np.sum(path.weight * (path.ice @ path.basis))
    path.uniform = lambda load: -ice / (WATER * np.sum(path.weight * path.sea))
    return sea_level


BUGS = {
    "a coefficient off by 1e-9": (_nudged, 5e-10),
    "half the ocean's attraction": (_half_attraction, 1e-3),
    "sign of the rotation": (partial(_rotation_scaled, factor=-1.0), 1e-3),
    "1 + k'_2 twice": (partial(_rotation_scaled, factor=0.7), 1e-3),
    "constant is the barystatic value": (_barystatic, 1e-3),
}


@pytest.mark.parametrize("bug", BUGS)
def test_the_residual_notices(bug):
    """The check can fail: with an error put in, the same residual is 50 times the limit or, for bugs of physics, 1e8 times."""
    path = Path(CASES["rough ocean to the grid's limit"], True)
    change, least = BUGS[bug]
    residual = path.residual(change(path, path.published("relative_sea_level")))
    assert residual > least >= 50.0 * ALLOWED
