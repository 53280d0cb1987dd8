"""Every named region: its area beside a published one, its family, its place, and a gigatonne on it.

Glacier areas: RGI 7.0 Consortium 2023, user guide. Grounded ice of Antarctica: the drainage systems of Zwally et al. 2012 and of
Rignot et al., as listed by the IMBIE team 2018, from memory. Greenland: sheet 1.71 and periphery 0.09 million km2, from memory.
No published area is at hand for the sectors, whose borders are this package's own: they are held against their sheet.
"""

import re
from pathlib import Path

import pytest
import shapely
from pyproj import Geod
from shapely.geometry import Point

from massfingerprint.bundled import open_bundled
from massfingerprint.coverage import sphere_area
from massfingerprint.errors import RegionError
from massfingerprint.load.ocean import ocean_fraction
from massfingerprint.load.regions import region_names, regions
from massfingerprint.load.spread import spread_mass

SPHERE = 6371.0**2  # km2 per steradian
GLACIERS = [f"glaciers_{number:02d}" for number in range(1, 20)]
RGI7 = [86708, 14521, 105370, 40538, 90482, 11060, 33959, 2948, 51595, 2643]
RGI7 += [2124, 1407, 50344, 33075, 16049, 1929, 27674, 886, 133432]
PUBLISHED = dict(zip(GLACIERS, RGI7, strict=True)) | {
    "greenland": 1.80e6,
    "antarctica": 11.89e6,
    "east_antarctica": 9.77e6,  # between 9.620e6 and 9.910e6
    "west_antarctica": 1.89e6,  # between 1.748e6 and 2.040e6
    "antarctic_peninsula": 0.23e6,  # without Alexander and other islands, which are in ours
}
FAMILIES = {
    "greenland": [
        f"greenland_{s}" for s in ["north", "northeast", "east", "southeast", "southwest", "west", "northwest"]
    ],
    "antarctica": ["east_antarctica", "west_antarctica", "antarctic_peninsula"],
    "east_antarctica": [
        f"east_antarctica_{s}"
        for s in ["filchner", "dronning_maud", "enderby", "amery", "queen_mary", "wilkes", "george_v", "transantarctic"]
    ],
    "west_antarctica": [f"west_antarctica_{s}" for s in ["ronne", "siple", "marie_byrd", "amundsen", "bellingshausen"]],
    "antarctic_peninsula": ["antarctic_peninsula_graham", "antarctic_peninsula_palmer"],
}


@pytest.fixture(scope="module")
def table():
    return regions(*region_names()).set_index("source")


def square_kilometres(shape):
    ellipsoid = Geod(ellps="WGS84")
    return sum(abs(ellipsoid.geometry_area_perimeter(part)[0]) for part in shapely.get_parts(shape)) / 1e6


def test_the_catalogue_is_what_it_says():
    families = [name for parent, children in FAMILIES.items() for name in (parent, *children)]
    assert set(region_names()) == {*families, *GLACIERS, "glaciers_20"}
    assert len(region_names()) == len(set(region_names()))


def test_outlines_are_sound(table):
    assert table.geometry.is_valid.all()
    bounds = table.geometry[~table.geometry.is_empty].bounds
    assert bounds.minx.min() >= -180.0
    assert bounds.maxx.max() <= 180.0
    assert bounds.miny.min() == -90.0
    assert set(table.geometry.geom_type) <= {"Polygon", "MultiPolygon"}
    assert all(len(note) > 20 for note in table.source_note)


@pytest.mark.parametrize("name", PUBLISHED)
def test_area_beside_the_published_one(name, table):
    """More than 25 % off is allowed only to what says it is approximate, and never as much as a factor of two."""
    ratio = square_kilometres(table.geometry[name]) / PUBLISHED[name]
    assert 0.5 < ratio < 2.0
    assert abs(ratio - 1.0) <= 0.25 or table.approximate[name]


@pytest.mark.parametrize("parent", FAMILIES)
def test_parts_fill_their_parent_and_do_not_overlap(parent, table):
    parts = table.loc[FAMILIES[parent]]
    assert (parts.parent == parent).all()
    whole = sphere_area(table.geometry[parent])
    # 1e-9 of Antarctica is 0.01 km2: rounding of where a divide cuts an edge
    assert sum(sphere_area(shape) for shape in parts.geometry) == pytest.approx(whole, rel=1e-9)
    assert sphere_area(shapely.union_all(parts.geometry)) == pytest.approx(whole, rel=1e-9)


def test_glacier_regions_do_not_overlap(table):
    glaciers = table.geometry[GLACIERS]
    total = sum(sphere_area(shape) for shape in glaciers)
    assert sphere_area(shapely.union_all(glaciers)) == pytest.approx(total, rel=1e-9)


