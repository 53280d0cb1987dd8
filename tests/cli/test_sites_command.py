"""``massfingerprint sites`` as a user types it."""

import csv
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import massfingerprint as mf
from massfingerprint.cli import main

DATA = Path(__file__).parent.parent.parent / "data_small"
RATES, SITES = DATA / "published_rates.csv", DATA / "coasts.csv"
QUICK = ["--max-degree", "64", "--spacing", "1"]


@pytest.fixture(scope="module")
def answer(tmp_path_factory):
    """Printed text and CSV of one run at degree 64."""
    out = tmp_path_factory.mktemp("sites") / "answer.csv"
    return out, main(["sites", "--rates", str(RATES), "--sites", str(SITES), "--csv", str(out), *QUICK])


def test_prints_the_answer(capsys):
    assert main(["sites", "--rates", str(RATES), "--sites", str(SITES), *QUICK]) == 0
    captured = capsys.readouterr()
    text = captured.out
    # 261 Gt/yr over the ocean of the solver; 20 Gt/yr in quadrature
    assert "Global mean (barystatic): +0.719 +- 0.056 mm/yr, 1992-01-01 to 2021-01-01" in text
    assert "1 mm over this ocean is 362.93 Gt (tables often use 361.8)." in text
    assert "Davis Strait landing" in text
    assert "Within 300 km of ice the value has the near field of its outline in it" in " ".join(text.split())
    assert "1 sigma" in text
    assert "For screening only" in text
    assert "Not included: ocean dynamics" in text
    assert "Otosaka et al. 2023" in captured.err
    assert max(len(line) for line in text.splitlines()) <= 160


def test_csv_holds_the_full_numbers(answer):
    path, code = answer
    assert code == 0
    table = pd.read_csv(path)
    assert len(table) == len(mf.read_sites(SITES))
    sources = [
        f"{name} [mm yr-1]" for name in ("greenland", "west_antarctica", "antarctic_peninsula", "east_antarctica")
    ]
    np.testing.assert_allclose(table[sources].sum(axis=1), table["total [mm yr-1]"], rtol=0, atol=1e-14)
    with path.open() as lines:
        assert max(len(cell) for row in csv.reader(lines) for cell in row) > 12


def test_the_range_within_each_source_holds_the_value(answer):
    table = pd.read_csv(answer[0])
    assert (table["total lowest [mm yr-1]"] <= table["total [mm yr-1]"]).all()
    assert (table["total [mm yr-1]"] <= table["total highest [mm yr-1]"]).all()
    for name in ("greenland", "east_antarctica"):
        assert (table[f"{name} lowest [mm yr-1]"] < table[f"{name} highest [mm yr-1]"]).all()


def test_the_chain_by_hand_gives_the_same(answer):
    """Each step called from Python at the same degree: equal to 1e-12 mm/yr."""
    ocean = mf.ocean_fraction(1.0)
    prepared = mf.prepare_solver(ocean, mf.love_numbers(max_degree=2048), max_degree=64)
    names = ("greenland", "west_antarctica", "antarctic_peninsula", "east_antarctica")
    outlines, sites = mf.regions(*names), mf.read_sites(SITES)
    load = mf.spread_mass(outlines, ocean)
    patterns = mf.solve_fingerprints(prepared, load, outputs=("bedrock_up", "relative_sea_level"))
    here = mf.add_near_field(mf.at_sites(patterns, sites), mf.near_field(prepared, outlines, load, sites))
    rates = np.array([-169.0, -82.0, -13.0, 3.0])
    table = pd.read_csv(answer[0])
    total = (here["relative_sea_level_tapered"].values * rates[:, None]).sum(axis=0)
    np.testing.assert_allclose(table["total [mm yr-1]"], total, rtol=0, atol=1e-12)
    sigma = np.sqrt(
        ((here["relative_sea_level_tapered"].values * np.array([9.0, 9.0, 5.0, 15.0])[:, None]) ** 2).sum(axis=0)
    )
    np.testing.assert_allclose(table["total sigma [mm yr-1]"], sigma, rtol=0, atol=1e-12)
    land = (here["bedrock_up_tapered"].values * rates[:, None]).sum(axis=0)
    np.testing.assert_allclose(table["vertical land motion, elastic [mm yr-1]"], land, rtol=0, atol=1e-12)
    ratio = total / (-rates.sum() / prepared.gigatonnes_per_millimetre)
    np.testing.assert_allclose(table["ratio to global mean [1]"], ratio, rtol=0, atol=1e-12)


