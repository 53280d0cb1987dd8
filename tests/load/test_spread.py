"""One gigatonne over each source: closure, land, metamorphic turns, refusals."""

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely.geometry import LineString, Point, Polygon, box

from massfingerprint.errors import GridError, InputError, RegionError
from massfingerprint.load.ocean import ocean_fraction
from massfingerprint.load.regions import disc, regions
from massfingerprint.load.spread import spread_mass
from massfingerprint.sphere.grids import grid_of

CLOSURE = 1e-12  # of a gigatonne: rounding of a sum of a million terms


def gigatonnes(load):
    """Integral over the sphere of 6371 km with the quadrature of the grid."""
    return (load.values * grid_of(load).quadrature_weights).sum(axis=(1, 2)) * 6.371e6**2 / 1e12


@pytest.mark.parametrize("spacing", [0.25, 0.5, 1.0, 2.0])
def test_every_region_closes_to_a_gigatonne(spacing):
    load = spread_mass(regions(), ocean_fraction(spacing))
    np.testing.assert_allclose(gigatonnes(load), 1.0, rtol=CLOSURE)
    assert load.dims == ("source", "lat", "lon")
    assert load.attrs["units"] == "kg m-2 Gt-1"
    assert load.source.values.tolist() == regions().source.tolist()
    assert load.values.dtype == np.float64
    assert load.values.min() == 0.0
    # coast at 1:50m against 1:10m, and grid cells of the margin: most of each outline is land
    assert np.all(load.land_share > 0.9)
    assert np.all(load.land_share <= 1.0)


def test_uniform_thickness_over_an_ice_sheet():
    """Inland of Greenland the load is 1e12 kg over 1.708e6 km2 of ice: 0.585 kg m-2."""
    load = spread_mass(regions("greenland"), ocean_fraction(0.5))
    inland = load.sel(source="greenland", lat=slice(70, 75), lon=slice(315, 325))
    # quadrature weights differ from cell areas by under 1 % away from the poles
    np.testing.assert_allclose(inland, 1e12 / (1.7078e12), rtol=0.01)


@pytest.mark.parametrize("south_first", [True, False])
@pytest.mark.parametrize("convention", ["0..360", "-180..180", "westward"])
@pytest.mark.parametrize("dtype", [np.float64, np.float32])
def test_any_orientation_convention_and_precision(ocean, south_first, convention, dtype):
    turned = ocean.astype(dtype)
    if convention == "-180..180":
        turned = turned.assign_coords(lon=(turned.lon + 180) % 360 - 180).sortby("lon")
    elif convention == "westward":
        turned = turned.isel(lon=slice(None, None, -1))
    turned = turned if south_first else turned.isel(lat=slice(None, None, -1))
    turned = turned.assign_coords(lat=turned.lat.astype(dtype), lon=turned.lon.astype(dtype))
    load = spread_mass(regions(), turned)
    np.testing.assert_allclose(gigatonnes(load), 1.0, rtol=CLOSURE)
    np.testing.assert_array_equal(load.lat, turned.lat)
    np.testing.assert_array_equal(load.lon, turned.lon)
    straight = load.assign_coords(lat=load.lat.astype(float), lon=load.lon.astype(float) % 360).sortby(["lat", "lon"])
    reference = spread_mass(regions(), ocean)
    # float32 fractions are rounded at 6e-8, of loads below 3 kg m-2 per gigatonne
    np.testing.assert_allclose(straight, reference, rtol=0, atol=1e-13 if dtype is np.float64 else 1e-6)


def test_transposed_ocean_gives_the_same(ocean):
    xr.testing.assert_allclose(
        spread_mass(regions("greenland"), ocean.T), spread_mass(regions("greenland"), ocean), rtol=1e-14
    )


@given(west=st.floats(-180, 179), south=st.floats(-90, 89), width=st.floats(1e-4, 300), height=st.floats(1e-4, 120))
@settings(max_examples=40, deadline=None)
def test_any_rectangle_closes(west, south, width, height):
    lat, lon = np.arange(-87.5, 90, 5), np.arange(2.5, 360, 5)
    dry = xr.DataArray(np.zeros((36, 72)), dims=("lat", "lon"), coords={"lat": lat, "lon": lon})
    shape = box(west, south, min(west + width, 180.0), min(south + height, 90.0))
    # a box wider than half a turn has corners in between, or its long edges would be read the short way round
    frame = gpd.GeoDataFrame({"source": ["r"]}, geometry=[shape.segmentize(90.0)], crs=4326)
    load = spread_mass(frame, dry)
    np.testing.assert_allclose(gigatonnes(load), 1.0, rtol=CLOSURE)
    assert float(load.land_share[0]) == pytest.approx(1.0, rel=1e-12)


