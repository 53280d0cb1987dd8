"""Reading mass records: layouts, times, units, errors, round trips."""

import re

import numpy as np
import pandas as pd
import pytest

from massfingerprint.errors import InputError, MassFingerprintError, MissingFileError, TableError, UnitsError
from massfingerprint.files.netcdf import write_netcdf
from massfingerprint.mass.covariance import COMPONENTS, covariance
from massfingerprint.mass.ledger import check_ledger, check_sources, read_ledger

LONG = "time,source,mass_change [Gt],mass_change_sigma [Gt]\n"
RATE = "time_start,time_end,source,mass_rate [Gt yr-1],mass_rate_sigma [Gt yr-1]\n"
YEAR = 365.25


@pytest.fixture
def record(tmp_path):
    def write(text, encoding="utf-8"):
        path = tmp_path / "mass.csv"
        path.write_bytes(text.encode(encoding))
        return path

    return write


def read(path, **choices):
    return read_ledger(path, **{"quantity": "cumulative", "error_model": "independent", **choices})


def days(ledger):
    return list(np.datetime_as_string(ledger["time"].values, unit="D"))


def test_long_table_with_gaps_between_sources(record):
    ledger = read(record(LONG + "2003-01-01,a,0,1\n2004-01-01,a,-10,2\n2003-07-01,b,5,3\n"))
    assert ledger["source"].values.tolist() == ["a", "b"]
    assert days(ledger) == ["2003-01-01", "2003-07-01", "2004-01-01"]
    np.testing.assert_array_equal(ledger["mass_change"], [[0, np.nan, -10], [np.nan, 5, np.nan]])
    np.testing.assert_array_equal(ledger["mass_change_sigma"], [[1, np.nan, 2], [np.nan, 3, np.nan]])
    assert ledger.attrs["reference_epoch"] == "2003-01-01"
    assert check_ledger(ledger).identical(ledger)


def test_wide_table_with_empty_cells(record):
    ledger = read(
        record("time,a [Gt],a sigma [Gt],b [kg],b sigma [kg]\n2003-01-01,0,1,,\n2004-01-01,-10,2,1e12,2e12\n")
    )
    np.testing.assert_allclose(ledger["mass_change"], [[0, -10], [np.nan, 1]], rtol=1e-15)
    np.testing.assert_allclose(ledger["mass_change_sigma"], [[1, 2], [np.nan, 2]], rtol=1e-15)


def test_rates_are_cumulated(record):
    """Two years of -100 and -50 Gt/yr: exact in years of 365.25 days; independent rate errors add in quadrature."""
    text = RATE + "2001-01-01,2002-01-01,a,-100,10\n2002-01-01,2003-01-01,a,-50,20\n"
    ledger = read_ledger(record(text), quantity="rate")
    years = 365 / YEAR
    np.testing.assert_allclose(ledger["mass_change"][0], [0, -100 * years, -150 * years], rtol=1e-14)
    np.testing.assert_allclose(ledger["mass_change_sigma"][0], [0, 10 * years, np.hypot(10, 20) * years], rtol=1e-14)
    assert ledger["error_model"].values.tolist() == ["random_walk"]
    assert days(ledger) == ["2001-01-01", "2002-01-01", "2003-01-01"]
    systematic = read_ledger(record(text), quantity="rate", error_model="systematic")
    np.testing.assert_allclose(systematic["mass_change_sigma"][0], [0, 10 * years, 30 * years], rtol=1e-14)


@pytest.mark.parametrize(
    ("cells", "expected"),
    [
        (["2003", "2003.5", "2004"], ["2003-01-01T00", "2003-07-02T12", "2004-01-01T00"]),  # half of 365 days
        (["2004.5", "2005.5"], ["2004-07-02T00", "2005-07-02T12"]),  # leap year: half of 366
        (
            ["2003.042", "2003.125", "2003.208"],
            ["2003-01-16T12", "2003-02-15T00", "2003-03-16T12"],
        ),  # middles of months
        (["2003-01-15", "2003-02-15T12:00"], ["2003-01-15T00", "2003-02-15T12"]),
        (["2003", "2003-07-01"], ["2003-01-01T00", "2003-07-01T00"]),
    ],
)
def test_times(record, cells, expected):
    ledger = read(record(LONG + "".join(f"{cell},a,{i},1\n" for i, cell in enumerate(cells))))
    assert list(np.datetime_as_string(ledger["time"].values, unit="h")) == expected