HEADER = "time_start,time_end,source,mass_rate [Gt yr-1],mass_rate_sigma [Gt yr-1],citation\n"
ROW = "1992-01-01,2021-01-01,greenland,-169,9,somebody\n"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (HEADER + ROW.replace("greenland", "greenlnd"), "no region is called 'greenlnd'. Did you mean greenland"),
        (HEADER + ROW.replace(",9,", ",-9,"), "line 2: mass_rate_sigma is -9; it must be 0 or more"),
        (HEADER + ROW.replace("2021", "1991"), "line 2: time_end must lie after time_start"),
        (HEADER + ROW.replace("2021-01-01", "someday"), "line 2: time_end is 'someday', not an ISO date"),
        (HEADER + ROW.replace("-169", '"-169,5"'), "line 2: mass_rate is '-169,5', not a number. Use a decimal point"),
        (HEADER + ROW + ROW, "line 3: source 'greenland' stands there twice"),
        (HEADER.replace("[Gt yr-1]", "[Gt]") + ROW, "column mass_rate: units must be 'Gt yr-1', got 'Gt'"),
        (HEADER.replace(" [Gt yr-1]", "") + ROW, "column mass_rate: has no units"),
        (HEADER.replace("source", "place") + ROW, "lacks the column source"),
        (HEADER + ROW.replace("greenland", ""), "line 2: source is empty"),
    ],
)
def test_wrong_rates_are_one_line_and_exit_1(tmp_path, capsys, text, message):
    path = tmp_path / "rates.csv"
    path.write_text(text)
    assert main(["sites", "--rates", str(path), "--sites", str(SITES), *QUICK]) == 1
    captured = capsys.readouterr()
    assert captured.out == ""
    assert captured.err.count("\n") == 1
    assert message in captured.err


def test_rates_in_other_units_are_converted(tmp_path, capsys):
    """169e12 kg/yr is 169 Gt/yr."""
    path = tmp_path / "rates.csv"
    path.write_text(HEADER.replace("[Gt yr-1]", "[kg yr-1]") + ROW.replace("-169,9", "-1.69e14,9e12"))
    assert main(["sites", "--rates", str(path), "--sites", str(SITES), *QUICK]) == 0
    assert "+0.466 +- 0.025 mm/yr" in capsys.readouterr().out


def test_missing_files_and_folders(tmp_path, capsys):
    assert main(["sites", "--rates", "nowhere.csv", "--sites", str(SITES)]) == 1
    assert capsys.readouterr().err == (
        "massfingerprint: nowhere.csv: there is no such file. Check the path; it is taken from the current folder.\n"
    )
    target = tmp_path / "no" / "out.csv"
    assert main(["sites", "--rates", str(RATES), "--sites", str(SITES), "--csv", str(target), *QUICK]) == 1
    assert "there is no folder" in capsys.readouterr().err


@pytest.mark.parametrize("arguments", [["sites"], ["nonsense"], ["sites", "--max-degree", "x"]])
def test_wrong_usage_exits_2(arguments, capsys):
    assert main(arguments) == 2
    assert "Error" in capsys.readouterr().err


def test_wrong_spacing(capsys):
    assert main(["sites", "--rates", str(RATES), "--sites", str(SITES), "--spacing", "0.7"]) == 1
    assert "spacing: must be a positive number of degrees that divides 180" in capsys.readouterr().err


def test_a_published_set_of_many_sources(capsys, tmp_path):
    """Nineteen glacier regions: the five largest and the others fit on a row, the file has all."""
    target = tmp_path / "all.csv"
    arguments = ["sites", "--published", "glambie 2025 by region", "--sites", str(SITES), "--csv", str(target), *QUICK]
    assert main(arguments) == 0
    captured = capsys.readouterr()
    # 273 +- 16 Gt/yr: one error, shared by all regions
    assert "Global mean (barystatic): +0.752 +- 0.044 mm/yr" in captured.out
    assert "others" in captured.out
    assert max(len(line) for line in captured.out.splitlines()) <= 180
    assert "GlaMBIE" in captured.err
    table = pd.read_csv(target)
    assert sum(name.startswith("glaciers_") and name.endswith("[mm yr-1]") for name in table.columns) == 19 * 3


@pytest.mark.parametrize("extra", [[], ["--rates", str(RATES), "--published", "otosaka 2023"]])
def test_either_a_file_or_a_published_set(extra, capsys):
    assert main(["sites", "--sites", str(SITES), *extra]) == 1
    assert "rates: give either --rates FILE or --published SET" in capsys.readouterr().err


def test_the_same_ice_twice_is_refused(tmp_path, capsys):
    path = tmp_path / "rates.csv"
    path.write_text(HEADER + ROW + ROW.replace("greenland", "greenland_west"))
    assert main(["sites", "--rates", str(path), "--sites", str(SITES), *QUICK]) == 1
    assert (
        "'greenland' and 'greenland_west' both cover greenland_west, sheet: it would count twice"
        in capsys.readouterr().err
    )


def test_a_published_total_without_an_outline(capsys):
    assert main(["sites", "--published", "glambie 2025", "--sites", str(SITES), *QUICK]) == 1
    assert "'glaciers' has no outline to spread mass over. Choose a set by region." in capsys.readouterr().err
