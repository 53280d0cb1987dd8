"""Love numbers against closed forms, limits, a second method, themselves refined, and published tables."""

import time

import numpy as np
import pytest

from massfingerprint.earth import _radial
from massfingerprint.earth._radial import surface_numbers
from massfingerprint.earth.layers import homogeneous
from massfingerprint.earth.love import compute_love_numbers, love_numbers
from massfingerprint.earth.models import MODELS
from massfingerprint.earth.prem import prem
from massfingerprint.errors import InputError
from tests.earth.second_method import Scaled, load_and_tide

NAMES = ("h_load", "l_load", "k_load", "h_tide", "l_tide", "k_tide")
TWENTY = (1, 2, 3, 4, 5, 6, 8, 10, 14, 20, 30, 45, 70, 110, 170, 260, 400, 700, 1200, 2000)


@pytest.fixture(scope="module")
def recomputed():
    begin = time.perf_counter()
    table = love_numbers("prem", max_degree=2048, recompute=True)
    return table, time.perf_counter() - begin


def test_the_shipped_table_is_what_the_code_computes(recomputed, love):
    """1e-12 leaves room for another LAPACK, nothing else."""
    for name in NAMES:
        np.testing.assert_allclose(recomputed[0][name], love[name], rtol=0, atol=1e-12, err_msg=name)
    assert recomputed[0].attrs == love.attrs


@pytest.mark.parametrize("degree", TWENTY)
def test_second_method_agrees(degree, love):
    """Another integrator and another set of variables (scipy's DOP853, see second_method.py): 1e-8 of the value."""
    second = load_and_tide(degree)
    ours = [float(love[name][degree]) for name in NAMES]
    for name, a, b in zip(NAMES, ours, second, strict=True):
        if degree == 1 and name.endswith("_tide"):
            assert a == 0.0
            continue
        assert a == pytest.approx(b, rel=1e-8, abs=1e-12), name


@pytest.mark.parametrize(
    "name", ["prem_200s", "prem_oceanic", "prem_continental", "prem_no_crust", "prem_as_published"]
)
def test_second_method_agrees_on_every_realistic_earth(name):
    """As above for two degrees, one that sees the whole Earth, one the crust. Uniform and layered spheres have closed forms."""
    ours, other = love_numbers(name, max_degree=400), Scaled(MODELS[name].make())
    for degree in (2, 400):
        second = load_and_tide(degree, other)
        for number, b in zip(NAMES, second, strict=True):
            assert float(ours[number][degree]) == pytest.approx(b, rel=1e-8, abs=1e-12), (number, degree)


def test_self_convergence(recomputed):
    """Half as many steps again change nothing beyond 1e-8 of the value (1e-10 in absolute terms), all degrees."""
    fine = surface_numbers(prem(), 2048, refinement=1.5)
    for name in NAMES:
        a, b = recomputed[0][name].values, getattr(fine, name)
        np.testing.assert_allclose(a, b, rtol=1e-8, atol=1e-16, err_msg=name)
        np.testing.assert_allclose(a, b, rtol=0, atol=1e-10, err_msg=name)


def test_degree_one_third_condition():
    """At degree 1 the unused surface condition y6 = 3 must follow from the other two."""
    assert surface_numbers(prem(), 1).degree_one_defect < 1e-11


def test_molodensky_reciprocity(love):
    """k'_n = k_n - h_n, n >= 2 (Molodensky; exact): 1e-10."""
    defect = (love["k_load"] - love["k_tide"] + love["h_tide"])[2:]
    assert float(np.abs(defect).max()) < 1e-10


@pytest.mark.parametrize("name", NAMES)
def test_homogeneous_incompressible_sphere(name):
    """Six closed forms, n = 2..50, 1e-8 (Thomson & Tait; Munk & MacDonald 1960, from memory; exact).

    Incompressible: first Lame parameter 1e11 times the rigidity, so that compressibility contributes 1e-11.
    """
    model = homogeneous(5500.0, 1.4e11, 1.4e22)
    n = np.arange(2.0, 51.0)
    mu = (2 * n**2 + 4 * n + 3) / n * 1.4e11 / (5500.0 * model.surface_gravity * model.radius)
    exact = {
        "h_load": -(2 * n + 1) / 3 / (1 + mu),
        "k_load": -1 / (1 + mu),
        "l_load": -1 / (n * (1 + mu)),
        "h_tide": (2 * n + 1) / (2 * (n - 1)) / (1 + mu),
        "k_tide": 3 / (2 * (n - 1)) / (1 + mu),
        "l_tide": 3 / (2 * n * (n - 1) * (1 + mu)),
    }
    np.testing.assert_allclose(getattr(surface_numbers(model, 50), name)[2:], exact[name], rtol=1e-8, atol=0)


