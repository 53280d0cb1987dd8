"""Files of tide gauges: what is read as it stands, and what is refused with its line. All numbers are invented."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from massfingerprint.errors import DamagedFileError, InputError, MissingFileError, TableError, UnitsError
from massfingerprint.files.gauge_files import ATTENTION, INCOMPLETE, OTHER_LEVEL, gauge_paths, read_gauge_file


@pytest.fixture
def text(tmp_path):
    def write(*lines, name="gauge.txt"):
        path = tmp_path / name
        path.write_text("\n".join(lines) + "\n", encoding="utf-8")
        return path

    return write


def stored(path, attrs=None, **variables):
    time = pd.date_range("2001-01-16", periods=3, freq="30D")
    data = {
        name: ("time", np.array(values, dtype=float), {"units": unit}) for name, (values, unit) in variables.items()
    }
    dataset = xr.Dataset(data, coords={"time": time, "lat": 51.5, "lon": 3.25}, attrs=attrs or {})
    dataset.to_netcdf(path, engine="netcdf4")
    return path


def test_an_archive_of_months_is_read(text):
    held = read_gauge_file(
        text("# invented", " 1950.0417;  7012; 0;000", " 1950.1250;-99999;99;001", "1950.2083 ; 7030 ;16; 010 ", "")
    )
    assert held.times.tolist() == ["1950.0417", "1950.1250", "1950.2083"]
    assert held.times.index.tolist() == [2, 3, 4]
    assert held.unit == "mm"
    np.testing.assert_array_equal(held.level, [7012.0, np.nan, 7030.0])
    assert held.attention.tolist() == [0, INCOMPLETE | ATTENTION, INCOMPLETE | OTHER_LEVEL]
    assert held.pressure is None


def test_an_archive_of_years_is_read(text):
    held = read_gauge_file(text(" 1950;  7012;N;000", " 1951;  7015;Y;001", "1952;7016"))
    assert held.times.tolist() == ["1950", "1951", "1952"]
    assert held.attention.tolist() == [0, INCOMPLETE | ATTENTION, 0]


@pytest.mark.parametrize(("header", "unit"), [("time; level [cm]", "cm"), ("time; level mm; missing; flag", "mm")])
def test_a_header_of_an_archive_names_the_unit(text, header, unit):
    assert read_gauge_file(text(header, "1950; 701", "1951; 702")).unit == unit


def test_a_csv_is_read(text):
    path = text(
        "time,level [m],flag,pressure [Pa]", "1990-01-16,7.01,,101200", "1990-02-15,,1,", "1990-03-16,-99999,N,1"
    )
    held = read_gauge_file(path)
    assert (held.unit, held.pressure_unit) == ("m", "Pa")
    np.testing.assert_array_equal(held.level, [7.01, np.nan, np.nan])
    np.testing.assert_array_equal(held.pressure, [101200.0, np.nan, 1.0])
    assert held.attention.tolist() == [0, ATTENTION, 0]


def test_a_netcdf_is_read(tmp_path):
    path = stored(
        tmp_path / "a.nc",
        msl=([7.0, -99999.0, 7.1], "m"),
        pressure=([1010.0, 1012.0, 1014.0], "hPa"),
        attention=([0, 0, 1], "1"),
    )
    held = read_gauge_file(path)
    assert (held.unit, held.pressure_unit, held.lat, held.lon) == ("m", "hPa", 51.5, 3.25)
    np.testing.assert_array_equal(held.level, [7.0, np.nan, 7.1])
    assert held.times.tolist()[0] == "2001-01-16T00:00:00"
    assert held.attention.tolist() == [0, 0, 1]


def test_of_several_lengths_the_level_is_taken(tmp_path):
    path = stored(tmp_path / "a.nc", level=([1, 2, 3], "mm"), level_sigma=([9, 9, 9], "mm"))
    np.testing.assert_array_equal(read_gauge_file(path).level, [1.0, 2.0, 3.0])


@pytest.mark.parametrize(
    ("lines", "message"),
    [
        (("1950; 70x",), "line 1: level is '70x', not a number"),
        (("1950; 7000", "1951"), "line 2: has 1 cells"),
        (("1950; 7000; N; 000; 5",), "line 1: has 5 cells"),
        (("1950; 7000; N; 002",), "line 1: flags are '002'"),
        (("1950; 7000; maybe; 000",), "line 1: missing data are 'maybe'"),
        (("time; level",), "has a header but no rows"),
        (("", " "), "has no rows"),
    ],
)
def test_a_bad_archive_is_refused_with_its_line(text, lines, message):
    with pytest.raises(TableError, match=message):
        read_gauge_file(text(*lines))


def test_a_bad_csv_is_refused(text):
    with pytest.raises(UnitsError, match=r"column level has no unit. Write it as 'level \[mm\]'"):
        read_gauge_file(text("time,level", "1990,7"))
    with pytest.raises(TableError, match="line 2: level is 'abc'"):
        read_gauge_file(text("time,level [mm]", "1990,abc"))
    with pytest.raises(TableError, match="lacks the column level"):
        read_gauge_file(text("time,height [mm]", "1990,1"))


@pytest.mark.parametrize(
    "lines",
    [
        ("# frame: geocentric", "1950; 7000"),
        ("time; geocentric level mm", "1950; 7000"),
        ("time,level [mm],height above ellipsoid [mm]", "1950,7000,1"),
    ],
)
def test_a_geocentric_text_is_refused(text, lines):
    with pytest.raises(InputError, match=r"line 1: says .* a gauge must be relative to its land"):
        read_gauge_file(text(*lines))


def test_a_geocentric_netcdf_is_refused(tmp_path):
    path = stored(tmp_path / "a.nc", attrs={"reference_frame": "Geocentric"}, level=([1, 2, 3], "mm"))
    with pytest.raises(InputError, match="reference_frame of level: says 'Geocentric'"):
        read_gauge_file(path)


def test_a_netcdf_without_one_level_is_refused(tmp_path):
    path = stored(tmp_path / "a.nc", first=([1, 2, 3], "mm"), second=([1, 2, 3], "cm"))
    with pytest.raises(InputError, match=r"found first, second. Name the one to use 'level'"):
        read_gauge_file(path)
    path = stored(tmp_path / "b.nc", temperature=([1, 2, 3], "K"))
    with pytest.raises(InputError, match="found none"):
        read_gauge_file(path)


def test_what_is_not_there_or_no_text_is_refused(tmp_path):
    with pytest.raises(MissingFileError, match="there is no such file"):
        read_gauge_file(tmp_path / "none.txt")
    (tmp_path / "latin.txt").write_bytes(b"1950; 7000; N; 000 \xe9\n")
    with pytest.raises(TableError, match="is not UTF-8 text"):
        read_gauge_file(tmp_path / "latin.txt")
    (tmp_path / "bad.nc").write_bytes(b"nothing")
    with pytest.raises(DamagedFileError, match="cannot be read as NetCDF"):
        read_gauge_file(tmp_path / "bad.nc")


def test_a_folder_lists_its_visible_files(tmp_path):
    with pytest.raises(MissingFileError, match="holds no files"):
        gauge_paths(tmp_path)
    for name in ("b.csv", "a.txt", ".hidden"):
        (tmp_path / name).write_text("x", encoding="utf-8")
    assert gauge_paths(tmp_path)["gauge"].tolist() == ["a", "b"]


def test_a_table_lists_files_beside_it(text, tmp_path):
    listed = gauge_paths(text("gauge,file,lat,lon", "North,n.txt,60.5,", "South,s.txt,-40,170", name="list.csv"))
    assert listed["file"].tolist() == [tmp_path / "n.txt", tmp_path / "s.txt"]
    np.testing.assert_array_equal(listed["lon"], [np.nan, 170.0])
    with pytest.raises(TableError, match="line 2: file is empty"):
        gauge_paths(text("gauge,file", "North,", name="list.csv"))
