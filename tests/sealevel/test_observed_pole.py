"""The observed pole: drifts that were published, cycles that go, windows that cannot be used."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from massfingerprint.errors import InputError
from massfingerprint.sealevel import observed_pole as module
from massfingerprint.sealevel.observed_pole import (
    CHANDLER_DAYS,
    centimetres,
    observed_drift,
    observed_pole,
    record_span,
    smoothed_pole,
)
from massfingerprint.sealevel.whole_earth import pole_direction


def speed_and_direction(window):
    found = observed_drift(window)
    x, y = float(found["x_rate"]), float(found["y_rate"])
    return float(centimetres(np.hypot(x, y))), float(pole_direction(x, y))


@pytest.fixture
def made_up(monkeypatch):
    """A record of 40 years with a drift, both cycles and an offset; noise where a test adds it."""
    years = np.arange(400) * 0.1
    turn = 2.0 * np.pi * years
    chandler = turn * 365.25 / CHANDLER_DAYS
    time = np.datetime64("1970-01-01", "ns") + (years * 365.25 * 86400.0).astype("timedelta64[s]")
    record = xr.Dataset(coords={"time": time})
    record["x"] = ("time", 30.0 + 2.0 * years + 90.0 * np.cos(turn) + 170.0 * np.cos(chandler + 0.3))
    record["y"] = ("time", 300.0 - 1.5 * years + 80.0 * np.sin(turn) + 170.0 * np.sin(chandler + 0.3))
    record["days"] = ("time", np.full(400, 37))
    monkeypatch.setattr(module, "_record", lambda: record)
    return record


def test_one_milliarcsecond_is_three_centimetres():
    """3.09 cm on a sphere of 6371 km: textbook value, from memory."""
    assert float(centimetres(1.0)) == pytest.approx(3.09, abs=0.005)


def test_the_drift_before_2000_and_after():
    """20th century: 10.5 +- 0.9 cm/yr towards Labrador, 60 to 80 W (Adhikari et al. 2018, from memory). Here 24 years of it, so
    wide: a quarter of the speed, 25 degrees. After 2005 it turned east (Adhikari & Ivins 2016; Chen et al. 2013, from memory).
    """
    speed, before = speed_and_direction(("1976-01-01", "2000-01-01"))
    assert speed == pytest.approx(10.5, rel=0.25)
    assert before == pytest.approx(-70.0, abs=25.0)
    _, after = speed_and_direction(("2005-01-01", "2020-01-01"))
    assert before + 30.0 < after < 60.0


def test_the_record():
    record = observed_pole()
    first, last = record_span()
    assert str(first) == "1962-01-01"
    assert last >= np.datetime64("2026-01-01")
    assert record["x"].attrs["units"] == "mas"
    assert (np.diff(record["time"].values) > np.timedelta64(0)).all()
    # the pole stays within half an arc second of a point near 0.1, 0.3 arc seconds
    assert np.hypot(record["x"] - 70.0, record["y"] - 300.0).max() < 500.0
    record["x"][:] = 0.0
    assert float(abs(observed_pole()["x"]).max()) > 100.0


def test_line_and_cycles_are_told_apart(made_up):
    found = observed_drift(("1972-01-01", "1980-01-01"))
    assert float(found["x_rate"]) == pytest.approx(2.0, abs=1e-9)
    assert float(found["y_rate"]) == pytest.approx(-1.5, abs=1e-9)
    years = (np.datetime64("1972-01-01") - np.datetime64("1970-01-01")) / np.timedelta64(1, "D") / 365.25
    assert float(found["x_start"]) == pytest.approx(30.0 + 2.0 * years, abs=1e-6)
    assert float(found["x_residual"]) < 1e-6
    assert found["x_rate"].attrs["units"] == "mas yr-1"
    assert found.attrs["start"] == "1972-01-01"


def test_the_smooth_pole_has_lost_its_cycles(made_up):
    smooth = smoothed_pole()
    line = made_up.sel(time=smooth["time"])
    years = (line["time"].values - made_up["time"].values[0]) / np.timedelta64(1, "D") / 365.25
    # of 260 mas, 0.3: the Chandler period is no whole number of tenths of a year
    assert np.abs(smooth["x"].values - 30.0 - 2.0 * years).max() < 0.5
    assert np.abs(smooth["y"].values - 300.0 + 1.5 * years).max() < 0.5
    assert years[0] == pytest.approx(3.2, abs=0.05)
    assert smooth.sizes["time"] == made_up.sizes["time"] - 64


def test_sigmas_of_white_and_of_slow_residuals(made_up):
    """White: sigma of a slope, s sqrt(12 / n) / length. Slow, r = 0.9 from step to step: wider by sqrt(1.9 / 0.1)."""
    rng = np.random.default_rng(7)
    white = rng.normal(size=(2, 400))
    slow = np.zeros(400)
    for n in range(1, 400):
        slow[n] = 0.9 * slow[n - 1] + white[1, n]
    made_up["x"] += 10.0 * white[0]
    made_up["y"] += 10.0 * slow
    found = observed_drift(("1970-01-01", "2009-12-01"))
    # of 400 draws: a standard deviation is known to 4 %, a correlation to 0.05 (white) and 0.03 (slow)
    assert float(found["x_rate_formal_sigma"]) == pytest.approx(10.0 * np.sqrt(12.0 / 400.0) / 40.0, rel=0.15)
    assert float(found["x_rate_sigma"] / found["x_rate_formal_sigma"]) == pytest.approx(1.0, abs=0.15)
    assert float(found["y_rate_sigma"] / found["y_rate_formal_sigma"]) == pytest.approx(np.sqrt(19.0), rel=0.35)


def test_the_observed_residuals_are_not_white():
    found = observed_drift(("1990-01-01", "2020-01-01"))
    for axis in "xy":
        assert float(found[f"{axis}_rate_sigma"]) > 2.0 * float(found[f"{axis}_rate_formal_sigma"]) > 0.0


@pytest.mark.parametrize(
    ("window", "message"),
    [
        (("1950-01-01", "1990-01-01"), r"known from 1962-01-01 to \d{4}-\d\d-\d\d, got 1950-01-01 to 1990-01-01"),
        (("2000-01-01", "2080-01-01"), "the observed pole is known from"),
        (("2000-01-01", "2005-01-01"), r"must be 6.4 years or longer .* got 5.0 years"),
        (("2010-01-01", "2000-01-01"), "must end after it starts"),
        (("soon", "2000-01-01"), "as ISO dates"),
    ],
)
def test_windows_that_cannot_be_used(window, message):
    with pytest.raises(InputError, match=message):
        observed_drift(window)


def test_both_ends_of_the_record_can_be_reached():
    first, last = record_span()
    assert observed_drift((first, last)).attrs["end"] == str(last)
    assert pd.Timestamp(observed_drift((first, pd.Timestamp("1970-01-01"))).attrs["end"]).year == 1970
