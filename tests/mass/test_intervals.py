"""Intervals in and out, asymmetric bounds, rounding for people."""

import numpy as np
import pytest
from scipy.stats import norm

from massfingerprint.errors import InputError
from massfingerprint.mass.intervals import INTERVALS, from_sigma, interval_factor, shown, sigma_of_bounds, to_sigma

SHARES = {"66 %": 0.66, "90 %": 0.90, "95 %": 0.95, "likely": 0.66, "very likely": 0.90}


@pytest.mark.parametrize(("name", "share"), SHARES.items())
def test_factors_are_normal_quantiles(name, share):
    assert interval_factor(name) == pytest.approx(norm.ppf((1 + share) / 2), rel=1e-14)


@pytest.mark.parametrize("name", INTERVALS)
def test_round_trip(name):
    values = np.array([0.0, 1.0, 7.5, np.nan])
    np.testing.assert_allclose(to_sigma(from_sigma(values, name), name), values, rtol=1e-15)


def test_greenland_range_of_ar6():
    """4890 [4140-5640] Gt very likely (IPCC AR6 ch. 9, 9.4.1.1): sigma 456 Gt; the bounds are symmetric."""
    sigma = sigma_of_bounds(4890.0, 4140.0, 5640.0, "very likely")
    assert sigma == pytest.approx(750 / 1.6448536, rel=1e-6)
    assert sigma == pytest.approx(to_sigma(750.0, "very likely"), rel=1e-12)


def test_asymmetric_bounds_keep_their_width():
    assert sigma_of_bounds(10.0, 8.0, 16.0, "1 sigma") == 4.0


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: to_sigma(1.0, "99 %"), "interval: no interval '99 %'"),
        (lambda: to_sigma(-1.0, "90 %"), "half_width: must be 0 or more, got -1"),
        (lambda: from_sigma([-2.0, 1.0], "90 %"), "sigma: must be 0 or more, got -2"),
        (lambda: sigma_of_bounds(1.0, 2.0, 3.0, "90 %"), "in the order lower, central, upper, got 2, 1, 3"),
        (lambda: shown({"a": 1.0}, 2.0, decimals=1), "total: must be the sum of the parts, 1, got 2"),
    ],
)
def test_wrong_arguments(call, message):
    with pytest.raises(InputError, match=message):
        call()


def test_parts_that_add_after_rounding_get_no_footnote():
    assert shown({"a": 1.21, "b": 2.32}, 3.53, decimals=1) == ({"a": "1.2", "b": "2.3"}, "3.5", "")


def test_parts_that_do_not_add_get_a_footnote():
    parts, total, footnote = shown({"a": 1.24, "b": 2.24}, 3.48, decimals=1)
    assert (parts, total) == ({"a": "1.2", "b": "2.2"}, "3.5")
    assert footnote == "Parts do not add to the total because each is rounded on its own."


def test_no_minus_zero():
    assert shown({"a": -0.01}, -0.01, decimals=1)[:2] == ({"a": "0.0"}, "0.0")