@pytest.mark.parametrize("size_km", [0.001, 1.0])
def test_outline_smaller_than_a_cell_closes(ocean, size_km):
    load = spread_mass(disc("hut", 61.3, -148.1, size_km / 2), ocean)
    np.testing.assert_allclose(gigatonnes(load), 1.0, rtol=CLOSURE)
    assert np.count_nonzero(load) == 1
    assert float(load.sel(lat=61.5, lon=211.5)[0]) > 0


def test_share_is_the_smaller_of_coverage_and_land(dry, one_region):
    """A cell wholly under the outline but half ocean, and one half under it on land, carry the same."""
    half_wet = dry.copy()
    half_wet.loc[{"lat": 1.0, "lon": 11.0}] = 0.5
    load = spread_mass(one_region(box(10, 0, 13, 2)), half_wet).sel(source="a", lat=1.0)
    assert float(load.sel(lon=11.0)) == pytest.approx(float(load.sel(lon=13.0)), rel=1e-12)
    assert float(load.land_share) == pytest.approx((0.5 * 2 + 0.5 * 2) / 3, rel=1e-12)
    assert np.count_nonzero(load) == 2


def test_turning_the_globe_turns_the_load(dry):
    """Metamorphic: the same cap moved in longitude, over the date line, is the same load moved."""
    at_home = spread_mass(disc("a", 64.0, -150.0, 900.0), dry)
    over = spread_mass(disc("a", 64.0, 180.0, 900.0), dry)
    np.testing.assert_allclose(over, at_home.roll(lon=-15), rtol=0, atol=1e-12 * float(at_home.max()))


def test_reflecting_the_globe_reflects_the_load(dry):
    north, south = spread_mass(disc("a", 90.0, 0.0, 900.0), dry), spread_mass(disc("a", -90.0, 0.0, 900.0), dry)
    np.testing.assert_allclose(north.values[:, ::-1], south.values, rtol=0, atol=1e-12 * float(north.max()))


def test_weights_share_out_the_gigatonne(dry, one_region):
    region, cells = one_region(box(10, 0, 14, 2)), xr.zeros_like(dry)
    cells.loc[{"lat": 1.0, "lon": [11.0, 13.0]}] = [1.0, 3.0]
    load = spread_mass(region, dry, weights=cells).sel(source="a", lat=1.0)
    assert float(load.sel(lon=13.0)) == pytest.approx(3 * float(load.sel(lon=11.0)), rel=1e-14)
    np.testing.assert_allclose(gigatonnes(spread_mass(region, dry, weights=cells)), 1.0, rtol=CLOSURE)
    by_name = spread_mass(region, dry, weights={"a": cells})
    by_dimension = spread_mass(region, dry, weights=cells.expand_dims(source=["a"]))
    xr.testing.assert_identical(by_name, by_dimension)
    xr.testing.assert_allclose(by_name, spread_mass(region, dry, weights=cells * 1e-290), rtol=1e-12)


def test_mapping_leaves_the_other_sources_uniform(ocean):
    table = regions("greenland", "west_antarctica")
    weights = xr.ones_like(ocean).where(ocean.lat > 70.0, 0.0)
    load = spread_mass(table, ocean, weights={"greenland": weights})
    assert float(load.sel(source="greenland", lat=65.5).max()) == 0.0
    xr.testing.assert_allclose(load[1], spread_mass(table, ocean)[1], rtol=1e-15)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda w: w.where(w.lat > 0), "cells are not numbers"),
        (lambda w: w - 2.0, "must be 0 or more, got -1"),
        (lambda w: w * 0.0, "are zero all over region 'greenland'"),
        (lambda w: w.isel(lat=slice(None, None, -1)), "cells of grid"),
        (lambda w: w.coarsen(lat=2, lon=2).mean(), "cells of grid"),
        (lambda w: w.expand_dims(time=[0]), "must be a DataArray"),
        (lambda w: w.values, "must be a DataArray or a mapping"),
        (lambda w: {"grenland": w}, "'grenland'. Did you mean greenland"),
        (lambda w: {"greenland": w.values}, "must be a DataArray"),
        (lambda w: w.expand_dims(source=["other"]), "none for region 'greenland'"),
        (lambda w: w.expand_dims("source"), "has no names"),
    ],
)
def test_bad_weights_are_refused(ocean, change, words):
    with pytest.raises(InputError, match=words):
        spread_mass(regions("greenland"), ocean, weights=change(xr.ones_like(ocean)))


