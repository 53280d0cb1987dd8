"""Rotation, gravity and the response per degree: absolute numbers, signs, and the IERS pole-tide coefficient."""

import numpy as np
import pytest
import xarray as xr

from massfingerprint.earth.response import (
    coefficient_factors,
    degree_factors,
    gravity_coefficients,
    rotational_factors,
)
from massfingerprint.earth.rotation import centrifugal_factors, length_of_day_change, polar_motion, rotation_vector
from massfingerprint.errors import InputError
from tests.earth.point_loads import point_load
from tests.published import absolute_numbers as published

TWO_PERCENT = 0.02


def vector_of(love, lat, lon, gigatonnes):
    load = point_load(lat, lon, 2, gigatonnes)
    return rotation_vector(load.values[:, [2, 4, 5]], love)


@pytest.mark.parametrize(("lon", "component"), [(0.0, 0), (90.0, 1)])
def test_pole_moves_towards_northern_loss(love, lon, component):
    vector = vector_of(love, 45.0, lon, -1.0) * 206264806.247
    assert vector[component] == pytest.approx(published.POLAR_MOTION_45N, rel=TWO_PERCENT)
    assert vector[1 - component] == pytest.approx(0.0, abs=1e-12)


def test_iers_axes(love):
    """x_p = m1 (towards 0 E), y_p = -m2 (towards 90 W)."""
    x, y = polar_motion(vector_of(love, 45.0, 90.0, -1.0))
    assert x == pytest.approx(0.0, abs=1e-12)
    assert y == pytest.approx(-published.POLAR_MOTION_45N, rel=TWO_PERCENT)


@pytest.mark.parametrize(("lat", "lon"), [(60.0, -42.0), (30.0, 100.0), (-75.0, -110.0), (-45.0, 170.0)])
def test_direction_of_the_pole(love, lat, lon):
    """Along the meridian of northern loss, along longitude + 180 for southern loss (Adhikari & Ivins 2016)."""
    vector = vector_of(love, lat, lon, -1.0)
    towards = np.rad2deg(np.arctan2(vector[1], vector[0]))
    expected = lon if lat > 0 else lon + 180.0
    assert (towards - expected + 180.0) % 360.0 - 180.0 == pytest.approx(0.0, abs=1e-9)


@pytest.mark.parametrize(
    ("lat", "milliseconds"), [(0.0, published.LENGTH_OF_DAY_EQUATOR), (90.0, published.LENGTH_OF_DAY_POLE)]
)
def test_length_of_day(love, lat, milliseconds):
    assert length_of_day_change(vector_of(love, lat, 17.0, -1.0)) == pytest.approx(milliseconds, rel=TWO_PERCENT)


def test_gravity_of_a_polar_gigatonne(love):
    square = gravity_coefficients(point_load(90.0, 0.0, 6), love)
    assert square[0, 2, 0] == pytest.approx(published.C20_POLE, rel=TWO_PERCENT)


@pytest.mark.parametrize(("lon", "part"), [(0.0, 0), (90.0, 1)])
def test_gravity_of_a_mid_latitude_gigatonne(love, lon, part):
    """Without the rotational deformation: (1 + k'_2) P21(45 N) / (5 M) per kg."""
    square = gravity_coefficients(point_load(45.0, lon, 6), love, rotation=False)
    assert square[part, 2, 1] == pytest.approx(published.C21_45N, rel=TWO_PERCENT)


def test_rotation_turns_the_pole_tide_into_gravity(love):
    """dC21 = -1.333e-9 (m1 + 0.0115 m2), m in arcsec (IERS Conventions (2010) 6.4), k2 = 0.3077 + 0.0036 i.

    A normalisation test: with the real k2 of the convention in the table, -k2 Omega^2 a^3 / (G M sqrt 15) must come out.
    """
    changed = love.copy(deep=True)
    changed["k_tide"][2] = 0.3077
    load = point_load(45.0, 0.0, 6, -1.0)
    with_rotation, without = (gravity_coefficients(load, changed, rotation=r) for r in (True, False))
    m1 = rotation_vector(load.values[:, [2, 8, 13]], changed)[0] * 206264.806247
    per_arcsec = (with_rotation - without)[0, 2, 1] / m1
    # the convention uses a = 6378136.6 m and GM = 3.986004418e14; on the sphere of 6371 km and PREM's mass 0.4 % less
    assert per_arcsec == pytest.approx(-1.333e-9, rel=0.005)


def test_feedback_sizes(love):
    zonal, tesseral = rotational_factors(love, "relative_sea_level")
    degree_two = degree_factors(love, "relative_sea_level")[2]
    assert tesseral == pytest.approx(published.ORDER_ONE_FEEDBACK, rel=TWO_PERCENT)
    assert zonal == pytest.approx(published.ORDER_ZERO_FEEDBACK, rel=TWO_PERCENT)
    assert degree_two == pytest.approx(published.DEGREE_TWO_RESPONSE, rel=TWO_PERCENT)
    assert tesseral / degree_two == pytest.approx(0.444, rel=TWO_PERCENT)


def test_centrifugal_potential_from_its_definition(love):
    """Lambda = Omega^2 a^2 [-(m1 cos lon + m2 sin lon) sin cos - (2/3) m3 P2], evaluated at places from the factors."""
    load = point_load(50.0, 33.0, 2, -3.0)
    m1, m2, m3 = rotation_vector(load.values[:, [2, 4, 5]], love)
    zonal, tesseral = centrifugal_factors(love)
    colatitude, lon = 0.7, 2.1
    s, c = np.sin(colatitude), np.cos(colatitude)
    scale = (7.292115e-5 * 6.371e6) ** 2 / love.attrs["surface_gravity"]
    direct = scale * (-(m1 * np.cos(lon) + m2 * np.sin(lon)) * s * c - 2 / 3 * m3 * (3 * c**2 - 1) / 2)
    y20, y21 = np.sqrt(5 / (16 * np.pi)) * (3 * c**2 - 1), np.sqrt(15 / (4 * np.pi)) * s * c
    cos20, (cos21, sin21) = load.values[0, 2], load.values[:, 4]
    ours = zonal * cos20 * y20 + tesseral * y21 * (cos21 * np.cos(lon) + sin21 * np.sin(lon))
    assert ours == pytest.approx(direct, rel=1e-12)


def test_factors_close(love):
    """Relative sea level is geoid minus bedrock in every frame, rotation included."""
    degree, order = np.array([0, 1, 1, 2, 2, 2, 700]), np.array([0, 0, 1, 0, 1, 2, 3])
    for frame in ("CE", "CM", "CF"):
        sea, geoid, land = (
            coefficient_factors(love, name, degree, order, reference_frame=frame)
            for name in ("relative_sea_level", "geoid", "bedrock_up")
        )
        np.testing.assert_allclose(sea, geoid - land, rtol=0, atol=1e-18)
        assert sea[0] == geoid[0] == land[0] == 0.0


def test_rigid_earth_has_newtons_response(love):
    """All load numbers 0: 3 / (rho_e (2l+1))."""
    rigid = xr.zeros_like(love).assign_attrs(love.attrs)
    l = np.arange(1, 100)  # noqa: E741
    factors = degree_factors(rigid, "relative_sea_level")[1:100]
    np.testing.assert_allclose(factors, 3 / (love.attrs["mean_density"] * (2 * l + 1)), rtol=1e-15)


def test_unknown_field(love):
    with pytest.raises(InputError, match=r"field: no response for 'tilt'. Known: relative_sea_level"):
        degree_factors(love, "tilt")
