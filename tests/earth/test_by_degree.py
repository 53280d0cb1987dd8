"""Love numbers of all degrees from few integrations, and the tail of a half-space, against every degree integrated."""

import numpy as np
import pytest

from massfingerprint.earth._radial import numbers_at
from massfingerprint.earth.layers import homogeneous
from massfingerprint.earth.love import compute_love_numbers, extend_love_numbers, love_numbers
from massfingerprint.earth.prem import prem
from massfingerprint.errors import InputError

NAMES = ("h_load", "l_load", "k_load", "h_tide", "l_tide", "k_tide")
LOAD = NAMES[:3]


@pytest.fixture(scope="module")
def fast():
    return love_numbers("prem", max_degree=4096)


def test_all_degrees_agree_with_the_plain_way(fast, love):
    """The shipped table is integrated at every degree. 2e-10 of the load numbers: its l' at degree 8 is wrong by 1e-10."""
    for name in LOAD:
        np.testing.assert_allclose(fast[name][:2049], love[name], rtol=2e-10, atol=0, err_msg=name)
    for name in NAMES[3:]:  # tide numbers come out as small differences from 1: 1e-14 of that
        np.testing.assert_allclose(fast[name][:2049], love[name], rtol=1e-10, atol=1e-12, err_msg=name)


def test_between_2048_and_4096(fast):
    degree = np.array([2049.0, 2500.0, 3001.0, 4000.0, 4096.0])
    for name, row in zip(LOAD, numbers_at(prem(), degree), strict=False):
        np.testing.assert_allclose(fast[name].values[degree.astype(int)], row, rtol=1e-10, err_msg=name)


def test_the_tail_agrees_with_integration():
    """1/n law from 4096 on: 1e-6 of the values up to 40000."""
    far = love_numbers("prem", max_degree=40000)
    degree = np.array([4200.0, 6000.0, 10000.0, 20000.0, 40000.0])
    for name, row in zip(NAMES, numbers_at(prem(), degree), strict=True):
        room = {"rtol": 1e-6, "atol": 0.0} if name in LOAD else {"rtol": 0.0, "atol": 1e-9}
        np.testing.assert_allclose(far[name].values[degree.astype(int)], row, err_msg=name, **room)


def test_a_table_is_continued(fast, love):
    longer = extend_love_numbers(fast, 8000)
    assert longer.sizes["degree"] == 8001
    assert extend_love_numbers(fast, 100) is fast
    for name in LOAD:
        assert float(longer[name][8000]) == pytest.approx(
            float(love_numbers("prem", max_degree=8000)[name][8000]), rel=1e-12
        )
    short = extend_love_numbers(love, 4096)
    for name in LOAD:
        np.testing.assert_allclose(short[name], fast[name], rtol=5e-3, err_msg=name)
    bare = love.copy()
    bare.attrs = {}
    with pytest.raises(InputError, match="has no h_load_limit, so it cannot be continued beyond degree 2048"):
        extend_love_numbers(bare, 4096)


def test_where_a_thin_layer_still_matters_the_tail_waits():
    """A soft skin of 500 m: at degree 4096 a wave is 10 km long and feels what lies below."""
    from massfingerprint.earth.layers import EarthModel, Layer  # noqa: PLC0415

    stiff = {"p": (8000.0,), "s": (4500.0,)}
    skin = {"p": (2500.0,), "s": (1000.0,)}
    model = EarthModel(
        "skin", (Layer(0.0, 6.3705e6, (5500.0,), stiff), Layer(6.3705e6, 6.371e6, (2000.0,), skin)), "made up"
    )
    found = compute_love_numbers(model, 9000)
    direct = numbers_at(model, np.array([9000.0]))
    assert float(found["h_load"][9000]) == pytest.approx(direct[0, 0], rel=1e-9)


def test_few_degrees_and_odd_ends():
    model = homogeneous(5500.0, 1.4e11, 2e11)
    for last in (1, 2, 65):
        found, plain = compute_love_numbers(model, last), compute_love_numbers(model, last, every_degree=True)
        for name in NAMES:
            np.testing.assert_allclose(found[name], plain[name], rtol=1e-9, atol=1e-13, err_msg=f"{name} to {last}")


@pytest.mark.parametrize(("degree", "words"), [(0, "1 or more, got 0"), (40001, "at most 40000"), (2.0, "got 2.0")])
def test_degrees_that_cannot_be(degree, words):
    with pytest.raises(InputError, match=words):
        love_numbers("prem", max_degree=degree)
