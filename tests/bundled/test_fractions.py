"""Cell fractions against closed forms on the sphere and against an independent polygon clipper."""

import numpy as np
import pytest
import shapely
from shapely.affinity import rotate, scale
from shapely.geometry import Point, Polygon, box

from massfingerprint.bundled._fractions import cell_fractions, united
from massfingerprint.errors import InputError

# Closed forms differ from the sums over edges by rounding only.
ROUNDING = 1e-10


def cell_areas(spacing):
    """Steradian."""
    edges = np.sin(np.radians(np.arange(-90, 90 + spacing / 2, spacing)))
    return np.repeat(np.diff(edges)[:, None] * np.radians(spacing), round(360 / spacing), axis=1)


def solid_angle(polygons, spacing):
    return (cell_fractions(polygons, spacing) * cell_areas(spacing)).sum()


def test_the_whole_globe_and_nothing():
    np.testing.assert_allclose(cell_fractions([box(-180, -90, 180, 90)], 5.0), 1.0, atol=ROUNDING)
    np.testing.assert_array_equal(cell_fractions([], 5.0), 0.0)


@pytest.mark.parametrize("spacing", [10.0, 1.0, 0.5])
def test_rectangle_cut_by_cells(spacing):
    west, south, east, north = 12.3, -47.1, 31.77, 8.45
    exact = np.radians(east - west) * (np.sin(np.radians(north)) - np.sin(np.radians(south)))
    assert solid_angle([box(west, south, east, north)], spacing) == pytest.approx(exact, rel=ROUNDING)


def test_shares_of_single_cells():
    fractions = cell_fractions([box(-180, 60.25, -179.25, 61)], 1.0)
    band = (np.sin(np.radians(61)) - np.sin(np.radians(60.25))) / (np.sin(np.radians(61)) - np.sin(np.radians(60)))
    assert fractions[150, 0] == pytest.approx(0.75 * band, abs=ROUNDING)
    assert np.count_nonzero(fractions) == 1


@pytest.mark.parametrize("spacing", [20.0, 1.0])
def test_triangle_with_an_edge_straight_in_longitude_and_latitude(spacing):
    # Longitude runs from 0 to a - latitude: the integral of (a - y) cos y from 0 to a is 1 - cos a.
    exact = 1 - np.cos(np.radians(17.0))
    assert solid_angle([Polygon([(0, 0), (17, 0), (0, 17)])], spacing) == pytest.approx(exact, rel=ROUNDING)


@pytest.mark.parametrize("pole", [-1, 1])
def test_polar_cap(pole):
    cap = box(-180, 80.1, 180, 90) if pole > 0 else box(-180, -90, 180, -80.1)
    fractions = cell_fractions([cap], 0.25)
    rows = fractions if pole > 0 else fractions[::-1]
    sines = np.sin(np.radians([80.0, 80.1, 80.25]))
    np.testing.assert_allclose(rows[681:], 1.0, atol=ROUNDING)
    np.testing.assert_allclose(rows[680], (sines[2] - sines[1]) / (sines[2] - sines[0]), atol=ROUNDING)
    np.testing.assert_array_equal(rows[:680], 0.0)


def test_a_hole_is_not_covered_whatever_way_the_rings_run():
    shell, hole = box(-10, -10, 10, 10), box(-3, -3, 4, 4)
    for ring in (hole.exterior.coords, list(hole.exterior.coords)[::-1]):
        fractions = cell_fractions([Polygon(shell.exterior.coords, [ring])], 1.0)
        assert fractions[90, 180] == pytest.approx(0.0, abs=ROUNDING)
        assert fractions[85, 180] == pytest.approx(1.0, abs=ROUNDING)


def test_turning_the_globe_by_whole_cells_turns_the_fractions():
    shape = Point(-40, 20).buffer(23.3)
    turned = shapely.transform(shape, lambda xy: np.add(xy, [60, 0]))
    np.testing.assert_allclose(
        cell_fractions([turned], 2.5), np.roll(cell_fractions([shape], 2.5), 24, axis=1), atol=ROUNDING
    )


def test_against_clipping_in_the_equal_area_plane():
    shape = rotate(scale(Point(30, 55).buffer(1, quad_segs=3), 21.7, 28.3), 33)
    spacing = 5.0

    def flat(geometry):
        # Chords of 0.01 degree leave the curved edge by 4e-9 rad, 1e-7 of a cell.
        dense = shapely.segmentize(geometry, 0.01)
        return shapely.transform(
            dense, lambda xy: np.column_stack([np.radians(xy[:, 0]), np.sin(np.radians(xy[:, 1]))])
        )

    expected = np.zeros((36, 72))
    whole = flat(shape)
    for row in range(36):
        for column in range(72):
            cell = flat(box(column * 5 - 180, row * 5 - 90, column * 5 - 175, row * 5 - 85).normalize())
            expected[row, column] = whole.intersection(cell).area / cell.area if whole.intersects(cell) else 0.0
    assert expected.max() == pytest.approx(1.0, abs=1e-6)
    np.testing.assert_allclose(cell_fractions([shape], spacing), expected, atol=1e-6)


def test_united_makes_overlaps_and_broken_outlines_countable():
    bow_tie = Polygon([(0, 0), (10, 10), (10, 0), (0, 10)])
    no_area = Polygon([(50, 50), (51, 51), (50, 50)])
    parts = united([box(20, 0, 30, 10), box(25, 0, 35, 10), bow_tie, no_area])
    assert all(part.is_valid and part.geom_type == "Polygon" for part in parts)
    assert sum(part.area for part in parts) == pytest.approx(150 + 50)
    assert cell_fractions(parts, 1.0).max() == pytest.approx(1.0, abs=ROUNDING)


def test_overlap_is_refused():
    with pytest.raises(InputError, match=r"they cover between 0 and 2 of a cell. Overlapping polygons must be united"):
        cell_fractions([box(0, 0, 10, 10), box(5, 5, 20, 20)], 1.0)


@pytest.mark.parametrize("bounds", [(170, 0, 190, 10), (-200, 0, -170, 10), (0, 80, 10, 91)])
def test_what_leaves_the_globe_is_refused(bounds):
    with pytest.raises(InputError, match=r"a vertex lies outside longitudes -180..180"):
        cell_fractions([box(*bounds)], 1.0)
