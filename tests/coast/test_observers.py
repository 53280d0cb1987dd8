"""What observers see: exact on the whole ocean, in bands of latitude by closed forms, by masks, gauges and the open ocean."""

from itertools import pairwise

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from numpy.polynomial import legendre

import massfingerprint as mf
from massfingerprint.coast.observers import View, observed_means
from massfingerprint.errors import GridError, InputError, SiteError
from massfingerprint.sealevel.coasts import coast_values
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


@pytest.fixture(scope="module")
def small(love):
    """A disc of ice beside the Davis Strait: solver, ocean, patterns, outline, load."""
    ocean, outlines = mf.ocean_fraction(6.0), mf.disc("ice", 65.5, -48.5, 200.0)
    prepared = mf.prepare_solver(ocean, love, max_degree=16)
    load = mf.spread_mass(outlines, ocean)
    return prepared, ocean, mf.solve_fingerprints(prepared, load, outputs=FIELDS), outlines, load


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
        # by the nodes of a belt: the cap that is left out has 1e-16 of the sphere
        assert seen[name].sel(view="nearly").values == pytest.approx(seen[name].sel(view="ocean").values, rel=1e-12)


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
    values = legendre.legvander(np.array([low, high]), 65)
    expected = prepared.barystatic_per_gigatonne
    for degree in range(1, 65):
        response = 3.0 / (density * (2 * degree + 1.0))
        level = (
            response * ice[degree].real / (1.0 - 1000.0 * response) * np.sqrt((2 * degree + 1.0) / (4.0 * np.pi)) * 1e3
        )
        ends = values[:, degree + 1] - values[:, degree - 1]
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


def test_gauges_are_points_with_tapered_values(problem):
    sites = mf.read_sites("data_small/coasts.csv")
    seen = observed_means(*problem, {"gauges": View(gauges=sites)})
    expected = mf.at_sites(problem[2], sites)
    for name in FIELDS:
        assert seen[name].values[0] == pytest.approx(expected[f"{name}_tapered"].mean("site").values, rel=1e-12)
    assert np.isnan(seen["seen_area"].values[0])
    assert seen["number_of_gauges"].values.tolist() == [len(sites)]


def test_gauges_count_by_their_weight(problem):
    """Weights 3 and 1 are three of one gauge and one of the other; a weight of 0 leaves a gauge out."""
    sites = mf.read_sites("data_small/coasts.csv").iloc[[0, 4, 8]]
    views = {str(n): View(gauges=sites.iloc[[n]]) for n in (0, 1)}
    weighted = observed_means(*problem, {**views, "both": View(gauges=sites.assign(weight=[3.0, 1.0, 0.0]))})
    for name in FIELDS:
        first, second, both = weighted[name].values
        assert both == pytest.approx(0.75 * first + 0.25 * second, rel=1e-12)


def test_gauges_beside_the_ice_have_its_near_field(small):
    """As coast_values, which the other commands print; and the parts still add to the ratio."""
    prepared, ocean, patterns, outlines, load = small
    sites = pd.DataFrame({"site": ["beside", "far"], "lat": [64.17, 1.26], "lon": [-51.72, 103.84]})
    view = {"it": View(gauges=sites)}
    seen = observed_means(prepared, ocean, patterns, view, outlines=outlines, load=load)
    expected = coast_values(prepared, outlines, load, sites, outputs=FIELDS)
    for name in FIELDS:
        assert seen[name].values[0] == pytest.approx(expected[name].mean("site").values, rel=1e-9)
    plain = observed_means(prepared, ocean, patterns, view)
    # a few degrees cannot carry the uplift beside the ice
    assert abs(plain["bedrock_up"].values / seen["bedrock_up"].values - 1.0).max() > 0.1
    assert (1.0 + seen["sampling"] + seen["ocean_floor"]).values == pytest.approx(
        seen["ratio_sea_surface"].values, abs=1e-12
    )


def test_belts_add_to_the_whole(problem):
    """Means weighted by the area of three belts that touch; the nodes are exact, so to rounding."""
    edges = [-90.0, -41.3, 12.7, 90.0]
    belts = {f"{low}": View(south=low, north=high) for low, high in pairwise(edges)}
    seen = observed_means(*problem, {**ALL, **belts})
    area = seen["seen_area"].values
    assert area[1:].sum() == pytest.approx(area[0], rel=1e-12)
    for name in FIELDS:
        values = seen[name].values
        scale = np.abs(values * area[:, None]).max()
        assert (values[1:] * area[1:, None]).sum(axis=0) == pytest.approx(values[0] * area[0], abs=1e-12 * scale)


def test_a_mask_may_have_its_cells_in_another_order(problem):
    """North first, longitudes from another start: the same cells, so the same numbers to the last digits."""
    ocean = problem[1]
    mask = ((ocean["lat"] > 10.0) & (ocean["lon"] < 100.0)) * xr.ones_like(ocean)
    other = mask.roll(lon=37, roll_coords=True).isel(lat=slice(None, None, -1))
    seen = observed_means(*problem, {"own": View(mask=mask), "other": View(mask=other.transpose("lon", "lat"))})
    for name in FIELDS:
        assert seen[name].values[1] == pytest.approx(seen[name].values[0], rel=1e-12)