def test_open_ocean_is_refused_unless_allowed(ocean):
    """South Pacific, the far side of everything."""
    sea = disc("pacific_patch", -48.0, -123.0, 300.0)
    with pytest.raises(RegionError, match="'pacific_patch': lies in the open ocean"):
        spread_mass(sea, ocean)
    with pytest.raises(RegionError, match="open ocean"):
        spread_mass(sea, ocean.astype(np.float32) - np.float32(6e-8))
    load = spread_mass(sea, ocean, allow_ocean=True)
    np.testing.assert_allclose(gigatonnes(load), 1.0, rtol=CLOSURE)
    assert float(load.land_share[0]) == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("shape", "words"),
    [
        (Polygon([(0, 0), (10, 10), (10, 0), (0, 10)]), r"'a': .*Self-intersection\[5 5\]"),
        (Polygon([(0, 0), (10, 10), (0, 0)]), "'a': its outline has no area"),
        (Polygon(), "'a': has no outline"),
        (None, "'a': has no outline"),
        (Point(0, 0), "'a': must be a polygon, got Point"),
        (LineString([(0, 0), (1, 1)]), "'a': must be a polygon, got LineString"),
        (box(0, 80, 10, 95), "'a': latitude 95 is beyond the pole"),
        (Polygon([(0, 0), (10, 0), (10, np.inf)]), "'a': its outline has a corner that is not a number"),
    ],
)
def test_unusable_outline_is_refused_by_name(dry, one_region, shape, words):
    with pytest.raises(RegionError, match=words):
        spread_mass(one_region(shape), dry)


@pytest.mark.parametrize(
    ("table", "words"),
    [
        (lambda t: t.iloc[:0], "holds no outline"),
        (lambda t: pd.concat([t, t], ignore_index=True), "'greenland' stands there more than once"),
        (lambda t: t.rename(columns={"source": "name"}), "no field 'source'"),
        (lambda t: pd.DataFrame(t.drop(columns="geometry")), "must be a GeoDataFrame"),
        (lambda t: t.set_crs(None, allow_override=True), "does not say its coordinate reference system"),
        (lambda t: "greenland", "must be a GeoDataFrame"),
    ],
)
def test_unusable_table_is_refused(ocean, table, words):
    with pytest.raises(RegionError, match=words):
        spread_mass(table(regions("greenland")), ocean)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda o: o * 100.0, "must lie from 0 to 1, got 0 to 100"),
        (lambda o: o.where(o > 0), "must lie from 0 to 1"),
        (lambda o: o.isel(lon=slice(0, 100)), "lon must be"),
        (lambda o: o.expand_dims(time=[0]), "must be an ocean-fraction DataArray"),
        (lambda o: o.to_dataset(), "must be an ocean-fraction DataArray"),
    ],
)
def test_unusable_grid_is_refused(ocean, change, words):
    with pytest.raises(GridError, match=words):
        spread_mass(regions("greenland"), change(ocean))


def test_table_in_another_reference_system_is_the_same_load(ocean):
    """Polar stereographic and back: outlines move by under a metre."""
    there = spread_mass(regions("greenland").to_crs(3413), ocean)
    here = spread_mass(regions("greenland"), ocean)
    # the stored edges are straight in degrees, to_crs makes them straight in the plane: up to 50 km long, they differ by
    # tens of metres in a cell of 40 km
    np.testing.assert_allclose(there, here, rtol=0, atol=2e-3 * float(here.max()))


def test_inputs_stay_as_they_were(ocean):
    table, weights = regions(), xr.ones_like(ocean)
    before = table.copy(deep=True), ocean.copy(deep=True), weights.copy(deep=True)
    load = spread_mass(table, ocean, weights=weights)
    load.values[:] = -1.0
    load["lat"].attrs["spoilt"] = 1
    assert table.equals(before[0])
    xr.testing.assert_identical(ocean, before[1])
    xr.testing.assert_identical(weights, before[2])
