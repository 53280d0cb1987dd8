"""Land motion north and east, gravity, the whole load, and water of two densities."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from massfingerprint.earth.response import coefficient_factors
from massfingerprint.earth.rotation import RotationConstants
from massfingerprint.errors import InputError
from massfingerprint.load.ocean import ocean_fraction
from massfingerprint.sealevel.fingerprints import FIELDS, solve_fingerprints
from massfingerprint.sealevel.kernels import apply_kernels, site_kernels
from massfingerprint.sealevel.sites import at_sites
from massfingerprint.sealevel.solver import prepare_solver
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import grid_of

DEGREE = 40
MOTION = ("bedrock_up", "bedrock_north", "bedrock_east")
SITES = pd.DataFrame(
    {"site": ["a", "b", "c", "d"], "lat": [64.1, -33.9, 0.5, 89.0], "lon": [-21.9, 151.2, 103.8, 40.0]}
)


@pytest.fixture(scope="module")
def ocean():
    return ocean_fraction(2.0)


@pytest.fixture(scope="module")
def load(ocean):
    """One gigatonne on two bands of land, north and south."""
    grid = grid_of(ocean)
    lat, lon = np.meshgrid(ocean["lat"], ocean["lon"], indexing="ij")
    cells = np.stack([(lat > 62) & (lon > 300) & (lon < 335), (lat < -70) & (lon > 220) & (lon < 300)]).astype(float)
    mean = (cells * grid.quadrature_weights).sum((1, 2), keepdims=True) * 6.371e6**2
    coords = {"source": ["north", "south"], "lat": ocean["lat"], "lon": ocean["lon"]}
    return xr.DataArray(
        cells / mean * 1e12, dims=("source", "lat", "lon"), coords=coords, attrs={"units": "kg m-2 Gt-1"}
    )


@pytest.fixture(scope="module")
def prepared(ocean, love):
    return prepare_solver(ocean, love, max_degree=DEGREE)


@pytest.fixture(scope="module")
def patterns(prepared, load):
    return solve_fingerprints(prepared, load, outputs=FIELDS, tolerance=1e-13)


@pytest.fixture(scope="module")
def in_frames(prepared, load):
    return {
        frame: solve_fingerprints(prepared, load, outputs=MOTION, reference_frame=frame, tolerance=1e-13)
        for frame in ("CM", "CF", "CE")
    }


def cartesian(values: xr.Dataset) -> np.ndarray:
    """Displacements (source, site, xyz) of up, north and east."""
    phi, lam = np.deg2rad(SITES["lat"].to_numpy()), np.deg2rad(SITES["lon"].to_numpy())
    zero = np.zeros_like(phi)
    up = np.stack([np.cos(phi) * np.cos(lam), np.cos(phi) * np.sin(lam), np.sin(phi)], axis=-1)
    north = np.stack([-np.sin(phi) * np.cos(lam), -np.sin(phi) * np.sin(lam), np.cos(phi)], axis=-1)
    east = np.stack([-np.sin(lam), np.cos(lam), zero], axis=-1)
    parts = zip(MOTION, (up, north, east), strict=True)
    return sum(values[name].transpose("source", "site").values[..., None] * axis for name, axis in parts)


@pytest.mark.parametrize("other", ["CF", "CE"])
def test_frames_differ_by_one_translation_at_all_stations(in_frames, other):
    shift = cartesian(at_sites(in_frames["CM"], SITES)) - cartesian(at_sites(in_frames[other], SITES))
    assert np.abs(shift).max() > 1e-4  # mm per Gt: there is one
    assert shift == pytest.approx(np.broadcast_to(shift[:, :1], shift.shape), abs=1e-10 * np.abs(shift).max())


def test_in_the_centre_of_figure_the_mean_displacement_is_nothing(in_frames):
    """Its definition: the mean of the vector over the sphere is 0 (Blewitt 2003)."""
    grid, found = grid_of(in_frames["CF"]["bedrock_up"]), in_frames["CF"]
    lat, lon = np.deg2rad(np.meshgrid(found["lat"], found["lon"], indexing="ij"))
    z = found["bedrock_up"].values * np.sin(lat) + found["bedrock_north"].values * np.cos(lat)
    x = (
        found["bedrock_up"].values * np.cos(lat) * np.cos(lon)
        - found["bedrock_north"].values * np.sin(lat) * np.cos(lon)
        - found["bedrock_east"].values * np.sin(lon)
    )
    for part in (x, z):
        mean = (part * grid.quadrature_weights).sum((1, 2)) / (4.0 * np.pi)
        assert mean == pytest.approx(np.zeros(2), abs=1e-9 * np.abs(part).max())


def test_horizontal_motion_is_the_gradient_of_its_potential(patterns):
    """Spheroidal: differences of the potential by a small step, in scalar synthesis, give both components."""
    step = 1e-4  # degrees; a centred difference errs by the square of it times the highest degree
    here = at_sites(patterns, SITES)
    rows = patterns[["bedrock_horizontal_coefficients"]].rename(
        bedrock_horizontal_coefficients="potential_coefficients"
    )
    for name, shift in (("bedrock_north", (step, 0.0)), ("bedrock_east", (0.0, step))):
        ends = [
            at_sites(rows, SITES.assign(lat=SITES["lat"] + s * shift[0], lon=SITES["lon"] + s * shift[1]))[
                "potential"
            ].values
            for s in (1.0, -1.0)
        ]
        scale = np.cos(np.deg2rad(SITES["lat"].to_numpy())) if name == "bedrock_east" else 1.0
        slope = (ends[0] - ends[1]) / (2.0 * np.deg2rad(step) * scale)
        assert here[name].values == pytest.approx(slope, abs=1e-6 * np.abs(slope).max())


def test_the_field_on_the_grid_is_that_at_the_sites(patterns):
    lat, lon = float(patterns["lat"][70]), float(patterns["lon"][33])
    here = at_sites(patterns, pd.DataFrame({"site": ["cell"], "lat": [lat], "lon": [lon]}))
    for name in FIELDS:
        cell = patterns[name].sel(lat=lat, lon=lon).values
        assert here[name].values[:, 0] == pytest.approx(cell, rel=1e-9, abs=1e-13 * np.abs(patterns[name]).max().item())


def test_the_horizontal_field_has_no_curl(patterns):
    """The library's decomposition of the vector field into gradient and curl leaves nothing in the curl."""
    import ducc0  # noqa: PLC0415

    grid = grid_of(patterns["bedrock_north"])
    for source in range(2):
        north, east = (grid.to_rings(patterns[name].values[source]) for name in ("bedrock_north", "bedrock_east"))
        field = np.stack([-north, east])
        both = ducc0.sht.analysis_2d(map=field, spin=1, lmax=DEGREE, geometry="F1", phi0=grid.first_azimuth)
        assert np.abs(both[1]).max() < 1e-11 * np.abs(both[0]).max()


