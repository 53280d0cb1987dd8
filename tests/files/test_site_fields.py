"""Grids and long tables of sea level as they stand in files. All numbers are invented."""

import numpy as np
import pytest
import xarray as xr

from massfingerprint.errors import DamagedFileError, InputError, MissingFileError, TableError, UnitsError
from massfingerprint.files.site_fields import read_field_grid, read_site_series

TIMES = np.array(["2001-01-16", "2001-02-15"], dtype="datetime64[ns]")


def grid(names=("time", "lat", "lon")):
    """Dynamic sea level of a model: metres, single precision, a hole."""
    values = np.arange(24.0).reshape((2, 3, 4)).astype(np.float32)
    values[0, 0, 0] = np.nan
    words = {"units": "m", "standard_name": "sea_surface_height_above_geoid"}
    places = {names[1]: [-60.0, 0.0, 60.0], names[2]: [0.0, 90.0, 180.0, 270.0]}
    return xr.Dataset({"zos": (names, values, words)}, coords={"time": TIMES, **places})


@pytest.fixture
def stored(tmp_path):
    def write(data):
        path = tmp_path / "grid.nc"
        data.to_netcdf(path)
        return path

    return write


def test_a_grid_is_read_with_its_unit(stored):
    found = read_field_grid(stored(grid()))
    assert found.dims == ("time", "lat", "lon")
    assert found.dtype == np.float64
    assert found.attrs["units"] == "m"
    np.testing.assert_array_equal(found, grid()["zos"])
    np.testing.assert_array_equal(found["time"], TIMES)


def test_axes_are_known_by_their_cf_words(stored):
    """Latitude by its standard name, longitude by its unit, and in another order."""
    data = grid(("time", "y", "x"))
    data["y"].attrs, data["x"].attrs = {"standard_name": "latitude"}, {"units": "degrees_east"}
    data["area"] = (("y", "x"), np.ones((3, 4)), {"units": "m2", "standard_name": "cell_area"})
    path = stored(data.transpose("x", "y", "time"))
    for variable in ("zos", "sea_surface_height_above_geoid"):
        found = read_field_grid(path, variable=variable)
        assert found.dims == ("time", "lat", "lon")
        np.testing.assert_array_equal(found.values, grid()["zos"].values)
    with pytest.raises(InputError, match=r"holds 2 fields \(zos, area\). Pass variable="):
        read_field_grid(path)
    with pytest.raises(InputError, match=r"no field 'zoss' .* Did you mean zos"):
        read_field_grid(path, variable="zoss")


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        (lambda d: d.drop_attrs(), UnitsError, "variable zos has no units"),
        (lambda d: d.rename(lat="j"), InputError, "has no latitude along a dimension of its own"),
        (lambda d: d.isel(time=[1, 0]), InputError, "time 2001-01-16 .number 1. does not come after"),
        (lambda d: d.isel(time=[0, 0]), InputError, "does not come after"),
        (lambda d: d.assign_coords(time=[1.0, 2.0]), InputError, "time must be dates of the standard calendar"),
        (lambda d: d.isel(lat=0, drop=True), InputError, "has no latitude"),
    ],
)
def test_grids_that_cannot_be_used_say_why(stored, change, error, words):
    with pytest.raises(error, match=words) as raised:
        read_field_grid(stored(change(grid())))
    assert "\n" not in str(raised.value)


def test_files_that_are_not_there_or_no_netcdf_say_so(tmp_path):
    with pytest.raises(MissingFileError, match="no such file"):
        read_field_grid(tmp_path / "none.nc")
    (tmp_path / "text.nc").write_text("site,time\n", encoding="utf-8")
    with pytest.raises(DamagedFileError, match="cannot be read as NetCDF"):
        read_field_grid(tmp_path / "text.nc")


