"""What observers see: exact on the whole ocean, in bands of latitude by closed forms, by masks, gauges and the open ocean."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from numpy.polynomial import legendre

import massfingerprint as mf
from massfingerprint.coast.observers import View, observed_means
from massfingerprint.errors import GridError, InputError
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import grid_of

FIELDS = ("relative_sea_level", "sea_surface", "bedrock_up")
ALL = {"ocean": View()}


@pytest.fixture(scope="module")
def problem(love):
    ocean = mf.ocean_fraction(2.0)
    prepared = mf.prepare_solver(ocean, love, max_degree=64)
    load = mf.spread_mass(mf.regions("greenland", "west_antarctica"), ocean)
    return prepared, ocean, mf.solve_fingerprints(prepared, load, outputs=FIELDS, tolerance=1e-12)


def test_relative_sea_level_over_the_whole_ocean_is_the_true_mean(problem):
    """To 1e-10, on the real ocean: mass is closed with the same ocean."""
    seen = observed_means(*problem, ALL)
    assert seen["ratio_relative_sea_level"].values == pytest.approx(np.ones((1, 2)), abs=1e-10)
    assert seen["sampling"].values == pytest.approx(np.zeros((1, 2)), abs=1e-10)
    assert seen["seen_area"].values == pytest.approx([problem[0].ocean_area], rel=1e-12)


def test_the_parts_add_to_the_ratio(problem):
    views = {
        "band": View(south=-66.0, north=66.0),
        **ALL,
        "gauges": View(gauges=mf.read_sites("data_small/coasts.csv")),
    }
    seen = observed_means(*problem, views)
    whole = 1.0 + seen["sampling"] + seen["ocean_floor"]
    assert whole.values == pytest.approx(seen["ratio_sea_surface"].values, abs=1e-12)


def test_all_latitudes_and_a_full_mask_are_the_whole_ocean(problem):
    full = xr.ones_like(problem[1])
    views = {**ALL, "mask": View(mask=full), "nearly": View(south=-90.0, north=89.999999)}
    seen = observed_means(*problem, views)
    for name in FIELDS:
        assert seen[name].sel(view="mask").values == pytest.approx(seen[name].sel(view="ocean").values, rel=1e-11)
        # the cap that is left out has 1e-15 of the sphere, the nodes are others
        assert seen[name].sel(view="nearly").values == pytest.approx(seen[name].sel(view="ocean").values, rel=1e-9)


@pytest.fixture(scope="module")
def rigid(love):
    """Water everywhere, a rigid Earth that does not turn: every degree has a closed form."""
    still = love.isel(degree=slice(0, 65)).copy(deep=True)
    for name in ("h_load", "l_load", "k_load", "h_tide", "k_tide"):
        still[name][:] = 0.0
    ocean = xr.ones_like(mf.ocean_fraction(2.0))
    prepared = mf.prepare_solver(ocean, still, max_degree=64, rotation=False)
    grid = grid_of(ocean)
    cap = (ocean["lat"] > 80.0) * xr.ones_like(ocean)
    mass = float((cap.values * grid.quadrature_weights).sum()) * 6.371e6**2
    load = (cap / mass * 1e12).expand_dims(source=["cap"]).assign_attrs(units="kg m-2 Gt-1")
    patterns = mf.solve_fingerprints(prepared, load, outputs=FIELDS, reference_frame="CE", tolerance=1e-13)
    ice = _transform.analyse(grid.to_rings(load.values[0]), 64, grid.first_azimuth)
    return prepared, ocean, patterns, ice, float(love.attrs["mean_density"])


@pytest.mark.parametrize(("south", "north"), [(-66.0, 66.0), (20.0, 90.0), (-90.0, -35.5)])
def test_the_rigid_all_ocean_case_is_the_integral_over_the_belt(rigid, south, north):
    """S_l = T_l I_l / (1 - rho_w T_l) (derived; exact), mean of P_l over a belt = (P_l+1 - P_l-1) / ((2l+1) dx): 1e-6."""
    prepared, ocean, patterns, ice, density = rigid
    low, high = np.sin(np.deg2rad([south, north]))
    expected = prepared.barystatic_per_gigatonne
    for degree in range(1, 65):
        response = 3.0 / (density * (2 * degree + 1.0))
        level = (
            response * ice[degree].real / (1.0 - 1000.0 * response) * np.sqrt((2 * degree + 1.0) / (4.0 * np.pi)) * 1e3
        )
        ends = [legendre.legval(x, np.eye(66)[degree + 1] - np.eye(66)[degree - 1]) for x in (low, high)]
        expected += level * (ends[1] - ends[0]) / ((2 * degree + 1.0) * (high - low))
    seen = observed_means(prepared, ocean, patterns, {"belt": View(south=south, north=north)})
    assert float(seen["relative_sea_level"][0, 0]) == pytest.approx(expected, rel=1e-6)
    assert float(seen["ocean_floor"][0, 0]) == pytest.approx(0.0, abs=1e-12)
    assert float(seen["seen_area"][0]) == pytest.approx(2.0 * np.pi * 6.371e6**2 * (high - low), rel=1e-9)


def test_a_mask_is_summed_with_the_weights_of_the_grid(problem):
    """Cells west of 180 degrees, against a plain sum over the grid: the products differ by what the grid cannot carry."""
    prepared, ocean, patterns = problem
    mask = xr.where(ocean["lon"] > 180.0, 1.0, 0.0) * xr.ones_like(ocean)
    seen = observed_means(prepared, ocean, patterns, {"west": View(mask=mask)})
    weights = grid_of(ocean).quadrature_weights * ocean.values * mask.transpose("lat", "lon").values
    for name in FIELDS:
        plain = (patterns[name].values * weights).sum((1, 2)) / weights.sum()
        assert seen[name].values[0] == pytest.approx(plain, rel=1e-3)


def test_a_mask_and_a_belt_hold_together(problem):
    """A full mask cut at 66 degrees, where a cell of 2 degrees ends: the band by nodes, to the grid's own accuracy."""
    prepared, ocean, patterns = problem
    views = {"cells": View(mask=xr.ones_like(ocean), south=-66.0, north=66.0), "nodes": View(south=-66.0, north=66.0)}
    seen = observed_means(prepared, ocean, patterns, views)
    for name in FIELDS:
        assert seen[name].values[0] == pytest.approx(seen[name].values[1], rel=5e-3)
    assert seen["seen_area"].values[0] == pytest.approx(seen["seen_area"].values[1], rel=2e-3)