def test_byte_order_mark_other_names_and_units_from_outside(record):
    path = record("\ufeffwhen,basin,dM,sd\n2003-01-01,a,1,1\n")
    names = {"when": "time", "basin": "source", "dM": "mass_change", "sd": "mass_change_sigma"}
    ledger = read(path, columns=names, units="Gt")
    assert float(ledger["mass_change"][0, 0]) == 1.0


@pytest.mark.parametrize(
    ("unit", "extra", "cells", "gigatonnes", "sigma"),
    [
        ("kg", "", "", 1e-12, 1e-12),
        ("km3", ",material", ",water", 1.0, 1.0),
        ("km3", ",material", ",ice", 0.917, 0.917),
        ("km3", ",material,density [kg m-3]", ",ice,850", 0.85, 0.85),
        ("m w.e.", ",area [km2]", ",2000", 2.0, 2.0),
        ("mm w.e.", ",area [km2]", ",2000", 0.002, 0.002),
        ("mm sle", "", "", -361.8, 361.8),
    ],
)
def test_units_of_records(record, unit, extra, cells, gigatonnes, sigma):
    """By definition: 1 km3 of water is 1 Gt; 1 m of water on 1000 km2 is 1 Gt; a rise of 1 mm is a loss of 361.8 Gt."""
    header = f"time,source,mass_change [{unit}],mass_change_sigma [{unit}]{extra}\n"
    ledger = read(record(f"{header}2003-01-01,a,1,1{cells}\n"))
    assert float(ledger["mass_change"][0, 0]) == pytest.approx(gigatonnes, rel=1e-12)
    assert float(ledger["mass_change_sigma"][0, 0]) == pytest.approx(sigma, rel=1e-12)
    assert ledger.attrs["units_read"]


def test_intervals_in(record):
    """A half-width of 90 % and asymmetric bounds of 95 %: 1.6449 and 2 x 1.96 standard uncertainties."""
    text = "time,source,mass_change [Gt],mass_change_half_width [Gt],interval\n2003-01-01,a,-10,16.448536,90 %\n"
    assert float(read(record(text))["mass_change_sigma"][0, 0]) == pytest.approx(10.0, rel=1e-7)
    header = "time,source,mass_change [Gt],mass_change_lower [Gt],mass_change_upper [Gt],interval\n"
    text = header + "2003-01-01,a,-10,-30,9.19928,95 %\n"
    assert float(read(record(text))["mass_change_sigma"][0, 0]) == pytest.approx(10.0, rel=1e-6)
    rate = (
        RATE.replace("sigma", "half_width").rstrip() + ",interval\n2001-01-01,2002-01-01,a,-100,16.448536,very likely\n"
    )
    ledger = read_ledger(record(rate), quantity="rate")
    assert float(ledger["mass_change_sigma"][0, 1]) == pytest.approx(10.0 * 365 / YEAR, rel=1e-7)


def test_density_error_is_shared_by_all_epochs(record):
    """850 +- 60 kg m-3 (volume to mass of glaciers): 7 % of every value, fully correlated in time."""
    header = "time,source,mass_change [km3],mass_change_sigma [km3],material,density [kg m-3],density_sigma [kg m-3]\n"
    ledger = read(record(header + "2003-01-01,a,-100,5,ice,850,60\n2004-01-01,a,-200,5,ice,850,60\n"))
    assert ledger["error_model"].values.tolist() == ["sum"]
    np.testing.assert_allclose(ledger["mass_change_sigma_systematic"][0], [6.0, 12.0], rtol=1e-12)
    np.testing.assert_allclose(ledger["mass_change_sigma_independent"][0], [4.25, 4.25], rtol=1e-12)
    expected = np.outer([6, 12], [6, 12]) + np.diag([4.25**2] * 2)
    np.testing.assert_allclose(covariance(ledger, "a"), expected, rtol=1e-12)


def test_changing_area_does_not_change_what_was_lost_before(record):
    """1 m lost from 1000 km2, then 1 m from a glacier shrinking to 500 km2: 1 Gt and 0.75 Gt."""
    header = "time,source,mass_change [m w.e.],mass_change_sigma [m w.e.],area [km2]\n"
    ledger = read(record(header + "2003-01-01,a,0,0,1000\n2004-01-01,a,-1,0,1000\n2005-01-01,a,-2,0,500\n"))
    np.testing.assert_allclose(ledger["mass_change"][0], [0, -1, -1.75], rtol=1e-14)


