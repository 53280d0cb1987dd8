"""Trends of tide gauges: weights, noise models against other computations, and whether intervals hold what they promise.

All series are drawn here from known noise.
"""

import numpy as np
import pytest
import xarray as xr
from scipy import integrate, linalg, signal, stats
from statsmodels.tsa.statespace.sarimax import SARIMAX

from massfingerprint.coast import _noise
from massfingerprint.coast.gauge_corrections import nodal_tide
from massfingerprint.coast.gauge_trend import AS_GOOD, NOISES, gauge_trend
from massfingerprint.coast.trend_model import TrendModel
from massfingerprint.errors import InputError, SiteError

RATE = 2.0  # mm yr-1 of all drawn series
_BEFORE = 3000  # steps drawn and dropped, so that the noise has forgotten its beginning


def white(count, draw):
    return draw.standard_normal(count)


def first_order(phi):
    return lambda count, draw: signal.lfilter([1.0], [1.0, -phi], draw.standard_normal(count + 500))[500:]


def fractional(kappa):
    """Noise of a spectrum as frequency to the kappa: white noise through the filter of fractional integration (Kasdin 1995)."""

    def made(count, draw):
        step = np.arange(1, count + _BEFORE)
        response = np.concatenate([[1.0], np.cumprod((step - 1 - 0.5 * kappa) / step)])
        return signal.fftconvolve(draw.standard_normal(count + _BEFORE), response)[_BEFORE : count + _BEFORE]

    return made


def middles(count, *, monthly, start="1960"):
    step = "M" if monthly else "Y"
    first = np.datetime64(start, step) + np.arange(count)
    begin, end = first.astype("datetime64[ns]"), (first + 1).astype("datetime64[ns]")
    return begin + (end - begin) // 2


def years_of(time):
    return (time - time[0]) / np.timedelta64(1, "D") / 365.25


def levels(values, *, monthly=True, lat=50.0, start="1960"):
    values = np.atleast_2d(values)
    time = middles(values.shape[1], monthly=monthly, start=start)
    names = np.array([f"g{k}" for k in range(len(values))], dtype=object)
    places = {"lat": ("gauge", np.full(len(values), lat)), "lon": ("gauge", np.zeros(len(values)))}
    return xr.Dataset(
        {"level": (("gauge", "time"), values, {"units": "mm"})}, coords={"gauge": names, "time": time, **places}
    )


def drawn(noise, count, *, draws=1, monthly=True, seed=1):
    draw = np.random.default_rng(seed)
    trend = 7000.0 + RATE * years_of(middles(count, monthly=monthly))
    return levels(trend + 20.0 * np.stack([noise(count, draw) for _ in range(draws)]), monthly=monthly)


def with_gaps(data, places):
    out = data.copy(deep=True)
    out["level"].values[:, places] = np.nan
    return out


# --- the estimator ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("noise", ["choose", *NOISES])
def test_weights_are_the_estimator(noise):
    """They give the rate, pass over level, cycles and steps, and carry a unit rate whole: to rounding."""
    data = with_gaps(drawn(first_order(0.6), 240), [3, 50, 51, 52, 200])
    model = TrendModel(acceleration=True, steps=["1970-05-01"])
    found = gauge_trend(data, model=model, noise=noise).isel(gauge=0)
    weights, level = found["weights"].values, data["level"].values[0]
    years = years_of(data["time"].values)
    centred = years - 0.5 * years[-1]
    assert weights @ np.nan_to_num(level - 7000.0) == pytest.approx(float(found["rate"]), abs=1e-9)
    assert not weights[np.isnan(level)].any()
    step = (data["time"].values >= np.datetime64("1970-05-01")).astype(float)
    blind = [
        np.ones_like(years),
        centred**2,
        step,
        *(f(2 * np.pi * k * years) for k in (1, 2) for f in (np.cos, np.sin)),
    ]
    for column in blind:
        assert weights @ column == pytest.approx(0.0, abs=1e-9 * np.abs(weights) @ np.abs(column) + 1e-12)
    assert weights @ years == pytest.approx(1.0, abs=1e-10)


