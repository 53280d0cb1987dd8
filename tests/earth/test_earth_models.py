"""Built-in Earths: what they weigh, closed forms, limits and exact relations between their Love numbers."""

from dataclasses import replace

import numpy as np
import pytest

from massfingerprint.constants import EARTH_MASS, MEAN_MOMENT_OF_INERTIA
from massfingerprint.earth._radial import numbers_at, surface_numbers
from massfingerprint.earth.description import density_inversions, describe, fluid_regions, report, totals
from massfingerprint.earth.layers import EarthModel, Layer
from massfingerprint.earth.models import MODELS, earth_model
from massfingerprint.earth.prem import prem
from massfingerprint.errors import InputError

FAMILY = [name for name in MODELS if name.startswith("prem")]


@pytest.mark.parametrize("name", list(MODELS))
def test_every_earth(name):
    """Molodensky, k'_n = k_n - h_n, and at degree 1 the third condition at the surface follow exactly: 1e-8 leaves room for the
    incompressible ones, whose degree 1 is good to 3e-9; the others stay below 1e-12."""
    model = earth_model(name)
    numbers = surface_numbers(model, 8)
    room = 1e-8 if name == "homogeneous" else 1e-12
    assert np.abs(numbers.k_load - numbers.k_tide + numbers.h_tide)[2:].max() < room
    assert numbers.degree_one_defect < room
    assert model.name == name
    assert MODELS[name].about


@pytest.mark.parametrize("name", list(MODELS))
def test_mass_is_the_earths(name):
    """Mass to 0.25 % of 5.9722e24 kg (Astronomical Almanac, from memory): without a crust PREM is 0.2 % too heavy."""
    assert earth_model(name).mass == pytest.approx(EARTH_MASS.value, rel=2.5e-3)


@pytest.mark.parametrize("name", FAMILY)
def test_moment_is_the_earths(name):
    """Mean moment 8.0190e37 kg m2 (Gross 2007, from memory): the crust decides about 0.4 % of it."""
    assert earth_model(name).moment_of_inertia == pytest.approx(MEAN_MOMENT_OF_INERTIA.value, rel=4.5e-3)


def test_moment_factors():
    """Earth 0.3308; a uniform sphere 2/5 exactly; five layers by hand (sum of 8/15 pi rho (b^5 - a^5)): 0.3367."""
    factors = {name: {q.quantity: q.value for q in totals(earth_model(name))}["moment factor"] for name in MODELS}
    assert factors["homogeneous"] == pytest.approx(0.4, rel=1e-14)
    radii = np.array([0.0, 3480.0, 5701.0, 5951.0, 6301.0, 6371.0])
    density = np.array([10750.0, 4978.0, 3871.0, 3438.0, 3037.0])
    by_hand = 0.4 * (density * np.diff(radii**5)).sum() / (density * np.diff(radii**3)).sum() / 6371.0**2
    assert factors["five_layer"] == pytest.approx(by_hand, rel=1e-13)
    assert factors["prem"] == pytest.approx(0.3308, abs=2e-4)


def uniform(ratio: float) -> float:
    """Largest relative difference from the closed forms of the incompressible sphere, n = 2 to 20."""
    model = EarthModel(
        "uniform", (Layer(0.0, 6.371e6, (5515.0,), {"first_lame": (ratio * 1.45e11,), "rigidity": (1.45e11,)}),), "test"
    )
    return closed_form_error(model, 5515.0, 1.45e11, 20)


