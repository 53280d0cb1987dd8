"""The budget of gauges: their own weights and noise for every term, both estimators, what is missing, what limits the window."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from massfingerprint.coast import _noise
from massfingerprint.coast.budget import WHOLE, budget
from massfingerprint.coast.components import component, rate_component
from massfingerprint.coast.gauge_trend import gauge_trend
from massfingerprint.coast.reduction import difference_weights
from massfingerprint.coast.trend_model import TrendModel
from massfingerprint.errors import InputError

SITES = ["lock", "pier"]
MONTHS = (pd.period_range("1980-01", periods=360, freq="M").to_timestamp() + pd.Timedelta(days=14)).to_numpy()
YEARS = (MONTHS - MONTHS[0]) / np.timedelta64(1, "D") / 365.25


def gauges(values, time=MONTHS, sampling="monthly"):
    """Levels (time, gauge) as read_gauges gives them."""
    return xr.Dataset(
        {"level": (("gauge", "time"), np.asarray(values).T, {"units": "mm"})},
        coords={"gauge": SITES, "time": time, "lat": ("gauge", [53.0, -45.0]), "lon": ("gauge", [8.0, 170.0])},
        attrs={"sampling": sampling},
    )


def own(values, sigma=1.0, time=MONTHS, sites=SITES):
    series = xr.DataArray(values, dims=("time", "site"), coords={"time": time, "site": sites}, attrs={"units": "mm"})
    return component(series, xr.full_like(series, sigma), error_model="independent")


def red(rng, shape, phi=0.6, scale=30.0):
    out = rng.normal(size=shape) * scale
    for step in range(1, len(out)):
        out[step] += phi * out[step - 1]
    return out


@pytest.mark.parametrize("estimator", ["least squares", "last minus first"])
def test_parts_add_to_the_sum_under_the_noise_of_the_gauge(estimator):
    """One hundred patterns of gaps, two gauges in fifty draws, with steps and cycles fitted, to 1e-12 of the largest part."""
    rng = np.random.default_rng(3)
    model = TrendModel(steps={"lock": ["1993-06-01"]}, nodal="none")
    for draw in range(50):
        parts = [red(rng, (360, 2)) + 2.0 * YEARS[:, None] for _ in range(3)]
        whole = sum(parts)
        seen = np.where(rng.random((360, 2)) > rng.uniform(0.05, 0.7), whole, np.nan)
        terms = {f"part {n}": own(part) for n, part in enumerate(parts)}
        found = budget(gauges(seen), terms, estimator=estimator, model=model, noise="ar1" if draw else "choose")
        largest = np.abs(found["rate"].values).max()
        np.testing.assert_allclose(found["residual"].values, 0.0, atol=1e-12 * largest)
        assert found["covered"].values.tolist() == [[1.0, 1.0]]


def test_the_gauge_has_the_rate_and_the_sigma_of_its_own_trend():
    rng = np.random.default_rng(4)
    levels = gauges(red(rng, (360, 2)) + np.outer(YEARS, [3.0, -1.0]))
    alone = gauge_trend(levels)
    found = budget(levels, {"nothing": own(np.zeros((360, 2)))}).sel(window=WHOLE)
    np.testing.assert_allclose(found["observed"], alone["rate"], rtol=1e-12)
    np.testing.assert_allclose(found["observed_sigma"], alone["rate_sigma"], rtol=1e-12)
    np.testing.assert_allclose(found["weights"], alone["weights"], rtol=1e-12)
    assert found["noise"].values.tolist() == alone["noise"].values.tolist()


def test_a_term_limits_the_window_to_what_overlaps():
    """Steric from 1993 on: half of the record is explained, the rest is said; the trend is that of the months kept."""
    rng = np.random.default_rng(5)
    levels = gauges(red(rng, (360, 2)) + np.outer(YEARS**2, [0.05, 0.05]))
    late = slice(180, 300)
    found = budget(levels, {"steric": own(np.zeros((120, 2)), time=MONTHS[late])}).sel(window=WHOLE, site="lock")
    cut = gauge_trend(levels.isel(time=late)).sel(gauge="lock")
    assert float(found["covered"]) == pytest.approx(1 / 3)
    assert str(found["limited_by"].values) == "steric"
    assert [str(found[name].values)[:10] for name in ("first", "last")] == [str(MONTHS[k])[:10] for k in (180, 299)]
    assert float(found["observed"]) == pytest.approx(float(cut["rate"]), rel=1e-12)


def test_what_is_missing_is_named_and_the_sum_is_not_judged():
    rng = np.random.default_rng(6)
    levels = gauges(red(rng, (360, 2)) + np.outer(YEARS, [3.0, 3.0]))
    land = rate_component(
        xr.DataArray([1.5], dims="site", coords={"site": ["pier"]}),
        xr.DataArray([0.1], dims="site", coords={"site": ["pier"]}),
    )
    found = budget(levels, {"ice": own(np.outer(YEARS, [1.5, 1.5])), "land": land}).sel(window=WHOLE)
    assert found["missing"].values.tolist() == ["land", ""]
    assert found["closes"].values.tolist()[0] == -1
    assert found["closes"].values.tolist()[1] in (0, 1)
    assert np.isnan(found["rate"].sel(component="land").values).tolist() == [True, False]
    np.testing.assert_allclose(found["explained"], [1.5, 3.0], rtol=1e-9)
    assert int(found["degrees_of_freedom"]) == 1
    assert np.isnan(found["chi_square"].values[0])


def test_reasons_stand_where_there_is_no_number():
    rng = np.random.default_rng(7)
    values = red(rng, (360, 2))
    values[:, 1] = np.nan
    values[40:, 0] = np.nan
    found = budget(gauges(values), {"ice": own(np.zeros((360, 2)))}).sel(window=WHOLE)
    assert "has values in 4 calendar years of the window, 5 at least" in str(found["reason"].values[0])
    assert str(found["reason"].values[1]) == "the gauge has no values in the window"
    assert np.isnan(found["observed"].values).all()
    far = MONTHS + np.timedelta64(365 * 40, "D")
    apart = {"ice": own(np.zeros((100, 2)), time=MONTHS[:100]), "heat": own(np.zeros((100, 2)), time=MONTHS[200:300])}
    split = budget(gauges(red(rng, (360, 2))), apart)
    assert set(split["reason"].values.ravel()) == {
        "no time in the window is covered by all terms; leave one out or move the window"
    }
    none = budget(gauges(red(rng, (360, 2))), {"ice": own(np.zeros((360, 2)), time=far)})
    assert set(none["missing"].values.ravel()) == {"ice"}


def test_last_minus_first_is_twelve_months_against_twelve():
    """Months that both ends hold; a yearly cycle drops out; yearly values are last minus first (AR6 Table 9.5 is made so)."""
    season = 50.0 * np.cos(2.0 * np.pi * (np.arange(360) % 12) / 12.0)
    values = np.stack([2.0 * YEARS + season] * 2, axis=1)
    values[[1, 355], 0] = np.nan
    found = budget(
        gauges(values + 1e-4 * red(np.random.default_rng(1), (360, 2))),
        {"line": own(values)},
        estimator="last minus first",
    )
    np.testing.assert_allclose(found["observed"].values, 2.0, atol=1e-3)
    weights, years = difference_weights(MONTHS[~np.isnan(values[:, 0])])
    assert years == pytest.approx(29.0, abs=1e-3)
    assert weights.sum() == pytest.approx(0.0, abs=1e-15)
    assert (weights > 0.0).sum() == (weights < 0.0).sum() == 10
    yearly = np.array(["2000-07-02", "2001-07-02", "2004-07-02"], dtype="datetime64[ns]")
    weights, years = difference_weights(yearly)
    np.testing.assert_allclose(weights * years, [-1.0, 0.0, 1.0])
    assert difference_weights(MONTHS[:10])[0] is None
    assert difference_weights(np.r_[MONTHS[:3], MONTHS[30:33]])[0] is None  # no calendar month on both sides


def test_a_step_is_taken_off_before_the_difference():
    shift = np.where(np.datetime64("1995-01-01") <= MONTHS, 80.0, 0.0)
    values = np.stack([2.0 * YEARS + shift] * 2, axis=1) + red(np.random.default_rng(2), (360, 2), scale=0.01)
    model = TrendModel(steps=["1995-01-01"])
    terms = {"line": own(np.stack([2.0 * YEARS] * 2, axis=1))}
    found = budget(gauges(values), terms, estimator="last minus first", model=model)
    np.testing.assert_allclose(found["residual"].values, 0.0, atol=5e-3)
    plain = budget(gauges(values), terms, estimator="last minus first")
    assert float(plain["residual"][0, 0]) == pytest.approx(80.0 / 29.0, rel=0.01)


def test_steps_outside_a_window_do_not_matter_and_wrong_dates_are_refused():
    values = red(np.random.default_rng(8), (360, 2))
    windows = {"late": ("2000-01-01", "2010-01-01")}
    with_step = budget(gauges(values), {"a": own(values)}, windows=windows, model=TrendModel(steps=["1985-01-01"]))
    without = budget(gauges(values), {"a": own(values)}, windows=windows)
    np.testing.assert_array_equal(with_step["observed"], without["observed"])
    with pytest.raises(InputError, match="steps: 'soon' of gauge 'lock' is no ISO date"):
        budget(gauges(values), {"a": own(values)}, model=TrendModel(steps=["soon"]))
    with pytest.raises(InputError, match="noise: no noise model 'pink'"):
        budget(gauges(values), {"a": own(values)}, noise="pink")
    with pytest.raises(InputError, match="estimator: no estimator 'median'"):
        budget(gauges(values), {"a": own(values)}, estimator="median")


@pytest.mark.parametrize("noise", ["white", "ar1", "arma11", "power_law"])
def test_the_sigma_of_a_difference_is_that_of_its_noise(noise):
    """Against the sigma of the least-squares rate through the same covariance: w C w of the rate's weights is its variance."""
    rng = np.random.default_rng(9)
    levels = gauges(red(rng, (360, 2)) + np.outer(YEARS, [1.0, 1.0]))
    found = gauge_trend(levels, noise=noise).isel(gauge=0)
    held = _noise.fit(
        noise,
        MONTHS.astype("datetime64[M]").astype(np.int64),
        np.stack([np.ones(360), YEARS - YEARS.mean()], axis=1),
        levels["level"].values[0] - levels["level"].values[0].mean(),
    )
    rows = held.rows[1]
    index = MONTHS.astype("datetime64[M]").astype(np.int64)
    assert _noise.variance_of(held, index, rows) == pytest.approx(held.covariance[1, 1], rel=1e-6)
    assert np.isfinite(found["rate"])