def test_white_noise_is_the_textbook_line():
    data = drawn(white, 30, monthly=False)
    found = gauge_trend(data, noise="white").isel(gauge=0)
    line = stats.linregress(years_of(data["time"].values), data["level"].values[0])
    assert float(found["rate"]) == pytest.approx(line.slope, rel=1e-10)
    assert float(found["rate_sigma"]) == pytest.approx(line.stderr, rel=1e-10)
    assert float(found["degrees_of_freedom"]) == 28.0
    half = stats.t.ppf(0.95, 28) * line.stderr
    assert float(found["rate_high"] - found["rate_low"]) == pytest.approx(2.0 * half, rel=1e-10)
    assert float(found["datum"]) == pytest.approx(data["level"].values.mean(), rel=1e-14)


def test_exact_parts_are_found():
    """Rate, acceleration, steps and cycles without noise to speak of: 1e-6 mm of it leaves 1e-6 of each."""
    time = middles(480, monthly=True)
    years = years_of(time)
    centred = years - 0.5 * years[-1]
    cycles = 40.0 * np.cos(2 * np.pi * years + 1.0) + 9.0 * np.cos(4 * np.pi * years)
    steps = 30.0 * (time >= np.datetime64("1975-01-01")) - 12.0 * (time >= np.datetime64("1985-01-01"))
    tiny = 1e-6 * np.random.default_rng(3).standard_normal(480)
    data = levels(7000.0 + 3.0 * centred + 0.05 * centred**2 + cycles + steps + tiny)
    model = TrendModel(acceleration=True, steps={"g0": ["1985-01-01", "1975-01-01"]})
    found = gauge_trend(data, model=model, noise="white").isel(gauge=0)
    assert float(found["rate"]) == pytest.approx(3.0, abs=1e-6)
    assert float(found["acceleration"]) == pytest.approx(0.1, abs=1e-6)
    np.testing.assert_allclose(found["step"].values, [30.0, -12.0], atol=1e-5)


def test_a_window_is_the_record_cut():
    data = drawn(first_order(0.5), 360)
    window = gauge_trend(data, window=("1970-01-01", "1979-12-31"))
    cut = gauge_trend(data.sel(time=slice("1970-01-01", "1979-12-31")))
    assert float(window["rate"][0]) == pytest.approx(float(cut["rate"][0]), rel=1e-12)
    assert int(window["nepoch"][0]) == 120
    assert str(window["first"].values[0])[:7] == "1970-01"
    assert window["weights"].sizes["time"] == 360


def test_gauges_have_their_own_steps():
    data = drawn(white, 240, draws=2)
    found = gauge_trend(data, model=TrendModel(steps={"g1": ["1965-01-01"]}), noise="white")
    alone = gauge_trend(data.isel(gauge=[0]), noise="white")
    assert float(found["rate"][0]) == pytest.approx(float(alone["rate"][0]), rel=1e-12)
    assert np.isfinite(found["step"].values).tolist() == [[False], [True]]
    assert "step" not in alone


# --- the nodal tide --------------------------------------------------------------------------------------------------


def test_the_nodal_tide_is_taken_off_or_fitted():
    """The tide at 60 N over 45 years; noise of 0.01 mm moves a rate by less than 1e-3 mm yr-1."""
    data = drawn(white, 540)
    data["lat"].values[:] = 60.0
    trend = RATE * years_of(data["time"].values)
    tide = nodal_tide(data).values
    noise = 0.01 * np.random.default_rng(5).standard_normal(540)
    data["level"].values[:] = 7000.0 + trend + tide + noise
    off = gauge_trend(data, model=TrendModel(nodal="equilibrium"), noise="white").isel(gauge=0)
    fitted = gauge_trend(data, model=TrendModel(nodal="fit"), noise="white").isel(gauge=0)
    left = gauge_trend(data, noise="white").isel(gauge=0)
    for found in (off, fitted):
        assert float(found["rate"]) == pytest.approx(RATE, abs=1e-3)
    weights = off["weights"].values
    assert float(off["nodal_rate"]) == pytest.approx(weights @ tide[0], rel=1e-9)
    assert weights @ (data["level"].values[0] - 7000.0) - float(off["nodal_rate"]) == pytest.approx(float(off["rate"]))
    assert abs(float(left["rate"]) - RATE) > 0.01
    assert float(left["nodal_rate"]) == 0.0


