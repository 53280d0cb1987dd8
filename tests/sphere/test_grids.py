"""Grids: recognised in any orientation, refused in one line otherwise, quadrature exact."""

import numpy as np
import pytest
import xarray as xr

from massfingerprint.errors import GridError
from massfingerprint.sphere.grids import Grid, grid_of, regular_grid


def field(lat, lon, dtype=np.float64) -> xr.DataArray:
    lat, lon = np.asarray(lat, dtype=dtype), np.asarray(lon, dtype=dtype)
    return xr.DataArray(
        np.zeros((lat.size, lon.size)), dims=("lat", "lon"), coords={"lat": lat, "lon": lon}, name="load"
    )


LAT = np.arange(-87.5, 90, 5.0)
LON = np.arange(2.5, 360, 5.0)


@pytest.mark.parametrize("lat", [LAT, LAT[::-1]], ids=["south first", "north first"])
@pytest.mark.parametrize("lon", [LON, LON - 180, (LON + 180) % 360 - 180, LON[::-1], np.roll(LON, 7)])
@pytest.mark.parametrize("dtype", [np.float64, np.float32])
def test_any_orientation_is_recognised(lat, lon, dtype):
    grid = grid_of(field(lat, lon, dtype))
    assert (grid.nlat, grid.nlon, grid.band_limit) == (36, 72, 35)
    assert grid.south_first == (lat[0] < 0)
    values = np.arange(36 * 72.0).reshape(36, 72)
    np.testing.assert_array_equal(grid.from_rings(grid.to_rings(values)), values)


def test_rings_are_north_first_and_eastward():
    grid = grid_of(field(LAT, LON[::-1]))
    latitudes = np.broadcast_to(grid.latitudes[:, None], (36, 72))
    longitudes = np.broadcast_to(grid.longitudes, (36, 72))
    assert grid.to_rings(latitudes)[0, 0] == 87.5
    np.testing.assert_array_equal(grid.to_rings(longitudes)[0], LON)
    assert grid.first_azimuth == pytest.approx(np.deg2rad(2.5), abs=1e-15)


@pytest.mark.parametrize("rows", [12, 37, 180])
def test_quadrature_is_exact_for_low_powers_of_sin_latitude(rows):
    """int sin^p(lat) over the sphere = 4 pi / (p + 1) for even p, 0 for odd p (closed form); 1e-13 of 4 pi."""
    grid = regular_grid(180.0 / rows)
    s = np.sin(np.deg2rad(grid.latitudes))
    for power in range(min(rows, 12)):
        expected = 4 * np.pi / (power + 1) if power % 2 == 0 else 0.0
        total = (grid.quadrature_weights * s[:, None] ** power).sum()
        assert total == pytest.approx(expected, abs=4 * np.pi * 1e-13)


def test_quadrature_is_not_cell_areas():
    """On a polar ring the two differ by 13 % (computed: 1 - 0.8727); elsewhere hardly."""
    grid = regular_grid(1.0)
    edges = np.sin(np.deg2rad(grid.latitude_edges))
    areas = np.diff(edges) * 2 * np.pi / grid.nlon
    ratio = grid.ring_weights / areas
    assert ratio[0] == pytest.approx(0.873, abs=0.002)
    assert abs(ratio[60:120] - 1).max() < 1e-3


def test_edges_follow_the_order_of_the_grid():
    grid = grid_of(field(LAT[::-1], (LON - 180)[::-1]))
    assert grid.latitude_edges[0] == 90.0
    assert grid.longitude_edges[0] == pytest.approx(180.0)
    assert grid.longitude_edges[-1] == pytest.approx(-180.0)


def test_matches():
    grid = regular_grid(5.0)
    assert grid.matches(Grid(LAT, LON + 360.0))
    assert not grid.matches(Grid(LAT[::-1], LON))
    assert not grid.matches(regular_grid(2.5))


@pytest.mark.parametrize(
    ("lat", "lon", "message"),
    [
        (np.arange(-90, 91, 5.0), LON, "load: lat must be the 37 evenly spaced cell centres"),
        (LAT[1:], LON, "load: lat must be the 35 evenly spaced"),
        (np.rad2deg(np.arcsin(np.linspace(-0.97, 0.97, 36))), LON, "load: lat must be"),
        (LAT, np.arange(0, 361, 5.0), "once round the globe.*Drop a repeated last column"),
        (LAT, LON[:36], "load: lon must be 36 evenly spaced values"),
        ([0.0], LON, "lat needs at least 2 finite values"),
        (LAT, [0.0, 180.0], "lon needs at least 4 finite values"),
        (np.full(36, np.nan), LON, "lat needs at least 2 finite"),
    ],
)
def test_other_grids_are_refused(lat, lon, message):
    with pytest.raises(GridError, match=message):
        grid_of(field(lat, lon))


def test_missing_coordinates_are_named():
    bare = xr.DataArray(np.zeros((36, 72)), dims=("latitude", "longitude"))
    with pytest.raises(
        GridError, match=r"ocean: needs a dimension coordinate 'lat' in degrees, got dimensions \('latitude'"
    ):
        grid_of(bare, argument="ocean")


@pytest.mark.parametrize("spacing", [0.7, 0.0, -1.0, float("nan"), float("inf"), 361.0])
def test_spacing_that_does_not_divide_180(spacing):
    with pytest.raises(GridError, match="spacing: must be a positive number of degrees that divides 180"):
        regular_grid(spacing)
