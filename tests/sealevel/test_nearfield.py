"""The near field: a disc against a direct sum of twenty thousand degrees and against the half-space; refusals and flags."""

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import shapely
from numpy.polynomial import legendre

import massfingerprint as mf
from massfingerprint.earth.frames import in_frame
from massfingerprint.errors import InputError
from massfingerprint.sealevel.nearfield import _gridded, add_near_field, near_field

A, LAT, LON = 6.371e6, 65.0, -150.0
KM = np.array([0.0, 12.0, 20.0, 50.0, 250.0])
SITES = pd.DataFrame({"site": [f"{d:g} km" for d in KM], "lat": LAT - np.rad2deg(KM / 6371.0), "lon": LON})


@pytest.fixture(scope="module")
def problem(love):
    ocean = mf.ocean_fraction(0.5)
    prepared = mf.prepare_solver(ocean, love, max_degree=256)
    outline = mf.disc("disc", LAT, LON, 10.0)
    return prepared, outline, mf.spread_mass(outline, ocean)


def disc_shape(radius_km, degrees):
    """Degree weights (degrees + 1,) of one gigatonne on a disc, by the exact integral of P_l over it, kg m-2 times 2."""
    degree, edge = np.arange(degrees + 1.0), np.cos(radius_km / 6371.0)
    legendre_at = np.empty(degrees + 2)
    legendre_at[:2] = 1.0, edge
    for n in range(1, degrees + 1):
        legendre_at[n + 1] = ((2 * n + 1) * edge * legendre_at[n] - n * legendre_at[n - 1]) / (n + 1)
    shape = np.zeros(degrees + 1)
    shape[1:] = 0.5 * (legendre_at[:degrees] - legendre_at[2 : degrees + 2])
    return 1e12 / (2.0 * np.pi * A**2 * (1.0 - edge)) * shape / (2.0 * degree + 1.0)


def direct_sum(weights, radius_km, *, degrees=20_000):
    """Field (site,) in mm per Gt on a disc, degree by degree: w continued as w_last + (tail of 1/l) beyond the given ones."""
    return 1e3 * legendre.legval(np.cos(KM / 6371.0), 3.0 * weights * disc_shape(radius_km, degrees))


def test_horizontal_motion_beside_a_disc_is_that_of_twenty_thousand_degrees(problem, love):
    """South and east of a disc of 10 km, at 12 to 250 km: within 1 % of a sum with Love numbers of all degrees."""
    prepared, outline, load = problem
    long = in_frame(mf.love_numbers(max_degree=20_000), "CM")
    weights = 3.0 * long["l_load"].values / love.attrs["mean_density"] * disc_shape(10.0, 20_000)
    angle = KM / 6371.0
    away = -1e3 * np.sin(angle) * legendre.legval(np.cos(angle), legendre.legder(weights))
    turn = np.deg2rad(np.array([180.0, 90.0]))  # sites south of the disc, sites east of it
    for azimuth in turn:
        phi = np.deg2rad(LAT)
        sine = np.sin(phi) * np.cos(angle) + np.cos(phi) * np.sin(angle) * np.cos(azimuth)
        lon = LON + np.rad2deg(
            np.arctan2(np.sin(azimuth) * np.sin(angle) * np.cos(phi), np.cos(angle) - np.sin(phi) * sine)
        )
        sites = pd.DataFrame({"site": SITES["site"], "lat": np.rad2deg(np.arcsin(sine)), "lon": lon})
        near = near_field(prepared, outline, load, sites)
        held = _gridded(prepared, load.isel(source=0), sites, "CM") * 1e3
        north, east = (near[f"bedrock_{n}"].values[0] + held[row] for n, row in (("north", 2), ("east", 3)))
        # direction from the disc on to the site, seen at the site
        back = np.arctan2(
            np.cos(phi) * np.sin(np.deg2rad(LON - sites["lon"])),
            np.cos(np.arcsin(sine)) * np.sin(phi) - sine * np.cos(phi) * np.cos(np.deg2rad(LON - sites["lon"])),
        )
        here = slice(1, None)
        np.testing.assert_allclose(
            north[here], (-np.cos(back) * away)[here], rtol=0.01, atol=0.01 * abs(away[here]).min()
        )
        np.testing.assert_allclose(
            east[here], (-np.sin(back) * away)[here], rtol=0.01, atol=0.01 * abs(away[here]).min()
        )
        assert np.hypot(north[0], east[0]) < 0.01 * np.abs(away).max()  # nothing in the middle, by symmetry


def continued(love, degrees=20_000):
    """h' and k' in CM to a high degree: the table, then the 1/l approach to the half-space."""
    table, degree = in_frame(love, "CM"), np.arange(degrees + 1.0)
    h, k = np.empty(degrees + 1), np.empty(degrees + 1)
    h[:2049], k[:2049] = table["h_load"], table["k_load"]
    limit = love.attrs["h_load_limit"]
    h[2049:] = limit + 2048 * (h[2048] - limit) / degree[2049:]
    k[2049:] = 2048 * k[2048] / degree[2049:]
    return h, k


def test_a_disc_of_ten_kilometres_is_that_of_twenty_thousand_degrees(problem, love):
    """Direct elastic part at 0, 12, 20, 50, 250 km within 1 % (0.4 % seen; the direct sum itself ripples at the disc's edge)."""
    prepared, outline, load = problem
    near = near_field(prepared, outline, load, SITES)
    held = _gridded(prepared, load.isel(source=0), SITES, "CM") * 1e3
    h, k = continued(love)
    density = love.attrs["mean_density"]
    np.testing.assert_allclose(near["bedrock_up"].values[0] + held[1], direct_sum(h / density, 10.0), rtol=0.01)
    expected = direct_sum((1.0 + k - h) / density, 10.0)
    np.testing.assert_allclose(near["relative_sea_level"].values[0] + held[0], expected, rtol=0.01)
    assert near["near_field"].values.all()
    assert near["resolved"].values.all()
    assert (np.abs(near["bedrock_up_step"]) < 1e-3 * np.abs(near["bedrock_up"] + 1e-9)).all()