def test_the_greenland_periphery_is_part_of_greenland(table):
    assert table.parent["glaciers_05"] == "greenland"
    outside = table.geometry["glaciers_05"].difference(table.geometry["greenland"])
    assert sphere_area(outside) * SPHERE < 0.01  # km2, rounding


def test_rings_of_glacier_regions_cut_no_ice_but_the_sheet():
    """Region 19's bands stop on the mainland, which it does not take."""
    ice = shapely.make_valid(open_bundled("glaciated_areas_50m.geojson.gz").geometry.to_numpy())
    sheets = shapely.area(ice) > 100.0  # square degrees
    domains = open_bundled("region_boundaries.geojson").query("kind == 'domain' and takes in ('ice', 'detached')")
    for _, row in domains.iterrows():
        rest = ice[~sheets] if row["takes"] == "detached" else ice
        if row["name"] != "antarctica":
            assert not shapely.intersects(rest, row.geometry.boundary).any(), row["name"]


def test_discs_stand_inside_the_ring_of_their_region():
    rings = open_bundled("region_boundaries.geojson").query("kind == 'domain'").set_index("name").geometry
    discs = open_bundled("glacier_discs.geojson")
    assert (discs.radius_km > 0).all()
    for _, row in discs.iterrows():
        assert rings[row["region"]].contains(row.geometry), row["name"]


def test_divides_end_in_the_open_sea_or_on_another_divide():
    borders = open_bundled("region_boundaries.geojson")
    divides = borders[borders["kind"] == "divide"]
    land = shapely.union_all(open_bundled("land_50m.geojson.gz").geometry.make_valid())
    for _, row in divides.iterrows():
        others = divides.geometry[divides["name"] != row["name"]].to_numpy()
        for end in (row.geometry.coords[0], row.geometry.coords[-1]):
            # an end may stand up to half a degree beyond the line it meets; Titan Ridge goes on across the date line
            met = shapely.distance(others, Point(end)).min() < 0.6 or abs(end[0]) == 180.0
            assert met or not land.intersects(Point(end)), row["name"]


PLACES = [  # from memory
    (80.0, -59.0, "greenland_north"),  # Petermann
    (79.4, -63.5, "greenland_north"),  # Humboldt
    (79.3, -23.0, "greenland_northeast"),  # 79 North
    (78.9, -22.5, "greenland_northeast"),  # Zachariae
    (81.2, -15.5, "greenland_northeast"),  # Flade Isblink
    (71.8, -31.0, "greenland_east"),  # Daugaard-Jensen
    (69.0, -33.5, "greenland_east"),  # Kangerlussuaq
    (66.5, -38.8, "greenland_southeast"),  # Helheim
    (62.5, -43.5, "greenland_southeast"),
    (67.1, -48.5, "greenland_southwest"),  # above Russell Glacier
    (69.2, -49.0, "greenland_west"),  # Jakobshavn
    (71.8, -51.2, "greenland_west"),  # Rink
    (72.9, -53.5, "greenland_northwest"),  # Upernavik
    (77.18, -61.1, "greenland_northwest"),  # Camp Century
    (-67.2, 116.5, "east_antarctica_wilkes"),  # Totten
    (-67.2, 121.0, "east_antarctica_wilkes"),  # Moscow University
    (-66.8, 112.8, "east_antarctica_wilkes"),  # Law Dome
    (-67.5, 99.5, "east_antarctica_queen_mary"),  # Denman
    (-74.0, 66.0, "east_antarctica_amery"),  # Lambert and Mellor
    (-75.0, 76.0, "east_antarctica_amery"),
    (-68.0, 52.0, "east_antarctica_enderby"),
    (-71.0, 39.0, "east_antarctica_dronning_maud"),  # Shirase
    (-75.0, 0.07, "east_antarctica_dronning_maud"),  # Kohnen
    (-81.0, -20.0, "east_antarctica_filchner"),  # Recovery
    (-90.0, 0.0, "east_antarctica_filchner"),  # South Pole
    (-84.5, -60.0, "east_antarctica_filchner"),  # Foundation Ice Stream
    (-68.0, 145.0, "east_antarctica_george_v"),  # Mertz
    (-69.5, 153.0, "east_antarctica_george_v"),  # Cook
    (-80.3, 157.0, "east_antarctica_transantarctic"),  # Byrd
    (-75.3, 160.0, "east_antarctica_transantarctic"),  # David
    (-86.0, -152.0, "east_antarctica_transantarctic"),  # Scott
    (-75.5, -95.0, "west_antarctica_amundsen"),  # Pine Island
    (-75.8, -106.5, "west_antarctica_amundsen"),  # Thwaites
    (-75.3, -112.5, "west_antarctica_amundsen"),  # Smith and Kohler
    (-75.3, -123.0, "west_antarctica_marie_byrd"),  # behind Getz
    (-84.0, -140.0, "west_antarctica_siple"),  # Mercer and Whillans
    (-81.0, -140.0, "west_antarctica_siple"),  # Bindschadler
    (-79.5, -162.0, "west_antarctica_siple"),  # Roosevelt Island
    (-78.0, -84.5, "west_antarctica_ronne"),  # Rutford
    (-82.0, -80.0, "west_antarctica_ronne"),  # Institute
    (-79.5, -48.0, "west_antarctica_ronne"),  # Berkner Island
    (-73.9, -83.0, "west_antarctica_bellingshausen"),  # Ferrigno
    (-66.2, -64.5, "antarctic_peninsula_graham"),
    (-62.08, -58.4, "antarctic_peninsula_graham"),  # King George Island
    (-71.0, -71.0, "antarctic_peninsula_palmer"),  # Alexander Island
    (60.2, -140.6, "glaciers_01"),  # Malaspina and Seward
    (52.15, -117.2, "glaciers_02"),  # Columbia Icefield
    (82.2, -72.9, "glaciers_03"),  # northern Ellesmere
    (67.1, -65.9, "glaciers_04"),  # Penny Ice Cap
    (81.3, -15.8, "glaciers_05"),  # Flade Isblink
    (64.4, -16.9, "glaciers_06"),  # Vatnajoekull
    (79.6, 24.5, "glaciers_07"),  # Austfonna
    (61.7, 7.1, "glaciers_08"),  # Jostedalsbreen
    (75.5, 60.0, "glaciers_09"),  # Novaya Zemlya
    (49.8, 86.6, "glaciers_10"),  # Belukha
    (46.5, 8.0, "glaciers_11"),  # Aletsch
    (43.1, 43.0, "glaciers_12"),  # central Caucasus
    (38.8, 72.2, "glaciers_13"),  # Fedchenko
    (35.8, 76.3, "glaciers_14"),  # Baltoro
    (27.95, 86.9, "glaciers_15"),  # Khumbu
    (-13.93, -70.8, "glaciers_16"),  # Quelccaya
    (-49.5, -73.5, "glaciers_17"),  # Southern Patagonian Icefield
    (-43.55, 170.2, "glaciers_18"),  # Aoraki
    (-54.4, -36.6, "glaciers_19"),  # South Georgia
    (-49.35, 69.1, "glaciers_19"),  # Kerguelen
]


