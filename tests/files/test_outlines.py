"""Outlines from disk in any reference system, across the date line and round a pole."""

import geopandas as gpd
import numpy as np
import pyogrio
import pytest
import shapely
from pyproj import Transformer
from shapely.geometry import LineString, MultiPolygon, Point, Polygon, box

from massfingerprint.coverage import sphere_area
from massfingerprint.errors import DamagedFileError, MissingFileError, RegionError
from massfingerprint.files.outlines import read_regions

METRE = np.rad2deg(1 / 6.371e6)  # degrees


@pytest.fixture
def written(tmp_path):
    def write(shapes, crs="EPSG:4326", suffix="gpkg", names=None, **options):
        path = tmp_path / f"own.{suffix}"
        names = names or [f"r{i}" for i in range(len(shapes))]
        frame = gpd.GeoDataFrame({"name": names, "rank": range(len(shapes))}, geometry=shapes, crs=crs)
        pyogrio.write_dataframe(frame, path, **options)
        return path

    return write


def outline(path):
    table = read_regions(path, name_field="name")
    assert len(table) == 1
    shape = table.geometry.iloc[0]
    west, south, east, north = shape.bounds
    assert shape.is_valid
    assert (west, south) >= (-180.0, -90.0)
    assert east <= 180.0
    assert north <= 90.0
    return shape


def circle(radius, count=720):
    turn = 2 * np.pi * np.arange(count) / count
    return Polygon(np.column_stack([radius * np.sin(turn), radius * np.cos(turn)]))


@pytest.mark.parametrize("suffix", ["gpkg", "geojson", "shp"])
def test_formats_and_columns(written, suffix):
    path = written([box(10, 20, 30, 40), box(-30, -20, -10, 0)], suffix=suffix, names=["Ice A", "Ice B"])
    table = read_regions(path, name_field="name")
    assert list(table.columns) == ["source", "geometry", "parent", "approximate", "source_note"]
    assert table.source.tolist() == ["Ice A", "Ice B"]
    assert table.crs == "EPSG:4326"
    assert not table.approximate.any()
    assert table.parent.tolist() == ["", ""]
    assert all(f"own.{suffix}" in note for note in table.source_note)
    assert table.geometry.iloc[0].equals(box(10, 20, 30, 40))


def test_rows_of_one_name_are_united_and_it_is_said(written):
    path = written([box(0, 0, 10, 10), box(50, 0, 60, 10), box(10, 0, 20, 10)], names=["a", "b", "a"])
    table = read_regions(path, name_field="name")
    assert table.source.tolist() == ["a", "b"]
    assert table.geometry.iloc[0].equals(box(0, 0, 20, 10))
    assert "2 rows united" in table.source_note[0]
    assert "united" not in table.source_note[1]


def test_numbers_can_be_names(written):
    table = read_regions(written([box(0, 0, 1, 1), box(2, 0, 3, 1)]), name_field="rank")
    assert table.source.tolist() == ["0", "1"]


@pytest.mark.parametrize(("crs", "pole"), [(3031, -90.0), (3413, 90.0), (3571, 90.0)])
def test_polar_circle_equals_the_cap(written, crs, pole):
    """A circle round the pole in a polar plane is a parallel: area of the cap 2 pi (1 - sin lat) in closed form."""
    radius = 1.0e6
    shape = outline(written([circle(radius)], crs=crs))
    _, latitude = Transformer.from_crs(crs, 4326, always_xy=True).transform(radius, 0.0)
    cap = 2 * np.pi * (1 - np.sin(np.deg2rad(abs(latitude))))
    # a regular polygon of n corners has sin(x) / x of its circle's area, x = 2 pi / n
    polygon = np.sin(2 * np.pi / 720) / (2 * np.pi / 720)
    # scale of the plane varies by 1 % over the cap, so the missing slivers (1.3e-5 of it) count to 1e-6; edges to a metre 1e-6
    assert sphere_area(shape) == pytest.approx(cap * polygon, rel=3e-6)
    assert shape.geom_type == "Polygon"
    assert shape.intersects(Point(77.0, pole))


def test_polar_ring_with_a_hole_over_the_pole(written):
    ring = Polygon(circle(2e6).exterior, [circle(1e6).exterior])
    whole, hole = (outline(written([c], crs=3031)) for c in (circle(2e6), circle(1e6)))
    shape = outline(written([ring], crs=3031))
    assert sphere_area(shape) == pytest.approx(sphere_area(whole) - sphere_area(hole), rel=1e-12)
    assert not shape.contains(Point(0.0, -89.9))
    assert shape.contains(Point(0.0, -75.0))