def test_the_whole_load_closes_and_is_ice_and_water(patterns, load, ocean, prepared):
    total = patterns["surface_load"]
    assert total.attrs["units"] == "kg m-2 Gt-1"
    held = patterns["surface_load_coefficients"]
    assert held.isel(coefficient=0, part=0).values == pytest.approx(np.zeros(2), abs=1e-12 * np.abs(held).max().item())
    # the low degrees of ice plus water, water = density times the product on the grid
    grid = grid_of(load)
    water = 1.0 * patterns["relative_sea_level"].values * ocean.values  # mm times kg m-3 is 1e-3 of kg m-2 times 1e3
    direct = _transform.analyse(grid.to_rings(load.values + water), 10, grid.first_azimuth)
    kept = _transform.resized(held.values, 10)
    expected = _transform.real_from_complex(direct)
    # the solver cuts the product exactly at its degree, the coarse grid aliases some of it
    assert kept == pytest.approx(expected, abs=2e-3 * np.abs(expected).max())


def test_gravity_on_the_moving_surface_is_that_at_a_fixed_point_less_the_way_up(patterns, love):
    """Free air: -2 g u / a. Nanometres per second squared against millimetres."""
    gradient = 2.0 * love.attrs["surface_gravity"] / love.attrs["radius"] * 1e-3 * 1e9
    expected = patterns["gravity_fixed"] - gradient * patterns["bedrock_up"]
    scale = np.abs(expected).max().item()
    np.testing.assert_allclose(patterns["gravity_surface"].values, expected.values, rtol=0, atol=1e-12 * scale)


def test_gravity_on_the_moving_surface_knows_no_frame(prepared, load):
    there = [
        solve_fingerprints(prepared, load, outputs=("gravity_surface",), reference_frame=frame)[
            "gravity_surface"
        ].values
        for frame in ("CM", "CF")
    ]
    np.testing.assert_allclose(there[0], there[1], rtol=0, atol=1e-12 * np.abs(there[0]).max())


def test_gravity_by_degree(love):
    """n + 1 outside, of load and deformation; gravimetric factor 1 + h - 3 k / 2 of a degree-2 tide (Melchior; from memory)."""
    degree, order = np.array([2, 2, 7]), np.array([2, 1, 3])
    geoid, up = (coefficient_factors(love, name, degree, order, rotation=False) for name in ("geoid", "bedrock_up"))
    g_over_a = love.attrs["surface_gravity"] / love.attrs["radius"]
    fixed = coefficient_factors(love, "gravity_fixed", degree, order, rotation=False)
    assert fixed == pytest.approx((degree + 1) * geoid * g_over_a, rel=1e-12)
    surface = coefficient_factors(love, "gravity_surface", degree, order, rotation=False)
    assert surface == pytest.approx(((degree + 1) * geoid - 2.0 * up) * g_over_a, rel=1e-12)
    turned = coefficient_factors(love, "gravity_surface", degree, order)[1] - surface[1]
    tilt = (coefficient_factors(love, "geoid", degree, order) - geoid)[1] / (1.0 + float(love["k_tide"][2]))
    factor = 1.0 + float(love["h_tide"][2]) - 1.5 * float(love["k_tide"][2])
    assert turned == pytest.approx(-2.0 * factor * tilt * g_over_a, rel=1e-12)
    assert factor == pytest.approx(1.16, abs=0.01)


