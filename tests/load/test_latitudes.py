"""Geocentric latitudes of places, outlines and the ocean; the two coasts of Antarctica."""

import geopandas as gpd
import numpy as np
import pandas as pd
import pyproj
import pytest
import shapely

from massfingerprint.errors import InputError
from massfingerprint.load.latitudes import (
    geocentric_latitude,
    geocentric_ocean,
    geocentric_outlines,
    geocentric_sites,
)
from massfingerprint.load.ocean import ocean_fraction
from massfingerprint.sphere.grids import grid_of


def test_latitudes_are_those_of_the_geodetic_library():
    """pyproj: the angle of the Cartesian point on WGS84 above the equatorial plane."""
    lat = np.linspace(-90.0, 90.0, 37)
    to_centre = pyproj.Transformer.from_crs("EPSG:4979", "EPSG:4978", always_xy=True)
    x, y, z = to_centre.transform(np.full_like(lat, 20.0), lat, np.zeros_like(lat))
    expected = np.rad2deg(np.arctan2(z, np.hypot(x, y)))
    assert geocentric_latitude(lat) == pytest.approx(expected, abs=1e-9)
    assert np.abs(geocentric_latitude(lat) - lat).max() == pytest.approx(0.192, abs=1e-3)


def test_sites_and_outlines_move_and_the_originals_stay():
    sites = pd.DataFrame({"site": ["a"], "lat": [45.0], "lon": [10.0]})
    assert geocentric_sites(sites)["lat"][0] == pytest.approx(44.8076, abs=1e-4)
    assert sites["lat"][0] == 45.0
    square = gpd.GeoDataFrame({"source": ["s"], "geometry": [shapely.box(0.0, 44.0, 1.0, 45.0)]})
    moved = geocentric_outlines(square)
    assert moved.total_bounds == pytest.approx(
        [0.0, float(geocentric_latitude(44.0)), 1.0, float(geocentric_latitude(45.0))]
    )
    assert square.total_bounds == pytest.approx([0.0, 44.0, 1.0, 45.0])


def test_the_ocean_moves_by_whole_areas():
    """A coast along a parallel: the band of cells between the old and the new latitude changes by the share of its area."""
    ocean = ocean_fraction(1.0)
    ocean = ocean.copy(data=np.where(ocean["lat"].values[:, None] > 45.0, 1.0, 0.0) * np.ones((1, 360)))
    moved = geocentric_ocean(ocean)
    shore = float(geocentric_latitude(45.0))
    share = (np.sin(np.deg2rad(45.0)) - np.sin(np.deg2rad(shore))) / (
        np.sin(np.deg2rad(45.0)) - np.sin(np.deg2rad(44.0))
    )
    assert moved.sel(lat=44.5).values == pytest.approx(np.full(360, share))
    assert moved.sel(lat=43.5).values == pytest.approx(np.zeros(360), abs=1e-12)
    assert moved.sel(lat=45.5).values == pytest.approx(np.ones(360))
    whole = ocean.copy(data=np.ones_like(ocean.values))
    assert geocentric_ocean(whole).values == pytest.approx(np.ones_like(ocean.values))


def test_the_two_coasts_of_antarctica():
    """1.55e6 km2 of shelves, 0.43 % of the ocean (Natural Earth; the numbers of source.toml)."""
    areas = {}
    for coast in ("grounding line", "ice front"):
        ocean = ocean_fraction(0.5, coastline=coast)
        weights = np.sin(np.deg2rad(ocean["lat"] + 0.25)) - np.sin(np.deg2rad(ocean["lat"] - 0.25))
        areas[coast] = float((ocean.sum("lon") * weights).sum()) * np.deg2rad(0.5) * 6371.0**2 / 1e6
        assert grid_of(ocean).nlat == 360
    assert areas["grounding line"] == pytest.approx(362.93, abs=0.02)
    assert areas["ice front"] == pytest.approx(361.38, abs=0.03)
    assert "ice shelves are land" in ocean.attrs["long_name"]
    with pytest.raises(InputError, match="coastline: no coastline 'shore'"):
        ocean_fraction(0.5, coastline="shore")
