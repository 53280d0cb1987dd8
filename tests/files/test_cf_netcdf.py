"""The CF layout of names, times, gaps; there and back."""

import numpy as np
import pytest
import xarray as xr

from massfingerprint.errors import DamagedFileError
from massfingerprint.files.netcdf import read_netcdf, write_cf_netcdf


@pytest.fixture
def data():
    time = np.array(["2003-01-16", "2003-02-15"], dtype="datetime64[ns]")
    return xr.Dataset(
        {
            "value": (("time", "site"), [[1.0, np.nan], [3.0, 4.0]], {"units": "mm"}),
            "value_sigma": (("time", "site"), [[0.1, 0.2], [0.3, 0.4]], {"units": "mm"}),
            "note": ("site", np.array(["a", "größer"], dtype=object)),
            "polar_motion_x": ("site", [1.0, 2.0], {"units": "mas Gt-1"}),
        },
        coords={
            "time": time,
            "site": np.array(["Écluse d'été", "="], dtype=object),
            "lat": ("site", [1.0, 2.0]),
            "lon": ("site", [3.0, 4.0]),
        },
    )


def test_there_and_back(tmp_path, data):
    before = data.copy(deep=True)
    write_cf_netcdf(data, tmp_path / "d.nc", attributes={"title": "t"})
    xr.testing.assert_identical(data, before)
    back = read_netcdf(tmp_path / "d.nc")
    assert back["site"].values.tolist() == data["site"].values.tolist()
    assert back["note"].values.tolist() == ["a", "größer"]
    assert back["time"].values.tolist() == data["time"].values.tolist()
    np.testing.assert_array_equal(back["value"].transpose("time", "site").values, data["value"].values)
    assert back.attrs["title"] == "t"


def test_layout(tmp_path, data):
    write_cf_netcdf(data, tmp_path / "d.nc", attributes={})
    with xr.open_dataset(tmp_path / "d.nc", decode_cf=False) as raw:
        assert raw["site_name"].dims == ("site_index", "site_name_length")
        assert raw["value"].dims == ("site_index", "time")
        assert "_FillValue" in raw["value"].attrs
        assert "_FillValue" not in raw["value_sigma"].attrs
        assert all("_FillValue" not in raw[name].attrs for name in ("lat", "lon", "time"))
        assert raw["value"].attrs["ancillary_variables"] == "value_sigma"
        assert raw["value_sigma"].attrs["coverage_content_type"] == "qualityInformation"
        assert raw["polar_motion_x"].attrs["units"] == "milliarcsecond Gt-1"
        assert raw.attrs["Conventions"] == "CF-1.11, ACDD-1.3"


@pytest.mark.parametrize("share", [0.0, 0.3, 0.9])
def test_a_truncated_file_is_named(tmp_path, data, share):
    path = tmp_path / "d.nc"
    write_cf_netcdf(data, path, attributes={})
    content = path.read_bytes()
    path.write_bytes(content[: int(share * len(content))])
    with pytest.raises(DamagedFileError, match=r"d.nc: cannot be read as NetCDF"):
        read_netcdf(path)
