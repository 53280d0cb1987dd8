"""The budget: parts add to the sum, covariances against draws, closure, the published table, faults."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from massfingerprint.coast.budget import budget
from massfingerprint.coast.closure import closure
from massfingerprint.coast.components import component, mass_components, rate_component
from massfingerprint.coast.trend_model import TrendModel
from massfingerprint.errors import InputError, SiteError, UnitsError

SITES = ("lock", "pier")
MONTHS = pd.date_range("2001-01-15", periods=180, freq="30D").to_numpy()
WINDOW = {"all": ("2000-01-01", "2020-01-01")}


def years(times=MONTHS):
    return (times - np.datetime64("2001-01-15")) / np.timedelta64(1, "D") / 365.25


def series(values, times=MONTHS, units="mm"):
    return xr.DataArray(
        values, dims=("time", "site"), coords={"time": times, "site": list(SITES)}, attrs={"units": units}
    )


def term(rates, sigma=1.0, *, times=MONTHS, error_model="independent", shared=False, values=None):
    values = np.outer(years(times), rates) if values is None else values
    spread = xr.full_like(series(values, times), sigma)
    return component(series(values, times), spread, error_model=error_model, shared_between_sites=shared)


@pytest.fixture(scope="module")
def mass():
    time = pd.date_range("1999-12-01", periods=60, freq="122D").to_numpy()
    change = np.stack([-200.0 * years(time), -50.0 * years(time)])
    grow = np.sqrt(np.arange(60.0))
    ledger = xr.Dataset(
        {
            "mass_change": (("source", "time"), change, {"units": "Gt"}),
            "mass_change_sigma": (("source", "time"), np.stack([60.0 * grow, 9.0 + 0.0 * grow]), {"units": "Gt"}),
            "error_model": ("source", np.array(["random_walk", "systematic"], dtype=object)),
            "source_correlation": (("source", "source_other"), np.array([[1.0, 0.0], [0.0, 1.0]])),
        },
        coords={"source": ["sheet", "glaciers"], "source_other": ["sheet", "glaciers"], "time": time},
        attrs={"quantity": "cumulative", "reference_epoch": str(time[0])[:10]},
    )
    patterns = xr.Dataset(
        {"relative_sea_level": (("source", "site"), [[-2e-3, -3e-3], [-4e-3, 1e-3]], {"units": "mm Gt-1"})},
        coords={"source": ["sheet", "glaciers"], "site": list(SITES)},
    )
    return patterns, ledger


def test_rates_of_parts_add_to_the_rate_of_their_sum_for_any_gaps():
    """One hundred patterns of gaps, to 1e-12 of the largest rate: same months, same weights."""
    rng = np.random.default_rng(5)
    parts = [rng.normal(size=(180, 2)).cumsum(axis=0) for _ in range(3)]
    for draw in range(100):
        kept = rng.random((180, 2)) > rng.uniform(0.05, 0.8)
        seen = np.where(kept, sum(parts), np.nan)
        terms = {f"part {n}": term(None, values=part) for n, part in enumerate(parts)}
        found = budget(term(None, values=seen), terms, windows=WINDOW, model=TrendModel(seasonal=bool(draw % 2)))
        assert found["residual"].values == pytest.approx(np.zeros((1, 2)), abs=1e-12 * abs(found["rate"].values).max())
        assert found["share"].sum("component").values == pytest.approx(np.ones((1, 2)))


def test_straight_series_give_their_rates_whatever_their_own_times():
    daily = pd.date_range("2000-06-01", periods=800, freq="10D").to_numpy()
    terms = {"heat": term([1.0, 0.5], times=daily), "land": term([0.25, -1.0])}
    found = budget(term([2.0, 1.0]), terms, windows=WINDOW)
    assert found["rate"].values[0] == pytest.approx(np.array([[1.0, 0.25], [0.5, -1.0]]), rel=1e-9)
    assert found["residual"].values[0] == pytest.approx([0.75, 1.5], rel=1e-9)
    assert found["value"].values[0, 0] == pytest.approx(np.array([1.0, 0.25]) * years()[-1], rel=1e-9)
    other = budget(term([2.0, 1.0]), terms, windows=WINDOW, estimator="last minus first")
    assert other["rate"].values == pytest.approx(found["rate"].values, rel=1e-9)


def test_covariances_are_those_of_draws(mass):
    """2000 members of the ledger and of a shared systematic error: residual covariance within sampling error, 5 standard ones."""
    patterns, ledger = mass
    rng = np.random.default_rng(8)
    count, parts = 2000, mass_components(patterns, ledger)
    heat = term([0.0, 0.0], 4.0, error_model="systematic", shared=True)
    seen = term([0.0, 0.0], 3.0)
    found = budget(seen, {**parts, "heat": heat}, windows=WINDOW)
    sigma = ledger["mass_change_sigma"].values
    steps = np.sqrt(np.diff(sigma[0] ** 2, prepend=0.0))
    walk = (rng.normal(size=(count, 60)) * steps).cumsum(axis=1)
    fixed = rng.normal(size=(count, 1)) * sigma[1]
    time = ledger["time"].values.astype("datetime64[ns]").astype(float)
    at = MONTHS.astype("datetime64[ns]").astype(float)
    held = np.stack([np.array([np.interp(at, time, row) for row in rows]) for rows in (walk, fixed)])
    pattern = patterns["relative_sea_level"].values
    sums = np.einsum("sk,snt->nkt", pattern, held) + 4.0 * rng.normal(size=(count, 1, 1))
    rest = 3.0 * rng.normal(size=(count, 2, 180)) - sums
    slopes = np.polynomial.polynomial.polyfit(years(), rest.reshape(-1, 180).T, 1)[1].reshape(count, 2)
    expected = found["residual_covariance"].values[0]
    room = np.sqrt((np.outer(np.diag(expected), np.diag(expected)) + expected**2) / count)
    assert np.abs(np.cov(slopes.T) - expected).max() < 5.0 * room.max()
    assert expected[0, 1] > 3.0 * room[0, 1]  # the same ice
    assert found["residual_sigma"].values[0] == pytest.approx(np.sqrt(np.diag(expected)))


def test_a_constant_rate_keeps_its_rate_and_its_sigma():
    """Over any months: one error for all times."""
    rates, sigma = (xr.DataArray(v, dims="site", coords={"site": list(SITES)}) for v in ([0.5, -1.0], [0.2, 0.3]))
    for shared in (False, True):
        land = rate_component(rates, sigma, shared_between_sites=shared)
        found = budget(term([0.5, -1.0], 1e-9), {"land": land}, windows=WINDOW, model=TrendModel())
        assert found["rate"].values[0, :, 0] == pytest.approx([0.5, -1.0], rel=1e-9)
        assert found["rate_sigma"].values[0, :, 0] == pytest.approx([0.2, 0.3], rel=1e-9)
        assert found["residual_covariance"].values[0, 0, 1] == pytest.approx(0.06 if shared else 0.0, rel=1e-6)
    with pytest.raises(InputError, match="sigma: must have the sites of the rates"):
        rate_component(rates, -sigma)
    with pytest.raises(InputError, match="rates: must be a DataArray"):
        rate_component(rates.rename(site="place"), sigma)


def test_sources_that_are_correlated_are_not_taken_as_independent(mass):
    patterns, ledger = mass
    joined = ledger.copy(deep=True)
    joined["mass_change_sigma"][:] = 5.0
    joined["error_model"] = ("source", np.array(["systematic", "independent"], dtype=object))
    joined["error_model"][:] = "independent"
    free = budget(term([1.0, 1.0]), mass_components(patterns, joined), windows=WINDOW)
    joined["source_correlation"][:] = np.array([[1.0, 0.9], [0.9, 1.0]])
    tied = budget(term([1.0, 1.0]), mass_components(patterns, joined), windows=WINDOW)
    sigma = free["rate_sigma"].values[0]
    signs = patterns["relative_sea_level"].values.T
    expected = np.sqrt((sigma**2).sum(axis=1) + 1.8 * sigma.prod(axis=1) * np.sign(signs.prod(axis=1)))
    assert tied["explained_sigma"].values[0] == pytest.approx(expected, rel=1e-9)


def test_it_closes_as_often_as_it_says():
    """Nothing but white noise of the sigma given: 95 % of 400 gauges close, 92 to 98 (binomial, 2.8 standard errors)."""
    sites = [f"gauge {n}" for n in range(400)]
    noise = np.random.default_rng(2).normal(scale=2.0, size=(180, 400))
    coords = {"time": MONTHS, "site": sites}
    seen, nothing = (xr.DataArray(v, dims=("time", "site"), coords=coords) for v in (noise, 0.0 * noise))
    terms = {"nothing": component(nothing, nothing + 1e-9, error_model="independent")}
    found = budget(component(seen, nothing + 2.0, error_model="independent"), terms, windows=WINDOW)
    assert 0.92 <= found["closes"].values.mean() <= 0.98
    assert int(found["degrees_of_freedom"][0]) == 400
    assert int(found["closes_all"][0]) == 1


def test_what_is_large_dominates_and_does_not_close():
    found = budget(
        term([5.0, 1.0], 0.1), {"heat": term([1.0, 1.0], 8.0), "land": term([0.0, 0.0], 0.1)}, windows=WINDOW
    )
    assert found["dominant"].values.tolist() == [["heat", "heat"]]
    assert found["closes"].values.tolist() == [[0, 1]]
    assert int(found["closes_all"][0]) == 0


def test_the_published_table():
    """AR6 Table 9.5, 1993-2018, mm: terms with very likely ranges (90 %), sum 71.2 [60.2, 82.3], in quadrature; to rounding."""
    parts = {
        "thermal": (32.7, (41.6 - 23.8) / 2),
        "glaciers": (13.8, (17.6 - 10.0) / 2),
        "Greenland": (10.8, (12.7 - 8.9) / 2),
        "Antarctica": (6.1, (8.3 - 4.0) / 2),
        "land water": (7.8, (12.2 - 3.3) / 2),
    }
    found = closure((81.2, (90.2 - 72.1) / 2), parts)
    assert found["sum"] == pytest.approx(71.2, abs=0.051)
    assert found["sum_sigma"] == pytest.approx((82.3 - 60.2) / 2, abs=0.1)
    assert found["residual"] == pytest.approx(10.0, abs=0.1)


def test_a_window_is_cut_to_what_overlaps_and_says_so():
    short = term([1.0, 1.0], times=MONTHS[60:120])
    found = budget(term([1.0, 1.0]), {"heat": short}, windows=WINDOW)
    assert found["epochs"].values.tolist() == [[60, 60]]
    assert found["covered"].values[0] == pytest.approx([1 / 3, 1 / 3])
    assert str(found["first"].values[0, 0])[:10] == str(MONTHS[60])[:10]


def test_where_there_is_no_number_the_reason_stands():
    seen = np.outer(years(), [1.0, 1.0])
    seen[:, 1] = np.nan
    gone = np.outer(years(), [1.0, 1.0])
    found = budget(
        term(None, values=seen),
        {"heat": term(None, values=gone)},
        windows={**WINDOW, "early": ("1990-01-01", "1995-01-01")},
    )
    assert found["reason"].values.tolist() == [
        ["", "the gauge has no values in the window"],
        ["the gauge has no values in the window"] * 2,
    ]
    assert found["closes"].values.tolist() == [[1, -1], [-1, -1]]
    assert np.isnan(found["residual"].values[0, 1])
    missing = budget(
        term([1.0, 1.0]), {"heat": term([1.0, 1.0], times=MONTHS[:30])}, windows={"late": ("2010-01-01", "2016-01-01")}
    )
    assert missing["reason"].values.tolist() == [["no term has values at the gauge's times in the window"] * 2]


def test_faults_have_their_line(mass):
    patterns, ledger = mass
    good = term([1.0, 1.0])
    with pytest.raises(InputError, match="components: name at least one term"):
        budget(good, {}, windows=WINDOW)
    with pytest.raises(InputError, match="'observed' is what the gauge recorded"):
        budget(good, {"observed": good}, windows=WINDOW)
    with pytest.raises(InputError, match="fits no yearly cycle"):
        budget(good, {"a": good}, windows=WINDOW, estimator="last minus first", model=TrendModel())
    away = component(
        series(np.zeros((180, 2))).assign_coords(site=["x", "y"]),
        series(np.ones((180, 2))).assign_coords(site=["x", "y"]),
        error_model="independent",
    )
    with pytest.raises(SiteError, match="'a' is at none of the gauges"):
        budget(good, {"a": away}, windows=WINDOW)
    with pytest.raises(InputError, match="error_model: no error model 'white'"):
        term([1.0, 1.0], error_model="white")
    with pytest.raises(UnitsError, match="series: units must be 'mm'"):
        component(series(np.zeros((180, 2)), units="hPa"), series(np.ones((180, 2))), error_model="independent")
    with pytest.raises(InputError, match="sigma: must be 0 or more"):
        component(series(np.zeros((180, 2))), series(-np.ones((180, 2))), error_model="independent")
    with pytest.raises(InputError, match="values: none for 'sheet'"):
        mass_components(patterns.isel(source=[1]), ledger)
    bare = patterns.assign(relative_sea_level=patterns["relative_sea_level"].assign_attrs(units="m"))
    with pytest.raises(UnitsError, match="must be in mm Gt-1"):
        mass_components(bare, ledger)
    with pytest.raises(InputError, match="every sigma 0 or more"):
        closure((1.0, -1.0), {"a": (1.0, 0.0)})
