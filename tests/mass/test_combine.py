"""Aligning, rebasing and summing ledgers: values and errors against draws and hand-derived rules."""

import numpy as np
import pytest

from massfingerprint.errors import InputError
from massfingerprint.mass.combine import align, rebase, sum_sources
from massfingerprint.mass.covariance import covariance
from tests.mass.ledgers import draws, make_ledger

YEARS = np.linspace(-2.0, 6.0, 9)


def transformed(ledger, place):
    """Covariance of x(t) - x(epoch) from the covariance of x: C_tu - C_te - C_eu + C_ee."""
    c = covariance(ledger, "ice").values
    return c - c[:, [place]] - c[[place]] + c[place, place]


@pytest.mark.parametrize("place", [2, 4, 8])
@pytest.mark.parametrize("part", [{"independent": 1.0 + 0.1 * YEARS**2}, {"random_walk": 2.0 * np.sqrt(np.abs(YEARS))}])
def test_rebasing_is_exact_for_independent_and_random_walk(part, place):
    """Any epoch, on either side of the old one: every entry of the covariance, 1e-12."""
    ledger = make_ledger(YEARS, {"ice": {"mass": YEARS**3, **part}})
    moved = rebase(ledger, ledger["time"].values[place])
    np.testing.assert_allclose(covariance(moved, "ice"), transformed(ledger, place), rtol=0, atol=1e-9)
    np.testing.assert_allclose(moved["mass_change"][0], YEARS**3 - YEARS[place] ** 3, rtol=0, atol=1e-12)
    assert float(moved["mass_change_sigma"][0, place]) == 0.0


def test_rebasing_a_growing_systematic_error_is_exact_on_one_side():
    ledger = make_ledger([0.0, 1.0, 2.0, 4.0], {"ice": {"systematic": np.array([0.0, 1.0, 2.0, 4.0])}})
    moved = rebase(ledger, ledger["time"].values[0])
    np.testing.assert_allclose(covariance(moved, "ice"), transformed(ledger, 0), atol=1e-12)
    late = rebase(ledger, ledger["time"].values[2])
    np.testing.assert_allclose(np.diag(covariance(late, "ice")), np.diag(transformed(ledger, 2)), atol=1e-12)
    assert "lost" in late.attrs["rebased"]


def test_rebased_sigmas_against_draws():
    """20 000 draws of all three errors together: 2 %."""
    source = {"independent": 1.5, "systematic": np.abs(YEARS), "random_walk": np.sqrt(np.abs(YEARS))}
    ledger = make_ledger(YEARS, {"ice": source})
    errors = draws(ledger, 20_000, seed=5)[:, 0]
    moved = rebase(ledger, ledger["time"].values[6])
    spread = (errors - errors[:, [6]]).std(axis=0)
    np.testing.assert_allclose(moved["mass_change_sigma"][0], spread, rtol=0.02)


def test_rebasing_needs_a_value_there():
    ledger = make_ledger(
        [0.0, 1.0], {"a": {"mass": np.array([0.0, np.nan]), "independent": 1.0}, "b": {"independent": 1.0}}
    )
    with pytest.raises(InputError, match="epoch: 'a' has no value at 2000-12-31; its nearest time is 2000-01-01"):
        rebase(ledger, ledger["time"].values[1])
    with pytest.raises(InputError, match="epoch: must be ISO dates"):
        rebase(ledger, "then")


def test_aligning_takes_what_is_there_and_nothing_else():
    mass = np.array([1.0, np.nan, 3.0])
    ledger = make_ledger([0.0, 1.0, 2.0], {"ice": {"mass": mass, "independent": np.array([1.0, 2.0, 3.0])}})
    found = align(ledger, ["2000-01-01", "2000-12-31", "2001-06-01", "2002-01-02"], tolerance_days=2.0)
    np.testing.assert_array_equal(found["mass_change"][0], [1.0, np.nan, np.nan, 3.0])
    np.testing.assert_array_equal(found["mass_change_sigma"][0], [1.0, np.nan, np.nan, 3.0])
    strict = align(ledger, ["2002-01-03"], tolerance_days=0.5)
    assert np.isnan(strict["mass_change"]).all()
    with pytest.raises(InputError, match="times: must hold at least one time and ascend"):
        align(ledger, ["2002-01-01", "2001-01-01"])


def test_children_sum_to_their_parent():
    """Independent sources in quadrature; fully correlated ones in a line; a gap in one is a gap in the sum."""
    parts = {
        "a": {"mass": np.array([-1.0, -2.0]), "systematic": 3.0},
        "b": {"mass": np.array([-4.0, np.nan]), "systematic": 4.0},
    }
    apart = sum_sources(make_ledger([0.0, 1.0], parts), {"whole": ["a", "b"]})
    np.testing.assert_array_equal(apart["mass_change"], [[-5.0, np.nan]])
    np.testing.assert_allclose(apart["mass_change_sigma"], [[5.0, np.nan]])
    tied = sum_sources(make_ledger([0.0, 1.0], parts, correlation=[[1, 1], [1, 1]]), {"whole": ["a", "b"]})
    assert float(tied["mass_change_sigma"][0, 0]) == pytest.approx(7.0)
    assert tied.attrs["summed"] == "whole = a + b"


def test_wrong_members():
    ledger = make_ledger([0.0], {"a": {"independent": 1.0}})
    with pytest.raises(InputError, match=r"members: of 'whole': no source 'b' in the ledger"):
        sum_sources(ledger, {"whole": ["b"]})
    with pytest.raises(InputError, match="must name at least one source, each once"):
        sum_sources(ledger, {"whole": ["a", "a"]})