def test_it_matters_where_the_solver_is_blind(problem):
    """At the disc's centre the solver at degree 256 sees a fifth of the uplift; at 250 km it is within a few per cent."""
    prepared, outline, load = problem
    patterns = mf.solve_fingerprints(prepared, load, outputs=("relative_sea_level", "sea_surface", "bedrock_up"))
    plain = mf.at_sites(patterns, SITES)
    whole = add_near_field(plain, near_field(prepared, outline, load, SITES))
    ratio = (plain["bedrock_up"] / whole["bedrock_up"]).values[0]
    assert ratio[0] < 0.3
    assert ratio[-1] == pytest.approx(1.0, abs=0.2)
    np.testing.assert_allclose(
        whole["relative_sea_level"], whole["sea_surface"] - whole["bedrock_up"], rtol=0, atol=1e-12
    )
    np.testing.assert_allclose(whole["bedrock_up"] - plain["bedrock_up"], whole["bedrock_up_near_field"], atol=1e-15)
    assert whole["resolved"].values.all()
    np.testing.assert_array_equal(whole["bedrock_up_tapered"], whole["bedrock_up"])


def test_the_half_space_disc(love):
    """Disc of 20 km, 1 m of water, every h' at its limit -6.216: 2 (1 - nu^2) p a / E = 5.30 mm at the centre (elasticity)."""
    flat = love.copy(deep=True)
    flat["h_load"][:] = love.attrs["h_load_limit"]
    ocean = mf.ocean_fraction(1.0)
    outline = mf.disc("disc", LAT, LON, 20.0)
    load = mf.spread_mass(outline, ocean)
    prepared = mf.prepare_solver(ocean, flat, max_degree=64, water_density=1.0)  # such an Earth holds no more
    centre = SITES.iloc[:1]
    near = near_field(prepared, outline, load, centre, reference_frame="CE")
    held = _gridded(prepared, load.isel(source=0), centre, "CE")[1] * 1e3
    gigatonnes = 2.0 * np.pi * A**2 * (1.0 - np.cos(20.0 / 6371.0)) * 1000.0 / 1e12
    down = -(near["bedrock_up"].values[0, 0] + held[0]) * gigatonnes
    assert down == pytest.approx(5.30, abs=0.02)


def test_one_outline_of_many_polygons_and_sites_inside_and_outside(problem, love):
    """Two halves of a square are the square; a site inside, one outside, one across the date line from the other half."""
    ocean, prepared = mf.ocean_fraction(0.5), problem[0]
    halves = shapely.union_all([shapely.box(178.0, 66.0, 180.0, 68.0), shapely.box(-180.0, 66.0, -178.0, 68.0)])
    whole = gpd.GeoDataFrame({"source": ["square"]}, geometry=[halves], crs="EPSG:4326")
    load = mf.spread_mass(whole, ocean, allow_ocean=True)
    sites = pd.DataFrame(
        {"site": ["in west", "in east", "out"], "lat": [67.0, 67.0, 65.5], "lon": [179.0, -179.0, 180.0]}
    )
    near = near_field(prepared, whole, load, sites)
    assert near["distance_to_outline"].values[0, :2].tolist() == [0.0, 0.0]
    assert near["distance_to_outline"].values[0, 2] == pytest.approx(0.5 * 111.2, rel=0.01)
    held = _gridded(prepared, load.isel(source=0), sites, "CM") * 1e3
    level = near["relative_sea_level"].values[0] + held[0]
    assert level[0] == pytest.approx(level[1], rel=1e-3)
    assert level[0] > level[2] > 0.0


def test_far_sites_get_nothing_and_coarse_outlines_are_flagged(problem):
    prepared, _, _ = problem
    ocean = mf.ocean_fraction(0.5)
    coarse = gpd.GeoDataFrame(
        {"source": ["coarse"]}, geometry=[shapely.box(-152.0, 64.0, -148.0, 66.0)], crs="EPSG:4326"
    )
    sites = pd.DataFrame({"site": ["far", "edge"], "lat": [0.0, 64.02], "lon": [0.0, -151.97]})
    near = near_field(prepared, coarse, mf.spread_mass(coarse, ocean), sites)
    assert near["near_field"].values[0].tolist() == [0, 1]
    assert near["relative_sea_level"].values[0, 0] == 0.0
    assert near["resolved"].values[0].tolist() == [1, 0]


def test_what_does_not_fit_is_refused(problem, love):
    prepared, outline, load = problem
    with pytest.raises(InputError, match="load: must have the sources of the outlines"):
        near_field(prepared, outline, load.assign_coords(source=["other"]), SITES)
    with pytest.raises(InputError, match="within: must be a number of km"):
        near_field(prepared, outline, load, SITES, within=-1.0)
    short = mf.prepare_solver(mf.ocean_fraction(2.0), love.isel(degree=slice(0, 65)), max_degree=32)
    with pytest.raises(InputError, match="degrees to 2048 are needed, got 64"):
        near_field(short, outline, load, SITES)
    near = near_field(prepared, outline, load, SITES)
    values = mf.at_sites(mf.solve_fingerprints(prepared, load), SITES)
    with pytest.raises(InputError, match="near: must be of the same sources, sites and frame"):
        add_near_field(values, near.isel(site=slice(1, None)))
    with pytest.raises(InputError, match="near: must be of the same sources, sites and frame"):
        add_near_field(values.assign_attrs(reference_frame="CF"), near)
