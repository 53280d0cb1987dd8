"""Coverage of cells by outlines, against closed forms and against an independent polygon clipper."""

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely.geometry import MultiPolygon, Polygon, box

from massfingerprint.coverage import cell_areas, cell_coverage, sphere_area
from massfingerprint.load.regions import disc

ROUNDING = 1e-12  # of a cell, or of an area: sums of some thousand terms in double precision


def edges(spacing, *, start=0.0, northward=True, eastward=True):
    lat = np.linspace(-90.0, 90.0, round(180 / spacing) + 1)
    lon = start + np.linspace(0.0, 360.0, round(360 / spacing) + 1)
    return (lat if northward else lat[::-1]), (lon if eastward else lon[::-1])


def sine(degrees):
    return np.sin(np.deg2rad(degrees))


def rectangle_coverage(west, south, east, north, lat, lon):
    """Fractions of a longitude-latitude rectangle by overlap of intervals, in the same map from -180 to 180."""
    rows = np.clip(np.minimum(sine(north), sine(lat[1:])) - np.maximum(sine(south), sine(lat[:-1])), 0, None)
    columns = np.clip(np.minimum(east, lon[1:]) - np.maximum(west, lon[:-1]), 0, None)
    return np.outer(rows / np.diff(sine(lat)), columns / np.diff(lon))


@pytest.mark.parametrize(
    "corners", [(-20.3, 10.1, 31.7, 44.4), (0.0, 0.0, 10.0, 10.0), (-180.0, 60.0, 180.0, 90.0), (3.1, 4.2, 3.3, 4.3)]
)
def test_rectangle_equals_overlap_of_intervals(corners):
    lat, lon = edges(5.0, start=-180.0)
    covered = cell_coverage(box(*corners), lat, lon)
    np.testing.assert_allclose(covered, rectangle_coverage(*corners, lat, lon), rtol=0, atol=ROUNDING)


@given(st.data())
@settings(max_examples=40, deadline=None)
def test_any_rectangle_equals_overlap_of_intervals(data):
    west, east = sorted(data.draw(st.lists(st.floats(-180, 180), min_size=2, max_size=2)))
    south, north = sorted(data.draw(st.lists(st.floats(-90, 90), min_size=2, max_size=2)))
    if east - west < 1e-3 or north - south < 1e-3:
        return
    lat, lon = edges(10.0, start=-180.0)
    covered = cell_coverage(box(west, south, east, north), lat, lon)
    expected = rectangle_coverage(west, south, east, north, lat, lon)
    # coverage below 1e-12 of the best-covered cell is set to zero; a 0.001-degree sliver keeps 1e-8 of its value
    np.testing.assert_allclose(covered, expected, rtol=1e-8, atol=ROUNDING)


def test_triangle_equals_a_clipper_in_the_equal_area_plane():
    """Dense edges in the (longitude, sin latitude) plane, clipped by GEOS: an independent algorithm."""
    corners = [(-31.3, 12.2), (47.1, 33.9), (8.4, 78.6)]
    lat, lon = edges(10.0, start=-180.0)
    dense = shapely.segmentize(Polygon(corners), 0.002)
    flat = shapely.transform(dense, lambda p: np.column_stack([p[:, 0], sine(p[:, 1])]))
    expected = np.zeros((lat.size - 1, lon.size - 1))
    for i in range(lat.size - 1):
        for j in range(lon.size - 1):
            cell = box(lon[j], sine(lat[i]), lon[j + 1], sine(lat[i + 1]))
            expected[i, j] = flat.intersection(cell).area / cell.area
    # chords of 0.002 degree sag by (0.002 deg)^2 / 8 = 1.5e-10 rad, 1e-9 of a 10-degree cell's side
    np.testing.assert_allclose(cell_coverage(Polygon(corners), lat, lon), expected, rtol=0, atol=3e-9)


