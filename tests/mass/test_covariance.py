"""Covariance against closed forms derived by hand and against 20 000 draws from the definitions."""

import numpy as np
import pytest

from massfingerprint.errors import InputError
from massfingerprint.mass.covariance import component_sigmas, covariance, cross_covariance
from massfingerprint.mass.rates import combination_sigma, differences, means, rates
from tests.mass.ledgers import draws, make_ledger

DRAWS = 20_000
TWO_PERCENT = 0.02  # 20 000 draws give a standard deviation to 0.5 %, four standard errors are 2 %


def one(years, **parts):
    return make_ledger(years, {"ice": parts})


def sigma_of(dataset, name, source="ice"):
    return float(dataset[name].sel(source=source)[0])


WHOLE = {"whole": ("1990-01-01", "2030-01-01")}


def test_closed_forms_of_each_model():
    """Three epochs 1, 2, 4 years after the reference epoch."""
    years, s = [1.0, 2.0, 4.0], np.array([3.0, 5.0, 7.0])
    assert np.array_equal(covariance(one(years, independent=s), "ice"), np.diag([9.0, 25.0, 49.0]))
    assert np.array_equal(covariance(one(years, systematic=s), "ice"), np.outer(s, s))
    walk = [[9.0, 9.0, 9.0], [9.0, 25.0, 25.0], [9.0, 25.0, 49.0]]
    assert np.array_equal(covariance(one(years, random_walk=s), "ice"), walk)
    whole = one(years, independent=s, systematic=2 * s, random_walk=s)
    assert np.allclose(covariance(whole, "ice"), np.diag(s**2) + np.outer(2 * s, 2 * s) + walk, rtol=1e-14)
    assert np.array_equal(covariance(whole, "ice", component="random_walk"), walk)
    assert covariance(whole, "ice").attrs["units"] == "Gt2"


def test_random_walk_across_the_reference_epoch():
    """Independent rate errors before and after it do not know of each other."""
    ledger = one([-2.0, -1.0, 0.0, 1.0, 3.0], random_walk=np.array([4.0, 3.0, 0.0, 2.0, 6.0]))
    expected = np.zeros((5, 5))
    expected[:2, :2] = [[16.0, 9.0], [9.0, 9.0]]
    expected[3:, 3:] = [[4.0, 4.0], [4.0, 36.0]]
    assert np.array_equal(covariance(ledger, "ice"), expected)


def test_differences_by_hand():
    """Independent: sqrt(s1^2 + s2^2). Systematic: |s2 - s1|. Random walk: sqrt(s2^2 - s1^2)."""
    years, s = [1.0, 2.0], np.array([3.0, 5.0])
    expected = {"independent": np.sqrt(34.0), "systematic": 2.0, "random_walk": 4.0}
    for model, value in expected.items():
        assert sigma_of(differences(one(years, **{model: s}), windows=WHOLE), "difference_sigma") == pytest.approx(
            value
        )


def test_means_by_hand():
    """N equal independent errors: s / sqrt(N). Systematic: s. Random walk with variances 1, 2, 3: sqrt(14) / 3."""
    years = [1.0, 2.0, 3.0]
    assert sigma_of(means(one(years, independent=2.0), windows=WHOLE), "mean_sigma") == pytest.approx(2.0 / np.sqrt(3))
    assert sigma_of(means(one(years, systematic=2.0), windows=WHOLE), "mean_sigma") == pytest.approx(2.0)
    walk = one(years, random_walk=np.sqrt([1.0, 2.0, 3.0]))
    assert sigma_of(means(walk, windows=WHOLE), "mean_sigma") == pytest.approx(np.sqrt(14.0) / 3.0)


def slope_sigma(years, **parts):
    return sigma_of(rates(one(years, **parts), windows=WHOLE), "rate_sigma")


@pytest.mark.parametrize("count", [5, 20, 80])
def test_rate_of_independent_errors_by_hand(count):
    """s / sqrt(sum (t - mean t)^2): textbook least squares."""
    years = np.linspace(0.0, 10.0, count)
    expected = 2.0 / np.sqrt(((years - years.mean()) ** 2).sum())
    assert slope_sigma(years, independent=2.0) == pytest.approx(expected, rel=1e-9)


def test_rate_of_systematic_errors_by_hand():
    """An error that grows as b t is a rate error of b, however many epochs; a constant one is an offset without rate."""
    for count in (5, 20, 80):
        years = np.linspace(0.0, 10.0, count)
        assert slope_sigma(years, systematic=3.0 * years) == pytest.approx(3.0, rel=1e-6)
        assert slope_sigma(years, systematic=3.0) == pytest.approx(0.0, abs=1e-6)


def test_rate_of_a_random_walk_by_hand():
    """Wiener process of unit variance a year over T: ordinary slope has variance 6 / (5 T) (textbook), last minus first 1 / T."""
    years = np.linspace(0.0, 10.0, 1001)
    ledger = one(years, random_walk=np.sqrt(years))
    assert sigma_of(rates(ledger, windows=WHOLE), "rate_sigma") == pytest.approx(np.sqrt(6 / 50), rel=2e-3)
    ends = rates(ledger, windows=WHOLE, estimator="last minus first")
    assert sigma_of(ends, "rate_sigma") == pytest.approx(np.sqrt(1 / 10), rel=1e-9)


