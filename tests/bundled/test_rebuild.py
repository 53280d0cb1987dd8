"""The script that remakes the bundled geography, on a small made-up world in the layout of the two packages."""

import gzip
import json
import struct
import sys
from pathlib import Path

import geopandas as gpd
import numpy as np
import pytest
from shapely.geometry import Polygon, box

from massfingerprint import bundled
from massfingerprint.bundled import open_bundled, rebuild
from massfingerprint.bundled._pn2 import decode_pn2
from massfingerprint.errors import DamagedFileError, MissingFileError

# One polygon with a hole behind a group record (flag 4), then one plain polygon; latitude before longitude.
OUTER = (
    struct.pack(">BII", 2, 7, 2) + struct.pack(">hhH4b", 120, -240, 2, 10, -20, 12, 24) + struct.pack(">hhH", 0, 0, 0)
)
INNER = struct.pack(">BII", 3, 7, 1) + struct.pack(">hhH6b", 60, -60, 3, 1, 1, 2, 2, 0, 3)
PLAIN = struct.pack(">BII", 2, 8, 1) + struct.pack(">hhH4b", -10800, 21600, 2, 120, -120, 0, -120)
GROUP = struct.pack(">BIB", 4, 7, 2)
PN2 = struct.pack(">BIB", 2, 3, 0) + GROUP + OUTER + INNER + PLAIN


def test_pn2_polygons_and_offsets_from_the_last_absolute_node():
    (outer, inner), (plain,) = decode_pn2(PN2)
    # Offsets count from (1 N, 2 W), not from one another.
    np.testing.assert_allclose(outer * 120, [[-240, 120], [-260, 130], [-216, 132], [0, 0]], atol=1e-9)
    np.testing.assert_allclose(inner * 120, [[-60, 60], [-59, 61], [-58, 62], [-57, 60]], atol=1e-9)
    np.testing.assert_allclose(plain, [[180, -90], [179, -89], [179, -90]], atol=1e-12)


@pytest.mark.parametrize("end", [0, 3, 15, 20, 30, len(PN2) - 1, len(PN2) - 3])
def test_pn2_cut_short(end):
    with pytest.raises(DamagedFileError, match=r"pn2: the bytes end inside a ring"):
        decode_pn2(PN2[:end])


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (struct.pack(">BIB", 1, 0, 0), "version 1, colour flag 0"),
        (struct.pack(">BIB", 2, 0, 1), "version 2, colour flag 1"),
        (PN2[:10], "0 rings found, 3 announced"),
        (struct.pack(">BIB", 2, 2, 0) + PLAIN, "1 rings found, 2 announced"),
        (struct.pack(">BIB", 2, 1, 0) + INNER, "ring flag 3 where"),
        (struct.pack(">BIB", 2, 1, 0) + b"\0" + PLAIN[1:], "ring flag 0 where"),
    ],
)
def test_pn2_that_is_not_what_it_should_be(content, words):
    with pytest.raises(DamagedFileError, match=f"pn2: .*{words}"):
        decode_pn2(content)


def shapefile(path, rows):
    path.parent.mkdir(parents=True, exist_ok=True)
    names, shapes = zip(*rows, strict=True)
    gpd.GeoDataFrame({"featurecla": list(names)}, geometry=list(shapes), crs="EPSG:4326").to_file(path)


def small_world(work: Path) -> None:
    """Eurasia with the Caspian and a second lake, a null island; one shelf and one glacier in pn2."""
    caspian, lake = box(48, 38, 53, 46), box(100, 50, 102, 52)
    eurasia = Polygon(box(0, 0, 120, 70).exterior, [caspian.exterior, lake.exterior])
    rows = [("Land", eurasia), (rebuild.NOT_LAND, box(-0.01, -0.01, 0, 0)), (None, box(-20, -20, -19, -19))]
    for scale in ("10m", "50m", "110m"):
        shapefile(work / rebuild.SHAPEFILES / f"ne_{scale}_land.shp", rows)
    folder = work / rebuild.PN2_FILES
    folder.mkdir(parents=True)
    for stem in ("glaciated_areas", "antarctic_ice_shelves_polys"):
        (folder / f"ne_50m_{stem}.pn2").write_bytes(struct.pack(">BIB", 2, 1, 0) + PLAIN)


@pytest.fixture
def layers(tmp_path):
    small_world(tmp_path / "work")
    return rebuild.read_layers(tmp_path / "work")


