"""Geocentre, Stokes coefficients, J2, pole and length of day per gigatonne, and as rates with errors."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import massfingerprint as mf
from massfingerprint.errors import InputError, UnitsError
from massfingerprint.sealevel.series import sea_level_rates, sea_level_series
from massfingerprint.sealevel.whole_earth import EARTH_NUMBERS, earth_numbers, pole_direction

MASS = 5.9722e24  # kg


@pytest.fixture(scope="module")
def problem(love):
    ocean = mf.ocean_fraction(2.0)
    prepared = mf.prepare_solver(ocean, love, max_degree=32)
    outlines = pd.concat(
        [mf.disc("greenland_like", 72.0, -40.0, 700.0), mf.disc("antarctica_like", -78.0, -100.0, 700.0)]
    )
    load = mf.spread_mass(outlines, ocean, allow_ocean=True)
    patterns = mf.solve_fingerprints(prepared, load, outputs=("surface_load", "bedrock_up"), tolerance=1e-12)
    return prepared, patterns


@pytest.fixture(scope="module")
def numbers(problem):
    return earth_numbers(*problem)


def test_the_centre_of_mass_rests_in_its_own_frame(numbers):
    for axis in "xyz":
        assert numbers[f"geocentre_{axis}"].sel(frame="CM").values == pytest.approx(np.zeros(2), abs=1e-18)


def test_in_ce_it_is_the_moment_of_the_load_over_the_mass_of_the_earth(numbers, problem):
    """Whole load, ice and water, summed over the cells of the grid: sum of r dm / M."""
    from massfingerprint.sphere.grids import grid_of  # noqa: PLC0415

    field = problem[1]["surface_load"]
    weights = grid_of(field).quadrature_weights * 6.371e6**2
    lat, lon = np.deg2rad(np.meshgrid(field["lat"], field["lon"], indexing="ij"))
    vector = {"x": np.cos(lat) * np.cos(lon), "y": np.cos(lat) * np.sin(lon), "z": np.sin(lat)}
    density = problem[0].love.attrs["mean_density"]
    mass = 4.0 / 3.0 * np.pi * 6.371e6**3 * density
    assert mass == pytest.approx(MASS, rel=2e-3)
    for axis, part in vector.items():
        expected = (field.values * weights * part).sum((1, 2)) * 6.371e6 / mass * 1e3
        assert numbers[f"geocentre_{axis}"].sel(frame="CE").values == pytest.approx(expected, rel=1e-9)


def test_frames_differ_by_degree_one_of_the_love_numbers(numbers, love):
    shift = (float(love["h_load"][1]) + 2.0 * float(love["l_load"][1])) / 3.0
    ratio = numbers["geocentre_z"].sel(frame="CF") / numbers["geocentre_z"].sel(frame="CE")
    assert ratio.values == pytest.approx(np.full(2, 1.0 - shift), rel=1e-12)
    high = numbers["stokes"].where(numbers["stokes"]["degree"] > 1, 0.0)
    assert np.array_equal(high.sel(frame="CM"), high.sel(frame="CF"))


def test_degree_one_of_the_gravity_field_is_the_centre_of_mass(numbers):
    """Fully normalised: C10 = z / (sqrt(3) a), C11 = x / (sqrt(3) a), S11 = y / (sqrt(3) a)."""
    stokes = numbers["stokes"].sel(frame="CF")
    first = stokes["degree"] == 1
    zonal, tesseral = (int(np.flatnonzero(first & (stokes["order"] == m))[0]) for m in (0, 1))
    scale = np.sqrt(3.0) * 6.371e6 * 1e3
    for axis, part, place in (("z", 0, zonal), ("x", 0, tesseral), ("y", 1, tesseral)):
        expected = numbers[f"geocentre_{axis}"].sel(frame="CF").values / scale
        assert stokes.isel(part=part, coefficient=place).values == pytest.approx(expected, rel=1e-9)


def test_polar_motion_and_degree_two_order_one_keep_the_conventions(problem, numbers, love):
    """IERS Conventions (2010) 6.4: the rotation adds dC21 = -k2 Omega^2 a^3 / (GM sqrt 15) m1; seen by switching it off."""
    patterns = problem[1]
    still = mf.prepare_solver(mf.ocean_fraction(2.0), love, max_degree=32, rotation=False)
    without = earth_numbers(still, patterns)["stokes"]
    added = (numbers["stokes"] - without).sel(frame="CM")
    place = int(np.flatnonzero((added["degree"] == 2) & (added["order"] == 1))[0])
    k2 = float(love["k_tide"][2])
    # -1.333e-9 per arcsec for k2 = 0.3077
    factor = -1.333e-9 * k2 / 0.3077
    m1 = numbers["polar_motion_x"].values * 1e-3
    m2 = -numbers["polar_motion_y"].values * 1e-3
    assert added.isel(part=0, coefficient=place).values == pytest.approx(factor * m1, rel=3e-3)
    assert added.isel(part=1, coefficient=place).values == pytest.approx(factor * m2, rel=3e-3)


def test_j2_and_the_length_of_day_belong_together(problem, numbers, love):
    """Ice from near the poles to the ocean makes the Earth flatter and its day longer; per gigatonne *added* the reverse."""
    assert (numbers["j2"] < 0).all()
    assert (numbers["length_of_day_change"] < 0).all()
    zonal = numbers["stokes"].sel(frame="CM").isel(part=0)
    place = int(np.flatnonzero((zonal["degree"] == 2) & (zonal["order"] == 0))[0])
    assert numbers["j2"].values == pytest.approx(-np.sqrt(5.0) * zonal.isel(coefficient=place).values, rel=1e-14)


def test_the_pole_goes_towards_northern_loss_and_away_from_southern(numbers):
    """Per gigatonne lost. Rule: Adhikari & Ivins 2016; ten degrees for what the ocean adds (Greenland some 5 degrees, computed)."""
    towards = pole_direction(-numbers["polar_motion_x"].values, -numbers["polar_motion_y"].values)
    assert towards[0] == pytest.approx(-40.0, abs=10.0)
    assert towards[1] == pytest.approx(80.0, abs=15.0)
    assert np.hypot(*(float(numbers[f"polar_motion_{a}"][0]) for a in "xy")) == pytest.approx(0.011, rel=0.3)


def test_rates_and_series_carry_units_and_the_errors_of_the_record(numbers):
    time = pd.date_range("2005-01-01", periods=25, freq="91D").to_numpy()
    years = (time - time[0]) / np.timedelta64(1, "D") / 365.25
    ledger = xr.Dataset(
        {
            "mass_change": (("source", "time"), np.stack([-250.0 * years, -100.0 * years]), {"units": "Gt"}),
            "mass_change_sigma": (("source", "time"), np.stack([10.0 + years, 5.0 + 0 * years]), {"units": "Gt"}),
            "error_model": ("source", np.array(["independent", "systematic"], dtype=object)),
        },
        coords={"source": numbers["source"].values, "time": time},
        attrs={"quantity": "cumulative", "reference_epoch": "2005-01-01"},
    )
    rates = sea_level_rates(numbers, ledger, windows={"all": ("2005-01-01", "2012-01-01")}, fields=EARTH_NUMBERS)
    expected = numbers["j2"].values @ np.array([-250.0, -100.0])
    assert float(rates["j2_total"][0]) == pytest.approx(expected, rel=1e-9)
    assert float(rates["j2_total_sigma"][0]) > 0.0
    units = {
        "j2_total": "yr-1",
        "geocentre_z_total": "mm yr-1",
        "polar_motion_x": "mas yr-1",
        "stokes_total": "yr-1",
    }
    assert {name: rates[name].attrs["units"] for name in units} == units
    series = sea_level_series(numbers, ledger, fields=EARTH_NUMBERS, keep_source=True)
    assert series["polar_motion_x"].sizes["time"] == 25
    assert series["j2_total"].attrs["units"] == "1"
    assert series["geocentre_z_total"].sel(frame="CF").values[-1] == pytest.approx(
        float(numbers["geocentre_z"].sel(frame="CF").values @ ledger["mass_change"].values[:, -1]), rel=1e-12
    )


def test_what_cannot_be_used_is_refused(problem):
    prepared, patterns = problem
    with pytest.raises(InputError, match="holds no surface_load_coefficients"):
        earth_numbers(prepared, patterns.drop_vars("surface_load_coefficients"))
    with pytest.raises(InputError, match="the patterns end at degree 32, got 40"):
        earth_numbers(prepared, patterns, stokes_degree=40)
    with pytest.raises(InputError, match="no frame 'XX'"):
        earth_numbers(prepared, patterns, reference_frames=("XX",))
    bare = patterns.copy()
    bare["surface_load_coefficients"] = bare["surface_load_coefficients"].assign_attrs(units="kg m-2")
    with pytest.raises(UnitsError, match="must be in kg m-2 Gt-1"):
        earth_numbers(prepared, bare)
