"""Maps by structure: limits, hatching, words, places; the same picture whatever the order of the grid."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from matplotlib.axes import Axes

from massfingerprint.errors import GridError, InputError
from massfingerprint.figures import _projected, look, maps
from tests.figures.structure import all_words, outside, overlaps

SITES = pd.DataFrame(
    {
        "site": ["Nordsee", "Åland", "close one", "close two", "close three", "Delta", "Cape $1", "Far south"],
        "lat": [54.0, 60.1, 40.7, 40.8, 40.6, 1.0, -34.0, -70.0],
        "lon": [8.0, 19.9, -74.0, -73.9, 286.1, 104.0, 18.0, 179.9],
    }
)


def field(spacing=2.0, depth=0.0):
    """1 with a gentle wave, and a hole of a given depth round Greenland."""
    lat, lon = np.arange(-90 + spacing / 2, 90, spacing), np.arange(spacing / 2, 360, spacing)
    phi, lam = np.meshgrid(np.deg2rad(lat), np.deg2rad(lon), indexing="ij")
    near = np.sin(phi) * np.sin(np.deg2rad(72)) + np.cos(phi) * np.cos(np.deg2rad(72)) * np.cos(lam - np.deg2rad(318))
    values = 1.0 + 0.3 * np.cos(2 * phi) * np.cos(lam) - depth * np.exp((near - 1.0) / 0.02)
    return xr.DataArray(values, dims=("lat", "lon"), coords={"lat": lat, "lon": lon})


def drawn(ratio=None, **more):
    with look.style():
        figure = maps.pattern_map(field() if ratio is None else ratio, title="A title", caption="Small print.", **more)
        figure.canvas.draw()
    return figure


def panel(figure) -> Axes:
    return figure.axes[0]


def test_limits_lie_equally_far_below_and_above_the_global_mean():
    assert maps.STEPS[0] + maps.STEPS[-1] == pytest.approx(2.0)
    assert 1.0 in maps.STEPS
    np.testing.assert_allclose(np.diff(maps.STEPS), 0.1, atol=1e-12)
    bar = drawn().axes[-1]
    low, high = bar.get_xlim()
    assert (low + high) / 2.0 == pytest.approx(1.0)


@pytest.mark.parametrize("poles", [(), ("north",), ("south",), ("north", "south")])
def test_words_do_not_overlap_nor_leave_the_page(poles):
    with look.style():
        figure = drawn(field(depth=4.0), sites=SITES, poles=poles)
        assert overlaps(figure) == []
        assert outside(figure) == []
    words = all_words(figure)
    for part in (
        "A title",
        "Small print.",
        "multiple of the global mean [1]",
        "relative sea level falls",
        "Nordsee",
        "Cape $1",
    ):
        assert part in words
    assert len(figure.axes) == 2 + len(poles)


@pytest.mark.parametrize(("depth", "expected"), [(0.0, False), (4.0, True)])
def test_hatching_only_where_the_sea_falls(depth, expected):
    figure = drawn(field(depth=depth))
    hatched = [c for c in panel(figure).collections if c.get_gid() == "falls"]
    assert bool(hatched) == expected
    assert (maps.FALLS in all_words(figure)) == expected


def test_contours_are_labelled_with_their_value():
    words = all_words(drawn(field(depth=4.0)))
    assert "| 1.0 |" in words
    assert "| 1.2 |" in words


def test_sites_stand_at_their_places():
    figure = drawn(sites=SITES)
    (line,) = [one for one in panel(figure).lines if one.get_gid() == "sites"]
    x, y = _projected.places("world", SITES["lon"].to_numpy(), SITES["lat"].to_numpy())
    np.testing.assert_allclose(line.get_xdata(), x)
    np.testing.assert_allclose(line.get_ydata(), y)


def test_projection_of_the_world_is_equal_area():
    """Cells between the same parallels have one projected area, and it is proportional to that on the sphere."""
    x, y = _projected.nodes("world", 18, 36)
    cells = []
    for row in (3, 9, 14):
        for column in (5, 20):
            ring = [(row, column), (row, column + 1), (row + 1, column + 1), (row + 1, column)]
            px, py = (np.array([axis[at] for at in ring]) for axis in (x, y))
            cells.append(0.5 * abs(np.dot(px, np.roll(py, -1)) - np.dot(py, np.roll(px, -1))))
    sines = [
        np.sin(np.deg2rad(-90 + 10 * (row + 0.5))) - np.sin(np.deg2rad(-90 + 10 * (row - 0.5))) for row in (3, 9, 14)
    ]
    ratio = np.array(cells) / np.repeat(sines, 2)
    np.testing.assert_allclose(ratio, ratio.mean(), rtol=0.02)  # straight edges of cells of ten degrees


def test_the_cut_runs_through_land_of_the_old_world_only():
    assert 20.0 < _projected.CUT < 30.0


@pytest.mark.parametrize("turn", ["longitudes from -180", "north first", "westward"])
def test_the_order_of_the_grid_does_not_matter(turn):
    ratio = field(depth=4.0)
    other = {
        "longitudes from -180": lambda f: f.assign_coords(lon=(f["lon"] + 180.0) % 360.0 - 180.0).sortby("lon"),
        "north first": lambda f: f.isel(lat=slice(None, None, -1)),
        "westward": lambda f: f.isel(lon=slice(None, None, -1)).transpose("lon", "lat"),
    }[turn](ratio)
    before = other.copy(deep=True)
    assert look.file_content(drawn(ratio), "png") == look.file_content(drawn(other), "png")
    xr.testing.assert_identical(other, before)


def test_many_sites_in_one_place_are_counted_not_piled_up():
    crowd = pd.DataFrame(
        {"site": [f"harbour number {n}" for n in range(40)], "lat": 10.0, "lon": 200.0 + 0.1 * np.arange(40)}
    )
    with look.style():
        figure = drawn(sites=crowd)
        assert overlaps(figure) == []
    assert "more sites)" in all_words(figure)


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        (lambda f: f.values, GridError, "ratio: must be a DataArray"),
        (lambda f: f.expand_dims(source=1), GridError, "Select one field first"),
        (lambda f: f.isel(lat=slice(10, None)), GridError, "regular global cell-centred grid"),
        (lambda f: f.where(f["lat"] < 0.0), GridError, "not finite"),
    ],
)
def test_fields_that_are_none_are_refused(change, error, words):
    with pytest.raises(error, match=words):
        drawn(change(field()))


def test_other_bad_input_is_refused():
    with pytest.raises(InputError, match="sites: lacks the column lon"):
        drawn(sites=SITES.drop(columns="lon"))
    with pytest.raises(InputError, match="poles: no pole 'east'"):
        drawn(poles=("east",))
