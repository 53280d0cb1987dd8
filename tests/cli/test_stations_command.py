"""``massfingerprint stations``: from a list of stations and a mass record to rates, residuals and files."""

import csv
import io
import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import massfingerprint as mf
from massfingerprint.cli import main
from massfingerprint.coast.station_rates import station_rates
from massfingerprint.coast.stations import read_stations
from massfingerprint.files.netcdf import read_netcdf

DATA = Path(__file__).parent.parent.parent / "data_small"
COARSE = ["--max-degree", "64", "--spacing", "2"]
SOURCES = ("greenland_southeast", "glaciers_06")
OUTPUTS = ("bedrock_up", "bedrock_north", "bedrock_east")
LIST = """station,lat,lon,start,end
FARR,-35.0,149.0,2003-01-01,2011-01-01
NEAR,64.3,-21.5,2002-01-01,2012-06-01
LATE,50.0,10.0,2004-01-01,2018-01-01
"""


def ledger():
    rows = ["time,source,mass_change [Gt],mass_change_sigma [Gt],error_model,citation"]
    for source, rate in zip(SOURCES, (-80.0, -9.0), strict=True):
        rows += [
            f"{2000 + n}-01-01,{source},{rate * n},{2.0 * np.sqrt(n)},random_walk,an invented record" for n in range(14)
        ]
    return "\n".join(rows) + "\n"


@pytest.fixture(scope="module")
def files(tmp_path_factory):
    folder = tmp_path_factory.mktemp("stations")
    (folder / "list.csv").write_text(LIST, encoding="utf-8")
    (folder / "mass.csv").write_text(ledger(), encoding="utf-8")
    years = np.arange(2003, 2011)
    series = "station,time,up [mm],up_sigma [mm]\n"
    series += "".join(f"FARR,{year}-01-01,{2.0 * (year - 2003)},1\n" for year in years)
    (folder / "series.csv").write_text(series, encoding="utf-8")
    velocities = "station,up [mm yr-1],up_sigma [mm yr-1]\nNEAR,5.0,0.4\n"
    (folder / "velocities.csv").write_text(velocities, encoding="utf-8")
    return folder


def run(files, *more):
    return main(
        ["stations", "--stations", str(files / "list.csv"), "--ledger", str(files / "mass.csv"), *COARSE, *more]
    )


@pytest.fixture(scope="module")
def values(files):
    """What the package gives for the same problem."""
    ocean = mf.ocean_fraction(2.0)
    prepared = mf.prepare_solver(ocean, mf.love_numbers(max_degree=2048), max_degree=64)
    outlines = mf.regions(*SOURCES)
    sites = read_stations(files / "list.csv").rename(columns={"station": "site"})
    load = mf.spread_mass(outlines, ocean)
    return mf.coast_values(prepared, outlines, load, sites, outputs=OUTPUTS, reference_frame="CM")


def test_the_numbers_are_those_of_the_package(files, values, capsys, tmp_path):
    out = [str(tmp_path / name) for name in ("table.csv", "covariance.nc", "series.csv")]
    paths = ["--csv", out[0], "--covariance", out[1], "--series-out", out[2]]
    assert run(files, "--json", "--quiet", "--interval", "95 %", "--overlap", *paths) == 0
    captured = capsys.readouterr()
    assert captured.err == ""
    data = json.loads(captured.out)
    stations = read_stations(files / "list.csv")
    record = mf.read_ledger(files / "mass.csv", quantity="cumulative")
    expected = station_rates(values, record, stations, overlap=True)
    for i, row in enumerate(data["rows"]):
        for k, name in enumerate(("up", "north", "east")):
            assert row[f"{name} [mm yr-1]"] == pytest.approx(float(expected["rate_total"][i, k]), rel=1e-6)
            half = 1.959964 * float(expected["rate_total_sigma"][i, k])
            assert row[f"{name} half width [mm yr-1]"] == pytest.approx(half, rel=1e-6)
    assert [row["flag"] for row in data["rows"]] == ["far (> 300 km)", "near field added", "far (> 300 km)"]
    assert data["rows"][2]["remark"].startswith("overlap alone, 2004-01-01 to 2012-")
    assert data["reference_frame"] == "CM"
    table = list(csv.DictReader(io.StringIO(Path(out[0]).read_text(encoding="utf-8"))))
    assert float(table[1]["up [mm yr-1]"]) == data["rows"][1]["up [mm yr-1]"]
    stored = read_netcdf(out[1])
    assert "massfingerprint stations" in stored.attrs["history"]
    assert stored["covariance"].values == pytest.approx(expected["covariance"].values, rel=1e-6)
    assert list(stored["station_other"].values) == ["FARR", "NEAR", "LATE"]
    series = pd.read_csv(out[2])
    near = series[series["station"] == "NEAR"]
    years = (pd.to_datetime(near["time"]) - pd.Timestamp("2000-01-01")) / pd.Timedelta(days=365.25)
    # a straight record gives a straight line; its calendar years differ by a day
    assert np.polyfit(years, near["up [mm]"], 1)[0] == pytest.approx(float(expected["rate_total"][1, 0]), rel=1e-3)
    assert set(series["missing"].dropna()) == {"outside the mass record"}


