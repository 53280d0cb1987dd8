"""``massfingerprint choices``."""

import csv
import io
import json

import pytest

from massfingerprint.cli import main
from massfingerprint.sealevel import choices
from massfingerprint.sealevel.choices import other_choices

SITES = "site,lat,lon\nnorthern harbour,59,-8\nsouthern harbour,-34,151\n"
RATES = """time_start,time_end,source,mass_rate [Gt yr-1],mass_rate_sigma [Gt yr-1],citation
2000-01-01,2010-01-01,greenland_southeast,-80,5,made up
"""


@pytest.fixture(autouse=True)
def few(monkeypatch):
    """One choice of each kind: all of them are solved in the tests of the table."""
    kept = ("prem_continental", "none", "geocentric", "ice front")

    def some(usual):
        return {key: physics for key, physics in other_choices(usual).items() if key[1] in kept}

    monkeypatch.setattr(choices, "other_choices", some)


@pytest.fixture
def arguments(tmp_path):
    (tmp_path / "sites.csv").write_text(SITES, encoding="utf-8")
    (tmp_path / "rates.csv").write_text(RATES, encoding="utf-8")
    files = ["--rates", str(tmp_path / "rates.csv"), "--sites", str(tmp_path / "sites.csv")]
    return ["choices", *files, "--max-degree", "32", "--spacing", "3", "--quiet"]


def test_table_json_and_csv_agree(arguments, tmp_path, capsys):
    assert main([*arguments, "--csv", str(tmp_path / "out.csv"), "--json"]) == 0
    found = json.loads(capsys.readouterr().out)
    with (tmp_path / "out.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(io.StringIO(file.read())))
    assert [row["choice"] for row in rows] == [row["choice"] for row in found["rows"]]
    assert float(rows[0]["northern harbour [mm yr-1]"]) == pytest.approx(found["rows"][0]["northern harbour [mm yr-1]"])
    assert found["usual [mm yr-1]"]["northern harbour"] < 0.0
    assert "licensed practice decide" in found["caution"]


def test_printed(arguments, capsys):
    assert main([*arguments, "--earth", "prem_oceanic"]) == 0
    captured = capsys.readouterr()
    for word in (
        "as usual",
        "geocentric",
        "ice front",
        "prem_continental",
        "root of squares",
        "Earth prem_oceanic",
        "no error bar",
    ):
        assert word in captured.out
    assert captured.err == ""
    assert max(map(len, captured.out.splitlines())) <= 130


@pytest.mark.parametrize(
    ("more", "message"),
    [
        (["--earth", "moon"], "earth: no Earth named 'moon'"),
        (["--max-degree", "3"], "max_degree: must be a whole number of 4 or more, got 3"),
        (["--period", "20", "--earth", "homogeneous"], "has no quality factors"),
    ],
)
def test_refusals(arguments, more, message, capsys):
    assert main([*arguments, *more]) == 1
    captured = capsys.readouterr()
    assert message in captured.err
    assert captured.err.count("\n") == 1
