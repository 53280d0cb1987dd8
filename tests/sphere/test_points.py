"""Sites and values at them."""

import numpy as np
import pandas as pd
import pytest
from scipy.special import sph_harm_y

from massfingerprint import read_sites
from massfingerprint.errors import MissingFileError, SiteError, TableError
from massfingerprint.sphere.grids import regular_grid
from massfingerprint.sphere.harmonics import synthesise
from massfingerprint.sphere.points import check_sites, distance_to_cells, values_at
from tests.sphere.test_harmonics import random_coefficients


def sites(lat, lon):
    return pd.DataFrame({"site": [f"s{i}" for i in range(len(lat))], "lat": lat, "lon": lon})


def test_values_are_exact_against_direct_sums():
    """scipy.special.sph_harm_y summed term by term, degree 20: 1e-12 of values of order 20."""
    coefficients = random_coefficients(20)
    places = sites([0.0, 51.3, -89.9, 90.0, -33.0], [0.0, -70.1, 10.0, 45.0, 359.0])
    expected = np.zeros(5)
    theta, phi = np.deg2rad(90 - places["lat"]), np.deg2rad(places["lon"])
    for i, (degree, order) in enumerate(zip(coefficients["degree"].values, coefficients["order"].values, strict=True)):
        y = (-1) ** order * sph_harm_y(degree, order, theta, phi) * (np.sqrt(2) if order else 1)
        expected += coefficients.values[0, i] * y.real + coefficients.values[1, i] * y.imag
    np.testing.assert_allclose(values_at(coefficients, places), expected, rtol=0, atol=1e-12)


def test_values_agree_with_the_grid_at_cell_centres_at_high_degree():
    grid, coefficients = regular_grid(1.0), random_coefficients(150)
    field = synthesise(coefficients, grid)
    rows, columns = np.array([0, 17, 90, 179]), np.array([0, 200, 359, 31])
    places = sites(grid.latitudes[rows], grid.longitudes[columns])
    size = float(np.abs(field).max())
    np.testing.assert_allclose(values_at(coefficients, places), field.values[rows, columns], rtol=0, atol=1e-12 * size)


def test_longitude_turns_do_not_matter():
    coefficients = random_coefficients(30)
    a = values_at(coefficients, sites([10.0], [-75.0]))
    b = values_at(coefficients, sites([10.0], [285.0]))
    np.testing.assert_allclose(a, b, rtol=0, atol=1e-12)


def test_leading_dimensions_are_kept():
    assert values_at(random_coefficients(5, lead=(2, 3)), sites([1.0, 2.0], [3.0, 4.0])).shape == (2, 3, 2)


def test_distance_to_marked_cells():
    """One marked cell at 0.5 N 0.5 E: 10 degrees along its meridian less half a diagonal; inside it 0."""
    grid = regular_grid(1.0)
    mask = np.zeros((180, 360))
    mask[90, 0] = 1
    distance = distance_to_cells(mask, grid, sites([10.5, 0.4], [0.5, 0.6]))
    degree = np.pi / 180 * 6371.0
    assert distance[0] == pytest.approx((10 - np.hypot(1, 1) / 2) * degree, rel=1e-12)
    assert distance[1] == 0.0
    assert np.isinf(distance_to_cells(mask * 0, grid, sites([1.0], [1.0]))).all()


def write(tmp_path, text, encoding="utf-8"):
    path = tmp_path / "coasts.csv"
    path.write_bytes(text.encode(encoding))
    return path


def test_read_sites(tmp_path):
    path = write(tmp_path, "\ufeffsite, lat, lon, note\nMole, 53.5, 8.25, x\n\nPier,-10,350,\n")
    table = read_sites(path)
    assert list(table.columns) == ["site", "lat", "lon"]
    assert table.to_numpy().tolist() == [["Mole", 53.5, 8.25], ["Pier", -10.0, 350.0]]


@pytest.mark.parametrize(
    ("text", "error", "message"),
    [
        (
            "site,lat,lon\nA,153.5,8.2\n",
            SiteError,
            "site 'A': lat must lie between -90 and 90, got 153.5. Are lat and lon swapped",
        ),
        ("site,lat,lon\nA,-95,120\n", SiteError, "got -95.0. Use degrees, north and east positive"),
        ("site,lat,lon\nA,10,361\n", SiteError, "lon must lie between -180 and 360, got 361"),
        ("site,lat,lon\nA,1,2\nA,3,4\n", SiteError, "site 'A' stands there twice"),
        ("site,lat\nA,1\n", TableError, "lacks the column lon; found site, lat"),
        ("name,lat,lon\nA,1,2\n", TableError, "lacks the column site; found name, lat, lon"),
        ("site;lat;lon\nA;1;2\n", TableError, "Use commas between columns"),
        ("site,lat,lon\nA,north,2\n", TableError, "line 2: lat is 'north', not a number. Give a finite number"),
        ('site,lat,lon\nA,"53,5",2\n', TableError, "line 2: lat is '53,5', not a number. Use a decimal point"),
        ("site,lat,lon\nA,nan,2\n", TableError, "line 2: lat is 'nan'"),
        ("site,lat,lon\n,1,2\n", SiteError, "line 2: site is empty"),
        ("site,lat,lon\n", TableError, "has a header but no rows"),
        ("", TableError, "cannot be read as a comma-separated table"),
        ("site,lat,lon\nA,1,2,3\nB,1,2\n", TableError, "coasts.csv"),
        ("site,lat,lon,lat\nA,1,2,3\n", TableError, "column 'lat' stands there twice"),
    ],
)
def test_wrong_site_files(tmp_path, text, error, message):
    with pytest.raises(error, match=message) as caught:
        read_sites(write(tmp_path, text))
    assert "\n" not in str(caught.value)


def test_other_encodings_and_missing_files(tmp_path):
    with pytest.raises(TableError, match="is not UTF-8 text"):
        read_sites(write(tmp_path, "site,lat,lon\nMaré,1,2\n", "latin-1"))
    with pytest.raises(MissingFileError, match=r"nowhere.csv: there is no such file"):
        read_sites(tmp_path / "nowhere.csv")


def test_frames_from_python_are_checked_and_left_alone():
    frame = pd.DataFrame({"site": ["A"], "lat": ["1.5"], "lon": [2]})
    before = frame.copy(deep=True)
    assert check_sites(frame)["lat"].tolist() == [1.5]
    pd.testing.assert_frame_equal(frame, before)
    with pytest.raises(SiteError, match="sites: lacks the column lat; found site, lon"):
        check_sites(frame.drop(columns="lat"))
    with pytest.raises(SiteError, match="holds no sites"):
        check_sites(frame.iloc[:0])
