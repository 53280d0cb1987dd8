"""Named regions and discs. Places and areas are common knowledge of the trade, from memory unless said."""

import numpy as np
import pytest
import shapely
from pyproj import Geod
from shapely.geometry import Point, box

from massfingerprint.bundled import open_bundled
from massfingerprint.coverage import sphere_area
from massfingerprint.errors import InputError, RegionError
from massfingerprint.load.regions import disc, regions

SPHERE = 6371.0**2  # km2 per steradian
NAMES = ["greenland", "east_antarctica", "west_antarctica", "antarctic_peninsula"]


def geometry(name):
    return regions(name).geometry.iloc[0]


def test_no_name_gives_all_with_the_agreed_columns():
    table = regions()
    assert list(table.columns) == ["source", "geometry", "parent", "approximate", "source_note"]
    assert table.source.tolist() == NAMES
    assert table.parent.tolist() == ["", "antarctica", "antarctica", "antarctica"]
    assert table.approximate.all()
    assert table.crs == "EPSG:4326"
    assert table.geometry.is_valid.all()
    assert all("Natural Earth" in note for note in table.source_note)


def test_order_asked_for_and_fresh_copies():
    first = regions("west_antarctica", "greenland")
    assert first.source.tolist() == ["west_antarctica", "greenland"]
    first["source"] = "spoilt"
    assert regions("west_antarctica").source.tolist() == ["west_antarctica"]


@pytest.mark.parametrize(
    ("name", "low", "high"),
    [
        ("greenland", 1.70e6, 1.80e6),
        ("east_antarctica", 9.6e6, 10.2e6),
        ("west_antarctica", 1.75e6, 2.05e6),
        ("antarctic_peninsula", 0.23e6, 0.4e6),
    ],
)
def test_areas_are_those_of_the_ice(name, low, high):
    """Published areas of grounded ice, from memory; wide because divides and islands differ between authors."""
    ellipsoid = Geod(ellps="WGS84")
    parts = shapely.get_parts(geometry(name))
    area = sum(abs(ellipsoid.geometry_area_perimeter(part)[0]) for part in parts) / 1e6
    assert low < area < high
    # geodetic latitudes used as spherical ones shrink polar areas by less than 1 %
    assert sphere_area(geometry(name)) * SPHERE == pytest.approx(area, rel=0.01)


@pytest.mark.parametrize(
    ("lat", "lon", "name"),
    [
        (72.58, -38.46, "greenland"),  # Summit
        (63.5, -44.6, "greenland"),  # South Dome
        (77.5, -61.0, "greenland"),  # north-west
        (-78.46, 106.84, "east_antarctica"),  # Vostok
        (-90.0, 0.0, "east_antarctica"),  # South Pole
        (-75.1, 123.35, "east_antarctica"),  # Dome C
        (-83.0, -47.0, "east_antarctica"),  # Support Force Glacier
        (-84.5, -60.0, "east_antarctica"),  # Foundation Ice Stream
        (-85.25, -91.0, "east_antarctica"),  # Thiel Mountains
        (-86.0, -152.0, "east_antarctica"),  # Scott Glacier
        (-80.02, -119.53, "west_antarctica"),  # Byrd
        (-75.5, -106.75, "west_antarctica"),  # Thwaites
        (-75.5, -95.0, "west_antarctica"),  # Pine Island
        (-78.5, -85.6, "west_antarctica"),  # Ellsworth Mountains
        (-78.0, -85.0, "west_antarctica"),  # Rutford Ice Stream
        (-84.0, -140.0, "west_antarctica"),  # Mercer and Whillans
        (-79.5, -162.0, "west_antarctica"),  # Roosevelt Island
        (-79.5, -48.0, "west_antarctica"),  # Berkner Island
        (-66.2, -64.5, "antarctic_peninsula"),  # behind Larsen
        (-71.3, -67.5, "antarctic_peninsula"),  # opposite Fossil Bluff
        (-71.0, -71.0, "antarctic_peninsula"),  # Alexander Island
        (-62.08, -58.4, "antarctic_peninsula"),  # King George Island
    ],
)
def test_known_places_lie_in_their_region(lat, lon, name):
    inside = [row.source for row in regions().itertuples() if row.geometry.intersects(Point(lon, lat))]
    assert inside == [name]


