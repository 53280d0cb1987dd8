"""Patterns times mass: closed forms, Monte Carlo against the analytic error, refusals."""

import numpy as np
import pytest
import xarray as xr

from massfingerprint.errors import InputError, UnitsError
from massfingerprint.mass.barystatic import barystatic
from massfingerprint.mass.rates import rates
from massfingerprint.sealevel.series import sea_level_rates, sea_level_series
from tests.mass.ledgers import draws, make_ledger

YEARS = np.arange(11.0)


@pytest.fixture
def ledger():
    return make_ledger(
        YEARS,
        {
            "a": {"mass": -100.0 * YEARS, "random_walk": 10.0 * np.sqrt(YEARS)},
            "b": {"mass": np.where(YEARS == 4.0, np.nan, -50.0 * YEARS), "systematic": 4.0 * YEARS},
        },
        correlation=[[1.0, 0.5], [0.5, 1.0]],
    )


@pytest.fixture
def here():
    values = xr.DataArray(
        [[-0.003, 0.001], [-0.002, -0.002]],
        dims=("source", "site"),
        coords={"source": ["a", "b"], "site": ["s", "t"]},
        attrs={"units": "mm Gt-1", "long_name": "change, at the site"},
    )
    return xr.Dataset({"relative_sea_level": values})


def test_a_pattern_of_minus_one_over_the_factor_is_the_barystatic_series(ledger):
    """A uniform pattern of -1/361.8 mm per Gt added makes every site the global mean, errors and correlations included."""
    flat = xr.DataArray(
        np.full((2, 1), -1 / 361.8), dims=("source", "site"), coords={"source": ["a", "b"], "site": ["s"]}
    )
    got = sea_level_series(xr.Dataset({"geoid": flat.assign_attrs(units="mm Gt-1")}), ledger)
    want = barystatic(ledger, gt_per_mm=361.8)
    np.testing.assert_allclose(got["geoid_total"].values[:, 0], want["sea_level_total"].values, rtol=1e-13)
    np.testing.assert_allclose(got["geoid_total_sigma"].values[:, 0], want["sea_level_total_sigma"].values, rtol=1e-13)
    np.testing.assert_allclose(got["geoid"].isel(site=0).T.values, want["sea_level"].values, rtol=1e-13)


def test_parts_add_up_and_a_gap_of_one_source_is_a_gap_of_the_total(here, ledger):
    got = sea_level_series(here, ledger)
    whole = got["relative_sea_level"].sum("source", skipna=False)
    np.testing.assert_allclose(got["relative_sea_level_total"].values, whole.values, rtol=1e-13, atol=1e-15)
    assert np.isnan(got["relative_sea_level_total"].values[4]).all()
    assert np.isfinite(got["relative_sea_level"].sel(source="a")).all()
    assert float(got["relative_sea_level_total"].sel(site="s")[10]) == pytest.approx(3.0 + 1.0)
    assert got["relative_sea_level_total"].attrs["units"] == "mm"


def test_the_error_of_series_and_rates_is_that_of_ten_thousand_draws(here, ledger):
    """Sampling error of a standard deviation from 10 000 draws is 0.7 %: 3 % is four of them."""
    count = 10_000
    whole = ledger.assign(
        mass_change=ledger["mass_change"].fillna(0.0), mass_change_sigma=ledger["mass_change_sigma"].fillna(16.0)
    )
    errors = draws(whole, count, seed=4)
    pattern = here["relative_sea_level"].sel(site="s").values
    level = np.einsum("s,nst->nt", pattern, errors)
    got = sea_level_series(here, whole)["relative_sea_level_total_sigma"].sel(site="s").values
    np.testing.assert_allclose(got[1:], level.std(axis=0)[1:], rtol=0.03)
    slope = sea_level_rates(here, whole, windows={"all": ("2000-01-01", "2010-01-02")})
    design = np.stack([np.ones(11), YEARS], axis=1)
    fitted = np.einsum("pt,nt->np", np.linalg.pinv(design), level)[:, 1]
    assert float(slope["relative_sea_level_total_sigma"].sel(window="all", site="s")) == pytest.approx(
        fitted.std(), rel=0.03
    )


def test_rates_are_pattern_times_mass_rate(here, ledger):
    windows = {"all": ("2000-01-01", "2010-12-31"), "late": ("2005-01-01", "2010-12-31")}
    got, mass = sea_level_rates(here, ledger, windows=windows), rates(ledger, windows=windows)
    want = here["relative_sea_level"] * mass["rate"]
    np.testing.assert_allclose(got["relative_sea_level"].transpose(*want.dims).values, want.values, rtol=1e-12)
    assert float(got["relative_sea_level_total"].sel(window="all", site="s")) == pytest.approx(0.4, rel=2e-3)
    assert got["relative_sea_level"].attrs["units"] == "mm yr-1"
    thin = ledger.assign(mass_change=ledger["mass_change"].where(ledger["source"] != "b"))
    thin = sea_level_rates(here, thin, windows={"all": windows["all"]})
    assert np.isnan(thin["relative_sea_level_total"]).all()
    assert np.isfinite(thin["relative_sea_level"].sel(source="a")).all()


def test_a_grid_gives_the_total_alone_unless_asked(ledger):
    field = xr.DataArray(
        np.ones((2, 3, 4)), dims=("source", "lat", "lon"), coords={"source": ["b", "a"]}, attrs={"units": "mm Gt-1"}
    )
    got = sea_level_series(xr.Dataset({"bedrock_up": field}), ledger)
    assert set(got.data_vars) == {"bedrock_up_total", "bedrock_up_total_sigma"}
    assert got["bedrock_up_total"].shape == (11, 3, 4)
    kept = sea_level_series(xr.Dataset({"bedrock_up": field}), ledger, keep_source=True)
    assert kept["bedrock_up"].dims == ("time", "source", "lat", "lon")
    assert kept["source"].values.tolist() == ["a", "b"]


def test_inputs_are_left_alone(here, ledger):
    before = here.copy(deep=True), ledger.copy(deep=True)
    sea_level_series(here, ledger)
    xr.testing.assert_identical(here, before[0])
    xr.testing.assert_identical(ledger, before[1])


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        (lambda d: d["relative_sea_level"], InputError, "patterns: must be a Dataset, got DataArray"),
        (lambda d: d.rename(relative_sea_level="x"), InputError, "patterns: holds none of relative_sea_level"),
        (lambda d: d.isel(source=0, drop=True), InputError, "has no named dimension 'source'"),
        (lambda d: d.isel(source=[0]), InputError, "patterns: none for 'b' of the ledger"),
        (lambda d: d.assign_coords(source=["a", "c"]), InputError, "patterns: none for 'b' of the ledger. Known"),
        (
            lambda d: d.assign(relative_sea_level=d["relative_sea_level"].assign_attrs(units="m")),
            UnitsError,
            "must be in mm Gt-1, got 'm'",
        ),
    ],
)
def test_what_does_not_fit_is_refused(here, ledger, change, error, words):
    with pytest.raises(error, match=words):
        sea_level_series(change(here), ledger)
    with pytest.raises(error, match=words):
        sea_level_rates(change(here), ledger, windows={"all": ("2000-01-01", "2010-12-31")})


def test_a_pattern_without_mass_is_refused(here, ledger):
    more = xr.concat([here, here.isel(source=[0]).assign_coords(source=["c"])], dim="source")
    with pytest.raises(InputError, match="ledger: no mass for 'c' of the patterns"):
        sea_level_series(more, ledger)
