"""The all-ocean Earth, where every degree has a closed form, in all fields and three frames; loads that stand alone."""

import numpy as np
import pytest
import xarray as xr

from massfingerprint import in_frame, prepare_solver, solve_fingerprints
from massfingerprint.sphere.grids import regular_grid
from massfingerprint.sphere.harmonics import analyse, synthesise
from tests.earth.point_loads import point_load

DEGREE = 40
GRID = regular_grid(3.0)
RESOLVED = 1e-9  # of the largest coefficient of the answer
TOLERANCE = 1e-13


def everywhere(value=1.0):
    values = np.full((GRID.nlat, GRID.nlon), value)
    return xr.DataArray(values, dims=("lat", "lon"), coords={"lat": GRID.latitudes, "lon": GRID.longitudes})


def polar_load(lat=90.0, lon=0.0):
    """Point mass cut at degree 40, 1 Gt, as a field that the grid resolves."""
    return synthesise(point_load(lat, lon, DEGREE), GRID).assign_attrs(units="kg m-2")


def rigid(love):
    return xr.zeros_like(love).assign_attrs(love.attrs)


def legendre_series(pattern):
    """Coefficients of P_l of a zonal field: C_l0 sqrt((2l+1) / 4 pi)."""
    coefficients = pattern["relative_sea_level_coefficients"]
    zonal = coefficients.values[0, : DEGREE + 1]
    return zonal * np.sqrt((2 * np.arange(DEGREE + 1) + 1) / (4 * np.pi))


def mean_of(water_density):
    return -1e12 / (water_density * 4 * np.pi * 6.371e6**2)


def test_rigid_without_the_attraction_of_the_water(love):
    """S / S_mean = 1 - 3 (rho_w/rho_e)(1/(2 sin(theta/2)) - 1): Woodward 1888; Farrell & Clark 1976 (from memory).

    1/(2 sin(theta/2)) = sum of P_l. Tiny water density: S minus its mean tends to T_l I_l.
    """
    density = 1e-6
    prepared = prepare_solver(everywhere(), rigid(love), max_degree=DEGREE, rotation=False, water_density=density)
    series = legendre_series(solve_fingerprints(prepared, polar_load(), tolerance=TOLERANCE))
    mean = mean_of(density)
    expected = mean * np.concatenate([[1.0], np.full(DEGREE, -3 * density / love.attrs["mean_density"])])
    np.testing.assert_allclose(series[1:], expected[1:], rtol=0, atol=RESOLVED * abs(expected[1]))
    assert series[0] == pytest.approx(mean, rel=1e-12)


def test_rigid_with_the_attraction_of_the_water(love):
    """S / S_mean = 1 - x sum_l>=1 (2l+1)/((2l+1) - x) P_l(cos theta), x = 3 rho_w / rho_e (derived; exact)."""
    prepared = prepare_solver(everywhere(), rigid(love), max_degree=DEGREE, rotation=False)
    series = legendre_series(solve_fingerprints(prepared, polar_load(), tolerance=TOLERANCE))
    l = np.arange(DEGREE + 1)  # noqa: E741
    x = 3 * 1000.0 / love.attrs["mean_density"]
    expected = mean_of(1000.0) * np.where(l == 0, 1.0, -x * (2 * l + 1) / (2 * l + 1 - x))
    np.testing.assert_allclose(series, expected, rtol=0, atol=RESOLVED * np.abs(expected).max())


def response(love, degree, order, kind, frame, rotation):
    """Independent of the package's response: written from the equations, constants and all."""
    table = in_frame(love, frame)
    h, k = table["h_load"].values[degree], table["k_load"].values[degree]
    out = 3 * {"geoid": 1 + k, "bedrock_up": h}[kind] / (love.attrs["mean_density"] * (2 * degree + 1))
    k_load, k_tide, h_tide = (float(love[name][2]) for name in ("k_load", "k_tide", "h_tide"))
    tide = {"geoid": 1 + k_tide, "bedrock_up": h_tide}[kind]
    base = (7.292115e-5) ** 2 * 6.371e6**6 * (1 + k_load) / love.attrs["surface_gravity"] * tide
    if rotation:
        out[(degree == 2) & (order == 1)] += base * 4 * np.pi / 15 / (2.630e35 * (1 - k_tide / 0.9382))
        out[(degree == 2) & (order == 0)] -= base * 4 / 9 * 4 * np.pi / 5 / 8.0365e37
    out[degree == 0] = 0.0
    return out