@pytest.mark.parametrize("opening", [(0.0, 90.0), (100.0, 250.0), (-60.0, 170.0)])
def test_wedge_with_its_corner_on_the_pole(written, opening):
    """A sector of the cap: its area is the opening's share of the cap."""
    turn = np.deg2rad(np.linspace(*opening, 400))
    sector = Polygon([(0, 0), *zip(1e6 * np.sin(turn), 1e6 * np.cos(turn), strict=True)])
    shape = outline(written([sector], crs=3031))
    _, latitude = Transformer.from_crs(3031, 4326, always_xy=True).transform(0.0, 1e6)
    expected = np.deg2rad(opening[1] - opening[0]) * (1 - np.sin(np.deg2rad(abs(latitude))))
    assert sphere_area(shape) == pytest.approx(expected, rel=2e-5)  # chords of up to 0.6 degree: (0.01)^2 / 6 = 1.7e-5


def test_polygon_over_the_pole_keeps_its_area(written):
    """EPSG:6932 keeps areas: the ellipsoid's area of the outline must be that in the plane, whatever its straight edges do."""
    plane = Polygon([(-2e5, -9e5), (1.3e6, -7e5), (1.1e6, 1e6), (-4e5, 6e5)])  # holds the pole, edges of 1500 km
    shape = outline(written([plane], crs=6932)).segmentize(0.05)
    back = shapely.transform(shape, Transformer.from_crs(4326, 6932, always_xy=True).transform, interleaved=False)
    # the edges along the pole and the date line fold to nothing; 5800 km of outline true to a metre is 5.8e6 m2
    assert back.area == pytest.approx(plane.area, abs=5.8e6)


def test_edge_of_an_equator_crossing_projection_stays_straight(written):
    """Transverse Mercator (UTM 33): a 900 km edge bows by kilometres in longitude and latitude."""
    plane = Polygon([(2e5, 6.5e6), (8e5, 6.5e6), (8e5, 7.4e6), (2e5, 7.4e6)])
    shape = outline(written([plane], crs=32633))
    transform = Transformer.from_crs(32633, 4326, always_xy=True).transform
    for x in np.linspace(2e5, 8e5, 41):
        assert shape.exterior.distance(Point(transform(x, 6.5e6))) < METRE * 1.5 / np.cos(np.deg2rad(59.0))
    assert len(shape.exterior.coords) > 100


DATE_LINE = {
    "jump": Polygon([(170, 60), (-170, 60), (-170, 70), (170, 70)]),
    "beyond 180": box(170, 60, 190, 70),
    "beyond -180": box(-190, 60, -170, 70),
    "corner on the line": Polygon([(170, 60), (180, 60), (-170, 60), (-170, 70), (180, 70), (170, 70)]),
    "seam steps": Polygon([(170, 60), (180, 60), (-180, 60), (-170, 60), (-170, 70), (-180, 70), (180, 70), (170, 70)]),
    "cut": MultiPolygon([box(170, 60, 180, 70), box(-180, 60, -170, 70)]),
}


@pytest.mark.parametrize("shape", DATE_LINE.values(), ids=DATE_LINE)
def test_every_way_of_crossing_the_date_line(written, shape):
    found = outline(written([shape]))
    expected = MultiPolygon([box(170, 60, 180, 70), box(-180, 60, -170, 70)])
    assert found.symmetric_difference(expected).area == pytest.approx(0.0, abs=1e-9)


def test_projection_centred_on_the_pacific(written):
    """Mercator round 150 E: a box in the plane is one in longitude and latitude."""
    forward = Transformer.from_crs(4326, 3832, always_xy=True).transform
    (west, south), (east, north) = forward(170.0, 60.0), forward(-170.0, 70.0)
    found = outline(written([box(west, south, east, north)], crs=3832))
    expected = MultiPolygon([box(170, 60, 180, 70), box(-180, 60, -170, 70)])
    assert found.symmetric_difference(expected).area == pytest.approx(0.0, abs=1e-6)  # square degrees of 200


def test_reading_across_the_date_line_is_said(written):
    table = read_regions(written([DATE_LINE["jump"], box(0, 0, 1, 1)]), name_field="name")
    assert "shorter way round" in table.source_note[0]
    assert "shorter" not in table.source_note[1]


