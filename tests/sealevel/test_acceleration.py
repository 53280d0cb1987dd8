"""Corrections and combinations change how soon the answer comes, not the answer."""

import numpy as np
import pytest

from massfingerprint import set_options
from massfingerprint.load.ocean import ocean_fraction
from massfingerprint.load.regions import disc, regions
from massfingerprint.load.spread import spread_mass
from massfingerprint.sealevel._equation import solve
from massfingerprint.sealevel._levels import DIRECT_DEGREE, Direct, coarser
from massfingerprint.sealevel.fingerprints import solve_fingerprints
from massfingerprint.sealevel.solver import prepare_solver
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import grid_of
from tests.sealevel.plain import plain_iteration

SPACING = 1.0


@pytest.fixture(scope="module")
def ocean():
    return ocean_fraction(SPACING)


@pytest.fixture(scope="module")
def loads(ocean):
    """A sheet, a few glaciers, a disc of one cell, and mass on the sea beside a coast."""
    import pandas as pd  # noqa: PLC0415

    own = pd.concat([disc("dot", 61.0, -147.0, 60.0), disc("wet", 0.5, 8.0, 150.0)], ignore_index=True)
    both = pd.concat([regions("greenland", "glaciers_18"), own], ignore_index=True)
    return spread_mass(both, ocean, allow_ocean=True)


def ice_of(prepared, load):
    grid = grid_of(load)
    band = min(grid.band_limit, prepared.max_degree)
    return _transform.resized(
        _transform.analyse(grid.to_rings(load.values), band, grid.first_azimuth), prepared.max_degree
    )


def size(coefficients):
    return float(np.sqrt(_transform.inner_product(coefficients, coefficients)))


@pytest.mark.parametrize(("degree", "rotation"), [(5, True), (24, False), (40, True), (100, False), (330, True)])
def test_the_answer_is_that_of_the_plain_iteration(ocean, loads, love, degree, rotation):
    """Both at a tolerance of 1e-13: they differ by what rounding leaves, a few 1e-13 of the answer."""
    prepared = prepare_solver(ocean, love, max_degree=degree, rotation=rotation)
    for load in loads[: 2 if degree > 300 else None]:
        ice = ice_of(prepared, load)
        expected, _ = plain_iteration(prepared.operator, ice)
        found = solve(prepared.operator, ice, tolerance=1e-13, correction=prepared.correction)
        got, uniform = prepared.operator.sea_level(found.load, float(ice[0].real) * np.sqrt(4.0 * np.pi))
        assert found.converged
        assert size(got - expected) < 1e-12 * size(expected)
        assert found.uniform == uniform


@pytest.mark.parametrize("degree", [16, 100, 330])
def test_fewer_rounds_at_the_same_tolerance_and_an_honest_residual(ocean, loads, love, degree):
    """4 rounds against 11 or more; the residual told is that of the state it is about, the answer is one round further."""
    prepared = prepare_solver(ocean, love, max_degree=degree)
    for load in loads[: 2 if degree > 300 else None]:
        ice = ice_of(prepared, load)
        exact, residuals = plain_iteration(prepared.operator, ice)
        found = solve(prepared.operator, ice, tolerance=1e-8, correction=prepared.correction)
        assert found.rounds <= 4
        assert sum(r > 1e-8 for r in residuals) >= 9
        got, _ = prepared.operator.sea_level(found.load, float(ice[0].real) * np.sqrt(4.0 * np.pi))
        assert size(got - exact) < (found.residual + 1e-13) * size(exact)  # the plain answer is known to 1e-13
        again = prepared.operator.sea_level(
            ice + prepared.operator.ocean_load(got), float(ice[0].real) * np.sqrt(4.0 * np.pi)
        )
        assert size(again[0] - got) < (found.residual + 1e-14) * size(got)  # rounding


def test_without_corrections_the_rounds_alone_get_there(ocean, loads, love):
    prepared = prepare_solver(ocean, love, max_degree=40)
    ice = ice_of(prepared, loads[0])
    found = solve(prepared.operator, ice, tolerance=1e-10, correction=lambda residual: residual)
    helped = solve(prepared.operator, ice, tolerance=1e-10, correction=prepared.correction)
    assert found.converged
    assert found.rounds > helped.rounds
    assert size(found.load - helped.load) < 1e-8 * size(found.load)


def test_the_direct_level_solves_its_problem(ocean, love):
    """(1 - K) of the correction is the residual, to rounding of a matrix whose condition is about 2."""
    prepared = prepare_solver(ocean, love, max_degree=DIRECT_DEGREE)
    direct = prepared.correction
    assert isinstance(direct, Direct)
    rng = np.random.default_rng(5)
    residual = rng.normal(size=prepared.operator.ocean.size) + 1j * rng.normal(size=prepared.operator.ocean.size)
    residual.imag[: DIRECT_DEGREE + 1] = 0.0
    error = direct(residual)
    assert size(error - prepared.operator.homogeneous(error) - residual) < 1e-13 * size(residual)


def test_a_coarser_problem_is_the_exact_restriction(ocean, love):
    """Its product equals the low degrees of the fine product of the same low-degree field."""
    prepared = prepare_solver(ocean, love, max_degree=100)
    grid = prepared.grid
    fraction = _transform.analyse(grid.to_rings(ocean.values), grid.band_limit, grid.first_azimuth)
    low = coarser(prepared.operator, fraction, 20)
    rng = np.random.default_rng(6)
    field = rng.normal(size=low.ocean.size) + 1j * rng.normal(size=low.ocean.size)
    field.imag[:21] = 0.0
    fine = _transform.resized(prepared.operator.ocean_load(_transform.resized(field, 100)), 20)
    assert size(low.ocean_load(field) - fine) < 1e-12 * size(fine)


def test_threads_and_batches_do_not_matter(ocean, loads, love):
    """Thread count within 1e-12; one at a time, all together and again: the same bits."""
    prepared = prepare_solver(ocean, love, max_degree=100)
    whole = solve_fingerprints(prepared, loads)["relative_sea_level_coefficients"].values
    again = solve_fingerprints(prepared, loads)["relative_sea_level_coefficients"].values
    single = [solve_fingerprints(prepared, one)["relative_sea_level_coefficients"].values for one in loads]
    assert np.array_equal(whole, again)
    assert np.array_equal(whole, np.stack(single))
    with set_options(threads=1):
        alone = solve_fingerprints(prepare_solver(ocean, love, max_degree=100), loads)
    assert np.abs(alone["relative_sea_level_coefficients"].values - whole).max() < 1e-12 * np.abs(whole).max()