@pytest.mark.parametrize(("lat", "lon"), [(81.0, -75.0), (64.4, -16.8), (-80.0, 180.0), (-78.0, -60.0), (79.5, 20.0)])
def test_neighbours_and_shelves_lie_in_none(lat, lon):
    """Ellesmere, Iceland, the Ross and Ronne ice shelves, Svalbard."""
    assert not regions().geometry.intersects(Point(lon, lat)).any()


def test_antarctic_regions_share_all_its_ice_without_overlap():
    parts = [geometry(name) for name in NAMES[1:]]
    for i, one in enumerate(parts):
        for other in parts[:i]:
            assert one.intersection(other).area == pytest.approx(0.0, abs=1e-9)  # square degrees, of 4000
    stored = shapely.make_valid(open_bundled("glaciated_areas_50m.geojson.gz").geometry.to_numpy())
    southern = [shape for shape in stored if shape.bounds[3] < -60.0]
    cap = 2 * np.pi * (1 - np.cos(np.deg2rad(90 - 89.9917)))  # the stored outline leaves a dot of 2.7 km2 at the pole
    expected = sum(sphere_area(shape) for shape in southern) + cap
    assert sum(sphere_area(part) for part in parts) == pytest.approx(expected, rel=1e-9)  # 0.01 km2
    assert expected * SPHERE == pytest.approx(12.26e6, rel=0.01)  # 12.36e6 on the ellipsoid, by the bundled notes


def test_greenland_is_whole_outlines():
    stored = shapely.make_valid(open_bundled("glaciated_areas_50m.geojson.gz").geometry.to_numpy())
    north = stored[shapely.intersects(stored, box(-75.0, 59.0, -10.0, 84.0))]
    touched = [shape for shape in north if shape.intersects(geometry("greenland"))]
    assert sphere_area(geometry("greenland")) == pytest.approx(sum(sphere_area(s) for s in touched), rel=1e-12)


def test_unknown_and_repeated_names_are_refused():
    with pytest.raises(RegionError, match=r"'grenland'\. Did you mean greenland"):
        regions("grenland")
    with pytest.raises(RegionError, match="'greenland' is asked for more than once"):
        regions("greenland", "greenland")


@pytest.mark.parametrize(("lat", "lon"), [(61.0, -148.0), (89.0, 30.0), (-90.0, 0.0), (5.0, 179.9), (60.0, 40.0)])
def test_disc_holds_its_circle(lat, lon):
    outline = disc("d", lat, lon, 500.0).geometry.iloc[0]
    globe = Geod(a=6371.0, b=6371.0)
    assert outline.is_valid
    for azimuth in np.arange(0.0, 360.0, 15.0):
        for distance, inside in ((499.0, True), (501.0, False)):  # chords of 1 degree sag 0.02 km
            east, north, _ = globe.fwd(lon, lat, azimuth, distance)
            assert outline.intersects(Point(east, north)) == inside, (azimuth, distance)


def test_disc_longitude_convention_does_not_matter():
    assert (
        disc("d", 61.0, 212.0, 80.0).geometry.iloc[0].equals_exact(disc("d", 61.0, -148.0, 80.0).geometry.iloc[0], 1e-9)
    )


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("d", 91, 0, 10), "lat: must be a number from -90 to 90, got 91"),
        (("d", np.nan, 0, 10), "lat: must be"),
        (("d", 0, np.inf, 10), "lon: must be"),
        (("d", 0, 0, 0), "radius_km must be more than 0"),
        (("d", 0, 0, -3), "radius_km: must be"),
        (("d", 0, 0, 10001), "radius_km: must be a number from 0 to 10000"),
        (("d", 0, 0, "10"), "radius_km: must be"),
        (("", 0, 0, 10), "name must be text"),
    ],
)
def test_impossible_disc_is_refused(arguments, words):
    with pytest.raises(InputError, match=words):
        disc(*arguments)


@pytest.mark.parametrize("vertices", [3, 36.0, True])
def test_impossible_number_of_corners_is_refused(vertices):
    with pytest.raises(InputError, match="vertices: must be"):
        disc("d", 0, 0, 10, vertices=vertices)
