"""Lists of stations, their series and velocities: what is read, and what is refused with its line."""

import numpy as np
import pandas as pd
import pytest
from pyproj import Geod, Transformer

from massfingerprint.coast.stations import read_station_series, read_station_velocities, read_stations
from massfingerprint.errors import TableError, UnitsError

# GRS80: a by definition, b = a (1 - f) with 1/f = 298.257222101 (Moritz 2000)
SEMI_MAJOR, SEMI_MINOR = 6378137.0, 6356752.3141
HEAD = "station,lat,lon"
CARTESIAN = "station,x [m],y [m],z [m]"


@pytest.fixture
def table(tmp_path):
    def write(*lines):
        path = tmp_path / "table.csv"
        path.write_text("\n".join(lines) + "\n", encoding="utf-8")
        return path

    return write


def test_a_list_is_read(table):
    path = table(
        "station,lat,lon,height [km],start,end,gaps",
        "abcd,53.7,7.8,0.25,2005-01-01,2010-06-30,2006-01-01/2006-02-28; 2008-03-11/2008-04-01",
        "WXYZ00NLD,-45.0,170.0,,,,",
    )
    found = read_stations(path)
    assert found["station"].tolist() == ["ABCD", "WXYZ00NLD"]
    assert found["height"].iloc[0] == pytest.approx(250.0)
    assert np.isnan(found["height"].iloc[1])
    assert found["start"].iloc[0] == pd.Timestamp("2005-01-01")
    assert found["end"].isna().tolist() == [False, True]
    (first, last), second = found["gaps"].iloc[0]
    assert (str(first)[:10], str(last)[:16]) == ("2006-01-01", "2006-02-28T23:59")  # the last day belongs to it
    assert str(second[0])[:10] == "2008-03-11"
    assert found["gaps"].iloc[1] == []


def test_decimal_years_follow_the_rule_of_mass_records(table):
    found = read_stations(table(f"{HEAD},start,end", "ABCD,0,0,2003.5,2010.25"))
    # half of 365 days, a quarter of 365 days
    assert found["start"].iloc[0] == pd.Timestamp("2003-07-02T12:00")
    assert found["end"].iloc[0] == pd.Timestamp("2010-04-02T06:00")


def test_axes_of_the_ellipsoid(table):
    found = read_stations(
        table(
            CARTESIAN,
            f"EQUA,{SEMI_MAJOR},0,0",
            f"EAST,0,{SEMI_MAJOR + 100.0},0",
            f"POLE,0,0,{SEMI_MINOR}",
            f"SOUT,0,0,{-SEMI_MINOR - 250.0}",
        )
    )
    assert found["lat"].to_numpy() == pytest.approx([0.0, 0.0, 90.0, -90.0], abs=1e-9)
    assert found["lon"].to_numpy()[:2] == pytest.approx([0.0, 90.0], abs=1e-9)
    assert found["height"].to_numpy() == pytest.approx(
        [0.0, 100.0, 0.0, 250.0], abs=1e-4
    )  # SEMI_MINOR has four decimals


def test_there_and_back_through_geocentric_coordinates(table):
    """To 1e-9 degree, a tenth of a millimetre: an independent path, EPSG's own transformation the other way."""
    lat, lon, height = np.array([78.9, -35.3, 5.2]), np.array([11.9, 149.0, -52.8]), np.array([80.0, 665.0, -25.0])
    x, y, z = Transformer.from_crs("EPSG:4979", "EPSG:4978", always_xy=True).transform(lon, lat, height)
    rows = [f"ST0{n},{x[n]:.6f},{y[n]:.6f},{z[n]:.6f}" for n in range(3)]
    found = read_stations(table(CARTESIAN, *rows))
    away = Geod(ellps="GRS80").inv(lon, lat, found["lon"], found["lat"])[2]
    assert np.abs(away).max() < 2e-4  # WGS84 and GRS80 differ by 0.1 mm
    assert found["height"].to_numpy() == pytest.approx(height, abs=2e-4)


def test_kilometres_in_the_header_are_converted(table):
    found = read_stations(table("station,x [km],y [km],z [km]", "EQUA,6378.137,0,0"))
    assert found["height"].iloc[0] == pytest.approx(0.0, abs=1e-6)