def closed_form_error(model: EarthModel, density: float, rigidity: float, last: int) -> float:
    """Thomson & Tait; Munk & MacDonald 1960, from memory; exact."""
    n = np.arange(2.0, last + 1.0)
    mu = (2 * n**2 + 4 * n + 3) / n * rigidity / (density * model.surface_gravity * model.radius)
    exact = {
        "h_load": -(2 * n + 1) / 3 / (1 + mu),
        "k_load": -1 / (1 + mu),
        "l_load": -1 / (n * (1 + mu)),
        "h_tide": (2 * n + 1) / (2 * (n - 1)) / (1 + mu),
        "k_tide": 3 / (2 * (n - 1)) / (1 + mu),
        "l_tide": 3 / (2 * n * (n - 1) * (1 + mu)),
    }
    numbers = surface_numbers(model, last)
    return max(float(np.abs(getattr(numbers, name)[2:] / values - 1.0).max()) for name, values in exact.items())


@pytest.mark.parametrize(("ratio", "error"), [(1e4, 3.6e-3), (1e8, 3.6e-7), (1e10, 3.6e-9), (1e12, 1e-9), (1e16, 1e-9)])
def test_how_incompressible_a_first_lame_parameter_makes_a_sphere(ratio, error):
    """The error falls as 36 / ratio until the integration's own 2e-10 is reached at 1e12, and stays there."""
    assert uniform(ratio) < error


def test_the_built_in_uniform_earth():
    """Closed forms to 5e-9, what its first Lame parameter of 1e10 rigidities leaves."""
    shell = earth_model("homogeneous").layers[0]
    assert closed_form_error(earth_model("homogeneous"), shell.density[0], 1.45e11, 20) < 5e-9


def test_five_layers_of_one_material_are_a_uniform_sphere():
    """The five shells given one density and rigidity, the core's solid too: closed forms to 5e-9 as above."""
    shells = tuple(
        replace(shell, density=(5515.0,), elastic={"first_lame": (1.45e21,), "rigidity": (1.45e11,)})
        for shell in earth_model("five_layer").layers
    )
    assert closed_form_error(EarthModel("same", shells, "test"), 5515.0, 1.45e11, 20) < 5e-9


def test_five_layers_as_published():
    """Spada et al. 2011, GJI 185:106 (from memory): radii, densities, rigidities, viscosities."""
    shells = earth_model("five_layer").layers
    assert [shell.outer / 1e3 for shell in shells] == [3480.0, 5701.0, 5951.0, 6301.0, 6371.0]
    assert [shell.density for shell in shells] == [(10750.0,), (4978.0,), (3871.0,), (3438.0,), (3037.0,)]
    assert [shell.elastic["rigidity"][0] for shell in shells] == [0.0, 2.2834e11, 1.0549e11, 0.70363e11, 0.50605e11]
    assert [shell.viscosity for shell in shells] == [0.0, 2e21, 1e21, 1e21, float("inf")]
    assert [shell.fluid for shell in shells] == [True, False, False, False, False]


def test_moduli_and_speeds_are_the_same_shell():
    """One shell by speeds, by bulk modulus and by first Lame parameter: same moduli to rounding."""
    p, s, density = 8000.0, 4500.0, 3300.0
    mu, bulk = density * s**2, density * (p**2 - 4.0 / 3.0 * s**2)
    forms = (
        {"p": (p,), "s": (s,)},
        {"bulk": (bulk,), "rigidity": (mu,)},
        {"first_lame": (bulk - 2 * mu / 3,), "rigidity": (mu,)},
    )
    for elastic in forms:
        model = EarthModel("one", (Layer(0.0, 6.371e6, (density,), elastic),), "test")
        first, rigidity = model.moduli(0, np.array([1e6, 6e6]))
        assert first == pytest.approx([bulk - 2 * mu / 3] * 2, rel=1e-14)
        assert rigidity == pytest.approx([mu] * 2, rel=1e-14)
        assert model.wave_speeds(0, np.array([3e6]))[0] == pytest.approx(p, rel=1e-14)