def test_the_nodal_tide_needs_two_cycles_or_a_latitude():
    with pytest.raises(InputError, match=r"nodal: 'fit' needs 37.2 years, gauge 'g0' has 29.9"):
        gauge_trend(drawn(white, 360), model=TrendModel(nodal="fit"))
    data = drawn(white, 360)
    data["lat"].values[:] = np.nan
    with pytest.raises(SiteError, match="lat: of gauge 'g0' is not known"):
        gauge_trend(data, model=TrendModel(nodal="equilibrium"))


# --- the noise -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("model", "theta", "order"),
    [("ar1", (0.7,), (1, 0, 0)), ("ar1", (-0.4,), (1, 0, 0)), ("arma11", (0.8, -0.5), (1, 0, 1)),
     ("arma11", (0.5, 0.4), (1, 0, 1)), ("arma11", (-0.3, 0.6), (1, 0, 1)), ("arma11", (0.0, 0.5), (1, 0, 1))],
)  # fmt: skip
def test_likelihood_with_gaps_is_that_of_a_kalman_filter(model, theta, order):
    """statsmodels' state space form of the same process; one covariance exact, the other a recursion: rounding.

    Where phi is 0, 0.001 is taken for it, as its covariance is divided by phi.
    """
    index = np.setdiff1d(np.arange(120), [4, 5, 30, 31, 32, 33, 90])
    series = np.full(120, np.nan)
    series[index] = np.random.default_rng(2).standard_normal(index.size)
    products, log_determinant = _noise.inverse_times(model, np.array(theta), index, series[index, None])
    other = SARIMAX(series, order=order, trend="n")
    theta = (theta[0] or 0.001, *theta[1:])
    phi, ma = theta if model == "arma11" else (theta[0], 0.0)
    variance = (1.0 + 2.0 * phi * ma + ma**2) / (1.0 - phi**2)  # of a value, over that of an innovation
    own = -0.5 * (
        index.size * np.log(2 * np.pi * variance) + log_determinant + series[index] @ products[:, 0] / variance
    )
    expected = other.loglike([*theta, 1.0])
    assert own == pytest.approx(expected, abs=1e-7)


@pytest.mark.parametrize("kappa", [-0.5, -0.8, -1.0, -1.3, -1.8])
def test_power_law_noise_has_its_spectrum(kappa):
    """Variance of a difference is the integral of its spectrum, 2 (1 - cos h w) (2 sin(w/2))^kappa / pi: quadrature to 1e-6."""
    found = _noise.difference_variances(kappa, 40)
    for lag in (1, 2, 7, 40):

        def density(w, lag=lag):
            return 2.0 * (1.0 - np.cos(lag * w)) * (2.0 * np.sin(0.5 * w)) ** kappa / np.pi

        expected, _ = integrate.quad(density, 0.0, np.pi, limit=400)
        assert found[lag] == pytest.approx(expected, rel=1e-6)


def test_power_law_noise_ends_in_white_noise_and_random_walk():
    np.testing.assert_allclose(_noise.difference_variances(0.0, 6), [0, 2, 2, 2, 2, 2, 2], atol=1e-14)
    np.testing.assert_allclose(_noise.difference_variances(-2.0, 6), np.arange(7), atol=1e-14)


def covariance(model, theta, index):
    return linalg.inv(_noise.inverse_times(model, np.array(theta), index, np.eye(index.size))[0])


@pytest.mark.parametrize("model", NOISES)
def test_the_restricted_likelihood_is_that_of_contrasts(model):
    """Any orthonormal contrasts free of the regressors have the density that is maximised; dense algebra, to 1e-7."""
    index = np.setdiff1d(np.arange(60), [7, 8, 20, 41])
    design = np.stack([np.ones(index.size), index - 30.0, (index > 25).astype(float)], axis=1)
    series = first_order(0.5)(60, np.random.default_rng(4))[index]
    held = _noise.fit(model, index, design, series)
    contrasts = linalg.null_space(design.T)
    matrix = held.scale**2 * contrasts.T @ covariance(model, held.theta, index) @ contrasts
    expected = stats.multivariate_normal(cov=matrix).logpdf(contrasts.T @ series)
    assert held.log_likelihood == pytest.approx(expected, abs=1e-7)
    # nothing near it is likelier: 1e-3 is what the search of the power law's index may miss
    for k, (low, high) in enumerate(_noise.BOUNDS[model]):
        for move in (-0.03, 0.03):
            theta = held.theta.copy()
            theta[k] = np.clip(theta[k] + move, low, high)
            matrix = contrasts.T @ covariance(model, theta, index) @ contrasts
            values = contrasts.T @ series
            scale = values @ np.linalg.solve(matrix, values) / values.size
            assert stats.multivariate_normal(cov=scale * matrix).logpdf(values) < held.log_likelihood + 1e-3


