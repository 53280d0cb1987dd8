"""Degree 1 in CE, CM, CF, CL, CH."""

import numpy as np
import pytest
import xarray as xr

from massfingerprint import in_frame
from massfingerprint.earth.frames import FRAMES, geocentre_motion
from massfingerprint.errors import InputError
from tests.earth.point_loads import point_load
from tests.published import absolute_numbers as published


def degree_one(table):
    return [float(table[name][1]) for name in ("h_load", "l_load", "k_load")]


def test_definitions_of_the_frames(love):
    """Blewitt 2003, JGR 108(B2):2103 (formulas from memory)."""
    h, l, _ = degree_one(love)  # noqa: E741
    alpha = {"CE": 0.0, "CM": 1.0, "CL": l, "CH": h, "CF": (h + 2 * l) / 3}
    for frame in FRAMES:
        expected = [h - alpha[frame], l - alpha[frame], -alpha[frame]]
        np.testing.assert_allclose(degree_one(in_frame(love, frame)), expected, rtol=0, atol=1e-15)
        assert in_frame(love, frame).attrs["reference_frame"] == frame


def test_published_degree_one_in_cf(love):
    """k'_1 = +0.027 in CF (Wahr, Molenaar & Bryan 1998, Table 1; 0.0015 as for the other degrees)."""
    assert float(in_frame(love, "CF")["k_load"][1]) == pytest.approx(0.027, abs=0.0015)


@pytest.mark.parametrize("first", FRAMES)
@pytest.mark.parametrize("second", FRAMES)
def test_any_frame_leads_to_any_other(love, first, second):
    there = in_frame(in_frame(love, first), second)
    xr.testing.assert_allclose(there, in_frame(love, second), rtol=0, atol=1e-15)


def test_only_degree_one_moves_and_the_input_stays(love):
    before = love.copy(deep=True)
    moved = in_frame(love, "CM")
    xr.testing.assert_identical(love, before)
    for name in love.data_vars:
        keep = love["degree"].values != 1
        np.testing.assert_array_equal(moved[name].values[keep], love[name].values[keep])


def test_meaning_of_the_frames(love):
    """CF: mean displacement of the surface is 0. CM: no degree-1 geoid. CL, CH: no horizontal, no vertical motion."""
    h, l, _ = degree_one(in_frame(love, "CF"))  # noqa: E741
    assert h + 2 * l == pytest.approx(0.0, abs=1e-15)
    assert 1 + degree_one(in_frame(love, "CM"))[2] == 0.0
    assert degree_one(in_frame(love, "CL"))[1] == 0.0
    assert degree_one(in_frame(love, "CH"))[0] == 0.0


def test_mean_displacement_in_cf_vanishes_over_the_sphere(love):
    """Mean along the axis of the degree-1 displacement of a polar load over 4000 bands of equal area; midpoint rule, 1e-7."""
    table = in_frame(love, "CF")
    h, l, _ = degree_one(table)  # noqa: E741
    x = (np.arange(4000) + 0.5) / 2000 - 1.0  # sin(lat), equal areas
    # degree 1 along the polar axis: up h x, northward l cos(lat); the component along the axis
    axial = h * x * x + l * (1 - x * x)
    assert axial.mean() == pytest.approx(0.0, abs=1e-7)  # midpoint rule on 4000 bands


@pytest.mark.parametrize(
    ("frame", "millimetres"), [("CE", published.GEOCENTRE_CE), ("CF", published.GEOCENTRE_CF), ("CM", 0.0)]
)
def test_geocentre_moves_towards_the_load(love, frame, millimetres):
    motion = geocentre_motion(point_load(90.0, 0.0, 4).values, love, frame) * 1e3
    np.testing.assert_allclose(motion, [0.0, 0.0, millimetres], rtol=0.005, atol=1e-12)


@pytest.mark.parametrize(("lat", "lon", "axis"), [(0.0, 0.0, 0), (0.0, 90.0, 1), (90.0, 0.0, 2)])
def test_geocentre_axes(love, lat, lon, axis):
    motion = geocentre_motion(point_load(lat, lon, 6).values, love, "CE")
    assert motion[axis] > 0
    np.testing.assert_allclose(np.delete(motion, axis), 0.0, atol=1e-12 * motion[axis])


def test_unknown_frame(love):
    with pytest.raises(InputError, match=r"frame: no frame 'CX'. Did you mean"):
        in_frame(love, "CX")
