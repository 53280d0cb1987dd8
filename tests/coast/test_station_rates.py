"""Rates at stations: exact where they can be, and their covariance against members drawn from the error models."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from massfingerprint.coast.station_rates import station_rates, station_series
from massfingerprint.coast.station_report import constant_ledger, station_flags, station_residuals, station_table
from massfingerprint.coast.stations import COMPONENTS
from massfingerprint.errors import InputError, UnitsError
from tests.mass.ledgers import draws, make_ledger

SOURCES = ("ice", "snow", "firn")
MONTHS = np.arange(61) / 12.0
YEAR = 365.25
EPOCH = np.datetime64("2000-01-01", "ns")


def make_values(names, sources=SOURCES, seed=3):
    """Made-up motion per gigatonne."""
    random = np.random.default_rng(seed)
    fields = {
        f"bedrock_{name}": (
            ("source", "site"),
            random.normal(scale=0.01, size=(len(sources), len(names))),
            {"units": "mm Gt-1"},
        )
        for name in COMPONENTS
    }
    return xr.Dataset(
        fields, coords={"source": np.array(sources, dtype=object), "site": np.array(names, dtype=object)}
    ).assign_attrs(reference_frame="CM")


def make_stations(**rows):
    """Stations from name=(start, end, gaps) in years after 2000; None: not given."""
    out = pd.DataFrame({"station": list(rows), "lat": 0.0, "lon": 0.0})
    for place, name in enumerate(("start", "end")):
        ends = [row[place] for row in rows.values()]
        out[name] = np.array([np.datetime64("NaT") if e is None else at(e) for e in ends], dtype="datetime64[ns]")
    out["gaps"] = [[(at(a), at(b)) for a, b in row[2]] for row in rows.values()]
    return out


def at(years):
    """Times of years of 365.25 days after 2000, one or many, to the hour."""
    hours = np.round(np.asarray(years) * YEAR * 24.0).astype("timedelta64[h]")
    return EPOCH + hours


def make_series(name, years, **columns):
    return pd.DataFrame({"station": name, "time": at(years), **columns})


def linear(slopes=(-100.0, 30.0, -5.0), **more):
    return make_ledger(
        MONTHS,
        {n: {"mass": s * MONTHS, "systematic": abs(s) * MONTHS, **more} for n, s in zip(SOURCES, slopes, strict=True)},
    )


def years_of(times):
    return (times - EPOCH) / np.timedelta64(1, "D") / YEAR


def test_the_covariance_is_that_of_drawn_members():
    """2000 members, each interpolated and fitted by numpy alone, give the covariance of every pair of rates.

    The sample covariance of n Gaussian members has the standard deviation sqrt((C_ii C_jj + C_ij^2) / n). 21 entries, each
    within 4 of them: by chance one is missed once in 750 seeds.
    """
    members = 2000
    related = [[1.0, 0.6, 0.0], [0.6, 1.0, -0.4], [0.0, -0.4, 1.0]]
    walk = {"mass": -90.0 * MONTHS, "random_walk": 12.0 * np.sqrt(MONTHS)}
    mixed = {"independent": 8.0 + MONTHS, "systematic": 4.0 * MONTHS, "random_walk": 6.0 * np.sqrt(MONTHS)}
    ledger = make_ledger(
        MONTHS,
        {"ice": walk, "snow": {"mass": 20.0 * MONTHS, **mixed}, "firn": {"mass": MONTHS, **mixed}},
        correlation=related,
    )
    names = ["AAAA", "BBBB"]
    stations = make_stations(AAAA=(0.3, 4.9, [(1.0, 1.7)]), BBBB=(1.11, 4.0, []))
    values = make_values(names)
    found = station_rates(values, ledger, stations)
    times = station_series(values, ledger, stations).groupby("station")["time"]
    own = years_of(ledger["time"].values)
    mass = ledger["mass_change"].values + draws(ledger, members, seed=11)
    slopes = []
    for name in names:
        epochs = years_of(times.get_group(name).to_numpy())
        there = np.array([[np.interp(epochs, own, row) for row in member] for member in mass])
        for component in COMPONENTS:
            pattern = values[f"bedrock_{component}"].sel(site=name).values
            slopes.append(np.polyfit(epochs, np.einsum("s,mst->tm", pattern, there), 1)[0])
    sample = np.cov(slopes)
    exact = found["covariance"].values.reshape(6, 6)
    spread = np.sqrt((np.outer(np.diag(exact), np.diag(exact)) + exact**2) / members)
    assert (np.abs(sample - exact) / spread).max() < 4.0
    assert found["rate_total_sigma"].values.ravel() == pytest.approx(np.sqrt(np.diag(exact)), rel=1e-12)
    sigma = np.sqrt(np.diag(exact))
    between = np.abs(exact[:3, 3:] / np.outer(sigma[:3], sigma[3:]))
    assert between.max() > 0.5  # stations share ice: what is compared is not nothing
    mean = found["rate_total"].values.ravel()
    assert (np.abs(np.mean(slopes, axis=1) - mean) / np.sqrt(np.diag(exact) / members)).max() < 4.0


@pytest.mark.parametrize("seasonal", [False, True])
@pytest.mark.parametrize("gaps", [[], [(1.0, 1.4)], [(0.5, 1.2), (3.1, 3.9)]])
def test_the_rate_of_a_straight_record_is_exact(gaps, seasonal):
    stations = make_stations(AAAA=(0.2, 4.7, gaps))
    values, ledger = make_values(["AAAA"]), linear()
    found = station_rates(values, ledger, stations, seasonal=seasonal)
    for component in COMPONENTS:
        parts = values[f"bedrock_{component}"].sel(site="AAAA").values * [-100.0, 30.0, -5.0]
        here = found.sel(station="AAAA", component=component)
        assert here["rate"].values == pytest.approx(parts, rel=1e-9)
        assert float(here["rate_total"]) == pytest.approx(parts.sum(), rel=1e-9)
        # one error for all epochs, as large as the rate itself; sources independent
        assert here["rate_sigma"].values == pytest.approx(np.abs(parts), rel=1e-9)
        assert float(here["rate_total_sigma"]) == pytest.approx(np.sqrt((parts**2).sum()), rel=1e-9)
    series = station_series(values, ledger, stations)
    inside = [
        ((years_of(series["time"].to_numpy()) - a) * (years_of(series["time"].to_numpy()) - b) < 0) for a, b in gaps
    ]
    assert not np.any(inside)
    assert found["nepoch"].values.tolist() == [[len(series)] * 3]


def test_monthly_epochs_hold_both_ends():
    stations = make_stations(AAAA=(0.5, 3.5, []))
    series = station_series(make_values(["AAAA"]), linear(), stations)
    time = series["time"].to_numpy()
    assert time[0] == stations["start"].iloc[0]
    assert time[-1] == stations["end"].iloc[0]
    assert len(time) == 37
    steps = np.diff(time) / np.timedelta64(1, "D")
    assert np.ptp(steps) < 1e-9
    assert steps[0] == pytest.approx(YEAR / 12.0, rel=1e-3)


def test_a_yearly_cycle_is_taken_out_of_the_rate():
    cycle = 50.0 * np.cos(2.0 * np.pi * (MONTHS - 0.1))
    ledger = make_ledger(MONTHS, {"ice": {"mass": -100.0 * MONTHS + cycle, "independent": np.ones(61)}})
    values = make_values(["AAAA"], sources=("ice",))
    series = make_series("AAAA", MONTHS[3:50])  # no whole number of years, at the epochs of the record
    stations = make_stations(AAAA=(None, None, []))
    expected = -100.0 * values["bedrock_up"].item()
    rates = [
        float(station_rates(values, ledger, stations, series=series, seasonal=fit)["rate_total"][0, 0])
        for fit in (True, False)
    ]
    assert rates[0] == pytest.approx(expected, rel=1e-4)  # epochs are rounded to the hour, 1e-4 of a year
    assert abs(rates[1] / expected - 1.0) > 0.01


def test_stations_that_share_ice_are_correlated():
    """Of one source alone, all rates over the same epochs have one error: correlation 1 or -1."""
    ledger = make_ledger(MONTHS, {"ice": {"mass": -MONTHS, "random_walk": np.sqrt(MONTHS)}})
    values = make_values(["AAAA", "BBBB"], sources=("ice",))
    same = make_stations(AAAA=(0.5, 4.5, []), BBBB=(0.5, 4.5, []))
    found = station_rates(values, ledger, same)["covariance"].values.reshape(6, 6)
    sigma = np.sqrt(np.diag(found))
    assert np.abs(found / np.outer(sigma, sigma)) == pytest.approx(np.ones((6, 6)), rel=1e-9)
    apart = station_rates(values, ledger, make_stations(AAAA=(0.5, 2.0, []), BBBB=(2.0, 4.5, [])))
    cross = apart["covariance"].sel(station="AAAA", station_other="BBBB").values
    # steps of a random walk before and after are independent
    assert np.abs(cross).max() < 1e-9 * sigma.max() ** 2
    assert apart["covariance"].sel(station="AAAA", station_other="AAAA").values[0, 0] > 0.0


def test_weights_are_those_of_the_observations():
    """Two straight pieces: epochs with tiny sigma on the first decide the slope; equal weights mix both."""
    mass = np.where(MONTHS < 2.5, -100.0 * MONTHS, -250.0 + 40.0 * (MONTHS - 2.5))
    ledger = make_ledger(MONTHS, {"ice": {"mass": mass, "systematic": MONTHS}})
    values = make_values(["AAAA"], sources=("ice",))
    stations = make_stations(AAAA=(None, None, []))
    years = MONTHS[1:-1:3]
    sigma = np.where(years < 2.5, 1e-4, 10.0)
    plain = np.interp(years, MONTHS, mass)
    for spread in (sigma, np.full(years.size, 7.0), 1.0 + years):
        seen = np.zeros(years.size)
        series = make_series("AAAA", years, up=seen, up_sigma=spread)
        found = station_rates(values, ledger, stations, series=series)
        slope = np.polyfit(years, plain, 1, w=1.0 / spread)[0]
        # epochs are rounded to the hour
        assert float(found["rate_total"].sel(component="up")[0]) == pytest.approx(
            slope * values["bedrock_up"].item(), rel=1e-4
        )
        equal = np.polyfit(years, plain, 1)[0] * values["bedrock_north"].item()
        assert float(found["rate_total"].sel(component="north")[0]) == pytest.approx(equal, rel=1e-4)
    tight = station_rates(values, ledger, stations, series=make_series("AAAA", years, up=seen, up_sigma=sigma))
    assert float(tight["rate_total"][0, 0]) == pytest.approx(-100.0 * values["bedrock_up"].item(), rel=1e-3)


def test_what_is_observed_beyond_the_ice_is_the_residual():
    ledger, values, stations = linear(), make_values(["AAAA"]), make_stations(AAAA=(0.5, 4.0, []))
    years = np.linspace(0.5, 4.0, 40)
    random = np.random.default_rng(5)
    elastic = (values["bedrock_up"].sel(site="AAAA").values * [-100.0, 30.0, -5.0]).sum()
    up = (elastic + 3.0) * years + random.normal(scale=0.5, size=40)
    up[7] = np.nan  # no observation then
    series = make_series("AAAA", years, up=up)
    found = station_rates(values, ledger, stations, series=series).sel(station="AAAA", component="up")
    held = np.isfinite(up)
    (slope, _), squared = np.polyfit(years[held], up[held], 1, cov=True)
    assert int(found["nepoch"]) == 39
    assert float(found["observed_rate"]) == pytest.approx(slope, rel=1e-3)
    assert float(found["observed_rate_sigma"]) == pytest.approx(np.sqrt(squared[0, 0]), rel=1e-3)
    assert float(found["residual_rate"]) == pytest.approx(3.0, abs=4.0 * np.sqrt(squared[0, 0]))
    both = np.hypot(found["observed_rate_sigma"], found["rate_total_sigma"])
    assert float(found["residual_rate_sigma"]) == pytest.approx(float(both))
    table = station_series(values, ledger, stations, series=series)
    assert table["up_residual"].to_numpy() == pytest.approx(
        (table["up_observed"] - table["up"]).to_numpy(), nan_ok=True
    )
    assert table["up_observed"].isna().sum() == 1


def test_a_station_without_rows_in_the_series_has_monthly_epochs():
    stations = make_stations(AAAA=(0.5, 4.0, []), BBBB=(0.5, 4.0, []))
    values, ledger = make_values(["AAAA", "BBBB"]), linear()
    series = make_series("AAAA", [1.0, 2.0, 3.0], up=[0.0, 1.0, 2.0])
    found = station_rates(values, ledger, stations, series=series)
    assert found["nepoch"].values.tolist() == [[3] * 3, [43] * 3]
    assert np.isfinite(found["observed_rate"].values).tolist() == [[True, False, False], [False] * 3]
    table = station_series(values, ledger, stations, series=series)
    assert table.groupby("station")["up_residual"].count().tolist() == [3, 0]


def test_a_record_that_does_not_cover_the_span_gives_no_number_unless_asked():
    ledger, values = linear(), make_values(["AAAA", "BBBB", "CCCC"])
    stations = make_stations(AAAA=(0.5, 4.5, []), BBBB=(3.0, 7.0, []), CCCC=(6.0, 8.0, []))
    found = station_rates(values, ledger, stations)
    assert np.isfinite(found["rate_total"].values).all(axis=1).tolist() == [True, False, False]
    assert found["reason"].values[0] == ""
    span = "its span is 2002-12-31 to 2006-12-31, the mass record covers 2000-01-01 to 2004-12-31"
    assert found["reason"].values[1].startswith(span)
    assert np.isnan(found["covariance"].values[1]).all()
    assert np.isnan(found["covariance"].values[0, :, 1]).all()
    assert np.isfinite(found["covariance"].values[0, :, 0]).all()
    shared = station_rates(values, ledger, stations, overlap=True)
    assert np.isfinite(shared["rate_total"].values).all(axis=1).tolist() == [True, True, False]
    assert shared["note"].values[1].startswith("overlap alone, 2002-12-31 to 2004-")
    assert str(shared["last"].values[1])[:4] == "2004"
    up = values["bedrock_up"].sel(site="BBBB").values @ np.array([-100.0, 30.0, -5.0])
    assert float(shared["rate_total"][1, 0]) == pytest.approx(up, rel=1e-9)


def test_the_source_that_bounds_the_record_is_named():
    ledger = linear()
    ledger["mass_change"][2, :13] = np.nan
    ledger["mass_change_sigma"][2, :13] = np.nan
    found = station_rates(make_values(["AAAA"]), ledger, make_stations(AAAA=(0.5, 4.5, [])))
    assert "covers 2001-01-30 (firn starts) to 2004-12-31" in found["reason"].item()


def test_nothing_is_interpolated_across_a_hole():
    ledger = linear()
    for name in ("mass_change", "mass_change_sigma"):
        ledger[name][0, 20:31] = np.nan  # eleven months of one source
        ledger[name][1, 40:42] = np.nan  # two months: three steps, still interpolated
    values, stations = make_values(["AAAA"]), make_stations(AAAA=(0.52, 4.52, []))
    found = station_rates(values, ledger, stations)
    series = station_series(values, ledger, stations)
    lost = series["up"].isna().to_numpy()
    years = years_of(series["time"].to_numpy())
    expected = (years > MONTHS[19]) & (years < MONTHS[31])
    assert lost.tolist() == expected.tolist()
    assert set(series["missing"][lost]) == {"hole of the mass record"}
    assert found["note"].item() == f"{lost.sum()} of {lost.size} epochs left out, in holes of the mass record"
    assert found["nepoch"].values[0, 0] == (~lost).sum()


def test_a_displacement_and_its_sigma_by_hand():
    """Half-way between two epochs, of two sources with correlated independent errors."""
    sources = {
        "ice": {"mass": [0.0, -10.0, -30.0], "independent": [3.0, 4.0, 5.0]},
        "snow": {"mass": [0.0, 2.0, 4.0], "independent": [1.0, 1.0, 2.0]},
    }
    ledger = make_ledger([0.0, 1.0, 2.0], sources, correlation=[[1.0, 0.5], [0.5, 1.0]])
    values = make_values(["AAAA"], sources=("ice", "snow"))
    found = station_series(values, ledger, make_stations(AAAA=(None, None, [])), series=make_series("AAAA", [1.5]))
    p, q = values["bedrock_east"].values[:, 0]
    assert found["east"].item() == pytest.approx(-20.0 * p + 3.0 * q, rel=1e-4)
    # variances (16 + 25) / 4 and (1 + 4) / 4; between them 0.5 (4 x 1 + 5 x 2) / 4
    variance = p**2 * 41.0 / 4.0 + q**2 * 5.0 / 4.0 + 2.0 * p * q * 0.5 * 14.0 / 4.0
    assert found["east_sigma"].item() == pytest.approx(np.sqrt(variance), rel=1e-3)


def test_constant_rates_hold_for_their_period_alone():
    period = {"time_start": pd.Timestamp("2000-01-01"), "time_end": pd.Timestamp("2010-01-01")}
    rates = pd.DataFrame(
        {
            "source": ["ice", "snow"],
            **period,
            "mass_rate": [-200.0, 50.0],
            "mass_rate_sigma": [10.0, 4.0],
            "error_group": "one",
        }
    )
    ledger = constant_ledger(rates)
    values = make_values(["AAAA", "BBBB"], sources=("ice", "snow"))
    stations = make_stations(AAAA=(1.0, 6.0, [(2.0, 3.5)]), BBBB=(5.0, 12.0, []))
    found = station_rates(values, ledger, stations)
    p, q = values["bedrock_up"].sel(site="AAAA").values
    assert float(found["rate_total"][0, 0]) == pytest.approx(-200.0 * p + 50.0 * q, rel=1e-9)
    assert float(found["rate_total_sigma"][0, 0]) == pytest.approx(abs(10.0 * p + 4.0 * q), rel=1e-9)  # one error
    assert "the mass record covers 2000-01-01 to 2010-01-01" in found["reason"].values[1]
    alone = station_rates(values, constant_ledger(rates.assign(error_group=rates["source"])), stations)
    assert float(alone["rate_total_sigma"][0, 0]) == pytest.approx(np.hypot(10.0 * p, 4.0 * q), rel=1e-9)
    with pytest.raises(InputError, match="rates: holds no rows"):
        constant_ledger(rates.iloc[:0])


@pytest.mark.parametrize(
    ("seasonal", "years"), [(False, [1.0]), (True, [1.0, 2.0, 3.0]), (True, [0.0, 1.0, 2.0, 3.0, 4.0])]
)
def test_too_few_epochs_are_said(seasonal, years):
    found = station_rates(
        make_values(["AAAA"]),
        linear(),
        make_stations(AAAA=(None, None, [])),
        series=make_series("AAAA", years),
        seasonal=seasonal,
    )
    assert found["reason"].item() == "too few epochs with a value for a rate"
    assert np.isnan(found["rate_total"].values).all()


def test_gaps_may_leave_nothing():
    found = station_rates(make_values(["AAAA"]), linear(), make_stations(AAAA=(1.0, 2.0, [(0.5, 2.5)])))
    assert found["reason"].item() == "no epoch is left between start, end and gaps"


@pytest.mark.parametrize(
    ("change", "kind", "words"),
    [
        (lambda v, g: (v.drop_vars("bedrock_east"), g), InputError, "values: lacks bedrock_east"),
        (lambda v, g: (v.isel(source=[0, 1]), g), InputError, "values: none for source 'firn'"),
        (lambda v, g: (v, g.isel(source=[0, 1])), InputError, "ledger: no mass for 'firn' of the values"),
        (lambda v, g: (v.assign_coords(site=["BBBB"]), g), InputError, "values: none for site 'AAAA'"),
        (
            lambda v, g: (v.assign(bedrock_up=v["bedrock_up"].assign_attrs(units="kg")), g),
            UnitsError,
            "values: bedrock_up",
        ),
        (
            lambda v, g: (v, g.assign(mass_change=g["mass_change"].where(g["source"] != "ice"))),
            InputError,
            "'ice' has no value",
        ),
        (
            lambda v, g: (
                v,
                g.assign(
                    mass_change=g["mass_change"]
                    .where((g["source"] != "ice") | (g["time"] < at(2.0)))
                    .where((g["source"] != "firn") | (g["time"] > at(3.0)))
                ),
            ),
            InputError,
            "ledger: 'ice' ends before 'firn' starts",
        ),
    ],
)
def test_what_does_not_fit_together_is_refused(change, kind, words):
    with pytest.raises(kind, match=words):
        station_rates(*change(make_values(["AAAA"]), linear()), make_stations(AAAA=(1.0, 2.0, [])))


def test_the_order_of_sources_and_sites_does_not_matter():
    stations = make_stations(AAAA=(1.0, 4.0, []), BBBB=(0.5, 4.5, []))
    values = make_values(["AAAA", "BBBB"])
    plain = station_rates(values, linear(), stations)
    turned = station_rates(values.isel(source=[2, 0, 1], site=[1, 0]), linear(), stations)
    xr.testing.assert_allclose(plain, turned)


def test_the_table_says_what_is_near_and_what_is_left():
    values = make_values(["AAAA", "BBBB", "CCCC"])
    near = np.array([[0, 1, 0], [0, 0, 1], [0, 0, 0]])
    fine = np.array([[1, 1, 1], [1, 1, 0], [1, 1, 1]])
    values["near_field"], values["resolved"] = (("source", "site"), near), (("source", "site"), fine)
    values["distance_to_load"] = (("source", "site"), 400.0 + np.arange(9.0).reshape(3, 3))
    assert station_flags(values) == ["far (> 300 km)", "near field added", "not resolved"]
    stations = make_stations(AAAA=(0.5, 4.0, []), BBBB=(0.5, 9.0, []), CCCC=(0.5, 4.5, []))
    rates = station_rates(values, linear(), stations)
    table = station_table(rates, values, interval="95 %")
    assert table["up half width [mm yr-1]"].iloc[0] == pytest.approx(1.959964 * rates["rate_total_sigma"].values[0, 0])
    assert table["largest source"].tolist() == ["ice", "", "ice"]
    assert table["remark"].iloc[1].startswith("no rate: its span is")
    assert table["distance to ice [km]"].tolist() == [400.0, 401.0, 402.0]
    velocities = pd.DataFrame({"station": ["CCCC", "BBBB"], "up": [2.0, 1.0], "up_sigma": [0.3, 0.3]})
    residuals = station_residuals(rates, velocities, interval="90 %")
    assert residuals[["station", "component"]].to_numpy().tolist() == [["CCCC", "up"]]  # BBBB has no elastic rate
    row = residuals.iloc[0]
    assert row["residual [mm yr-1]"] == pytest.approx(2.0 - rates["rate_total"].values[2, 0])
    sigma = np.hypot(0.3, rates["rate_total_sigma"].values[2, 0])
    assert row["residual half width [mm yr-1]"] == pytest.approx(1.6448536 * sigma)