def test_units_of_a_load_in_metres(prepared, load, patterns):
    plain = load.isel(source=[0]).assign_attrs(units="kg m-2")
    found = solve_fingerprints(prepared, plain, outputs=FIELDS, tolerance=1e-13)
    factors = dict.fromkeys(FIELDS, 1e-3) | {"gravity_fixed": 1e-9, "gravity_surface": 1e-9, "surface_load": 1.0}
    for name, factor in factors.items():
        expected = patterns[name].values[:1] * factor
        np.testing.assert_allclose(found[name].values, expected, rtol=1e-9, atol=1e-12 * np.abs(expected).max())
    assert found["gravity_surface"].attrs["units"] == "m s-2"


@pytest.fixture(scope="module")
def salty(ocean, love):
    return prepare_solver(ocean, love, max_degree=DEGREE, redistributed_density=1027.0)


class TestTwoDensities:
    def test_the_same_density_twice_changes_nothing(self, ocean, love, load, patterns):
        twice = prepare_solver(ocean, love, max_degree=DEGREE, redistributed_density=1000.0)
        found = solve_fingerprints(twice, load, tolerance=1e-13)
        assert np.array_equal(found["relative_sea_level"].values, patterns["relative_sea_level"].values)

    def test_the_mean_is_that_of_fresh_water_and_the_uneven_part_weighs_more(self, salty, load, patterns):
        found = solve_fingerprints(salty, load, outputs=("relative_sea_level", "surface_load"), tolerance=1e-13)
        ocean = _transform.real_from_complex(salty.operator.ocean)
        for answer in (found, patterns):
            mean = (answer["relative_sea_level_coefficients"].values * ocean).sum((1, 2)) / (
                ocean[0, 0] * np.sqrt(4 * np.pi)
            )
            assert mean == pytest.approx(np.full(2, salty.barystatic_per_gigatonne), rel=1e-10)
        change = found["relative_sea_level"] - patterns["relative_sea_level"]
        assert 1e-5 < float(np.abs(change).max()) < 0.05 * float(np.abs(patterns["relative_sea_level"]).max())
        # the equation itself, put together in another way: rho_f O e + rho_s O (S - e)
        mean, fresh, sea = salty.barystatic_per_gigatonne, 1.0, 1.027
        for row in range(2):
            level = _transform.complex_from_real(found["relative_sea_level_coefficients"].values[row])
            uneven = level.copy()
            uneven[0] -= mean * np.sqrt(4 * np.pi)
            product = salty.operator.ocean_load(uneven) / salty.operator.water_density
            grid = grid_of(load)
            ice = _transform.resized(
                _transform.analyse(grid.to_rings(load.values[row]), DEGREE, grid.first_azimuth), DEGREE
            )
            whole = ice + fresh * mean * salty.operator.ocean + sea * product
            held = _transform.complex_from_real(found["surface_load_coefficients"].values[row])
            assert whole == pytest.approx(held, abs=1e-10 * np.abs(held).max())

    def test_kernels_answer_for_two_densities(self, salty, load):
        fields = ("relative_sea_level", "sea_surface", "bedrock_up")
        kernels = site_kernels(salty, SITES.iloc[:2], outputs=fields, tolerance=1e-12)
        found = apply_kernels(kernels, load)
        direct = at_sites(solve_fingerprints(salty, load, outputs=fields, tolerance=1e-12), SITES.iloc[:2])
        for name in fields:
            expected = direct[name].values
            assert found[name].transpose("source", "site").values == pytest.approx(
                expected, abs=1e-9 * np.abs(expected).max()
            )

    def test_a_density_that_is_none_is_refused(self, ocean, love):
        with pytest.raises(InputError, match="redistributed_density: must be a positive number of kg m-3, got -1"):
            prepare_solver(ocean, love, max_degree=DEGREE, redistributed_density=-1.0)


def test_other_rotation_constants_turn_the_pole_more(ocean, love, load, patterns):
    """k_s of a hydrostatic Earth is smaller than the observed one: the axis gives way further."""
    hydrostatic = prepare_solver(ocean, love, max_degree=DEGREE, rotation=RotationConstants(secular_love_number=0.934))
    found = solve_fingerprints(hydrostatic, load)
    ratio = found["polar_motion_x"].values / patterns["polar_motion_x"].values
    k = float(love["k_tide"][2])
    assert ratio == pytest.approx(np.full(2, (1 - k / 0.9382) / (1 - k / 0.934)), abs=2e-3)  # the water answers, too
    with pytest.raises(InputError, match="every constant must be a positive number"):
        prepare_solver(ocean, love, max_degree=DEGREE, rotation=RotationConstants(polar_moment=0.0))