@pytest.fixture
def table(tmp_path):
    def write(*rows, header="site,time,value [mm],sigma [mm]"):
        path = tmp_path / "series.csv"
        path.write_text("\n".join([header, *rows]) + "\n", encoding="utf-8")
        return path

    return write


def test_a_long_table_becomes_series_with_gaps(table):
    path = table(
        "Quay,2001-01-16,5,1",
        "Pier,2001-02-15,7.5,2",
        "Quay,2001-02-15,,",
        "Pier,2001-03-16,-1,0",
    )
    found = read_site_series(path, quantity="dynamic sea level")
    assert found["site"].values.tolist() == ["Quay", "Pier"]
    assert [str(time)[:10] for time in found["time"].values] == ["2001-01-16", "2001-02-15", "2001-03-16"]
    np.testing.assert_array_equal(found["value"], [[5.0, np.nan], [np.nan, 7.5], [np.nan, -1.0]])
    np.testing.assert_array_equal(found["sigma"], [[1.0, np.nan], [np.nan, 2.0], [np.nan, 0.0]])
    assert found["value"].attrs == {"units": "mm", "long_name": "dynamic sea level"}
    assert found["sigma"].attrs["long_name"] == "1 sigma of dynamic sea level"


def test_units_of_length_become_millimetres(table):
    path = table("Quay,2001-01-16,5,10", header="site,time,value [m],sigma [cm]")
    found = read_site_series(path, quantity="steric sea level")
    assert (float(found["value"][0, 0]), float(found["sigma"][0, 0])) == pytest.approx((5000.0, 100.0), rel=1e-12)


@pytest.mark.parametrize(
    ("rows", "words"),
    [
        (("Quay,2001-01-16,5,1", "Quay,2001-01-16,6,1"), "line 3: site 'Quay' at 2001-01-16 stands there twice"),
        (("Quay,2001-01-16,5,1", "Quay,2001-01-16,,"), "line 3: site 'Quay' at 2001-01-16 stands there twice"),
        (
            ("Quay,2001-02-15,5,1", "Pier,2001-01-16,6,1", "Quay,2001-01-16,6,1"),
            "line 4: 2001-01-16 of site 'Quay' comes after",
        ),
        (("Quay,2001-13-15,5,1",), "line 2: time is '2001-13-15', not an ISO date"),
        (("Quay,2001-01-16,5,",), "line 2: sigma is ''; it must be 0 or more where there is a value"),
        (("Quay,2001-01-16,5,-1",), "line 2: sigma is '-1'"),
        (("Quay,2001-01-16,five,1",), "line 2: value is 'five', not a number"),
        ((",2001-01-16,5,1",), "line 2: site is empty"),
    ],
)
def test_rows_that_cannot_be_used_are_told_by_line(table, rows, words):
    with pytest.raises(TableError, match=words) as raised:
        read_site_series(table(*rows), quantity="dynamic sea level")
    assert "\n" not in str(raised.value)


@pytest.mark.parametrize(
    ("header", "error", "words"),
    [
        ("site,time,value,sigma [mm]", UnitsError, r"column value \(dynamic sea level\): has no units"),
        ("site,time,value [mm],sigma []", UnitsError, "column sigma .*: has no units"),
        ("site,time,value [Pa],sigma [mm]", UnitsError, "column value .*: units must be 'mm', got 'Pa'"),
        ("site,time,value [furlongz],sigma [mm]", UnitsError, "got 'furlongz'"),
        ("site,date,value [mm],sigma [mm]", TableError, "lacks the column time"),
    ],
)
def test_headers_that_cannot_be_used_say_why(table, header, error, words):
    with pytest.raises(error, match=words) as raised:
        read_site_series(table("Quay,2001-01-16,5,1", header=header), quantity="dynamic sea level")
    assert "\n" not in str(raised.value)


def test_the_quantity_must_be_said(table):
    with pytest.raises(InputError, match="quantity: must say what the values are"):
        read_site_series(table("Quay,2001-01-16,5,1"), quantity=" ")