@pytest.mark.parametrize(("lat", "lon"), [(90, 0), (-90, 120), (72, -40), (10, 179), (-85, -170), (0, 0)])
@pytest.mark.parametrize("radius_km", [30.0, 1500.0])
def test_disc_has_the_area_of_the_cap(lat, lon, radius_km):
    """Archimedes: 2 pi (1 - cos r)."""
    cap = 2 * np.pi * (1 - np.cos(radius_km / 6371.0))
    # a regular polygon of n great-circle edges loses (2 pi / n)^2 / 6 = 1.3e-5 of the cap at n = 1440; its edges here are
    # straight in longitude and latitude, which beside a pole costs as much again
    outline = disc("a", lat, lon, radius_km, vertices=1440).geometry.iloc[0]
    assert sphere_area(outline) == pytest.approx(cap, rel=5e-5)
    rows, columns = edges(1.0)
    covered = np.sum(cell_coverage(outline, rows, columns) * cell_areas(rows, columns))
    assert covered == pytest.approx(sphere_area(outline), rel=ROUNDING)


def test_octant_and_globe_areas():
    assert sphere_area(box(0, 0, 90, 90)) == pytest.approx(np.pi / 2, rel=1e-15)
    assert sphere_area(box(-180, -90, 180, 90)) == pytest.approx(4 * np.pi, rel=1e-15)


@pytest.mark.parametrize("northward", [True, False])
@pytest.mark.parametrize("eastward", [True, False])
@pytest.mark.parametrize("start", [0.0, -180.0, -182.5, 17.5, 360.0])
def test_every_order_of_the_grid_gives_the_same_cells(northward, eastward, start):
    shape = Polygon([(-175.0, -40.0), (171.2, 12.0), (13.0, 77.7), (-60.0, 21.0)])
    lat, lon = edges(5.0)
    reference = cell_coverage(shape, lat, lon)
    if start % 5.0:  # half a cell off: compare on the halves that both grids have
        fine_lat, fine_lon = edges(2.5)
        fine = cell_coverage(shape, fine_lat, fine_lon) * cell_areas(fine_lat, fine_lon)
        halves = np.roll(fine, -round(start / 2.5), axis=1)
        pairs = halves.reshape(36, 2, 72, 2).sum(axis=(1, 3))
        reference = pairs / cell_areas(lat, lon)
    else:
        reference = np.roll(reference, -round(start / 5.0), axis=1)
    rows, columns = edges(5.0, start=start, northward=northward, eastward=eastward)
    covered = cell_coverage(shape, rows, columns)
    covered = covered if northward else covered[::-1]
    covered = covered if eastward else covered[:, ::-1]
    np.testing.assert_allclose(covered, reference, rtol=0, atol=ROUNDING)


def test_holes_parts_and_ring_direction_do_not_matter():
    lat, lon = edges(5.0)
    shell, hole, island = box(10, 10, 50, 50), box(22, 21, 33, 44), box(100, -50, 111, -33)
    whole = MultiPolygon([Polygon(shell.exterior, [hole.exterior]), island])
    backward = MultiPolygon(
        [Polygon(shell.exterior.coords[::-1], [hole.exterior.coords[::-1]]), Polygon(island.exterior.coords[::-1])]
    )
    expected = cell_coverage(shell, lat, lon) - cell_coverage(hole, lat, lon) + cell_coverage(island, lat, lon)
    np.testing.assert_allclose(cell_coverage(whole, lat, lon), expected, rtol=0, atol=ROUNDING)
    np.testing.assert_allclose(cell_coverage(backward, lat, lon), expected, rtol=0, atol=ROUNDING)


def test_no_trace_outside_the_outline():
    lat, lon = edges(1.0)
    outline = disc("a", 61.3, -148.2, 333.0).geometry.iloc[0]
    covered = cell_coverage(outline, lat, lon)
    west, south, east, north = outline.bounds
    outside_rows = (lat[1:] < south) | (lat[:-1] > north)
    outside_columns = (lon[1:] < west + 360) | (lon[:-1] > east + 360)
    assert np.count_nonzero(covered[outside_rows]) == 0
    assert np.count_nonzero(covered[:, outside_columns]) == 0
    assert covered.max() == 1.0


def test_half_metre_outline_keeps_its_area():
    lat, lon = edges(0.25)
    size = 5e-6
    covered = cell_coverage(box(40.1, 50.1, 40.1 + size, 50.1 + size), lat, lon)
    expected = size * (sine(50.1 + size) - sine(50.1)) / (0.25 * (sine(50.25) - sine(50.0)))
    # corners near 40 degrees carry 7e-15 degree of rounding, 1e-9 of the side
    assert covered.sum() == pytest.approx(expected, rel=1e-8)
    assert np.count_nonzero(covered) == 1
