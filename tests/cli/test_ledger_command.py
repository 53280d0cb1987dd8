"""``massfingerprint ledger`` as a user types it."""

import json

import pandas as pd
import pytest

from massfingerprint.cli import main

ROWS = [f"{year}-01-01,{source},{rate * (year - 2000)},{sigma * (year - 2000)},systematic" for source, rate, sigma in
        (("greenland", -100.0, 5.0), ("west_antarctica", -50.0, 4.0)) for year in range(2000, 2011)]  # fmt: skip
HEADER = "time,source,mass_change [Gt],mass_change_sigma [Gt],error_model\n"


@pytest.fixture
def record(tmp_path):
    path = tmp_path / "mass.csv"
    path.write_text(HEADER + "\n".join(ROWS) + "\n")
    return str(path)


def test_table_and_sentence(record, capsys):
    """Ten years at 100 and 50 Gt/yr: 1500 Gt, 4.15 mm at 361.8, 4.14 at 362.5; 5 and 4 Gt/yr in quadrature over ten years."""
    assert main(["ledger", record]) == 0
    text = capsys.readouterr().out
    assert "-1000 +- 50" in text
    assert "-1500 +- 64" in text
    assert "+4.15 +- 0.18" in text
    assert "+4.14 +- 0.18" in text
    assert "lost 1500 +- 64 Gt (1 sigma)" in text
    assert "+-: 1 sigma." in text
    assert "Mass change: negative = loss." in text
    assert "362.5 (AR6)" in text


def test_interval_window_and_factor(record, capsys):
    arguments = [
        "ledger",
        record,
        "--interval",
        "95 %",
        "--window",
        "first half=2000-01-01/2005-01-01",
        "--gt-per-mm",
        "362.5",
    ]
    assert main(arguments) == 0
    text = capsys.readouterr().out
    assert "first half" in text
    assert "-500 +- 49" in text  # 5 years times 5 Gt/yr times 1.96
    assert "(95 %)" in text
    assert "at 362.5 Gt per mm" in text


def test_json_holds_unrounded_numbers(record, capsys):
    assert main(["ledger", record, "--json"]) == 0
    answer = json.loads(capsys.readouterr().out)
    total = next(row for row in answer["rows"] if row["source"] == "total")
    assert total["change"] == pytest.approx(-1500.0)
    assert total["sea_level"] == pytest.approx(1500 / 361.8)
    assert answer["interval"] == "1 sigma"


@pytest.mark.parametrize(("style", "mark"), [("--markdown", "|---"), ("--latex", r"\toprule")])
def test_other_styles(record, capsys, style, mark):
    assert main(["ledger", record, style]) == 0
    text = capsys.readouterr().out
    assert mark in text.replace(" ", "")
    assert "-1500" in text


def test_csv_file(record, tmp_path, capsys):
    target = tmp_path / "out.csv"
    assert main(["ledger", record, "--csv", str(target)]) == 0
    table = pd.read_csv(target)
    assert table["source"].tolist() == ["greenland", "west_antarctica", "total"]
    assert "Table written to" in capsys.readouterr().err


def test_preview_computes_nothing(record, capsys):
    assert main(["ledger", record, "--preview"]) == 0
    text = capsys.readouterr().out
    assert "understood as cumulative mass change in Gt" in text
    assert "systematic" in text
    assert "2010-01-01" in text
    assert "[mm]" not in text


def test_published_sets(capsys):
    assert main(["ledger", "published"]) == 0
    assert "Otosaka" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("extra", "message"),
    [
        (["--window", "2000"], "--window: must be START/END or NAME=START/END in ISO dates, got '2000'"),
        (["--window", "2005-01-01/2001-01-01"], "must end after it starts"),
        (["--interval", "99 %"], "interval: no interval '99 %'"),
        (["--gt-per-mm", "3.6"], "gt_per_mm: must be a number of Gt per mm between 300 and 420"),
        (["--error-model", "noisy"], "noisy"),
    ],
)
def test_wrong_options(record, capsys, extra, message):
    assert main(["ledger", record, *extra]) == 1
    captured = capsys.readouterr()
    assert message in captured.err
    assert captured.err.count("\n") == 1


def test_wrong_files(tmp_path, capsys):
    assert main(["ledger", str(tmp_path / "none.csv")]) == 1
    assert "there is no such file" in capsys.readouterr().err
    assert main(["ledger", "published", "nothing like it"]) == 1
    assert capsys.readouterr().err.count("\n") == 1


def test_the_same_ice_twice_is_refused_until_one_is_dropped(record, tmp_path, capsys):
    path = tmp_path / "twice.csv"
    path.write_text(
        HEADER
        + "\n".join(ROWS)
        + "\n"
        + "\n".join(row.replace("west_antarctica", "antarctica") for row in ROWS[11:])
        + "\n"
    )
    assert main(["ledger", str(path)]) == 1
    assert "'west_antarctica' and 'antarctica' both cover" in capsys.readouterr().err
    assert main(["ledger", str(path), "--drop", "antarctica"]) == 0
    assert "-1500 +- 64" in capsys.readouterr().out


def test_yearly_values_have_no_seasonal_rate(record, capsys):
    assert main(["ledger", record, "--seasonal"]) == 0
    text = capsys.readouterr().out
    assert "lost 1500 +- 64 Gt" in text
    assert "too few values for a rate" in text
    assert "nan" not in text


def test_correlated_sources(record, tmp_path, capsys):
    """50 and 40 Gt fully correlated: 90 instead of 64."""
    table = tmp_path / "correlation.csv"
    table.write_text("source,greenland,west_antarctica\ngreenland,1,1\nwest_antarctica,1,1\n")
    assert main(["ledger", record, "--correlation", str(table)]) == 0
    assert "lost 1500 +- 90 Gt" in capsys.readouterr().out
