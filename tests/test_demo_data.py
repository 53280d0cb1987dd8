"""The invented demonstration scenario: reproducible, readable, honest about what it is."""

import importlib.util
import sys
import tomllib
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import shapely

import massfingerprint as mf
from massfingerprint.study.inputs import read_study

DATA = Path(__file__).parent.parent / "data_small"
TABLES = ("demo_mass.csv", "demo_harbours.csv")
WINDOWS = {"early": ("2005-01-01", "2015-01-01"), "late": ("2015-01-01", "2026-01-01")}
EARTH_RADIUS_KM = 6371.0


def load_script():
    spec = importlib.util.spec_from_file_location("make_demo", DATA / "make_demo.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


demo = load_script()


@pytest.fixture(scope="module")
def ledger():
    return mf.read_ledger(DATA / "demo_mass.csv", quantity="cumulative")


@pytest.fixture(scope="module")
def harbours():
    return mf.read_sites(DATA / "demo_harbours.csv")


@pytest.fixture(scope="module")
def study():
    return read_study(DATA / "demo_study.toml")


@pytest.fixture(scope="module")
def readme():
    return " ".join((DATA / "README.md").read_text(encoding="utf-8").split())


def distance_km(site, lat, lon):
    """Great-circle distance from a site to points in degrees."""
    here, there, apart = np.deg2rad(site.lat), np.deg2rad(lat), np.deg2rad(site.lon - lon)
    cosine = np.sin(here) * np.sin(there) + np.cos(here) * np.cos(there) * np.cos(apart)
    return EARTH_RADIUS_KM * np.arccos(np.clip(cosine, -1.0, 1.0))


def months_of(ledger, source):
    """Months in which a source has a value."""
    held = np.isfinite(ledger["mass_change"].sel(source=source).values)
    return pd.PeriodIndex(ledger["time"].values[held], freq="M")


def test_script_writes_the_committed_bytes(tmp_path, capsys):
    demo.main([str(tmp_path)])
    assert [Path(line).name for line in capsys.readouterr().out.splitlines()] == list(TABLES)
    for name in TABLES:
        assert (tmp_path / name).read_bytes() == (DATA / name).read_bytes(), f"{name}: run data_small/make_demo.py"


def test_script_names_a_folder_that_is_not_there(tmp_path, capsys):
    with pytest.raises(SystemExit):
        demo.main([str(tmp_path / "nowhere")])
    assert "nowhere. Make it first" in capsys.readouterr().err


def test_script_needs_no_more_than_numpy_and_pandas():
    lines = (DATA / "make_demo.py").read_text(encoding="utf-8").splitlines()
    modules = {line.split()[1].split(".")[0] for line in lines if line.startswith(("import ", "from "))}
    assert modules - sys.stdlib_module_names == {"numpy", "pandas"}


def test_every_row_says_it_is_invented():
    head, *rows = (DATA / "demo_mass.csv").read_text(encoding="utf-8").splitlines()
    assert head == "time,source,mass_change [Gt],mass_change_sigma [Gt],error_model,citation"
    assert rows
    assert all(row.endswith(",invented for demonstration") for row in rows)
    assert not any(",-0.0," in row for row in rows)


def test_readme_names_every_invented_thing(readme, harbours):
    invented = readme.split("**Invented:**")[1].split("**Real:**")[0]
    for name in harbours["site"]:
        assert name in invented
    for word in ("the network and its name", "the story", "every mass number"):
        assert word in invented
    assert "Lantern Harbours" in readme
    for name in (*TABLES, "demo_study.toml", "make_demo.py"):
        assert f"`{name}`" in readme


def test_no_ice_is_counted_twice(ledger):
    names = [str(name) for name in ledger["source"].values]
    assert set(names) <= set(mf.region_names())
    assert mf.check_scope(names) == names
    with pytest.raises(ValueError, match="glaciers_05"):
        mf.check_scope([*names, "glaciers_05"])


def test_harbours_stand_by_the_sea_and_away_from_ice(harbours, study):
    ocean = mf.ocean_fraction(0.25)
    edge = shapely.get_coordinates(shapely.segmentize(study[1].outlines.geometry.values, 0.5))
    assert len(harbours) == 8
    for site in harbours.itertuples():
        near = ocean.sel(lat=slice(site.lat - 0.5, site.lat + 0.5))
        row, column = np.nonzero(near.values > 0.5)
        assert distance_km(site, near["lat"].values[row], near["lon"].values[column]).min() < 30.0
        assert distance_km(site, edge[:, 1], edge[:, 0]).min() > 100.0


def test_harbour_names_are_their_own_and_one_is_not_plain_ascii(harbours):
    assert not set(harbours["site"]) & set(mf.read_sites(DATA / "coasts.csv")["site"])
    assert any(not name.isascii() for name in harbours["site"])


def test_gaps_are_gaps(ledger):
    every = pd.period_range("2003-01", "2025-12", freq="M")
    common = [*pd.period_range("2017-07", "2018-05", freq="M"), *pd.PeriodIndex(["2011-06", "2012-10"], freq="M")]
    for source in ledger["source"].values:
        first = "2005-01" if source == "glaciers_13" else "2003-01"
        expected = [month for month in every if month >= pd.Period(first, "M") and month not in common]
        if source == "glaciers_06":
            expected.remove(pd.Period("2021-02", "M"))
        assert list(months_of(ledger, source)) == expected


def test_values_are_changes_since_the_first_month(ledger):
    for source in ledger["source"].values:
        row = ledger.sel(source=source).dropna("time")
        first, sigma = float(row["mass_change"][0]), float(row["mass_change_sigma"][0])
        if row["error_model"].item() == "independent":
            assert 0.0 < abs(first) < 3.0 * sigma  # its first month has an error like any other
        else:
            assert (first, sigma) == (0.0, 0.0)


def test_three_error_models_grow_as_they_say(ledger):
    models = {str(n): str(m) for n, m in zip(ledger["source"].values, ledger["error_model"].values, strict=True)}
    assert set(models.values()) == {"random_walk", "systematic", "independent"}
    for source, model in models.items():
        sigma = ledger["mass_change_sigma"].sel(source=source).dropna("time")
        months = months_of(ledger, source)
        years = np.array([(month - months[0]).n for month in months]) / 12.0
        power = {"independent": 0.0, "random_walk": 0.5, "systematic": 1.0}[model]
        expected = sigma.values[-1] * (years / years[-1]) ** power
        # the last value and each other are rounded to 0.1
        np.testing.assert_allclose(sigma.values, expected, atol=0.1 + 1e-9)


def test_rates_of_all_sources_exist_and_make_a_plausible_total(ledger):
    found = mf.rates(ledger, windows=WINDOWS, seasonal=True)
    assert np.isfinite(found["rate"].values).all()
    assert (found["rate_sigma"].values > 0.0).all()
    assert (np.abs(found["total_rate"].values + 575.0) < 75.0).all()
    whole = mf.rates(ledger, windows={"all": ("2003-01-01", "2026-01-01")}, seasonal=True).sel(window="all")
    for source in demo.SOURCES:
        row = whole.sel(source=source.name)
        # five sigma, and what the acceleration makes of a window that is not the whole record
        slack = 5.0 * float(row["rate_sigma"]) + 2.0 * abs(source.acceleration)
        assert abs(float(row["rate"]) - source.rate) < slack


@pytest.mark.parametrize("source", demo.SOURCES, ids=lambda source: source.name)
def test_seasonal_cycle_has_the_season_of_its_hemisphere(ledger, source):
    row = ledger["mass_change"].sel(source=source.name).dropna("time")
    months = months_of(ledger, source.name)
    years = np.array([(month - months[0]).n for month in months]) / 12.0
    angle = 2.0 * np.pi * (months.month.to_numpy() - 1) / 12.0
    design = np.stack([np.ones_like(years), years, years**2, np.cos(angle), np.sin(angle)], axis=1)
    *_, cosine, sine = np.linalg.lstsq(design, row.values, rcond=None)[0]
    # an amplitude fitted to 23 years of noise of this spread is uncertain by less than 0.1 of it
    allowed = 0.4 * source.spread
    peak = 2.0 * np.pi * (source.peak - 1) / 12.0
    assert np.hypot(cosine - source.season * np.cos(peak), sine - source.season * np.sin(peak)) < allowed
    south = source.name.startswith(("west_ant", "antarctic", "east_ant", "glaciers_17"))
    assert source.peak in ((9, 10) if south else (5, 6))


def test_study_file_names_what_is_there(ledger, harbours, study):
    content = tomllib.loads((DATA / "demo_study.toml").read_text(encoding="utf-8"))
    assert content["regions"]["builtin"] == list(ledger["source"].values)
    assert "invented" in content["title"]
    recipe, inputs = study
    assert list(inputs.outlines["source"]) == list(ledger["source"].values)
    assert list(inputs.sites["site"]) == list(harbours["site"])
    assert np.isfinite(mf.rates(inputs.ledger, windows=recipe.windows)["total_rate"].values).all()