def test_layers_leave_out_the_null_island_and_keep_the_rest(layers):
    assert set(layers) == {"land_10m", *rebuild.DECIMALS}
    assert [polygon.bounds for polygon in layers["land_10m"]] == [(0, 0, 120, 70), (-20, -20, -19, -19)]
    assert [polygon.bounds for polygon in layers["ice_shelves_50m"]] == [(179, -90, 180, -89)]


def test_the_caspian_is_land_and_other_water_is_ocean(layers):
    ocean = rebuild.fractions_of(layers)["ocean_fraction"]
    assert ocean[4 * (90 + 42), 4 * (180 + 50)] == pytest.approx(0.0, abs=1e-12)
    assert ocean[4 * (90 + 51), 4 * (180 + 101)] == pytest.approx(1.0, abs=1e-12)
    assert ocean[4 * 90 - 1, 4 * 180 - 1] == 1.0


def test_what_is_written_reads_back_as_bundled_files_do(layers, tmp_path):
    polygons = rebuild.write_polygons(tmp_path / "a.geojson.gz", layers["land_110m"], decimals=3)
    features = json.loads(gzip.decompress((tmp_path / "a.geojson.gz").read_bytes()))["features"]
    assert [Polygon(f["geometry"]["coordinates"][0], f["geometry"]["coordinates"][1:]) for f in features] == polygons
    fractions = rebuild.fractions_of(layers)
    rebuild.write_fractions(tmp_path / "a.nc", fractions)
    stored = bundled.xr.load_dataset(tmp_path / "a.nc", engine="netcdf4")
    for name, values in fractions.items():
        # Steps of 0.0001: half of one.
        np.testing.assert_allclose(stored[name], values, atol=0.5e-4 * (1 + 1e-9))
    assert "_FillValue" not in stored["lat"].encoding
    bundled_file = open_bundled(rebuild.FRACTIONS)
    np.testing.assert_array_equal(stored["lat"], bundled_file["lat"])
    np.testing.assert_array_equal(stored["lon"], bundled_file["lon"])
    assert set(stored.data_vars) == set(bundled_file.data_vars)


def test_comparison_sees_a_moved_vertex_and_a_lost_polygon():
    before = [box(0, 0, 1, 1), box(5, 5, 6, 6)]
    moved = [box(0, 0, 1, 1.01), box(5, 5, 6, 6)]
    assert "0 of 20 coordinates differ" in rebuild.compare_polygons(before, before)
    assert "2 of 20 coordinates differ, by at most 0.01 degree" in rebuild.compare_polygons(moved, before)
    assert "polygons 1 (bundled 2)" in rebuild.compare_polygons(before[:1], before)


def test_comparison_sees_a_changed_cell():
    before = open_bundled(rebuild.FRACTIONS)
    after = before.copy(deep=True)
    after["ocean_fraction"][400, 700] -= 0.3
    lines = rebuild.compare_fractions(after, before).splitlines()
    assert "max 3.00e-01" in lines[0]
    assert "1 cells beyond half a stored step" in lines[0]
    assert "(bundled 362.933383)" in lines[0]
    assert "max 0.00e+00" in lines[1]


def test_the_script_writes_into_the_folder_it_is_given_and_leaves_the_package_alone(tmp_path, monkeypatch, capsys):
    package = {path: path.read_bytes() for path in Path(bundled.__file__).parent.iterdir() if path.is_file()}
    monkeypatch.setattr(rebuild, "fetch", small_world)
    monkeypatch.setattr(sys, "argv", ["rebuild", "--into", str(tmp_path / "new")])
    rebuild.main()
    assert {path.name for path in (tmp_path / "new").iterdir()} == {
        rebuild.FRACTIONS,
        *(f"{stem}.geojson.gz" for stem in rebuild.DECIMALS),
    }
    assert all(path.read_bytes() == content for path, content in package.items())
    printed = capsys.readouterr().out
    assert "polygons 2 (bundled 1421)" in printed
    assert "ocean_fraction: max 1.00e+00" in printed
    assert f"written into {tmp_path / 'new'}" in printed


def test_the_script_says_which_program_it_lacks(tmp_path, monkeypatch):
    monkeypatch.setenv("PATH", str(tmp_path))
    with pytest.raises(MissingFileError, match=r"apt-get: not found. Run this on Debian"):
        rebuild.fetch(tmp_path)


def test_united_makes_overlaps_and_broken_outlines_countable():
    bow_tie = Polygon([(0, 0), (10, 10), (10, 0), (0, 10)])
    no_area = Polygon([(50, 50), (51, 51), (50, 50)])
    together = rebuild.united([box(20, 0, 30, 10), box(25, 0, 35, 10), bow_tie, no_area])
    assert together.is_valid
    assert together.area == pytest.approx(150 + 50)