def test_an_ocean_in_another_order_is_the_same_ocean(small, love):
    """Latitude north first and longitudes from -180 leave means by nodes and by cells alone."""
    first, load = small[1], small[4]
    other = (
        first.assign_coords(lon=(first["lon"] + 180.0) % 360.0 - 180.0).sortby("lon").isel(lat=slice(None, None, -1))
    )
    views = {"belt": View(south=-50.0, north=60.0), "open": View(south=-50.0, north=60.0, away_from_land=900.0)}
    prepared = mf.prepare_solver(other, love, max_degree=16)
    turned = observed_means(prepared, other, mf.solve_fingerprints(prepared, load, outputs=FIELDS), views)
    plain = observed_means(*small[:3], views)
    for name in (*FIELDS, "seen_area"):
        assert turned[name].values == pytest.approx(plain[name].values, rel=1e-9)


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
    for row, column in np.argwhere(~land)[::23]:
        cosine = np.sin(lat[row, column]) * np.sin(lat[land]) + np.cos(lat[row, column]) * np.cos(lat[land]) * np.cos(
            lon[row, column] - lon[land]
        )
        if np.arccos(np.clip(cosine.max(), -1.0, 1.0)) * 6371.0 > 500.0:
            count += ocean.values[row, column] * grid_of(ocean).quadrature_weights[row, 0]
    assert seen["seen_area"].values[0] == pytest.approx(23.0 * count * 6.371e6**2, rel=0.03)


def test_a_satellite_sees_too_little_of_greenlands_ice(problem):
    """The sea floor sinks under the water: 8 % of all ice's rise, 1993 to 2014 (Frederikse et al. 2017, from memory)."""
    seen = observed_means(*problem, {"altimeter": View(south=-66.0, north=66.0), **ALL})
    floor = seen["ocean_floor"].sel(view=["ocean"]).values
    assert floor[0, 0] == pytest.approx(-0.08, abs=0.03)
    # under West Antarctic loss the floor of the seas around it rises by nearly as much
    assert -0.03 < floor[0, 1] < 0.0


def test_a_belt_whose_little_ocean_is_ripple_is_refused(small):
    """South of 84 S the ocean cut at degree 29 is four times that of its cells; south of 80 S they agree within 5 %."""
    prepared, ocean, patterns = small[:3]
    with pytest.raises(InputError, match="degree 16 cannot tell the little ocean in 'it'"):
        observed_means(prepared, ocean, patterns, {"it": View(south=-90.0, north=-84.0)})
    assert observed_means(prepared, ocean, patterns, {"it": View(south=-90.0, north=-80.0)})["seen_area"][0] > 0.0


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
        (View(mask=mf.ocean_fraction(3.0)), GridError, "60 x 120 cells, the ocean 90 x 180; they must have the same"),
        (View(mask=ocean.assign_coords(lon=ocean["lon"] + 0.5)), GridError, "they must have the same"),
        (View(mask=ocean.values), GridError, r"must be a DataArray \(lat, lon\)"),
        (View(south=-90.0, north=-86.0), InputError, "'it' sees no ocean"),
        (View(gauges=sites.assign(weight=-1.0)), SiteError, "weight must be a number of 0 or more, got -1"),
        (View(gauges=sites.assign(weight=0.0)), SiteError, "every weight is 0"),
        ((-66.0, 66.0), InputError, "'it' must be a View, got tuple"),
    ]
    for view, kind, words in cases:
        with pytest.raises(kind, match=words):
            observed_means(prepared, ocean, patterns, {"it": view})
    with pytest.raises(GridError, match="ocean: is another one than the solver was prepared from"):
        observed_means(prepared, mf.ocean_fraction(3.0), patterns, ALL)
    with pytest.raises(GridError, match="ocean: is another one than the solver was prepared from"):
        observed_means(prepared, ocean.assign_coords(lon=(ocean["lon"] + 90.0) % 360.0), patterns, ALL)
    with pytest.raises(InputError, match="outlines, load: must be given together"):
        observed_means(prepared, ocean, patterns, ALL, outlines=mf.regions("greenland"))
    with pytest.raises(InputError, match="patterns: end at degree 10, the solver at 64"):
        observed_means(prepared, ocean, patterns.isel(coefficient=slice(0, 66)), ALL)
    with pytest.raises(InputError, match="holds no sea_surface_coefficients"):
        observed_means(prepared, ocean, patterns.drop_vars("sea_surface_coefficients"), ALL)
    with pytest.raises(InputError, match="views: name at least one"):
        observed_means(prepared, ocean, patterns, {})
    with pytest.raises(InputError, match="gauges"):
        observed_means(prepared, ocean, patterns, {"it": View(gauges=pd.DataFrame())})
