"""Published rates: every row reproduces its paper's gigatonnes and millimetres with a factor the paper can have used."""

import numpy as np
import pytest

from massfingerprint.errors import InputError
from massfingerprint.mass.published import published_rates, published_rows, published_sets

ROWS = published_rows()
LOWEST, HIGHEST = 355.6, 366.4  # Gt per mm that rounding admits over all published pairs (computed from the pairs)


def decimals(value):
    return len(f"{value:.6f}".rstrip("0").partition(".")[2])


@pytest.mark.parametrize("position", list(ROWS.index[ROWS["sea_level"].notna() & ROWS["mass"].notna()]))
def test_gigatonnes_and_millimetres_belong_together(position):
    """|Gt / factor - mm| <= half a unit of the last printed digit for some factor from 355.6 to 366.4, half-widths too."""
    row = ROWS.loc[position]
    half = 0.5 * 10.0 ** -decimals(row["sea_level"])
    smallest, largest = -row["mass"] / (row["sea_level"] + half), -row["mass"] / (row["sea_level"] - half)
    assert smallest <= HIGHEST
    assert largest >= LOWEST
    if np.isfinite(row["sea_level_upper"]):
        spread = 0.5 * (row["sea_level_upper"] - row["sea_level_lower"])
        room = 10.0 ** -decimals(row["sea_level_upper"])
        assert row["mass_half_width"] / HIGHEST - room <= spread <= row["mass_half_width"] / LOWEST + room


@pytest.mark.parametrize("position", list(ROWS.index[ROWS["mass"].isna()]))
def test_millimetres_alone_come_with_their_factor(position):
    row = ROWS.loc[position]
    assert row["factor"] == 362.5  # IPCC AR6 WGI ch. 9, footnote 3
    assert row["sea_level_lower"] <= row["sea_level"] <= row["sea_level_upper"]
    assert "own factor" in row["assumption"]


def test_both_sheets_together():
    """21.0 +- 1.9 mm over 1992-2020 (Otosaka et al. 2023): 261 Gt a year for 29 years, errors of rates kept for the whole span."""
    rates = published_rates("otosaka 2023")
    total = -rates["mass_rate"].sum() * 29
    assert LOWEST < total / 21.0 < HIGHEST
    assert np.sqrt((rates["mass_rate_sigma"] ** 2).sum()) * 29 / 361.8 == pytest.approx(1.9, abs=0.35)


def test_ar6_components_and_their_sum():
    """13.8 + 10.8 + 6.1 + 7.8 mm in 25 years; 0.55, 0.43, 0.25, 0.31 mm/yr (AR6 Table 9.5)."""
    rates = published_rates("ar6 1993-2018").set_index("source")["mass_rate"] / -362.5
    for source, value in {"glaciers": 0.55, "greenland": 0.43, "antarctica": 0.25, "land_water": 0.31}.items():
        assert rates[source] == pytest.approx(value, abs=0.0061)
    very_likely = published_rates("ar6 1993-2018").set_index("source")["mass_rate_sigma"]["glaciers"] * 25 / 362.5
    assert very_likely == pytest.approx(3.8 / 1.6449, rel=1e-3)


@pytest.mark.parametrize(
    ("by_region", "whole"), [("glambie 2025 by region", "glambie 2025"), ("zemp 2019 by region", "zemp 2019")]
)
def test_shares_add_to_the_published_total(by_region, whole):
    """An assumption, marked as one: shares follow RGI 7.0 areas, sum to the total, errors fully shared."""
    parts, total = published_rates(by_region), published_rates(whole)
    assert parts["mass_rate"].sum() == pytest.approx(total["mass_rate"].sum(), abs=1e-3)
    assert parts["mass_rate_sigma"].sum() == pytest.approx(total["mass_rate_sigma"].sum(), abs=1e-3)
    assert parts["assumption"].str.contains("RGI 7.0").all()
    assert len(parts) == 19
    alaska = parts.set_index("source")["mass_rate"]["glaciers_01"] / parts["mass_rate"].sum()
    assert alaska == pytest.approx(86708 / 706744, rel=1e-3)


def test_every_row_is_cited_and_ordered():
    assert (ROWS["citation"] != "").all()
    assert ROWS["doi"].str.match(r"^10\.\d+/").all()
    assert (ROWS["time_end"] > ROWS["time_start"]).all()
    assert not ROWS.duplicated(["set", "source"]).any()
    assert set(published_sets()["set"]) == set(ROWS["set"])


def test_unknown_set():
    with pytest.raises(InputError, match=r"set: no set of published rates named 'otosaka'\. Did you mean otosaka 2023"):
        published_rates("otosaka")
