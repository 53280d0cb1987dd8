"""The range within a region: reciprocity makes one solve per site enough."""

import numpy as np
import pandas as pd
import pytest

import massfingerprint as mf
from massfingerprint.errors import InputError
from massfingerprint.sealevel.kernels import point_mass
from massfingerprint.sealevel.within import range_within
from massfingerprint.sphere import _transform
from tests.earth.point_loads import point_load

SITES = pd.DataFrame({"site": ["Hudson", "Cape"], "lat": [40.70, -33.91], "lon": [-74.01, 18.43]})


@pytest.fixture(scope="module")
def problem(love):
    ocean = mf.ocean_fraction(1.0)
    prepared = mf.prepare_solver(ocean, love, max_degree=64)
    return prepared, mf.spread_mass(mf.regions("greenland", "west_antarctica"), ocean)


def test_point_mass_is_the_harmonics_at_the_point(problem):
    """Against direct sums of scipy's harmonics; 1e-12 of the largest."""
    expected = point_load(40.7, -74.01, 64).values
    found = _transform.real_from_complex(point_mass(problem[0], 40.7, -74.01))
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-12 * np.abs(expected).max())


def test_the_value_of_the_region_lies_in_its_range(problem):
    prepared, load = problem
    found = range_within(prepared, load, SITES)
    even = mf.at_sites(mf.solve_fingerprints(prepared, load), SITES)["relative_sea_level_tapered"]
    assert (found["relative_sea_level_lowest"] < even).all()
    assert (even < found["relative_sea_level_highest"]).all()
    assert found["relative_sea_level_lowest"].dims == ("source", "site")


def test_a_region_of_one_cell_has_no_range(problem):
    """One cell at 70.5 N 40.5 W: lowest and highest are the forward value of a disc of that size, to 2 % of the mean."""
    prepared, load = problem
    single = load.sel(source=["greenland"]) * 0.0
    single.loc[{"lat": 70.5, "lon": 319.5}] = 1.0
    found = range_within(prepared, single, SITES)
    np.testing.assert_array_equal(found["relative_sea_level_lowest"], found["relative_sea_level_highest"])
    disc = mf.spread_mass(mf.disc("cell", 70.5, -40.5, 40.0), mf.ocean_fraction(1.0))
    forward = mf.at_sites(mf.solve_fingerprints(prepared, disc), SITES)["relative_sea_level_tapered"]
    limit = 0.02 * abs(prepared.barystatic_per_gigatonne)
    np.testing.assert_allclose(found["relative_sea_level_lowest"][0], forward[0], rtol=0, atol=limit)


def test_wrong_loads(problem):
    prepared, load = problem
    with pytest.raises(InputError, match=r"load: must be a DataArray \(source, lat, lon\)"):
        range_within(prepared, load.isel(source=0), SITES)
    with pytest.raises(InputError, match="load: source 'greenland' carries no mass"):
        range_within(prepared, load * 0.0, SITES)