@pytest.mark.parametrize("model", NOISES)
def test_the_rate_sigma_is_that_of_the_weights(model):
    """w C w of the fitted covariance, for any covariance that was fitted; to rounding of the inverse."""
    index = np.arange(80)
    design = np.stack([np.ones(80), index - 39.5], axis=1)
    held = _noise.fit(model, index, design, fractional(-0.8)(80, np.random.default_rng(6)))
    spread = held.scale**2 * held.rows @ covariance(model, held.theta, index) @ held.rows.T
    assert spread[1, 1] == pytest.approx(held.covariance[1, 1], rel=1e-7)


def test_known_noise_is_found_in_long_series():
    """800 values: phi to 3 sqrt((1 - phi^2) / n) = 0.1, kappa to 3 x 2 sqrt(6 / pi^2 / n) = 0.17 (Hosking 1981, from memory)."""
    index = np.arange(800)
    design = np.stack([np.ones(800), index - 400.0], axis=1)
    draw = np.random.default_rng(8)
    first = _noise.fit("ar1", index, design, first_order(0.4)(800, draw))
    law = _noise.fit("power_law", index, design, fractional(-0.8)(800, draw))
    assert first.theta[0] == pytest.approx(0.4, abs=0.1)
    assert law.theta[0] == pytest.approx(-0.8, abs=0.17)


@pytest.mark.parametrize("criterion", ["AICc", "BIC"])
def test_of_models_as_good_the_widest_is_taken(criterion):
    data = drawn(first_order(0.4), 60, draws=8, monthly=False)
    found = gauge_trend(data, criterion=criterion)
    table = found["criterion"].sel(kind=criterion)
    as_good = table <= table.min("noise_model") + AS_GOOD
    chosen = [str(name) for name in found["noise"].values]
    for k, name in enumerate(chosen):
        equals = [other for other in NOISES if bool(as_good.isel(gauge=k).sel(noise_model=other))]
        alone = {other: gauge_trend(data.isel(gauge=[k]), noise=other) for other in equals}
        widths = {other: float((held["rate_high"] - held["rate_low"])[0]) for other, held in alone.items()}
        assert max(widths, key=widths.get) == name
    assert len(set(chosen)) > 1


def test_short_series_have_no_noise_they_cannot_tell():
    found = gauge_trend(drawn(white, 12, monthly=False)).isel(gauge=0)
    assert np.isfinite(found["model_rate"].values).tolist() == [True, True, False, True]
    assert str(gauge_trend(drawn(white, 6, monthly=False))["noise"].values[0]) == "white"
    with pytest.raises(InputError, match="noise: 'arma11' cannot be fitted to the 12 values of gauge 'g0'"):
        gauge_trend(drawn(white, 12, monthly=False), noise="arma11")


# --- whether intervals hold what they promise ------------------------------------------------------------------------


def coverage(noise, count, *, draws, monthly=False, seed=11):
    """Share of 90 % intervals that hold the true rate."""
    found = gauge_trend(drawn(noise, count, draws=draws, monthly=monthly, seed=seed))
    return float(((found["rate_low"] < RATE) & (found["rate_high"] > RATE)).mean())


KNOWN = {"white": white, "ar1": first_order(0.4), "power_law": fractional(-0.8)}


@pytest.mark.parametrize("noise", list(KNOWN))
def test_intervals_of_forty_years_cover(noise):
    """40 draws: 90 % less 3 standard deviations of a binomial (4.7 %). White noise fitted to the power law covers 54 %."""
    assert coverage(KNOWN[noise], 40, draws=40) >= 0.76


def test_white_noise_fitted_to_a_power_law_covers_too_little():
    """So that the test above can fail: 54 % in 300 draws, 3 standard deviations of 100 draws above."""
    data = drawn(fractional(-0.8), 40, draws=100, monthly=False, seed=11)
    found = gauge_trend(data, noise="white")
    assert float(((found["rate_low"] < RATE) & (found["rate_high"] > RATE)).mean()) < 0.69


