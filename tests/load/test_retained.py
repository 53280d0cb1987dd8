"""Mass that stays on land, through the solver."""

import numpy as np
import pandas as pd
import pytest

import massfingerprint as mf
from massfingerprint.errors import InputError, RegionError
from massfingerprint.load.retained import retain_on_land
from massfingerprint.sphere.grids import grid_of


@pytest.fixture(scope="module")
def spread():
    ocean = mf.ocean_fraction(1.0)
    sources = pd.concat([mf.disc("pamir", 38.5, 73.0, 150.0), mf.disc("alps", 46.0, 8.0, 100.0)])
    return ocean, mf.spread_mass(sources, ocean), mf.disc("pamir", 45.0, 60.0, 150.0)


def integral(load):
    weights = grid_of(load).quadrature_weights * 6.371e6**2 / 1e12
    return (load * weights).sum(("lat", "lon")).values


@pytest.mark.parametrize("fraction", [0.0, 0.3, 1.0])
def test_the_load_integrates_to_the_fraction(spread, fraction):
    ocean, load, lake = spread
    before = load.copy(deep=True)
    kept = retain_on_land(load, ocean, ocean_reaching_fraction={"pamir": fraction}, places=lake)
    np.testing.assert_allclose(integral(kept), [fraction, 1.0], rtol=0, atol=1e-12)
    np.testing.assert_array_equal(kept.sel(source="alps"), load.sel(source="alps"))
    assert load.identical(before)
    assert kept["ocean_reaching_fraction"].values.tolist() == [fraction, 1.0]


def test_fraction_zero_moves_no_ocean_mean_and_still_the_land(spread, love):
    """Zero mean over the ocean (1e-12 of a full source's), a fall of the sea floor's neighbours by the lake all the same."""
    ocean, load, lake = spread
    kept = retain_on_land(load, ocean, ocean_reaching_fraction={"pamir": 0.0}, places=lake)
    prepared = mf.prepare_solver(ocean, love, max_degree=64)
    found = mf.solve_fingerprints(prepared, kept, outputs=("relative_sea_level", "bedrock_up"))
    weights = ocean * prepared.grid.quadrature_weights
    mean = (found["relative_sea_level"] * weights).sum(("lat", "lon")) / weights.sum()
    per_gt = prepared.barystatic_per_gigatonne
    # the grid's quadrature of a product of degrees 179 and 64 is exact to 1e-4; the coefficients close to rounding
    assert float(mean.sel(source="pamir")) == pytest.approx(0.0, abs=1e-4 * abs(per_gt))
    assert float(mean.sel(source="alps")) == pytest.approx(per_gt, rel=1e-4)
    sites = pd.DataFrame({"site": ["lake", "glacier"], "lat": [45.0, 38.5], "lon": [60.0, 73.0]})
    up = mf.at_sites(found, sites)["bedrock_up"].sel(source="pamir") * -1.0  # per gigatonne lost
    assert float(up.sel(site="lake")) < -1e-3
    assert float(up.sel(site="glacier")) > 1e-3


def test_the_answer_is_the_mixture(spread, love):
    """Linear: pattern of the source minus 0.7 of the pattern of its lake."""
    ocean, load, lake = spread
    prepared = mf.prepare_solver(ocean, love, max_degree=32)
    choice = {"tolerance": 1e-12}
    kept = retain_on_land(load, ocean, ocean_reaching_fraction={"pamir": 0.3}, places=lake)
    found = mf.solve_fingerprints(prepared, kept, **choice)["relative_sea_level"].sel(source="pamir")
    whole = mf.solve_fingerprints(prepared, load, **choice)["relative_sea_level"].sel(source="pamir")
    water = mf.solve_fingerprints(prepared, mf.spread_mass(lake, ocean, allow_ocean=True), **choice)[
        "relative_sea_level"
    ]
    expected = whole - 0.7 * water.sel(source="pamir")
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-10 * float(np.abs(expected).max()))


def test_wrong_arguments(spread):
    ocean, load, lake = spread
    with pytest.raises(RegionError, match="places: none for 'alps'"):
        retain_on_land(load, ocean, ocean_reaching_fraction={"alps": 0.5}, places=lake)
    with pytest.raises(InputError, match=r"no source 'alpes' in the load\. Did you mean alps"):
        retain_on_land(load, ocean, ocean_reaching_fraction={"alpes": 0.5}, places=lake)
    with pytest.raises(InputError, match=r"of 'alps' must lie between 0 and 1, got -0\.5"):
        retain_on_land(load, ocean, ocean_reaching_fraction={"alps": -0.5}, places=lake)