REFUSED = [
    ((HEAD, "ABCD,1,2", "abcd,3,4"), r"line 3: station ABCD stands there twice, first in line 2"),
    ((HEAD, "ABC,1,2"), r"line 2: station 'ABC' is no identifier.*4 characters"),
    ((HEAD, "ABCD,1,2", "EFGH,91,2"), r"line 3: lat must lie between -90 and 90, got 91\. Are lat and lon swapped"),
    ((HEAD, "ABCD,1,999"), r"line 2: lon must lie between -180 and 360, got 999"),
    ((HEAD, "ABCD,1;5,2"), r"line 2: lat is '1;5', not a number"),
    (("station,lat", "ABCD,1"), r"lacks the column lon beside lat"),
    (("station,name", "ABCD,x"), r"either lat and lon or x, y and z, found none"),
    (("station,lat,lon,x [m]", "ABCD,1,2,3"), r"either lat and lon or x, y and z, found lat, lon, x"),
    (
        (CARTESIAN, "ABCD,6378137,0,0", "EFGH,6378.137,0,0"),
        r"line 3: lies -63\d\d\.\d* km above.*-12 to \+10 km.*units",
    ),
    ((CARTESIAN, "ABCD,6378137,,0"), r"line 2: x, y and z must all be given"),
    (("station,x,y,z", "ABCD,6378137,0,0"), r"column x has no unit\. Write it as 'x \[m\]'"),
    ((f"{HEAD},height [m]", "ABCD,1,2,12000"), r"line 2: lies 12 km above the ellipsoid"),
    ((f"{HEAD},start,end", "ABCD,1,2,2010-01-01,2009-01-01"), r"line 2: end must lie after start"),
    ((f"{HEAD},start", "ABCD,1,2,last year"), r"line 2: start is 'last year', not an ISO date"),
    ((f"{HEAD},gaps", "ABCD,1,2,2008-01-01"), r"line 2: gap '2008-01-01' must be START/END"),
    ((f"{HEAD},gaps", "ABCD,1,2,2008-01-01/2007-01-01"), r"line 2: gap .* must end after it starts"),
]


@pytest.mark.parametrize(("lines", "words"), REFUSED, ids=[words[:40] for _, words in REFUSED])
def test_refused_with_its_line(table, lines, words):
    with pytest.raises(TableError, match=words) as caught:
        read_stations(table(*lines))
    assert "\n" not in str(caught.value)


@pytest.fixture
def stations():
    return pd.DataFrame({"station": ["ABCD", "EFGH"]})


def test_a_series_is_sorted_and_in_millimetres(table, stations):
    path = table(
        "station,time,up [m],up_sigma [mm],east [mm]",
        "efgh,2005-02-01,0.003,2,",
        "ABCD,2005-01-01,,,1.5",
        "EFGH,2005-01-01,0.001,1,",
    )
    found = read_station_series(path, stations=stations)
    assert found["station"].tolist() == ["ABCD", "EFGH", "EFGH"]
    assert found["up"].to_numpy()[1:] == pytest.approx([1.0, 3.0])
    assert found["up_sigma"].to_numpy()[1:] == pytest.approx([1.0, 2.0])
    assert found["east"].isna().tolist() == [False, True, True]
    assert "north" not in found


SERIES_REFUSED = [
    (
        ("station,time", "ABCE,2005-01-01"),
        TableError,
        r"line 2: station ABCE is not in the list of stations\. Did you mean ABCD",
    ),
    (
        ("station,time", "ABCD,2005-01-01", "ABCD,2005-01-01"),
        TableError,
        r"line 3: ABCD at 2005-01-01 stands there twice",
    ),
    (("station,time", "ABCD,soon"), TableError, r"line 2: time is 'soon'"),
    (("station,time,up", "ABCD,2005-01-01,1"), TableError, r"column up has no unit"),
    (("station,time,up [s]", "ABCD,2005-01-01,1"), UnitsError, r"column up: units must be 'mm', got 's'"),
    (("station,time,up [mm],up_sigma [mm]", "ABCD,2005-01-01,1,0"), TableError, r"line 2: up_sigma is '0'"),
    (("station,time,up [mm],up_sigma [mm]", "ABCD,2005-01-01,1,"), TableError, r"line 2: up_sigma is ''"),
    (("station,time,up_sigma [mm]", "ABCD,2005-01-01,1"), TableError, r"has up_sigma but no up"),
]


@pytest.mark.parametrize(("lines", "kind", "words"), SERIES_REFUSED, ids=[words[:40] for *_, words in SERIES_REFUSED])
def test_a_series_is_refused_with_its_line(table, stations, lines, kind, words):
    with pytest.raises(kind, match=words):
        read_station_series(table(*lines), stations=stations)


def test_velocities_are_converted(table, stations):
    found = read_station_velocities(
        table("station,up [m yr-1],up_sigma [mm yr-1]", "efgh,0.001,0.2"), stations=stations
    )
    assert found["station"].tolist() == ["EFGH"]
    assert found["up"].iloc[0] == pytest.approx(1.0)
    assert found["up_sigma"].iloc[0] == pytest.approx(0.2)


@pytest.mark.parametrize(
    ("lines", "words"),
    [
        (("station,up [mm yr-1]", "ABCD,1"), r"lacks the column up_sigma"),
        (("station,remark", "ABCD,1"), r"has no velocity"),
        (
            ("station,up [mm yr-1],up_sigma [mm yr-1]", "ABCD,1,1", "ABCD,1,1"),
            r"line 3: station ABCD stands there twice",
        ),
        (("station,up [mm yr-1],up_sigma [mm yr-1]", "ABCD,1,-1"), r"line 2: up_sigma is '-1'"),
    ],
)
def test_velocities_are_refused(table, stations, lines, words):
    with pytest.raises(TableError, match=words):
        read_station_velocities(table(*lines), stations=stations)
