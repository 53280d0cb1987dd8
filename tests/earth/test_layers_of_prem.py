"""PREM: polynomials, mass and inertia against a seismology package's table and published totals."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest

from massfingerprint.earth.layers import EarthModel, Layer, homogeneous
from massfingerprint.earth.prem import prem

MODEL = prem()
ROUNDING = 1e-4  # the table normalised radii to five digits: 5e-6 times slopes of up to 20 km/s per radius
# Two rows of the table differ from the polynomials in the fourth decimal: vs 4.93259 for 4.93249, vp 9.27867 for 9.27880.
MISPRINTED = {400.0: 1.03e-4, 3771.0: 1.4e-4}


def prem_nd() -> np.ndarray:
    """Rows depth [km], vp, vs [km/s], density [g/cm3] of obspy's taup/data/prem.nd, read without importing obspy."""
    package = Path(importlib.util.find_spec("obspy").submodule_search_locations[0])
    lines = (package / "taup" / "data" / "prem.nd").read_text().splitlines()
    return np.array([[float(v) for v in line.split()[:4]] for line in lines if len(line.split()) >= 4])


def ours_at(depth: float, above: bool) -> tuple[float, float, float]:
    """Isotropic vp, vs, density at a depth, taken from the shell above or below a boundary."""
    radius = MODEL.radius - depth * 1e3
    sign = 1.0 if above else -1.0
    layer = next(
        i for i, shell in enumerate(MODEL.layers) if radius + sign <= shell.outer and radius + sign >= shell.inner
    )
    p, s = MODEL.wave_speeds(layer, np.array(radius))
    return float(p) / 1e3, float(s) / 1e3, float(MODEL.density(layer, np.array(radius))) / 1e3


def rows():
    table = prem_nd()
    for i, (depth, p, s, density) in enumerate(table):
        if depth < 3.0 or depth > 6370.0:  # the ocean is replaced; the centre is singular for the shell search
            continue
        first_of_pair = i + 1 < len(table) and table[i + 1, 0] == depth
        second_of_pair = table[i - 1, 0] == depth
        yield pytest.param(
            depth, p, s, density, first_of_pair or not second_of_pair, second_of_pair, id=f"{i}-{depth:g}"
        )


@pytest.mark.parametrize(("depth", "p", "s", "density", "above", "below"), list(rows()))
def test_against_the_table_of_a_seismology_package(depth, p, s, density, above, below):
    """obspy 1.5 taup/data/prem.nd, 5 decimals; between 24.4 and 220 km it tabulates PREM's own isotropic form."""
    vp, vs, rho = ours_at(depth, above=above and not below)
    anisotropic = 24.4 <= depth <= 220.0 and not (depth == 220.0 and below) and not (depth == 24.4 and not below)
    assert rho == pytest.approx(density, abs=ROUNDING)
    # PREM's own isotropic lines for that shell are rounded fits to the Voigt average, good to 0.3 %
    limit = {"rel": 3e-3} if anisotropic else {"abs": MISPRINTED.get(depth, ROUNDING)}
    assert vp == pytest.approx(p, **limit)
    assert vs == pytest.approx(s, **limit)


def test_published_totals():
    """Mass 5.974e24 kg, inertia ratio 0.3308 (Dziewonski & Anderson 1981, from memory).

    Ours has crust instead of ocean: 3 km of (2600 - 1020) kg m-3 more, 2.4e21 kg, 0.04 %.
    """
    crust = 4.0 * np.pi * 6.3695e6**2 * 3000.0 * (2600.0 - 1020.0)
    assert MODEL.mass - crust == pytest.approx(5.974e24, rel=5e-4)
    assert MODEL.moment_of_inertia / (MODEL.mass * MODEL.radius**2) == pytest.approx(0.3308, abs=3e-4)
    assert MODEL.surface_gravity == pytest.approx(9.8156, rel=2e-3)


def test_mass_is_the_integral_of_density():
    """Simpson sums of density on 20 001 radii per shell agree with the exact polynomial integral to 1e-12."""
    total = 0.0
    for i, shell in enumerate(MODEL.layers):
        r = np.linspace(shell.inner, shell.outer, 20001)
        f = 4.0 * np.pi * r**2 * MODEL.density(i, r)
        weights = np.ones(r.size)
        weights[1:-1:2], weights[2:-1:2] = 4.0, 2.0
        total += float((f * weights).sum()) * (r[1] - r[0]) / 3.0
    assert MODEL.mass == pytest.approx(total, rel=1e-12)


def test_voigt_average_of_an_isotropic_medium_is_itself():
    speeds = {"pv": (8000.0,), "ph": (8000.0,), "sv": (4500.0,), "sh": (4500.0,), "eta": (1.0,)}
    model = EarthModel("one", (Layer(0.0, 6.371e6, (3300.0,), speeds),), "test")
    p, s = model.wave_speeds(0, np.array([5e6]))
    assert p[0] == pytest.approx(8000.0, rel=1e-14)
    assert s[0] == pytest.approx(4500.0, rel=1e-14)


def test_homogeneous_sphere_has_the_gravity_of_a_ball():
    model = homogeneous(5500.0, 1e11, 1e11)
    r = np.array([1e6, 3e6, 6.371e6])
    assert model.gravity(0, r) == pytest.approx(4.0 / 3.0 * np.pi * 6.6743e-11 * 5500.0 * r, rel=1e-14)
    assert model.moment_of_inertia == pytest.approx(0.4 * model.mass * model.radius**2, rel=1e-14)