@pytest.mark.parametrize(("lat", "lon", "name"), PLACES)
def test_known_places_lie_in_their_region(lat, lon, name, table):
    group = table[
        table.index.str.startswith("glaciers") == name.startswith("glaciers")
    ]  # 05 and 19 share ice with sheets
    leaves = group[~group.index.isin(set(table.parent))]
    assert leaves.index[leaves.geometry.intersects(Point(lon, lat))].tolist() == [name]


def test_a_gigatonne_fits_on_the_land_of_every_region(table):
    table = table[~table.index.isin({*table.parent, "glaciers_20"})]  # a parent has the land of its parts
    shares = spread_mass(table.reset_index(), ocean_fraction(0.25)).land_share.to_series()
    # narrow islands and coasts at 1:50m, a disc of 4 km on Bouvet Island: most of each outline is land
    assert shares.min() > 0.6, shares.idxmin()


def test_the_antarctic_mainland_is_accepted_as_empty():
    table = regions("glaciers_20", "glaciers_19")
    assert table.geometry.is_empty.tolist() == [True, False]
    assert table.parent.tolist() == ["antarctica", ""]
    with pytest.raises(RegionError, match="'glaciers_20': has no outline"):
        spread_mass(table, ocean_fraction(2.0))


def test_the_printed_table_is_this_one(table):
    """DEVELOPERS.md prints every region with its area, rounded to 1 km2."""
    text = (Path(__file__).parents[2] / "DEVELOPERS.md").read_text(encoding="utf-8")
    rows = re.findall(r"^\| ([a-z_0-9]+) \| ([a-z_]*) \| ([\d ]+) \| ([^|]*) \| ([\d.]*) \| (yes|no) \|$", text, re.M)
    assert [row[0] for row in rows] == region_names()
    for name, parent, area, _, ratio, approximate in rows:
        assert parent == table.parent[name]
        assert (approximate == "yes") == bool(table.approximate[name])
        covered = square_kilometres(table.geometry[name])
        assert float(area.replace(" ", "")) == pytest.approx(covered, abs=0.51)
        if name in PUBLISHED:
            assert float(ratio) == pytest.approx(covered / PUBLISHED[name], abs=0.00501)