def test_independent_shrinks_with_the_number_of_epochs_and_systematic_does_not():
    few, many = np.linspace(0.0, 10.0, 11), np.linspace(0.0, 10.0, 401)
    assert slope_sigma(many, independent=1.0) < 0.25 * slope_sigma(few, independent=1.0)
    assert slope_sigma(many, systematic=many) == pytest.approx(slope_sigma(few, systematic=few), rel=1e-6)


def test_weights_follow_the_independent_errors():
    """Two good and one useless epoch: the slope is that of the good two."""
    ledger = one([0.0, 1.0, 2.0], mass=np.array([0.0, 500.0, -20.0]), independent=np.array([1.0, 1e6, 1.0]))
    assert sigma_of(rates(ledger, windows=WHOLE), "rate") == pytest.approx(-10.0, rel=1e-6)


YEARS = np.linspace(-4.0, 8.0, 49)
SOURCES = {
    "white": {"mass": -20.0 * YEARS, "independent": 1.0 + 0.1 * np.abs(YEARS)},
    "shared": {"mass": -5.0 * YEARS, "systematic": 2.0 * np.abs(YEARS)},
    "walk": {"mass": 3.0 * YEARS, "random_walk": 4.0 * np.sqrt(np.abs(YEARS))},
    "all": {"mass": YEARS**2, "independent": 1.5, "systematic": np.abs(YEARS), "random_walk": np.sqrt(np.abs(YEARS))},
}
CORRELATION = [[1.0, 0.3, 0.0, 0.2], [0.3, 1.0, 0.0, -0.4], [0.0, 0.0, 1.0, 0.5], [0.2, -0.4, 0.5, 1.0]]


@pytest.fixture(scope="module")
def drawn():
    ledger = make_ledger(YEARS, SOURCES, correlation=CORRELATION)
    return ledger, draws(ledger, DRAWS, seed=4)


@pytest.mark.parametrize("source", list(SOURCES))
def test_draws_have_the_covariance(drawn, source):
    """Every entry within 4 standard errors of the sampling; the sigmas within 2 %."""
    ledger, errors = drawn
    sample = errors[:, list(SOURCES).index(source)]
    matrix = covariance(ledger, source).values
    spread = np.sqrt(np.diag(matrix))
    held = spread > 0
    np.testing.assert_allclose(sample.std(axis=0)[held], spread[held], rtol=TWO_PERCENT)
    empirical = sample.T @ sample / DRAWS
    allowed = 5.0 * np.sqrt((np.outer(spread, spread) ** 2 + matrix**2) / DRAWS)
    assert (np.abs(empirical - matrix) <= allowed + 1e-12).all()


def test_draws_have_the_covariance_between_sources(drawn):
    ledger, errors = drawn
    matrix = cross_covariance(ledger, "shared", "all").values
    empirical = errors[:, 1].T @ errors[:, 3] / DRAWS
    spreads = [np.sqrt(np.diag(covariance(ledger, name).values)) for name in ("shared", "all")]
    assert (np.abs(empirical - matrix) <= 5.0 * np.outer(*spreads) * np.sqrt(2 / DRAWS) + 1e-12).all()


@pytest.mark.parametrize("choices", [{}, {"seasonal": True}, {"acceleration": True}, {"estimator": "last minus first"}])
def test_draws_have_the_sigma_of_rates(drawn, choices):
    """The estimator put on 20 000 drawn ledgers scatters as rate_sigma says, source by source and for the total."""
    ledger, errors = drawn
    windows = {"all": ("1996-01-01", "2008-01-02"), "late": ("2001-06-01", "2007-03-01")}
    expected = rates(ledger, windows=windows, **choices)
    for window, span in windows.items():
        slopes = estimated(ledger, errors, span, choices)
        for i, source in enumerate(SOURCES):
            spread = float(expected["rate_sigma"].sel(window=window, source=source))
            assert slopes[:, i].std() == pytest.approx(spread, rel=TWO_PERCENT), (window, source)
        total = float(expected["total_rate_sigma"].sel(window=window))
        assert slopes.sum(axis=1).std() == pytest.approx(total, rel=TWO_PERCENT)


def estimated(ledger, errors, window, choices):
    """Slopes (draw, source) of each drawn series by numpy's own least squares."""
    start, end = (np.datetime64(v) for v in window)
    inside = (ledger["time"].values >= start) & (ledger["time"].values <= end)
    t = (ledger["time"].values[inside] - np.datetime64("2000-01-01")) / np.timedelta64(1, "D") / 365.25
    if choices.get("estimator"):
        ends = errors[:, :, inside][:, :, [0, -1]]
        return (ends[..., 1] - ends[..., 0]) / (t[-1] - t[0])
    t = t - 0.5 * (t[0] + t[-1])
    columns = [np.ones_like(t), t]
    columns += [t**2] if choices.get("acceleration") else []
    columns += [np.cos(2 * np.pi * t), np.sin(2 * np.pi * t)] if choices.get("seasonal") else []
    design, out = np.stack(columns, axis=1), []
    for i, model in enumerate(ledger["error_model"].values):
        sigma = component_sigmas(ledger, str(ledger["source"].values[i]))["independent"][inside]
        weight = 1 / sigma if model in ("independent", "sum") else np.ones_like(sigma)
        out.append(np.linalg.lstsq(design * weight[:, None], (errors[:, i, inside] * weight).T, rcond=None)[0][1])
    return np.stack(out, axis=1)


