"""The table of a ledger."""

import numpy as np
import pytest

from massfingerprint.mass.summary import sentence, summarise
from tests.mass.ledgers import make_ledger

YEARS = np.arange(0.0, 20.5, 0.5)
SOURCES = {
    "a": {"mass": -100.0 * YEARS, "systematic": 2.0 * YEARS},
    "b": {"mass": -20.0 * YEARS, "systematic": 3.0 * YEARS},
}


@pytest.fixture
def table():
    return summarise(make_ledger(YEARS, SOURCES), interval="90 %")


def row(table, source):
    return table[table["source"] == source].iloc[0]


def test_values_by_hand(table):
    """20 years at 100 and 20 Gt/yr; systematic rate errors of 2 and 3 Gt/yr; 90 % is 1.645 sigma."""
    assert row(table, "a")["change"] == pytest.approx(-2000.0)
    assert row(table, "a")["rate"] == pytest.approx(-100.0)
    assert row(table, "a")["rate_half_width"] == pytest.approx(2.0 * 1.6448536, rel=1e-6)
    assert row(table, "total")["change"] == pytest.approx(-2400.0)
    assert row(table, "total")["change_half_width"] == pytest.approx(20.0 * np.hypot(2, 3) * 1.6448536, rel=1e-6)
    assert row(table, "total")["sea_level"] == pytest.approx(2400.0 / 361.8)
    assert row(table, "total")["sea_level_ar6"] == pytest.approx(2400.0 / 362.5)
    assert row(table, "total")["sea_level_rate"] == pytest.approx(120.0 / 361.8)
    assert row(table, "total")["values"] == 41


def test_correlated_sources(table):
    tied = summarise(make_ledger(YEARS, SOURCES, correlation=[[1, 1], [1, 1]]), interval="90 %")
    assert row(tied, "total")["change_half_width"] == pytest.approx(20.0 * 5.0 * 1.6448536, rel=1e-6)
    assert row(tied, "a")["change_half_width"] == pytest.approx(row(table, "a")["change_half_width"])


def test_mass_that_stays_on_land_counts_as_mass_not_as_sea_level():
    ledger = make_ledger(YEARS, SOURCES)
    ledger["ocean_reaching_fraction"] = ("source", [1.0, 0.0])
    found = summarise(ledger)
    assert row(found, "total")["change"] == pytest.approx(-2400.0)
    assert row(found, "total")["sea_level"] == pytest.approx(2000.0 / 361.8)
    assert row(found, "b")["sea_level"] == 0.0


def test_a_source_without_values_leaves_no_total():
    sources = {**SOURCES, "b": {"mass": np.where(YEARS < 10, np.nan, -YEARS), "independent": 1.0}}
    found = summarise(make_ledger(YEARS, sources), windows={"early": ("2000-01-01", "2005-01-01")})
    assert np.isnan(row(found, "b")["change"])
    assert np.isnan(row(found, "total")["rate"])
    assert "do not share the window" in sentence(found, interval="1 sigma", gt_per_mm=361.8)


def test_sentence(table):
    assert sentence(table, interval="90 %", gt_per_mm=361.8) == (
        "Between 2000-01-01 and 2020-01-01 the 2 mass sources together lost 2400 +- 119 Gt (90 %), +6.6 +- 0.3 mm of global-mean "
        "(barystatic) sea level at 361.8 Gt per mm; the mean rate is -120 +- 6 Gt/yr, +0.332 +- 0.016 mm/yr."
    )
