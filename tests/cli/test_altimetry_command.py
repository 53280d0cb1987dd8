"""``massfingerprint altimetry``."""

import json

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import massfingerprint as mf
from massfingerprint.cli import altimetry, main
from massfingerprint.coast.observers import View, observed_means
from massfingerprint.files.netcdf import write_netcdf

SMALL = ["--max-degree", "8", "--spacing", "3"]
RATES = """time_start,time_end,source,mass_rate [Gt yr-1],mass_rate_sigma [Gt yr-1],citation
2000-01-01,2010-01-01,greenland,-200,5,made up
2000-01-01,2010-01-01,west_antarctica,-100,10,made up
"""


@pytest.fixture
def rates(tmp_path):
    (tmp_path / "rates.csv").write_text(RATES, encoding="utf-8")
    return ["altimetry", "--rates", str(tmp_path / "rates.csv"), *SMALL]


def test_numbers_are_those_of_the_function(rates, tmp_path, capsys):
    ocean = mf.ocean_fraction(3.0)
    write_netcdf(xr.Dataset({"south": (ocean["lat"] < 0.0) * xr.ones_like(ocean)}), tmp_path / "mask.nc")
    gauges = mf.read_sites("data_small/coasts.csv").iloc[[2, 7, 9]].assign(weight=[1.0, 2.0, 0.5])
    gauges.to_csv(tmp_path / "gauges.csv", index=False)
    more = [
        "--band",
        "-50",
        "60",
        "--off-land",
        "300",
        "--mask",
        str(tmp_path / "mask.nc"),
        "--gauges",
        str(tmp_path / "gauges.csv"),
    ]
    assert main([*rates, *more, "--json", "--csv", str(tmp_path / "out.csv")]) == 0
    found = json.loads(capsys.readouterr().out)
    prepared = mf.prepare_solver(ocean, mf.love_numbers(max_degree=2048), max_degree=8)
    outlines = mf.regions("greenland", "west_antarctica")
    load = mf.spread_mass(outlines, ocean)
    patterns = mf.solve_fingerprints(prepared, load, outputs=("relative_sea_level", "sea_surface", "bedrock_up"))
    views = {
        "whole ocean": View(),
        "belt -50 to 60": View(south=-50.0, north=60.0),
        "300 km off land": View(away_from_land=300.0),
        "belt -50 to 60, 300 km off": View(south=-50.0, north=60.0, away_from_land=300.0),
        "mask mask.nc": View(mask=(ocean["lat"] < 0.0) * xr.ones_like(ocean)),
        "3 gauges": View(gauges=gauges),
    }
    seen = observed_means(prepared, ocean, patterns, views, outlines=outlines, load=load)
    assert [row["view"] for row in found["rows"]] == list(views)
    amounts = np.array([-200.0, -100.0])
    for number, row in enumerate(found["rows"]):
        above = float(seen["sea_surface"].values[number] @ amounts)
        assert row["seen from above [mm yr-1]"] == pytest.approx(above, rel=1e-9)
        assert row["ratio to the true mean [1]"] == pytest.approx(above / found["true mean [mm yr-1]"], rel=1e-9)
        whole = 1.0 + row["sampling [1]"] + row["ocean floor [1]"]
        assert whole == pytest.approx(row["ratio to the true mean [1]"], abs=1e-9)
    table = pd.read_csv(tmp_path / "out.csv")
    assert table["ratio of greenland [1]"].to_numpy() == pytest.approx(seen["ratio_sea_surface"].values[:, 0])
    assert table["ocean floor [1]"].to_numpy() == pytest.approx([row["ocean floor [1]"] for row in found["rows"]])


def test_the_error_of_a_ratio_is_that_of_a_finite_step(rates, capsys):
    """First order: one source's rate moved by its sigma moves the ratio by what the printed error says, in squares."""
    assert main([*rates, "--json"]) == 0
    found = json.loads(capsys.readouterr().out)
    by_source = {name: ratios["belt -66 to 66"] for name, ratios in found["ratio by source"].items()}

    def ratio(greenland, west):
        return (greenland * by_source["greenland"] + west * by_source["west_antarctica"]) / (greenland + west)

    steps = ratio(-200.005, -100.0) - ratio(-200.0, -100.0), ratio(-200.0, -100.01) - ratio(-200.0, -100.0)
    expected = np.hypot(steps[0] * 1000.0, steps[1] * 1000.0)
    assert found["rows"][1]["ratio sigma [1]"] == pytest.approx(expected, rel=1e-3)


def test_printed(rates, capsys):
    assert main(rates) == 0
    text = capsys.readouterr().out
    for word in (
        "True mean (barystatic): +0.827",
        "belt -66 to 66",
        "whole ocean",
        "ocean floor",
        "licensed practice decide",
        "Ratio seen",
    ):
        assert word in text
    assert "-0.000" not in text  # sampling of the whole ocean


def test_a_view_that_cannot_be_used_is_refused_before_anything_is_solved(rates, monkeypatch, capsys):
    monkeypatch.setattr(altimetry, "solve_fingerprints", lambda *_, **__: pytest.fail("solved for nothing"))
    assert main([*rates, "--band", "10", "10"]) == 1
    assert "must have south below north" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("more", "message"),
    [
        (["--band", "66", "-66"], "must have south below north"),
        (["--off-land", "-3"], "a distance from 0 to 3000 km"),
        (["--mask", "no.nc"], "no.nc"),
        (["--frame", "XX"], "no frame 'XX'"),
        (["--published", "otosaka 2023"], "give either --rates FILE or --published SET"),
    ],
)
def test_refusals(rates, more, message, capsys):
    assert main([*rates, *more]) == 1
    captured = capsys.readouterr()
    assert message in captured.err
    assert captured.err.count("\n") == 1