def test_sum_of_two_correlated_sources_by_hand():
    """s^2 = a^2 + b^2 + 2 r a b."""
    ledger = make_ledger([1.0], {"a": {"systematic": 3.0}, "b": {"systematic": 4.0}}, correlation=[[1, 0.5], [0.5, 1]])
    sigma = combination_sigma(ledger, {"a": np.ones(1), "b": np.ones(1)})
    assert sigma == pytest.approx(np.sqrt(9 + 16 + 2 * 0.5 * 12))


def test_times_without_a_value_have_no_covariance():
    ledger = one([1.0, 2.0, 3.0], mass=np.array([0.0, np.nan, 1.0]), independent=1.0)
    matrix = covariance(ledger, "ice").values
    assert np.isnan(matrix[1]).all()
    assert np.isnan(matrix[:, 1]).all()
    assert matrix[0, 0] == 1.0
    assert sigma_of(rates(ledger, windows=WHOLE), "rate_sigma") == pytest.approx(np.sqrt(0.5))


def test_exact_signals_are_recovered():
    """Trend, acceleration and yearly cycle without noise come back to 1e-9."""
    years = np.linspace(0.0, 12.0, 145)
    mass = 7.0 - 30.0 * years + 0.5 * 4.0 * years**2 + 25.0 * np.cos(2 * np.pi * years + 0.3)
    found = rates(one(years, mass=mass, independent=1.0), windows=WHOLE, acceleration=True, seasonal=True)
    assert sigma_of(found, "acceleration") == pytest.approx(4.0, rel=1e-7)
    assert sigma_of(found, "rate") == pytest.approx(-30.0 + 4.0 * 6.0, rel=1e-7)  # at the middle of the window


def test_windows_with_too_little():
    ledger = make_ledger(
        [0.0, 1.0, 5.0, 6.0],
        {"a": {"mass": np.array([1, 2, np.nan, np.nan]), "independent": 1.0}, "b": {"independent": 1.0}},
    )
    found = rates(ledger, windows={"late": ("2004-01-01", "2010-01-01")})
    assert np.isnan(found["rate"].sel(source="a")).all()
    assert np.isfinite(found["rate"].sel(source="b")).all()
    assert np.isnan(found["total_rate"]).all()
    with pytest.raises(InputError, match="no source has enough values in 'none'"):
        rates(ledger, windows={"none": ("2030-01-01", "2031-01-01")})


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda x: covariance(x, "cie"), "source: no source 'cie' in the ledger. Did you mean ice"),
        (lambda x: covariance(x, "ice", component="white"), "component: no error component 'white'"),
        (
            lambda x: covariance(x.assign(error_model=("source", ["odd"])), "ice"),
            "error_model: of 'ice' must be one of",
        ),
        (
            lambda x: covariance(x.assign(error_model=("source", ["sum"])), "ice"),
            "mass_change_sigma_independent is missing",
        ),
        (lambda x: rates(x, windows={}), "windows: must be a mapping"),
        (lambda x: rates(x, windows={"w": ("2001-01-01", "2000-01-01")}), "'w' must end after it starts"),
        (lambda x: rates(x, windows={"w": ("then", "now")}), "'w' must be .start, end. as ISO dates"),
        (
            lambda x: rates(x, windows=WHOLE, estimator="median"),
            "estimator: must be 'least squares' or 'last minus first'",
        ),
        (
            lambda x: rates(x, windows=WHOLE, estimator="last minus first", seasonal=True),
            "has no acceleration and no seasonal",
        ),
    ],
)
def test_wrong_arguments(call, message):
    with pytest.raises(InputError, match=message):
        call(one([1.0, 2.0, 3.0], independent=1.0))


def test_components_that_do_not_add_up():
    ledger = one([1.0, 2.0], independent=1.0, systematic=1.0)
    ledger["mass_change_sigma"] = ledger["mass_change_sigma"] * 2
    with pytest.raises(InputError, match="squared error components of 'ice' do not add"):
        covariance(ledger, "ice")


def test_yearly_epochs_cannot_hold_a_yearly_cycle():
    """First days of years differ by less than a day from a grid of 365.25: no seasonal fit is made of that."""
    days = (
        np.array([f"{y}-01-01" for y in range(2000, 2012)], dtype="datetime64[D]") - np.datetime64("2000-01-01")
    ).astype(float)
    ledger = one(days / 365.25, mass=-days, independent=1.0)
    with pytest.raises(InputError, match="no source has enough values"):
        rates(ledger, windows=WHOLE, seasonal=True)
    assert np.isfinite(rates(ledger, windows=WHOLE)["rate"]).all()
