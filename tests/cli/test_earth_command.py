"""``massfingerprint earth``: list, compute, compare, export, plot."""

import json

import numpy as np
import pandas as pd
import pytest

from massfingerprint.cli import main
from massfingerprint.earth.love import love_numbers
from massfingerprint.earth.response import degree_factors
from massfingerprint.files.netcdf import read_netcdf


def test_list(capsys):
    assert main(["earth", "list"]) == 0
    text = capsys.readouterr().out
    for name in ("prem", "prem_200s", "prem_oceanic", "prem_continental", "homogeneous", "five_layer"):
        assert f"\n{name} " in text
    assert main(["earth", "list", "--json"]) == 0
    rows = json.loads(capsys.readouterr().out)["rows"]
    assert rows[0]["mass [1e24 kg]"] == pytest.approx(5.9722, rel=1e-3)


def test_prints_love_numbers(capsys, love):
    assert main(["earth", "compute", "--degrees", "1,2,10"]) == 0
    captured = capsys.readouterr()
    rows = [line.split() for line in captured.out.splitlines()]
    assert rows[0] == ["degree", "h_load", "l_load", "k_load", "h_tide", "l_tide", "k_tide"]
    assert [row[0] for row in rows[1:]] == ["1", "2", "10"]
    assert float(rows[2][3]) == pytest.approx(float(love["k_load"][2]), abs=5e-9)
    assert "Degree 1 in CE" in captured.err
    assert "fluid from 1221.5 to 3480 km radius" in captured.err


def test_frame_and_period(capsys):
    assert main(["earth", "compute", "--degrees", "1", "--frame", "CM"]) == 0
    assert float(capsys.readouterr().out.split()[-4]) == -1.0
    assert main(["earth", "compute", "prem", "--period", "200", "--degrees", "2", "--json"]) == 0
    found = json.loads(capsys.readouterr().out)["rows"][0]["k_load"]
    assert found == pytest.approx(float(love_numbers("prem_200s", max_degree=2)["k_load"][2]), rel=1e-12)


def test_export_and_read_again(tmp_path, capsys):
    table, layers, file = (str(tmp_path / name) for name in ("love.csv", "layers.csv", "love.nc"))
    assert main(["earth", "export", "prem", table, "--max-degree", "40", "--frame", "CF"]) == 0
    assert main(["earth", "export", "prem", file, "--max-degree", "40"]) == 0
    assert main(["earth", "export", "five_layer", layers, "--layers"]) == 0
    capsys.readouterr()
    assert main(["earth", "compute", table, "--love-frame", "CF", "--degrees", "1,2,40", "--json"]) == 0
    rows = json.loads(capsys.readouterr().out)["rows"]
    shipped = love_numbers(max_degree=40)
    for row in rows:
        for name in ("h_load", "l_load", "k_load", "h_tide", "k_tide"):
            assert row[name] == pytest.approx(float(shipped[name][row["degree"]]), abs=1e-12)
    kept = read_netcdf(file)
    np.testing.assert_array_equal(kept["h_load"], shipped["h_load"])
    assert main(["earth", "compute", layers, "--degrees", "2,20", "--json"]) == 0
    rows = json.loads(capsys.readouterr().out)["rows"]
    direct = love_numbers("five_layer", max_degree=20)
    for row in rows:
        assert row["h_load"] == pytest.approx(float(direct["h_load"][row["degree"]]), rel=1e-6)


def test_compare(tmp_path, capsys):
    figure, csv = tmp_path / "compare.png", tmp_path / "compare.csv"
    words = [
        "earth",
        "compare",
        "prem",
        "prem_oceanic",
        "--degrees",
        "2,100",
        "--figure",
        str(figure),
        "--csv",
        str(csv),
    ]
    assert main(words) == 0
    text = capsys.readouterr().out
    first, second = (
        degree_factors(love_numbers(name, max_degree=100), "relative_sea_level")[100]
        for name in ("prem", "prem_oceanic")
    )
    assert f"({100 * (second / first - 1):+.2f} %)" in text
    assert figure.read_bytes().startswith(b"\x89PNG")
    table = pd.read_csv(csv)
    assert table["prem_oceanic"][100] == pytest.approx(second, rel=1e-9)


def test_plot(tmp_path, capsys):
    assert main(["earth", "plot", str(tmp_path / "love.svg"), "prem", "five_layer"]) == 0
    assert "five_layer" in (tmp_path / "love.svg").read_text(encoding="utf-8")
    assert "love.svg written" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (
            ["compute", "--degrees", "1,two"],
            "--degrees: must be whole numbers of 0 or more separated by commas, got 'two'",
        ),
        (["compute", "--degrees", "-1"], "got '-1'"),
        (["compute", "--degrees", ""], "got ''"),
        (["compute", "--degrees", "50000"], "max_degree: at most 40000"),
        (["compute", "moon"], "earth: no Earth named 'moon'"),
        (["compute", "moon.csv"], "moon.csv"),
        (["compute", "--frame", "XX"], "frame: no frame 'XX'"),
        (["compute", "prem", "--love-frame", "CF"], "only a table of Love numbers has one"),
        (["compare", "prem"], "earths: name at least two, got prem"),
        (["compare", "prem", "prem"], "earths: each only once"),
        (["compare", "prem", "five_layer", "--degrees", "0"], "at least one of 1 or more"),
        (["compare", "prem", "prem_200s", "--published", "otosaka 2023"], "coasts are compared at sites"),
        (["export", "prem", "love.txt"], "must end in .csv or .nc, got 'love.txt'"),
        (["plot", "love.gif"], "must end in .png, .pdf or .svg, got 'love.gif'"),
    ],
)
def test_wrong_input(arguments, message, capsys):
    assert main(["earth", *arguments]) == 1
    captured = capsys.readouterr()
    assert message in captured.err
    assert captured.err.count("\n") == 1


@pytest.mark.parametrize("command", [[], ["earth"], ["earth", "compare"], ["sites"], ["choices"]])
def test_help(command, capsys):
    assert main([*command, "--help"]) == 0
    text = capsys.readouterr().out
    assert "Usage: massfingerprint" in text
    if command:
        assert "Example: massfingerprint" in text
