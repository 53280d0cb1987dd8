"""Tide gauges as a dataset, and what air pressure and the nodal tide do to them. All levels are invented."""

import numpy as np
import pytest
import xarray as xr

from massfingerprint.coast.gauge_corrections import (
    NODAL_PERIOD,
    OCEAN_MEAN_OF_NODAL_TIDE,
    inverse_barometer,
    nodal_tide,
)
from massfingerprint.coast.gauges import read_gauge, read_gauges
from massfingerprint.errors import InputError, SiteError, TableError, UnitsError
from massfingerprint.load.ocean import ocean_fraction

MONTHS = ["2001.0417", "2001.1250", "2001.2083", "2001.2917"]


@pytest.fixture
def archive(tmp_path):
    def write(name, rows):
        path = tmp_path / name
        path.write_text("\n".join(rows) + "\n", encoding="utf-8")
        return path

    return write


def monthly(levels, flags=("000",) * 4):
    return [f" {t}; {level};  0; {flag}" for t, level, flag in zip(MONTHS, levels, flags, strict=True)]


def test_months_are_at_their_middles(archive):
    found = read_gauge(archive("Quay.txt", monthly([7010, -99999, 7020, 7030])), lat=52.0, lon=4.0)
    assert found["gauge"].values.tolist() == ["Quay"]
    assert [str(time)[:13] for time in found["time"].values[:2]] == ["2001-01-16T12", "2001-02-15T00"]
    np.testing.assert_array_equal(found["level"].values, [[7010.0, np.nan, 7020.0, 7030.0]])
    assert found["attention"].dtype == np.int8
    assert (float(found["lat"][0]), float(found["lon"][0])) == (52.0, 4.0)
    assert found["level"].attrs["units"] == "mm"
    assert found.attrs["sampling"] == "monthly"


def test_years_are_at_their_middles_and_metres_become_millimetres(archive):
    found = read_gauge(archive("a.csv", ["time,level [m]", "1999,7.01", "2000,7.02", "2001,"]), name="Pier")
    assert [str(time)[:10] for time in found["time"].values] == ["1999-07-02", "2000-07-02", "2001-07-02"]
    np.testing.assert_allclose(found["level"].values[0, :2], [7010.0, 7020.0], rtol=1e-15)  # one rounding
    assert found.attrs["sampling"] == "yearly"
    assert np.isnan(found["lat"][0])


def test_flagged_values_go_only_when_told(archive):
    path = archive("a.txt", monthly([7010, 7011, 7012, -99999], ("000", "001", "010", "001")))
    kept, dropped = read_gauge(path), read_gauge(path, drop_flagged=True)
    assert kept["attention"].values.tolist() == [[0, 1, 2, 0]]
    assert int(kept["level"].count()) == 3
    np.testing.assert_array_equal(dropped["level"].values, [[7010.0, np.nan, np.nan, np.nan]])
    assert not dropped["attention"].any()


def test_gauges_of_a_folder_stand_beside_each_other(archive, tmp_path):
    archive("b.txt", monthly([7000, 7001, 7002, 7003], ("001", "000", "000", "000"))[:3])
    archive("a.txt", monthly([7100, 7101, 7102, 7103])[1:])
    found = read_gauges(tmp_path)
    assert found["gauge"].values.tolist() == ["a", "b"]
    np.testing.assert_array_equal(
        found["level"].values, [[np.nan, 7101.0, 7102.0, 7103.0], [7000.0, 7001.0, 7002.0, np.nan]]
    )
    assert found["attention"].values.tolist() == [[0, 0, 0, 0], [1, 0, 0, 0]]
    assert found["attention"].dtype == np.int8


def test_pressure_of_one_gauge_leaves_gaps_at_the_other(archive, tmp_path):
    rows = [f"{time},700,1013" for time in MONTHS]
    archive("a.csv", ["time,level [mm],pressure [hPa]", *rows])
    archive("b.txt", monthly([7000, 7001, 7002, 7003]))
    pressure = read_gauges(tmp_path)["pressure"]
    assert pressure.attrs["units"] == "hPa"
    assert pressure.notnull().sum("time").values.tolist() == [4, 0]


def test_gauges_that_do_not_go_together_are_refused(archive, tmp_path):
    archive("a.txt", monthly([7000, 7001, 7002, 7003]))
    archive("a.csv", ["time,level [mm]", *(f"{time},7000" for time in MONTHS)])
    with pytest.raises(SiteError, match=r"two gauges have the name 'a': .*a\.csv and .*a\.txt"):
        read_gauges(tmp_path)
    (tmp_path / "a.csv").unlink()
    archive("b.csv", ["time,level [m]", *(f"{time},7.0" for time in MONTHS)])
    with pytest.raises(InputError, match="'b' has the unit m, 'a' mm"):
        read_gauges(tmp_path)
    (tmp_path / "b.csv").unlink()
    archive("c.txt", ["1999; 7000", "2000; 7001"])
    with pytest.raises(InputError, match="'c' has the sampling yearly, 'a' monthly"):
        read_gauges(tmp_path)