def test_half_space_limits_are_approached_as_one_over_n():
    """Farrell 1972 limits with the top layer; what is left halves when n doubles, to 10 %.

    The top 15 km fix the values once a wave of degree n no longer reaches below: n = 3000 upwards.
    """
    model = prem()
    radius = np.array(model.radius)
    lam, mu = (float(v) for v in model.moduli(len(model.layers) - 1, radius))
    rho, g, a = float(model.density(len(model.layers) - 1, radius)), model.surface_gravity, model.radius
    limits = {
        "h_load": -(g**2) * (lam + 2 * mu) / (4 * np.pi * 6.6743e-11 * mu * (lam + mu)),
        "l_load": g**2 / (4 * np.pi * 6.6743e-11 * (lam + mu)),
        "k_load": -rho * g * a / (2 * mu),
    }
    degrees = np.array([8000, 16000])
    numbers = _at_degrees(model, degrees)
    for name, limit in limits.items():
        values = numbers[name] * (1.0 if name == "h_load" else degrees)
        left = values - limit
        assert abs(left[1] / limit) < 2e-3, name
        assert left[0] / left[1] == pytest.approx(2.0, rel=0.1), name


def _at_degrees(model, degrees):
    n = degrees.astype(float)
    load, _, _ = _radial._surface(n, _radial._integrate(model, n, 1.0))
    return {"h_load": load[:, 0], "l_load": load[:, 2] / n, "k_load": load[:, 4] - 1.0}


WAHR_1998 = {
    2: -0.303,
    3: -0.194,
    4: -0.132,
    5: -0.104,
    6: -0.089,
    7: -0.081,
    8: -0.076,
    9: -0.072,
    10: -0.069,
    12: -0.064,
}
WAHR_1998 |= {
    15: -0.058,
    20: -0.051,
    30: -0.040,
    40: -0.033,
    50: -0.027,
    70: -0.020,
    100: -0.014,
    150: -0.010,
    200: -0.007,
}


@pytest.mark.parametrize(("degree", "value"), WAHR_1998.items())
def test_published_load_numbers(degree, value, love):
    """Wahr, Molenaar & Bryan 1998, JGR 103:30205, Table 1; good sets differ by max(2 %, 0.0015)."""
    assert float(love["k_load"][degree]) == pytest.approx(value, abs=max(0.02 * abs(value), 0.0015))


@pytest.mark.parametrize(("degree", "value"), {2: -0.3075, 3: -0.195, 4: -0.132, 5: -0.1032, 6: -0.0892}.items())
def test_iers_load_numbers(degree, value, love):
    """IERS Conventions (2010), TN 36, 6.3.1; tolerance as above."""
    assert float(love["k_load"][degree]) == pytest.approx(value, abs=max(0.02 * abs(value), 0.0015))


@pytest.mark.parametrize(
    ("name", "degree", "value"),
    [("h_tide", 2, 0.6078), ("l_tide", 2, 0.0847), ("h_tide", 3, 0.292), ("l_tide", 3, 0.015), ("k_tide", 2, 0.29525)],
)
def test_iers_tide_numbers(name, degree, value, love):
    """IERS Conventions (2010), TN 36, Table 7.2 and 6.2: for an elastic Earth with its ocean layer; 2 % or 0.0015."""
    assert float(love[name][degree]) == pytest.approx(value, abs=max(0.02 * value, 0.0015))


def test_gutenberg_bullen_trend(love):
    """Farrell 1972, Table A2 (from memory): h'_10 -1.433, 10 k'_10 -0.682; another Earth, hence 3 %."""
    assert float(love["h_load"][10]) == pytest.approx(-1.433, rel=0.03)
    assert 10 * float(love["k_load"][10]) == pytest.approx(-0.682, rel=0.03)


def test_degree_zero_of_a_compressible_ball():
    """A uniform ball without gravity under pressure p shrinks by p a / (3 kappa); gravity off by a tiny density.

    h'_0 = -g u/phi with p = g sigma: -(rho g a) / (9 kappa) in the units of h'. Own derivation. The ball's own weight
    adds terms of relative size rho g a / kappa = 7e-6.
    """
    model = homogeneous(10.0, 1e11, 1e11)
    kappa = 1e11 + 2e11 / 3
    expected = -model.mean_density * model.surface_gravity * model.radius / (9 * kappa)
    assert surface_numbers(model, 1).h_load[0] == pytest.approx(expected, rel=7e-6, abs=0)


def test_degrees_beyond_the_shipped_table_are_computed():
    table = love_numbers(max_degree=2050)
    assert table.sizes["degree"] == 2051
    shipped = love_numbers(max_degree=2048)
    np.testing.assert_allclose(table["h_load"][:2049], shipped["h_load"], rtol=1e-10)  # of the integration: 2e-11


def test_layout(love):
    assert list(love["degree"].values[:3]) == [0, 1, 2]
    assert love.attrs["reference_frame"] == "CE"
    assert [float(love[name][0]) for name in NAMES[1:]] == [0.0] * 5
    assert [float(love[name][1]) for name in ("k_load", *NAMES[3:])] == [0.0] * 4
    assert compute_love_numbers(prem(), 2).sizes["degree"] == 3


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"model": "pram"}, "earth: no Earth named 'pram'. Did you mean prem"),
        ({"max_degree": 0}, "max_degree: must be a whole number of 1 or more, got 0"),
        ({"max_degree": 2.5}, "max_degree: must be a whole number of 1 or more, got 2.5"),
        ({"max_degree": True}, "got True"),
    ],
)
def test_wrong_arguments(arguments, message):
    with pytest.raises(InputError, match=message):
        love_numbers(**arguments)
