"""Ocean fraction at any spacing that divides 180."""

import numpy as np
import pytest

from massfingerprint.bundled import open_bundled
from massfingerprint.errors import GridError
from massfingerprint.load.ocean import ocean_fraction


@pytest.fixture(scope="module")
def quarter():
    return ocean_fraction()


def area_mean(field):
    """Exact area mean with cell areas on the sphere."""
    step = 180.0 / field.sizes["lat"]
    weight = np.sin(np.deg2rad(field.lat.values + step / 2)) - np.sin(np.deg2rad(field.lat.values - step / 2))
    return float(np.sum(field.values * weight[:, None]) / (2 * field.sizes["lon"]))


@pytest.mark.parametrize("spacing", [0.25, 0.5, 0.3, 1, 1.0, np.float32(2.0), 4.5, 7.2, 90.0, 0.2, 180.0 / 7])
def test_every_spacing_keeps_the_ocean_area(quarter, spacing):
    field = ocean_fraction(spacing)
    assert field.dims == ("lat", "lon")
    assert field.shape == (round(180 / spacing), round(360 / spacing))
    # 362.93e6 km2 on the sphere of 6371 km: design value, measured from the polygons; stored fractions round at 5e-5
    assert area_mean(field) * 4 * np.pi * 6371.0**2 == pytest.approx(362.93e6, rel=5e-5)
    assert area_mean(field) == pytest.approx(area_mean(quarter), rel=1e-12)


def test_stored_spacing_returns_the_stored_cells(quarter):
    stored = open_bundled("ocean_fraction_0.25deg.nc")["ocean_fraction"]
    field = quarter
    np.testing.assert_allclose(np.roll(stored.values, 720, axis=1), field.values, rtol=0, atol=1e-15)
    assert field.lon.values[0] == 0.125
    assert field.lat.values[0] == -89.875


def test_one_degree_equals_means_of_its_sixteen_cells(quarter):
    fine, coarse = quarter, ocean_fraction(1.0)
    height = np.diff(np.sin(np.deg2rad(np.linspace(-90, 90, 721)))).reshape(180, 4)
    means = (fine.values.reshape(180, 4, 360, 4).mean(axis=3) * height[:, :, None]).sum(axis=1) / height.sum(axis=1)[
        :, None
    ]
    np.testing.assert_allclose(coarse.values, means, rtol=0, atol=1e-14)


def test_finer_repeats_the_cells_and_says_so(quarter):
    fine = ocean_fraction(0.125)
    np.testing.assert_allclose(fine.values[::2, ::2], quarter.values, rtol=0, atol=1e-12)
    np.testing.assert_allclose(fine.values[1::2, 1::2], quarter.values, rtol=0, atol=1e-12)
    assert "repeated" in fine.attrs["comment"]
    assert "comment" not in quarter.attrs


@pytest.mark.parametrize(
    ("lat", "lon", "value"),
    [(0, 200, 1.0), (45, 100, 0.0), (42, 51, 0.0), (-80, 180, 1.0), (-90, 0, 0.0), (72, 320, 0.0)],
    ids=["pacific", "mongolia", "caspian is land", "ross shelf is ocean", "south pole", "greenland"],
)
def test_known_places(ocean, lat, lon, value):
    assert float(ocean.sel(lat=lat, lon=lon, method="nearest")) == pytest.approx(value, abs=1e-3)


def test_says_what_it_is(ocean):
    assert ocean.name == "ocean_fraction"
    assert ocean.attrs["units"] == "1"
    assert "ocean" in ocean.attrs["long_name"]
    assert "Natural Earth" in ocean.attrs["source"]
    assert ocean.values.dtype == np.float64
    assert 0.0 <= ocean.values.min() < ocean.values.max() <= 1.0


@pytest.mark.parametrize("spacing", [0.7, 0, -1, np.nan, np.inf, 181, 0.25 * (1 + 1e-6), "1", None, True, 0.001])
def test_bad_spacing_is_refused(spacing):
    with pytest.raises(GridError, match="spacing"):
        ocean_fraction(spacing)
