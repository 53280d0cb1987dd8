"""Green's functions: closed sums, a plain sum of many degrees, the half-space, a second integration for the tail."""

import numpy as np
import pytest
from numpy.polynomial import legendre

from massfingerprint.earth.frames import in_frame
from massfingerprint.earth.green import point_response, point_response_table
from massfingerprint.earth.love import love_numbers
from massfingerprint.errors import InputError
from tests.earth.second_method import load_and_tide

ANGLE = np.deg2rad(np.array([0.05, 0.3, 1.0, 5.0, 30.0, 90.0, 170.0]))
A, MASS = 6.371e6, 1e12


def plain_sum(love, weights, angle, *, degrees=60_000):
    """Sum of w_l P_l, w continued as w_inf + b/l to a high degree, with a smooth cut over its last half, in m per Gt."""
    last = weights.size - 1
    degree = np.arange(degrees + 1.0)
    whole = np.empty(degrees + 1)
    whole[: last + 1] = weights
    limit = {"up": love.attrs["h_load_limit"], "level": 1.0 - love.attrs["h_load_limit"]}
    kind = "up" if weights[last] < 0 else "level"
    whole[last + 1 :] = limit[kind] + last * (weights[last] - limit[kind]) / degree[last + 1 :]
    whole *= 0.5 * (1.0 + np.cos(np.pi * np.clip(2.0 * degree / degrees - 1.0, 0.0, 1.0)))
    whole[0] = 0.0
    scale = 3.0 / love.attrs["mean_density"] * MASS / (4.0 * np.pi * A**2)
    return scale * legendre.legval(np.cos(angle), whole)


@pytest.mark.parametrize("field", ["bedrock_up", "relative_sea_level"])
def test_against_a_plain_sum_of_sixty_thousand_degrees(love, field):
    """The cut of the plain sum leaves 1e-4 of the value from 0.3 degree on, where it runs over 160 waves, 2e-3 at 0.05 degree."""
    table = in_frame(love, "CM")
    weights = table["h_load"].values if field == "bedrock_up" else (1.0 + table["k_load"] - table["h_load"]).values
    got, expected = point_response(love, field, ANGLE), plain_sum(love, weights, ANGLE)
    np.testing.assert_allclose(got[1:], expected[1:], rtol=1e-4, atol=1e-10)
    assert got[0] == pytest.approx(expected[0], rel=2e-3)


def test_horizontally_against_a_plain_sum(love):
    """40 000 degrees of Love numbers, cut smoothly: 1e-3 of the value from 0.3 degree on, 1e-2 at 0.05 degree."""
    long = in_frame(love_numbers(max_degree=40_000), "CM")["l_load"].values
    degree = np.arange(40_001.0)
    weights = long * 0.5 * (1.0 + np.cos(np.pi * np.clip(2.0 * degree / 40_000 - 1.0, 0.0, 1.0)))
    scale = 3.0 / love.attrs["mean_density"] * MASS / (4.0 * np.pi * A**2)
    expected = -scale * np.sin(ANGLE) * legendre.legval(np.cos(ANGLE), legendre.legder(weights))
    got = point_response(love, "bedrock_horizontal", ANGLE)
    np.testing.assert_allclose(got[1:], expected[1:], rtol=1e-3, atol=1e-10)
    assert got[0] == pytest.approx(expected[0], rel=1e-2)
    assert got[0] < 0.0  # towards the load beside it, as Farrell 1972 has it


def test_a_rigid_earth_moves_nothing_and_pulls_by_newton(love):
    """No Love numbers: the geoid of a point mass without its degree 0 is m a / M (1/(2 s) - 1), exactly."""
    rigid = love.copy(deep=True)
    for name in ("h_load", "l_load", "k_load"):
        rigid[name][:] = 0.0
    rigid.attrs["h_load_limit"] = 0.0
    mass = 4.0 / 3.0 * np.pi * A**3 * love.attrs["mean_density"]
    expected = MASS * A / mass * (0.5 / np.sin(0.5 * ANGLE) - 1.0)
    in_ce = point_response(rigid, "geoid", ANGLE, reference_frame="CE")
    np.testing.assert_allclose(in_ce, expected, rtol=1e-11, atol=1e-16)
    assert np.abs(point_response(rigid, "bedrock_up", ANGLE, reference_frame="CE")).max() < 1e-22


def test_beside_the_load_the_earth_is_its_half_space(love):
    """At 10 m the crust answers alone: -g (lambda + 2 mu) / (4 pi mu (lambda + mu) r) per kg (Boussinesq; Farrell 1972)."""
    distance = 10.0
    got = point_response(love, "bedrock_up", np.array([distance / A]))[0]
    expected = love.attrs["h_load_limit"] * 3.0 / love.attrs["mean_density"] / (4.0 * np.pi * A) / distance * MASS
    assert got == pytest.approx(expected, rel=0.005)  # 1/l part of the Love numbers: 7/l at l = a/r


@pytest.mark.parametrize("degree", [3000, 6000])
def test_the_tail_is_that_of_a_second_integration(love, degree):
    """Another route integrates single degrees beyond the table; the tail w_inf + b/l is within 0.1 % of it."""
    h, _, k, *_ = load_and_tide(degree)
    limit, last = love.attrs["h_load_limit"], 2048
    tail = limit + last * (float(love["h_load"][last]) - limit) / degree
    assert tail == pytest.approx(h, rel=1e-3)
    assert float(love["k_load"][last]) * last / degree == pytest.approx(k, rel=5e-3)


def test_half_space_limits_are_approached(love):
    """Farrell's limits from the moduli of the upper crust: h' -6.216, n l' 1.892, n k' -3.057; degree 2048 is within 0.4 %."""
    assert love.attrs["h_load_limit"] == pytest.approx(-6.216, abs=5e-4)
    assert float(love["h_load"][2048]) == pytest.approx(love.attrs["h_load_limit"], rel=2e-3)
    assert 2048 * float(love["l_load"][2048]) == pytest.approx(love.attrs["l_load_limit"], rel=4e-3)
    assert 2048 * float(love["k_load"][2048]) == pytest.approx(love.attrs["k_load_limit"], rel=4e-3)


def test_the_table_follows_the_function(love):
    angle = np.geomspace(2e-6, 3.0, 57)
    spline = point_response_table(love, "bedrock_up")
    expected = np.sin(angle) * point_response(love, "bedrock_up", angle)
    # nodes 0.6 % of the angle apart, waves of degree 2048 in what is interpolated beyond a tenth of a radian
    np.testing.assert_allclose(spline(np.log(angle)), expected, rtol=1e-5, atol=1e-9 * np.abs(expected).max())


def test_a_table_that_ends_early_is_refused():
    with pytest.raises(InputError, match="beside the load degrees to 2048 are needed, got 512"):
        point_response(love_numbers(max_degree=512), "geoid", ANGLE)