def test_notes_of_a_source(record):
    header = LONG.rstrip() + ",citation,scope,gia_removed,grounding_netted,ocean_reaching_fraction\n"
    ledger = read(
        record(
            header
            + "2003-01-01,a,0,1,Someone 2020,without periphery,model A,1,0.5\n2004-01-01,a,1,1,,,,,\n2003-01-01,b,0,1,,,,,\n"
        )
    )
    assert ledger["citation"].values.tolist() == ["Someone 2020", ""]
    assert ledger["scope"].values.tolist() == ["without periphery", ""]
    assert ledger["grounding_netted"].values.tolist() == [1.0, -1.0]
    assert ledger["ocean_reaching_fraction"].values.tolist() == [0.5, 1.0]


def test_round_trip_through_netcdf(record, tmp_path):
    header = "time,source,mass_change [km3],mass_change_sigma [km3],material,density [kg m-3],density_sigma [kg m-3],citation\n"
    rows = "2003-01-01,a,-100,5,ice,850,60,x\n2004-01-01,b,-200,5,ice,850,60,\n"
    ledger = read(record(header + rows))
    write_netcdf(ledger, tmp_path / "ledger.nc")
    back = read_ledger(tmp_path / "ledger.nc", quantity="cumulative")
    for name in ("mass_change", "mass_change_sigma", *(f"mass_change_sigma_{c}" for c in COMPONENTS)):
        np.testing.assert_array_equal(back[name], ledger[name])
    assert back["error_model"].values.tolist() == ledger["error_model"].values.tolist()
    assert back["source"].values.tolist() == ["a", "b"]
    np.testing.assert_array_equal(back["time"], ledger["time"])
    assert back.attrs["reference_epoch"] == "2003-01-01"


ROW = "2003-01-01,a,1,1\n"
WRONG = [
    (LONG + ROW + ROW, {}, TableError, "line 3: time 2003-01-01 of 'a' stands there twice. Keep one."),
    (
        LONG + "2004-01-01,a,1,1\n" + ROW,
        {},
        TableError,
        "line 3: time 2003-01-01 of 'a' is before the line above. Sort by time.",
    ),
    (
        LONG + "2003-01-01,a,1,-1\n",
        {},
        TableError,
        "line 2: mass_change_sigma is -1; an uncertainty must be 0 or more.",
    ),
    (
        LONG + "2003-01-01,a,1,\n",
        {},
        TableError,
        "line 2: mass_change_sigma is '', not a number. Fill it, or take the row out.",
    ),
    (
        LONG + '2003-01-01,a,"1,5",1\n',
        {},
        TableError,
        "line 2: mass_change is '1,5', not a number. Use a decimal point.",
    ),
    (LONG + "2003-13-01,a,1,1\n", {}, TableError, "line 2: time is '2003-13-01', not an ISO date"),
    (LONG + "1500-01-01,a,1,1\n", {}, TableError, "line 2: time '1500-01-01' is outside the years 1678 to 2262."),
    (LONG + "2003.5,a,1,1\n2004-01-01,a,1,1\n", {}, TableError, "line 2: time '2003.5' is a decimal year among dates"),
    (LONG + "2003-01-01,,1,1\n", {}, TableError, "line 2: source is empty. Name the mass source."),
    (LONG.replace(",", ";") + ROW.replace(",", ";"), {}, TableError, "Use commas between columns."),
    (LONG + ROW.replace(",", ";"), {}, MassFingerprintError, "mass.csv"),
    (LONG.replace("[Gt]", "[bananas]") + ROW, {}, UnitsError, "unit 'bananas' is not one of a mass record"),
    (LONG.replace("[Gt]", "[Pa]") + ROW, {}, UnitsError, "unit 'Pa' is not one of a mass record. Use Gt, km3, m w.e."),
    (LONG.replace(" [Gt]", "") + ROW, {}, TableError, "column mass_change has no unit. Write it as 'mass_change [Gt]'"),
    (
        LONG.replace("sigma [Gt]", "sigma [kg]") + ROW,
        {},
        TableError,
        "mass_change is in 'Gt' but mass_change_sigma in 'kg'",
    ),
    (
        LONG.replace("[Gt]", "[km3]") + ROW,
        {},
        InputError,
        "km3 of ice or of water, which is not said. Add a column 'material'",
    ),
    (
        LONG.replace("[Gt]", "[m w.e.]") + ROW,
        {},
        InputError,
        "m w.e. needs a positive area. Add a column 'area [km2]'.",
    ),
    (
        LONG.replace("_sigma", "_error") + ROW,
        {},
        TableError,
        "lacks an uncertainty: give mass_change_sigma, or",
    ),
    (
        LONG.replace("sigma", "half_width") + ROW,
        {},
        TableError,
        "needs a column 'interval' (such as 90 %) beside",
    ),
    (LONG.replace("source", "sauce") + ROW, {}, TableError, "lacks the column"),
    (LONG.replace("source", "time") + ROW, {}, TableError, "column 'time' stands there twice. Keep one."),
    (LONG + ROW, {"error_model": None}, InputError, "does not say how its errors are related in time"),
    (LONG + ROW, {"error_model": "white"}, InputError, "error_model: no error model 'white'"),
    (LONG + ROW, {"quantity": "speed"}, InputError, "quantity: no quantity 'speed'"),
    (LONG + ROW, {"quantity": "rate"}, TableError, "lacks the column time_start"),
    (
        LONG + ROW,
        {"reference_epoch": "soon"},
        InputError,
        "reference_epoch: must be an ISO date such as 2003-01-01, got 'soon'",
    ),
    (RATE + "2001-01-01,2002-01-01,a,1,1\n", {}, TableError, "so it is a record of rates. Pass quantity='rate'."),
    ("time,a [Gt]\n2003-01-01,1\n", {}, TableError, "lacks the column 'a sigma'"),
    (
        "time,a [Gt],a sigma [Gt]\n2003-01-01,1,\n",
        {},
        TableError,
        "line 2: of 'a' only one of value and sigma is given.",
    ),
    (
        LONG.rstrip() + ",scope\n2003-01-01,a,1,1,x\n2004-01-01,a,1,1,y\n",
        {},
        TableError,
        "line 3: scope of 'a' is 'y', above it 'x'",
    ),
]


