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
    independent, shared = np.sqrt((rates["mass_rate_sigma"] ** 2).sum()), rates["mass_rate_sigma"].sum()
    assert independent * 29 / HIGHEST <= 1.9 <= shared * 29 / LOWEST  # the paper's total lies between the two limits


def test_antarctic_parts_make_the_published_whole():
    """IMBIE 2018: 2720 +- 1390 Gt in 25 years; Antarctica -49 +- 67 and -219 +- 43 Gt/yr in its first and last period (memory)."""
    wholes = {
        "imbie 2018 by region": (-2720 / 25, 1390 / 25),
        "imbie 2018 1992-1997": (-49.0, 67.0),
        "imbie 2018 2012-2017": (-219.0, 43.0),
    }
    for name, (rate, sigma) in wholes.items():
        parts = published_rates(name)
        assert parts["mass_rate"].sum() == pytest.approx(rate, abs=2.0)  # three parts and a total, each rounded to 1
        # the same roundings through the root of the sum of squares: 0.5 (1 + sum of sigmas / total)
        room = 0.5 * (1.0 + parts["mass_rate_sigma"].sum() / sigma)
        assert np.sqrt((parts["mass_rate_sigma"] ** 2).sum()) == pytest.approx(sigma, abs=room)


def test_glaciers_since_2000():
    """GlaMBIE 2025: 6542 Gt = 18 mm in 24 years beside 273 Gt/yr."""
    rate = published_rates("glambie 2025")["mass_rate"].item()
    assert -rate * 24 == pytest.approx(6542, abs=0.5 * 24)  # rate rounded to 1 Gt/yr
    assert 6542 / HIGHEST < 18.5
    assert 6542 / LOWEST > 17.5


def test_ar6_components_and_their_sum():
    """13.8 + 10.8 + 6.1 + 7.8 mm in 25 years; 0.55, 0.43, 0.25, 0.31 mm/yr; 71.2 with 32.7 thermal (AR6 Table 9.5)."""
    rates = published_rates("ar6 1993-2018").set_index("source")["mass_rate"] / -362.5
    for source, value in {"glaciers": 0.55, "greenland": 0.43, "antarctica": 0.25, "land_water": 0.31}.items():
        assert rates[source] == pytest.approx(value, abs=0.005 + 0.05 / 25)  # rounding of the rate and of the mm
    assert rates.sum() * 25 == pytest.approx(71.2 - 32.7, abs=0.3)  # six numbers rounded to 0.1
    very_likely = published_rates("ar6 1993-2018").set_index("source")["mass_rate_sigma"]["glaciers"] * 25 / 362.5
    assert very_likely == pytest.approx(3.8 / 1.6449, rel=1e-3)


@pytest.mark.parametrize(
    ("by_region", "whole"),
    [("glambie 2025 by region", "glambie 2025"), ("zemp 2019 by region", "zemp 2019")],
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


def test_ar6_glaciers_shared_over_regions_leave_out_05_and_19():
    parts = published_rates("ar6 1993-2018 ice by region").set_index("source")
    whole = published_rates("ar6 1993-2018").set_index("source")
    numbered = parts[parts.index.str.startswith("glaciers_")]
    assert list(numbered.index) == [f"glaciers_{n:02d}" for n in range(1, 19) if n != 5]
    for name in ("mass_rate", "mass_rate_sigma"):
        assert numbered[name].sum() == pytest.approx(whole.loc["glaciers", name], rel=1e-4)  # five decimals of mm kept
        assert parts.loc["greenland", name] == whole.loc["greenland", name]
    assert numbered["assumption"].str.contains("RGI 7.0").all()
    assert numbered["error_group"].nunique() == 1


def test_every_row_is_cited_and_ordered():
    assert (ROWS["citation"] != "").all()
    assert ROWS["doi"].str.match(r"^10\.\d+/").all()
    assert (ROWS["time_end"] > ROWS["time_start"]).all()
    assert not ROWS.duplicated(["set", "source"]).any()
    assert set(published_sets()["set"]) == set(ROWS["set"])


def test_unknown_set():
    with pytest.raises(InputError, match=r"set: no set of published rates named 'otosaka'\. Did you mean otosaka 2023"):
        published_rates("otosaka")