@pytest.mark.parametrize("rotation", [False, True])
@pytest.mark.parametrize("frame", ["CE", "CM", "CF"])
def test_elastic_earth_in_all_fields_and_frames(love, rotation, frame):
    """Each degree closed: S_l = T_l I_l / (1 - rho_w T_l), R added at degree 2; then geoid, bedrock and sea surface of
    L = I + rho_w S (derived; exact)."""
    load = polar_load(52.0, 35.0)
    ice = analyse(load, max_degree=DEGREE)
    degree, order = ice["degree"].values, ice["order"].values
    prepared = prepare_solver(everywhere(), love, max_degree=DEGREE, rotation=rotation)
    names = ("relative_sea_level", "sea_surface", "geoid", "bedrock_up")
    found = solve_fingerprints(prepared, load, outputs=names, reference_frame=frame, tolerance=TOLERANCE)

    geoid, land = (response(love, degree, order, kind, frame, rotation) for kind in ("geoid", "bedrock_up"))
    sea = geoid - land
    expected = {"relative_sea_level": sea * ice.values / (1 - 1000 * sea)}
    expected["relative_sea_level"][:, 0] = -ice.values[:, 0] / 1000
    whole = ice.values + 1000 * expected["relative_sea_level"]
    expected["geoid"], expected["bedrock_up"] = geoid * whole, land * whole
    expected["sea_surface"] = expected["geoid"].copy()
    expected["sea_surface"][:, 0] += expected["relative_sea_level"][:, 0]
    for name in names:
        values = found[f"{name}_coefficients"].values
        np.testing.assert_allclose(
            values, expected[name], rtol=0, atol=RESOLVED * np.abs(expected[name]).max(), err_msg=name
        )
        grid_values = synthesise(found[f"{name}_coefficients"], GRID)
        np.testing.assert_allclose(found[name], grid_values, rtol=0, atol=1e-12 * float(np.abs(grid_values).max()))


def test_rotation_scalars_of_the_whole_load(love):
    """Polar motion and length of day follow from ice and ocean together: closed form on the all-ocean Earth."""
    load = polar_load(45.0, 0.0)
    ice = analyse(load, max_degree=DEGREE)
    degree, order = ice["degree"].values, ice["order"].values
    found = solve_fingerprints(prepare_solver(everywhere(), love, max_degree=DEGREE), load, tolerance=TOLERANCE)
    sea = response(love, degree, order, "geoid", "CE", True) - response(love, degree, order, "bedrock_up", "CE", True)
    whole = (ice.values / (1 - 1000 * sea))[:, degree == 2]
    k_load, k_tide = float(love["k_load"][2]), float(love["k_tide"][2])
    inertia = -(6.371e6**4) * np.sqrt(4 * np.pi / 15) * whole[0, 1]
    m1 = (1 + k_load) * inertia / (2.630e35 * (1 - k_tide / 0.9382))
    assert float(found["polar_motion_x"]) == pytest.approx(np.rad2deg(m1) * 3.6e6, rel=1e-9)
    assert float(found["polar_motion_y"]) == pytest.approx(0.0, abs=1e-12)
    m3 = (1 + k_load) * 2 / 3 * 6.371e6**4 * np.sqrt(4 * np.pi / 5) * whole[0, 0] / 8.0365e37
    assert float(found["length_of_day_change"]) == pytest.approx(-m3 * 8.64e7, rel=1e-9)


def test_without_rotation_the_scalars_are_zero(love):
    prepared = prepare_solver(everywhere(), love, max_degree=8, rotation=False)
    found = solve_fingerprints(prepared, polar_load(45.0, 0.0))
    assert [float(found[n]) for n in ("polar_motion_x", "polar_motion_y", "length_of_day_change")] == [0.0] * 3


def test_units_of_the_answer(love):
    """kg m-2 gives m, kg m-2 Gt-1 gives mm Gt-1, and 0.1 g cm-2 is 1 kg m-2."""
    prepared = prepare_solver(everywhere(), love, max_degree=12)
    load = polar_load(45.0, 0.0)
    metres = solve_fingerprints(prepared, load)
    per_gt = solve_fingerprints(prepared, load.assign_attrs(units="kg m-2 Gt-1"))
    grams = solve_fingerprints(prepared, (load * 0.1).assign_attrs(units="g cm-2"))
    assert metres["relative_sea_level"].attrs["units"] == "m"
    assert metres["relative_sea_level"].attrs["standard_name"] == "change_in_mean_sea_level_wrt_solid_surface"
    assert per_gt["relative_sea_level"].attrs["units"] == "mm Gt-1"
    assert "standard_name" not in per_gt["relative_sea_level"].attrs
    assert per_gt["polar_motion_x"].attrs["units"] == "mas Gt-1"
    for name in ("relative_sea_level", "relative_sea_level_coefficients"):
        np.testing.assert_allclose(per_gt[name], metres[name] * 1e3, rtol=1e-14)
        np.testing.assert_allclose(grams[name], metres[name], rtol=1e-12, atol=1e-18)
    np.testing.assert_allclose(per_gt["polar_motion_x"], metres["polar_motion_x"], rtol=1e-14)


def test_load_finer_or_coarser_than_the_solution(love):
    """Degrees beyond the load's grid are 0 and said; degrees beyond the solution are cut."""
    prepared = prepare_solver(everywhere(), love, max_degree=80)
    found = solve_fingerprints(prepared, polar_load(45.0, 0.0))
    assert (found.attrs["max_degree"], found.attrs["load_max_degree"]) == (80, 59)
    coefficients = found["relative_sea_level_coefficients"]
    beyond = np.abs(coefficients.values[:, coefficients["degree"].values > DEGREE]).max()
    assert beyond < 1e-12 * float(np.abs(coefficients).max())
    low = solve_fingerprints(prepare_solver(everywhere(), love, max_degree=20), polar_load(45.0, 0.0))
    kept = coefficients[:, coefficients["degree"].values <= 20]
    np.testing.assert_allclose(
        low["relative_sea_level_coefficients"], kept, rtol=0, atol=1e-7 * float(np.abs(kept).max())
    )