@pytest.mark.slow
@pytest.mark.parametrize("noise", list(KNOWN))
@pytest.mark.parametrize(("count", "monthly", "draws"), [(40, False, 400), (80, False, 400), (240, True, 150)])
def test_intervals_cover(noise, count, monthly, draws):
    """85 to 95 %, with two standard deviations of a binomial around."""
    room = 2.0 * np.sqrt(0.9 * 0.1 / draws)
    assert 0.85 - room <= coverage(KNOWN[noise], count, draws=draws, monthly=monthly) <= 0.95 + room


# --- what is refused -------------------------------------------------------------------------------------------------


def test_records_that_cannot_carry_a_trend_are_refused():
    data = drawn(white, 360)
    with pytest.raises(InputError, match="gauge 'g0' has no value at all"):
        gauge_trend(with_gaps(data, slice(None)))
    with pytest.raises(
        InputError, match=r"window: gauge 'g0' has no value from 2100-01-01 to 2110-01-01; it has some from 1960"
    ):
        gauge_trend(data, window=("2100-01-01", "2110-01-01"))
    with pytest.raises(InputError, match="has values in 2 calendar years of the window, 5 at least"):
        gauge_trend(data, window=("1970-01-01", "1971-12-31"))
    with pytest.raises(InputError, match="has values in 2 calendar years"):
        gauge_trend(drawn(white, 2, monthly=False))
    much = TrendModel(acceleration=True, steps=["1961-01-01", "1962-01-01", "1963-01-01"])
    with pytest.raises(InputError, match="has 5 values in the window, more than 6 are needed"):
        gauge_trend(drawn(white, 5, monthly=False), model=much)


@pytest.mark.parametrize("rate", [0.0, 2.0**-20])
def test_levels_without_any_noise_are_refused(rate):
    data = levels(7000.0 + rate * years_of(middles(240, monthly=True)))
    with pytest.raises(InputError, match="gauge 'g0' lies on what is fitted to 1e-09 mm, there is no noise"):
        gauge_trend(data)


@pytest.mark.parametrize("step", ["1950-01-01", "1960-01-01", "2020-01-01"])
def test_a_step_without_epochs_on_both_sides_is_refused(step):
    with pytest.raises(InputError, match=f"steps: {step} of gauge 'g0' is outside the epochs used, 1960-01-16"):
        gauge_trend(drawn(white, 360), model=TrendModel(steps=[step]))


def test_regressors_that_cannot_be_told_apart_are_refused():
    data = drawn(white, 360)
    with pytest.raises(InputError, match="do not tell all of what is fitted apart"):
        gauge_trend(data, model=TrendModel(steps=["1970-01-02", "1970-01-03"]))
    januaries = with_gaps(data, np.arange(360) % 12 > 0)
    with pytest.raises(InputError, match="do not tell all of what is fitted apart"):
        gauge_trend(januaries)
    assert np.isfinite(gauge_trend(januaries, model=TrendModel(seasonal=False))["rate"][0])


@pytest.mark.parametrize(
    ("choice", "message"),
    [
        ({"noise": "pink"}, "noise: no noise model 'pink'"),
        ({"criterion": "AIC"}, "criterion: no criterion 'AIC'. Did you mean AICc"),
        ({"model": TrendModel(nodal="remove")}, "nodal: no treatment of the nodal tide 'remove'"),
        ({"model": TrendModel(steps="1970-01-01")}, "steps: must be a sequence of dates"),
        ({"model": TrendModel(steps=["soon"])}, "steps: 'soon' of gauge 'g0' is no ISO date"),
        ({"model": TrendModel(steps={"gx": []})}, "steps: 'gx' is none of the gauges g0"),
    ],
)
def test_a_wrong_choice_is_refused(choice, message):
    with pytest.raises(InputError, match=message):
        gauge_trend(drawn(white, 120), **choice)


def test_levels_in_another_unit_or_shape_are_refused():
    data = drawn(white, 120)
    with pytest.raises(InputError, match="levels: must be a Dataset with level"):
        gauge_trend(data["level"])
    data["level"].attrs["units"] = "m"
    with pytest.raises(InputError, match="level must be in 'mm', got 'm'"):
        gauge_trend(data)
