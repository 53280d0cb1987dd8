"""Gigatonnes to millimetres."""

import numpy as np
import pytest

from massfingerprint.errors import InputError
from massfingerprint.mass.barystatic import AR6_GIGATONNES_PER_MILLIMETRE, barystatic, ocean_area_of
from tests.mass.ledgers import make_ledger


def one(mass, sigma, years=(1.0,)):
    return make_ledger(years, {"ice": {"mass": np.asarray(mass, dtype=float), "systematic": sigma}})


@pytest.mark.parametrize(
    ("gigatonnes", "sigma", "millimetres", "spread", "digits", "source"),
    [
        (-2720, 1390, 7.6, 3.9, 1, "IMBIE team 2018, Nature 558:219, Antarctica 1992-2017"),
        (-4890, 456, 13.5, 1.3, 1, "IPCC AR6 ch. 9, 9.4.1.1, Greenland 1992-2020 (very likely 11.4-15.6)"),
        (-6542, 0, 18, 0, 0, "GlaMBIE team 2025, Nature 639:382, glaciers 2000-2023"),
        (-273, 0, 0.75, 0, 2, "GlaMBIE team 2025, per year"),
        (-335, 144, 0.92, 0.39, 2, "Zemp et al. 2019, Nature 568:382, per year, 2006-2016"),
    ],
)
def test_published_pairs(gigatonnes, sigma, millimetres, spread, digits, source):
    """Some factor between 355.6 and 366.4 reproduces every pair to its last digit; ours (361.8) to one unit of it."""
    level = barystatic(one([gigatonnes], sigma))
    unit = 10.0**-digits
    assert float(level["sea_level"][0, 0]) == pytest.approx(millimetres, abs=unit), source
    assert float(level["sea_level_sigma"][0, 0]) == pytest.approx(spread, abs=unit), source
    bounds = [-gigatonnes / (millimetres + s * unit / 2) for s in (1, -1)]
    assert bounds[0] < 366.4
    assert bounds[1] > 355.6


def test_velicogna_wahr_2006():
    """152 +- 80 km3 of ice a year = 0.4 +- 0.2 mm/yr (Science 311:1754, from memory): ice of 917 kg m-3."""
    level = barystatic(one([-152 * 0.917], 80 * 0.917))
    assert round(float(level["sea_level"][0, 0]), 1) == 0.4
    assert round(float(level["sea_level_sigma"][0, 0]), 1) == 0.2


def test_factor_and_area_are_named():
    level = barystatic(one([-361.8], 0.0))
    assert float(level["sea_level"][0, 0]) == pytest.approx(1.0, rel=1e-14)
    assert level.attrs["gigatonnes_per_millimetre"] == 361.8
    assert level.attrs["ocean_area"] == pytest.approx(3.618e14)
    other = barystatic(one([-362.5], 0.0), gt_per_mm=AR6_GIGATONNES_PER_MILLIMETRE)
    assert float(other["sea_level"][0, 0]) == pytest.approx(1.0, rel=1e-14)
    assert ocean_area_of(362.5) == pytest.approx(3.625e14)


def test_total_with_and_without_correlation():
    parts = {
        "a": {"mass": np.array([-361.8]), "systematic": 3.618},
        "b": {"mass": np.array([-723.6]), "independent": 3.618},
    }
    level = barystatic(make_ledger([1.0], parts))
    assert float(level["sea_level_total"][0]) == pytest.approx(3.0)
    assert float(level["sea_level_total_sigma"][0]) == pytest.approx(0.01 * np.sqrt(2))
    same = {name: {"mass": part["mass"], "systematic": 3.618} for name, part in parts.items()}
    tied = barystatic(make_ledger([1.0], same, correlation=[[1, 1], [1, 1]]))
    assert float(tied["sea_level_total_sigma"][0]) == pytest.approx(0.02)


def test_mass_that_does_not_reach_the_sea():
    ledger = make_ledger(
        [1.0], {"a": {"mass": np.array([-361.8]), "systematic": 36.18}, "b": {"mass": np.array([-361.8])}}
    )
    ledger["ocean_reaching_fraction"] = ("source", [0.25, 0.0])
    level = barystatic(ledger)
    assert level["sea_level"].values.ravel() == pytest.approx([0.25, 0.0])
    assert level["sea_level_sigma"].values.ravel() == pytest.approx([0.025, 0.0])
    assert float(level["sea_level_total"][0]) == pytest.approx(0.25)


def test_gaps_stay_gaps():
    ledger = make_ledger(
        [1.0, 2.0], {"a": {"mass": np.array([-1.0, np.nan]), "independent": 1.0}, "b": {"mass": np.array([-1.0, -2.0])}}
    )
    level = barystatic(ledger)
    assert np.isnan(level["sea_level"].sel(source="a")[1])
    assert np.isnan(level["sea_level_total"][1])
    assert np.isfinite(level["sea_level_total_sigma"][0])
    assert np.isnan(level["sea_level_total_sigma"][1])


@pytest.mark.parametrize("factor", [0.0, 361800.0, "361.8", np.nan])
def test_impossible_factors(factor):
    with pytest.raises(InputError, match="gt_per_mm: must be a number of Gt per mm between 300 and 420"):
        barystatic(one([-1.0], 0.0), gt_per_mm=factor)


def test_impossible_fraction():
    ledger = one([-1.0], 0.0)
    ledger["ocean_reaching_fraction"] = ("source", [1.5])
    with pytest.raises(InputError, match=r"of 'ice' must lie between 0 and 1, got 1\.5"):
        barystatic(ledger)