@pytest.mark.parametrize(("text", "choices", "error", "message"), WRONG)
def test_wrong_records_meet_one_line(record, text, choices, error, message):
    with pytest.raises(error, match=re.escape(message)) as caught:
        read(record(text), **choices)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        (
            "2001-01-01,2002-01-01,a,1,1\n2003-01-01,2004-01-01,a,1,1\n",
            "line 3: gap in the intervals of 'a' between 2002-01-01 and 2003-01-01",
        ),
        ("2001-01-01,2003-01-01,a,1,1\n2002-01-01,2004-01-01,a,1,1\n", "line 3: overlap in the intervals of 'a'"),
        ("2002-01-01,2001-01-01,a,1,1\n", "line 2: time_end must lie after time_start."),
    ],
)
def test_intervals_that_cannot_be_cumulated(record, rows, message):
    with pytest.raises(TableError, match=re.escape(message)):
        read_ledger(record(RATE + rows), quantity="rate")


def test_a_rate_without_per_year(record):
    with pytest.raises(TableError, match=re.escape("column mass_rate must be per year, as 'Gt yr-1', got 'Gt'")):
        read_ledger(record(RATE.replace(" yr-1", "") + "2001-01-01,2002-01-01,a,1,1\n"), quantity="rate")


def test_missing_and_damaged_files(tmp_path):
    with pytest.raises(MissingFileError, match="there is no such file"):
        read(tmp_path / "none.csv")
    with pytest.raises(MissingFileError, match="there is no such file"):
        read(tmp_path / "none.nc")
    (tmp_path / "bad.nc").write_text("not a file of that kind")
    with pytest.raises(MassFingerprintError, match=r"bad\.nc: cannot be read as NetCDF"):
        read(tmp_path / "bad.nc")


def test_unknown_sources_offer_the_nearest(record):
    ledger = read(record(LONG + ROW.replace(",a,", ",grenland,")))
    with pytest.raises(InputError, match=r"no mass source is called 'grenland'\. Did you mean greenland"):
        check_sources(ledger, ["greenland", "antarctica"])


def test_other_datasets_are_no_ledgers(record):
    ledger = read(record(LONG + ROW + "2004-01-01,a,2,1\n"))
    with pytest.raises(InputError, match="lacks error_model"):
        check_ledger(ledger.drop_vars("error_model"))
    with pytest.raises(InputError, match="times must ascend"):
        check_ledger(ledger.isel(time=[1, 0]))
    with pytest.raises(InputError, match="must be 0 or more"):
        check_ledger(ledger.assign(mass_change_sigma=-ledger["mass_change_sigma"]))
    with pytest.raises(InputError, match="quantity must be 'cumulative'"):
        check_ledger(ledger.assign_attrs(quantity="rate"))


def test_a_monthly_record_of_many_years(record):
    """264 months of fifteen sources: the union axis has 264 times, nothing is invented."""
    months = pd.date_range("2003-01-01", periods=264, freq="MS")
    rows = "".join(f"{m:%Y-%m-%d},s{i},{-i * k},1\n" for i in range(15) for k, m in enumerate(months))
    ledger = read(record(LONG + rows))
    assert ledger["mass_change"].shape == (15, 264)
    assert np.isfinite(ledger["mass_change"]).all()