def test_gauges_are_points(problem):
    prepared, ocean, patterns = problem
    sites = mf.read_sites("data_small/coasts.csv")
    seen = observed_means(prepared, ocean, patterns, {"gauges": View(gauges=sites)})
    expected = mf.at_sites(patterns, sites)
    for name in FIELDS:
        assert seen[name].values[0] == pytest.approx(expected[name].mean("site").values, rel=1e-12)
    assert np.isnan(seen["seen_area"].values[0])


def test_the_open_ocean_keeps_its_distance(problem):
    """Cells seen are those of the sea farther than 500 km from any cell of land, counted one by one for a few of them."""
    prepared, ocean, patterns = problem
    seen = observed_means(
        prepared, ocean, patterns, {"open": View(away_from_land=500.0), "near": View(away_from_land=1.0)}
    )
    assert seen["seen_area"].values[0] < 0.9 * seen["seen_area"].values[1]
    lat, lon = np.deg2rad(np.meshgrid(ocean["lat"], ocean["lon"], indexing="ij"))
    land = ocean.values < 0.5
    count = 0.0
    for row, column in np.argwhere(~land)[::7]:
        cosine = np.sin(lat[row, column]) * np.sin(lat[land]) + np.cos(lat[row, column]) * np.cos(lat[land]) * np.cos(
            lon[row, column] - lon[land]
        )
        if np.arccos(np.clip(cosine.max(), -1.0, 1.0)) * 6371.0 > 500.0:
            count += ocean.values[row, column] * grid_of(ocean).quadrature_weights[row, 0]
    assert seen["seen_area"].values[0] == pytest.approx(7.0 * count * 6.371e6**2, rel=0.03)


def test_a_satellite_sees_too_little_of_greenlands_ice(problem):
    """The sea floor sinks under the water: 8 % of all ice's rise, 1993 to 2014 (Frederikse et al. 2017, from memory)."""
    seen = observed_means(*problem, {"altimeter": View(south=-66.0, north=66.0), **ALL})
    floor = seen["ocean_floor"].sel(view=["ocean"]).values
    assert floor[0, 0] == pytest.approx(-0.08, abs=0.03)
    # under West Antarctic loss the floor of the seas around it rises by nearly as much
    assert -0.03 < floor[0, 1] < 0.0


def test_what_cannot_be_used_is_refused(problem):
    prepared, ocean, patterns = problem
    sites = mf.read_sites("data_small/coasts.csv")
    cases = [
        (View(south=10.0, north=10.0), InputError, "must have south below north, got 10 and 10"),
        (View(south=-95.0), InputError, "must be a latitude from -90 to 90, got -95"),
        (View(gauges=sites, north=66.0), InputError, "has gauges and an area"),
        (View(away_from_land=1e4), InputError, "a distance from 0 to 3000 km"),
        (View(mask=xr.zeros_like(ocean)), InputError, "'it' sees no ocean"),
        (View(mask=2.0 * xr.ones_like(ocean)), GridError, "between 0 and 1, got 2 to 2"),
        (View(mask=mf.ocean_fraction(3.0)), GridError, "must have the ocean's own lat and lon"),
    ]
    for view, kind, words in cases:
        with pytest.raises(kind, match=words):
            observed_means(prepared, ocean, patterns, {"it": view})
    with pytest.raises(GridError, match="Pass the ocean it was prepared from"):
        observed_means(prepared, mf.ocean_fraction(3.0), patterns, ALL)
    with pytest.raises(InputError, match="holds no sea_surface_coefficients"):
        observed_means(prepared, ocean, patterns.drop_vars("sea_surface_coefficients"), ALL)
    with pytest.raises(InputError, match="views: name at least one"):
        observed_means(prepared, ocean, patterns, {})
    with pytest.raises(InputError, match="gauges"):
        observed_means(prepared, ocean, patterns, {"it": View(gauges=pd.DataFrame())})