def test_ice_loss_beside_a_station_lifts_it(files, values):
    """Beside the ice the ground rises; on the other side of the Earth only its shift against the centre of mass is left."""
    record = mf.read_ledger(files / "mass.csv", quantity="cumulative")
    found = station_rates(values, record, read_stations(files / "list.csv"))
    up = found["rate_total"].sel(component="up").values
    assert up[1] > 0.5
    assert abs(up[0]) < 0.2 * up[1]
    assert np.isnan(up[2])


def test_what_is_printed(files, capsys):
    more = ["--series", str(files / "series.csv"), "--velocities", str(files / "velocities.csv")]
    assert run(files, *more) == 0
    captured = capsys.readouterr()
    lines = captured.out.splitlines()
    near = next(line for line in lines if line.startswith("NEAR"))
    assert "2002-01-01 to 2012-06-01" in near
    assert "near field added" in near
    text = " ".join(captured.out.split())
    assert (
        "LATE: no rate: its span is 2004-01-01 to 2018-01-01, the mass record covers 2000-01-01 to 2013-01-01" in text
    )
    residuals = captured.out[captured.out.index("Observed minus elastic") :]
    assert [line.split()[:3] for line in residuals.splitlines() if line.startswith(("FARR", "NEAR"))] == [
        ["FARR", "up", "series"],
        ["NEAR", "up", "velocity"],
    ]
    for words in (
        "rates in the ITRF compare with CM",
        "errors are taken as independent",
        "a straight line between the two values of the record",
        "Not included: glacial isostatic adjustment",
        "draconitic errors",
        "For screening only",
        "Mass: an invented record",
    ):
        assert words in text
    assert (
        max(len(line) for line in lines[lines.index("") :] if not line.startswith(("station", "---", "FARR", "NEAR")))
        < 121
    )
    assert "solving patterns: 2 of 2" in captured.err


def test_another_frame_shifts_all_stations_alike_and_is_explained(files, values, capsys):
    """One vector in space: the geocentre's. Spans differ, and a straight record in calendar years is straight to a day a year."""
    assert run(files, "--json", "--quiet", "--frame", "CF") == 0
    data = json.loads(capsys.readouterr().out)
    assert "in CF. CF is the centre of the Earth's surface" in data["about"]
    record = mf.read_ledger(files / "mass.csv", quantity="cumulative")
    in_cm = station_rates(values, record, read_stations(files / "list.csv"))["rate_total"].values
    shifts = []
    for row, before in list(zip(data["rows"], in_cm, strict=True))[:2]:
        up, north, east = (row[f"{name} [mm yr-1]"] - before[k] for k, name in enumerate(("up", "north", "east")))
        phi, lam = np.deg2rad(row["lat"]), np.deg2rad(row["lon"])
        outwards = up * np.cos(phi) - north * np.sin(phi)
        x = outwards * np.cos(lam) - east * np.sin(lam)
        y = outwards * np.sin(lam) + east * np.cos(lam)
        shifts.append([x, y, up * np.sin(phi) + north * np.cos(phi)])
    assert np.linalg.norm(shifts[0]) > 0.05
    assert shifts[1] == pytest.approx(shifts[0], abs=0.003 * np.linalg.norm(shifts[0]))


def test_published_rates_have_no_value_outside_their_period(files, capsys):
    arguments = ["stations", "--stations", str(files / "list.csv"), "--published", "otosaka 2023", *COARSE, "--quiet"]
    assert main([*arguments, "--json"]) == 0
    data = json.loads(capsys.readouterr().out)
    assert [row["up [mm yr-1]"] is None for row in data["rows"]] == [False, False, False]
    assert "outside it there is none" in data["about"]
    assert main([*arguments, "--drop", "greenland"]) == 1
    assert "--drop: goes with --ledger only" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ([], "mass: give either --ledger FILE or --published SET"),
        (["--ledger", "mass.csv", "--interval", "99 %"], "interval: no interval '99 %'"),
        (["--ledger", "mass.csv", "--series", "list.csv"], "lacks the column time"),
        (["--ledger", "mass.csv", "--velocities", "other.csv"], "line 2: station XXXX is not in the list"),
        (["--ledger", "nowhere.csv"], "there is no such file"),
    ],
)
def test_refused_in_one_line_before_anything_is_solved(files, monkeypatch, capsys, arguments, words):
    (files / "other.csv").write_text("station,up [mm yr-1],up_sigma [mm yr-1]\nXXXX,1,1\n", encoding="utf-8")
    monkeypatch.chdir(files)
    assert main(["stations", "--stations", "list.csv", *arguments]) == 1
    captured = capsys.readouterr()
    assert captured.out == ""
    assert words in captured.err
    assert captured.err.count("\n") == 1


def test_the_demonstration_stations_fit_the_demonstration_record():
    stations = read_stations(DATA / "demo_stations.csv")
    remarks = pd.read_csv(DATA / "demo_stations.csv")["remark"]
    assert 4 <= len(stations) <= 8
    assert set(remarks) == {"invented for demonstration"}
    time = mf.read_ledger(DATA / "demo_mass.csv", quantity="cumulative")["time"].values
    assert (stations["start"] < time[-1]).all()
    assert (stations["end"] > time[0]).all()
    harbours = mf.read_sites(DATA / "demo_harbours.csv")
    away = [np.hypot(harbours["lat"] - row.lat, harbours["lon"] - row.lon).min() for row in stations.itertuples()]
    assert max(away) < 0.1  # degrees: each beside one of the harbours