def test_rotated_outline_is_the_rotated_outline(written):
    """Metamorphic: moved by 160 degrees over the date line and back, with its hole."""
    home = Polygon([(5, -40), (31, -33), (28, 11), (9, 20)], [[(12, -10), (20, -8), (17, 3)]])
    moved = shapely.transform(home, lambda p: np.column_stack([(p[:, 0] + 160 + 180) % 360 - 180, p[:, 1]]))
    found = outline(written([moved]))

    def turn_back(points):
        return np.column_stack([points[:, 0] - 160 + (360 if points[:, 0].min() < 0 else 0), points[:, 1]])

    back = shapely.union_all([shapely.transform(part, turn_back) for part in shapely.get_parts(found)])
    assert back.symmetric_difference(home).area == pytest.approx(0.0, abs=1e-9)


POLAR = {
    "with pole edges": Polygon([(-180, -70), (-90, -65), (0, -70), (90, -65), (180, -70), (180, -90), (-180, -90)]),
    "0 to 360 with pole edges": Polygon(
        [(0, -70), (90, -65), (180, -70), (270, -65), (360, -70), (360, -90), (0, -90)]
    ),
    "ring without pole edges": Polygon([(-180, -70), (-90, -65), (0, -70), (90, -65)]),
    "closing along the date line": Polygon([(-180, -70), (-90, -65), (0, -70), (90, -65), (180, -70)]),
    "started elsewhere": Polygon([(90, -65), (180, -70), (-90, -65), (0, -70)]),
}


@pytest.mark.parametrize("shape", POLAR.values(), ids=POLAR)
def test_every_way_of_going_round_a_pole(written, shape):
    found = outline(written([shape]))
    expected = POLAR["with pole edges"]
    assert found.symmetric_difference(expected).area == pytest.approx(0.0, abs=1e-9)


@pytest.mark.parametrize(
    "shape", [box(-180, 60, 180, 90), box(-180, -20, 180, 30), box(0, 60, 360, 90), box(-180, -90, 180, 90)]
)
def test_box_right_round_the_globe_is_kept(written, shape):
    found = outline(written([shape]))
    _, south, _, north = shape.bounds
    assert sphere_area(found) == pytest.approx(2 * np.pi * np.diff(np.sin(np.deg2rad([south, north])))[0], rel=1e-12)


def test_disc_that_holds_both_poles(written):
    """Equal-area azimuthal disc of 100 degrees round (0, 0): chord 2 R sin(50 deg) holds both poles."""
    radius = 2 * 6371007.0 * np.sin(np.deg2rad(50.0))
    shape = outline(written([circle(radius, 3000)], crs="+proj=laea +lat_0=0 +lon_0=0 +R=6371007 +type=crs"))
    # chords of 0.12 degree: (2 pi / 3000)^2 / 6 = 7e-7
    assert sphere_area(shape) == pytest.approx(2 * np.pi * (1 - np.cos(np.deg2rad(100.0))), rel=1e-5)


def test_both_hemispheres_round_the_globe_is_refused(written):
    shape = Polygon([(-180, -10), (-90, 20), (0, -10), (90, 20)])
    with pytest.raises(RegionError, match="'r0': its outline goes round the globe and reaches both hemispheres"):
        read_regions(written([shape]), name_field="name")


@pytest.mark.parametrize(
    ("shape", "words"),
    [
        (Polygon([(0, 0), (10, 10), (10, 0), (0, 10)]), r"not a simple polygon \(Self-intersection\[5 5\]\)"),
        (Polygon([(170, 0), (-170, 10), (-170, 0), (170, 10)]), r"not a simple polygon \(Self-intersection\[180 5\]\)"),
        (MultiPolygon([box(0, 0, 10, 10), box(5, 5, 15, 15)]), "not a simple polygon"),
        (MultiPolygon([box(170, 0, 190, 10), box(-175, 5, -160, 15)]), "its parts overlap on the globe"),
        (Polygon(box(0, 0, 9, 9).exterior, [box(20, 0, 29, 9).exterior]), "Hole lies outside shell"),
        (Polygon(box(170, 0, 190, 9).exterior, [box(20, 0, 29, 9).exterior]), "a hole lies outside its outline"),
        (Polygon([(0, 0), (5, 5), (10, 10), (0, 0)]), "no area"),
        (Polygon(), "has no outline"),
        (None, "has no outline"),
        (box(0, 80, 10, 91), "latitude 91 is beyond the pole"),
    ],
)
def test_unusable_outline_is_refused_by_name(written, shape, words):
    path = written([box(100, 0, 101, 1), shape], names=["good", "bad"])
    with pytest.raises(RegionError, match=f"region 'bad': .*{words}"):
        read_regions(path, name_field="name")