def two_fluids(rigidity: float) -> EarthModel:
    """Five shells of plain materials, the middle of the mantle with the given rigidity."""
    rows = (
        (1221.5, 13000.0, 1.2e12, 1.6e11),
        (3480.0, 11000.0, 9e11, 0.0),
        (5000.0, 5200.0, 5e11, 2.4e11),
        (5300.0, 4900.0, 4e11, rigidity),
        (6371.0, 3800.0, 1.5e11, 1e11),
    )
    shells, inner = [], 0.0
    for outer, density, first, mu in rows:
        shells.append(Layer(inner, outer * 1e3, (density,), {"first_lame": (first,), "rigidity": (mu,)}))
        inner = outer * 1e3
    return EarthModel("two fluids", tuple(shells), "made up")


def test_two_fluid_regions_are_carried():
    """A second fluid shell: exact relations hold, and what lies under it matters only at low degree, so that a stiff and a fluid
    one agree at degree 200 (waves of 200 km do not reach down 1000 km: exp(-2 * 200 * ln(6371/5300)) = 1e-32)."""
    fluid, solid = two_fluids(0.0), two_fluids(2e11)
    assert fluid_regions(fluid) == [(1221.5e3, 3480e3), (5000e3, 5300e3)]
    numbers = surface_numbers(fluid, 8)
    assert np.abs(numbers.k_load - numbers.k_tide + numbers.h_tide)[2:].max() < 1e-11
    assert numbers.degree_one_defect < 1e-11
    # softer and softer solids tend to the fluid's answer
    apart = [abs(surface_numbers(two_fluids(mu), 2).h_load[2] - numbers.h_load[2]) for mu in (1e9, 1e8, 1e7, 1e6)]
    assert apart == sorted(apart, reverse=True)
    assert apart[-1] < 0.04 * abs(numbers.h_load[2])
    high = np.array([200.0])
    np.testing.assert_allclose(numbers_at(fluid, high)[:3], numbers_at(solid, high)[:3], rtol=1e-9)


def test_description():
    found = {q.quantity: q for q in describe(prem())}
    assert found["surface radius"].value == found["surface radius"].earth == 6.371e6
    assert found["bottom of fluid"].value == 1221.5e3
    assert found["mean density"].earth == pytest.approx(5513.0, abs=1.0)
    assert found["surface gravity"].earth == pytest.approx(9.820, abs=1e-3)
    assert found["moment factor"].earth == pytest.approx(0.3308, abs=5e-5)
    assert found["moment factor"].value == pytest.approx(0.3309, abs=1e-4)
    assert all(q.unit for q in found.values())


def test_report():
    lines = report(prem())
    assert lines[0] == "prem: 11 shells to 6371 km"
    assert "fluid from 1221.5 to 3480 km radius" in lines
    assert any(line.startswith("mass 5.9756e+24 kg, +0.06 % against the Earth's 5.9722e+24") for line in lines)
    assert lines[-1] == "density grows outwards from 6151 to 6346.6 km"
    assert "no fluid region" in report(earth_model("homogeneous"))


def test_density_inversions():
    heavy = EarthModel(
        "top-heavy",
        tuple(
            Layer(a, b, (rho,), {"p": (9e3,), "s": (5e3,)})
            for a, b, rho in ((0.0, 5e6, 5000.0), (5e6, 6.371e6, 5100.0))
        ),
        "made up",
    )
    assert density_inversions(heavy) == [(5e6, 5e6)]
    assert density_inversions(earth_model("five_layer")) == []
    assert "density grows outwards at 5000 km" in report(heavy)


def test_periods_of_built_in_earths():
    assert earth_model("prem", period=200.0) == earth_model("prem_200s")
    with pytest.raises(InputError, match="period: only prem has one, got 200 with 'prem_oceanic'"):
        earth_model("prem_oceanic", period=200.0)
    with pytest.raises(InputError, match="period: five_layer has no quality factors"):
        earth_model("five_layer", period=200.0)
    with pytest.raises(InputError, match=r"earth: no Earth named 'five_layers'\. Did you mean five_layer"):
        earth_model("five_layers")
