"""``massfingerprint kernel`` as a user types it."""

import json
import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import massfingerprint as mf
from massfingerprint.cli import main
from massfingerprint.files.netcdf import read_netcdf

QUICK = ["--max-degree", "64", "--spacing", "1", "--quiet"]
REGIONS = ["--region", "greenland_southeast", "--region", "west_antarctica_amundsen", "--region", "glaciers_18"]


@pytest.fixture
def sites(tmp_path):
    path = tmp_path / "sites.csv"
    path.write_text("site,lat,lon\nHudson,40.70,-74.01\n=Cape,-33.91,18.43\n", encoding="utf-8")
    return path


def test_ranked_table_with_range_and_words(sites, capsys):
    assert main(["kernel", "--sites", str(sites), *REGIONS, *QUICK]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    values = [
        float(v) for v in re.findall(r"^(?:west_|greenland_|glaciers_)\S+\s+([-+]\d+\.\d+)", out, flags=re.MULTILINE)
    ]
    assert len(values) == 6
    assert values[:3] == sorted(values[:3], reverse=True)
    for words in (
        "Hudson: most by West Antarctica Amundsen",
        "global mean +2.76 mm",
        "lowest, highest",
        "ocean dynamics",
        "screening",
    ):
        assert words in " ".join(out.split()), words


def test_numbers_are_those_of_the_forward_chain_and_all_files_agree(sites, tmp_path, capsys):
    """Tapered forward values at the same degree, 1e-7 of them (both solved to 1e-8)."""
    files = {"--csv": tmp_path / "k.csv", "--netcdf": tmp_path / "k.nc"}
    words = [word for pair in files.items() for word in map(str, pair)]
    assert main(["kernel", "--sites", str(sites), *REGIONS, *QUICK, *words, "--json"]) == 0
    rows = pd.DataFrame(json.loads(capsys.readouterr().out)["rows"])
    ocean = mf.ocean_fraction(1.0)
    solver = mf.prepare_solver(ocean, mf.love_numbers(max_degree=2048), max_degree=64)
    load = mf.spread_mass(mf.regions(*REGIONS[1::2]), ocean)
    here = mf.at_sites(mf.solve_fingerprints(solver, load), mf.read_sites(sites))["relative_sea_level_tapered"]
    for _, row in rows.iterrows():
        expected = -1000.0 * float(here.sel(site=row["site"], source=row["source"]))
        assert row["relative sea level [mm]"] == pytest.approx(expected, rel=1e-7)
        assert row["lowest [mm]"] <= row["relative sea level [mm]"] <= row["highest [mm]"]
    table = pd.read_csv(files["--csv"])
    assert table["site"].tolist()[-1] == "'=Cape"
    np.testing.assert_allclose(table["relative sea level [mm]"], rows["relative sea level [mm]"], rtol=1e-12)
    kernels = read_netcdf(files["--netcdf"])
    again = mf.apply_kernels(kernels, load)["relative_sea_level"].sel(site="Hudson")
    plain = mf.at_sites(mf.solve_fingerprints(solver, load), mf.read_sites(sites))["relative_sea_level"].sel(
        site="Hudson"
    )
    np.testing.assert_allclose(again.values, plain.values, rtol=1e-7)
    checker = str(Path(sys.executable).parent / "compliance-checker")
    run = [checker, "--test=cf:1.11", "--criteria=strict", str(files["--netcdf"])]
    done = subprocess.run(run, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout


def test_figures_of_every_site(sites, tmp_path, capsys):
    sites.write_text("site,lat,lon\nHudson,40.70,-74.01\n", encoding="utf-8")
    folder = tmp_path / "figures"
    assert main(["kernel", "--sites", str(sites), *REGIONS, *QUICK, "--figures", str(folder)]) == 1
    assert "there is no folder" in capsys.readouterr().err
    folder.mkdir()
    assert main(["kernel", "--sites", str(sites), *REGIONS, *QUICK, "--figures", str(folder)]) == 0
    names = [f"{what}.{kind}" for what in ("hudson_kernel", "hudson_per_gigatonne", "strip") for kind in ("pdf", "png")]
    assert sorted(p.name for p in folder.iterdir()) == names


def test_a_region_that_is_none(sites, capsys):
    assert main(["kernel", "--sites", str(sites), "--region", "greenlan", *QUICK]) == 1
    assert "no region is called 'greenlan'. Did you mean greenland" in capsys.readouterr().err


def test_by_default_no_ice_stands_there_twice():
    from massfingerprint.cli.kernel import _sources  # noqa: PLC0415

    assert mf.check_scope(_sources(())) == _sources(())
    assert len(_sources(())) == 7 + 15 + 17