@pytest.mark.parametrize("shape", [Point(1, 2), LineString([(0, 0), (1, 1)])])
def test_points_and_lines_are_refused(written, shape):
    with pytest.raises(RegionError, match=f"'r0': must be a polygon, got {shape.geom_type}"):
        read_regions(written([shape], suffix="geojson"), name_field="name")


@pytest.mark.parametrize(
    ("ring", "words"),
    [("[[0, 0], [1, 1], [0, 0]]", "its outline has no area"), ("[[0, 0]]", "one of fewer than three corners")],
)
def test_ring_of_two_corners_is_refused_by_name(tmp_path, ring, words):
    path = tmp_path / "short.geojson"
    path.write_text(
        '{"type": "FeatureCollection", "features": [{"type": "Feature", "properties": {"name": "stub"}, '
        f'"geometry": {{"type": "Polygon", "coordinates": [{ring}]}}}}]}}'
    )
    with pytest.raises(RegionError, match=f"region 'stub': .*{words}"):
        read_regions(path, name_field="name")


def test_outline_off_the_projection_is_refused(written):
    far = box(1e9, 1e9, 2e9, 2e9)
    with pytest.raises(RegionError, match=r"'r0': the point .* has no longitude and latitude"):
        read_regions(written([far], crs=3035), name_field="name")


def test_missing_field_offers_those_there_are(written):
    with pytest.raises(RegionError, match=r"no field 'nane' to name the regions\. Did you mean name"):
        read_regions(written([box(0, 0, 1, 1)]), name_field="nane")


@pytest.mark.parametrize("name", [None, "", "  "])
def test_row_without_a_name_is_refused(written, name):
    with pytest.raises(RegionError, match="row 2 has no name in field 'name'"):
        read_regions(written([box(0, 0, 1, 1), box(2, 0, 3, 1)], names=["a", name]), name_field="name")


@pytest.mark.filterwarnings("ignore:'crs' was not provided")
@pytest.mark.parametrize("suffix", ["gpkg", "shp"])
def test_file_without_a_reference_system_is_refused(written, suffix):
    with pytest.raises(RegionError, match=r"does not say its coordinate reference system.*EPSG:4326"):
        read_regions(written([box(0, 0, 1, 1)], crs=None, suffix=suffix), name_field="name")


def test_missing_damaged_and_layered_files(tmp_path, written):
    with pytest.raises(MissingFileError, match=r"nowhere\.gpkg: there is no such file"):
        read_regions(tmp_path / "nowhere.gpkg", name_field="name")
    broken = tmp_path / "broken.gpkg"
    broken.write_bytes(b"not a database")
    with pytest.raises(DamagedFileError, match=r"broken\.gpkg: cannot be read as outlines"):
        read_regions(broken, name_field="name")
    path = written([box(0, 0, 1, 1)], layer="first")
    pyogrio.write_dataframe(
        gpd.GeoDataFrame({"name": ["z"]}, geometry=[box(0, 0, 1, 1)], crs=4326), path, layer="second"
    )
    with pytest.raises(RegionError, match=r"must hold one layer of polygons, got 2 \(first, second\)"):
        read_regions(path, name_field="name")


def test_file_without_rows_or_outlines_is_refused(tmp_path, written):
    with pytest.raises(RegionError, match="holds no outline"):
        read_regions(written([], names=[]), name_field="name")
    table = tmp_path / "plain.csv"
    table.write_text("name,mass\na,1\n")
    with pytest.raises(RegionError, match="must hold one layer of polygons, got none"):
        read_regions(table, name_field="name")


def test_other_geographic_systems_and_heights(written):
    """NAD83 differs from WGS 84 by under two metres; heights are dropped."""
    high = shapely.force_3d(box(-150, 60, -140, 65), z=1000.0)
    shape = outline(written([high], crs=4269))
    assert not shape.has_z
    assert shape.hausdorff_distance(box(-150, 60, -140, 65)) < 3 * METRE / np.cos(np.deg2rad(65.0))