@pytest.mark.parametrize(
    ("rows", "error", "message"),
    [
        (["time,level [hPa]", "1999,1", "2000,2"], UnitsError, "level: units must be 'mm'"),
        (["time,level [m]", "1999,7", "2000,7000"], TableError, "line 3: level of 'a' is 7e.06 mm"),
        (["time,level [mm],pressure [hPa]", "1999,7,101300", "2000,7,1013"], TableError, "line 2: pressure at 'a'"),
        (["time,level [mm]", "1999,7", "1999,8"], TableError, "line 3: time 1999-07-02 of 'a' stands there twice"),
        (["time,level [mm]", "2000,7", "1999,8"], TableError, "line 3: time 1999-07-02 of 'a' is before"),
        (["time,level [mm]", "1999,7"], InputError, "two at least are needed"),
        (["time,level [mm]", "1999-01-01,7", "1999-01-09,8"], InputError, "8.0 days apart"),
    ],
)
def test_a_bad_record_is_refused(archive, rows, error, message):
    with pytest.raises(error, match=message):
        read_gauge(archive("a.csv", rows))


def test_a_place_off_the_globe_is_refused(archive):
    with pytest.raises(InputError, match="lat: must be degrees from -90 to 90, got 91"):
        read_gauge(archive("a.txt", monthly([1, 2, 3, 4])), lat=91)


def field(values, unit, dims=("gauge", "time")):
    coords = {"gauge": ["a"], "time": np.array(["2001-01", "2001-02", "2001-03"], dtype="datetime64[ns]")}
    kept = {name: coords[name] for name in dims}
    return xr.DataArray(np.array(values, dtype=float), coords=kept, dims=dims, attrs={"units": unit})


def test_high_pressure_pressed_the_sea_down():
    """9.94 mm per hPa; the common part of the pressure does nothing."""
    level, local = field([[7000, 7000, np.nan]], "mm"), field([[101300, 102300, 101300]], "Pa")
    mean = field([1011, 1013, 1012], "hPa", ("time",))
    found = inverse_barometer(level, local, ocean_mean_pressure=mean)
    np.testing.assert_allclose(found.values, [[7000 + 2 * 9.94, 7000 + 10 * 9.94, np.nan]], rtol=1e-14)
    constant = inverse_barometer(level, local, ocean_mean_pressure=1013.0)
    np.testing.assert_allclose(constant.values[0, :2], [7000.0, 7000 + 10 * 9.94], rtol=1e-14)
    assert found.attrs["units"] == "mm"


def test_epochs_without_pressure_become_gaps_and_are_counted():
    found = inverse_barometer(
        field([[1, 2, 3]], "mm"), field([[1010, np.nan, 1010]], "hPa"), ocean_mean_pressure=1010.0
    )
    assert found.attrs["epochs_without_pressure"] == 1
    assert np.isnan(found.values[0, 1])


def test_pressure_that_cannot_be_used_is_refused():
    level, local = field([[1, 2, 3]], "mm"), field([[1010, 1010, 1010]], "hPa")
    with pytest.raises(TypeError, match="ocean_mean_pressure"):
        inverse_barometer(level, local)
    with pytest.raises(InputError, match="ocean_mean_pressure: must be a DataArray"):
        inverse_barometer(level, local, ocean_mean_pressure=None)
    with pytest.raises(InputError, match=r"pressure: must lie between 800 and 1100 hPa, got 1.01 to 1.01"):
        inverse_barometer(level, local.copy(data=local.values / 1e3), ocean_mean_pressure=1013.0)
    with pytest.raises(UnitsError, match="pressure: units must be 'hPa'"):
        inverse_barometer(level, local.assign_attrs(units="mm"), ocean_mean_pressure=1013.0)
    later = local.assign_coords(time=local["time"] + np.timedelta64(1, "D"))
    with pytest.raises(InputError, match="no epoch in common"):
        inverse_barometer(level, later, ocean_mean_pressure=1013.0)
    with pytest.raises(SiteError, match="pressure: has no gauge 'a'"):
        inverse_barometer(level, local.assign_coords(gauge=["b"]), ocean_mean_pressure=1013.0)


def at(*lat):
    time = np.arange("1990-01", "2030-01", dtype="datetime64[M]").astype("datetime64[ns]")
    coords = {"gauge": [f"g{k}" for k in range(len(lat))], "time": time, "lat": ("gauge", list(lat))}
    return nodal_tide(xr.Dataset(coords=coords))


def test_the_nodal_tide_stands_highest_at_the_pole_at_the_major_standstill():
    """Major lunar standstills: June 2006 and January 2025 (almanacs, from memory), the Moon farthest from the equator."""
    tide = at(90.0, 0.0)
    pole, equator = tide.values
    highest = tide["time"].values[[k for k in range(1, 479) if pole[k] > max(pole[k - 1], pole[k + 1])]]
    assert [str(time)[:4] for time in highest] == ["2006", "2025"]
    # 12.2 mm times 1 and -1/2, the mean over the ocean off: half the range, to the month's share of a cycle
    np.testing.assert_allclose([np.ptp(pole) / 2, np.ptp(equator) / 2], [12.2 * 1.0327, 12.2 * 0.4673], rtol=1e-3)
    assert (pole * equator <= 0.0).all()
    assert (
        pytest.approx(18.613, abs=0.001) == NODAL_PERIOD
    )  # years, nutation period 6798.4 days (IERS Conventions 2010)


def test_the_mean_over_the_ocean_is_that_of_the_bundled_ocean():
    ocean = ocean_fraction()
    sine = np.sin(np.deg2rad(ocean["lat"]))
    weight = ocean * np.cos(np.deg2rad(ocean["lat"]))
    mean = float(((1.5 * sine**2 - 0.5) * weight).sum() / weight.sum())
    assert pytest.approx(mean, abs=5e-5) == OCEAN_MEAN_OF_NODAL_TIDE  # half of its last digit: 0.0006 mm of tide


def test_a_gauge_without_latitude_has_no_nodal_tide():
    with pytest.raises(SiteError, match="lat: of gauge 'g1' is not known"):
        at(50.0, np.nan)
