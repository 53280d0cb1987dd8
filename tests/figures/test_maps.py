"""Maps by structure: limits, hatching, words, places; the same picture whatever the order of the grid."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.text import Text

from massfingerprint.errors import GridError, InputError
from massfingerprint.figures import _projected, look, maps
from tests.figures.structure import all_words, outside, overlaps, texts

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


def test_a_fall_on_land_alone_is_not_said():
    """Where only ground inside Asia is below 0 there is nothing at sea to hatch."""
    ratio = field()
    inland = (abs(ratio["lat"] - 45.0) < 5.0) & (abs(ratio["lon"] - 90.0) < 8.0)
    figure = drawn(ratio.where(~inland, -1.0))
    assert not [c for c in panel(figure).collections if c.get_gid() == "falls"]
    assert maps.FALLS not in all_words(figure)


def test_lines_keep_their_place_where_the_field_is_smooth():
    """The means that calm the lines leave a plane field as it is, and go round the globe."""
    plane = np.add.outer(np.arange(6.0), np.full(8, 2.0))
    np.testing.assert_allclose(maps._calmed(plane)[1:-1], plane[1:-1], rtol=1e-14)
    ripple = np.tile([1.0, -1.0], (6, 4))
    np.testing.assert_allclose(maps._calmed(ripple), 0.0, atol=1e-14)


def test_all_words_can_be_read_in_a_column():
    """At least 6.5 points."""
    figure = drawn(field(depth=4.0), sites=SITES, poles=("north", "south"))
    sizes = {t.get_fontsize() for t in figure.findobj(Text) if t.get_visible() and t.get_text().strip()}
    assert min(sizes) >= 6.5


@pytest.mark.parametrize("poles", [("north",), ("south",), ("north", "south"), ("south", "south")])
def test_panels_of_the_poles_cover_nothing_of_the_world(poles):
    figure = drawn(poles=poles)
    world, *caps, bar = figure.axes
    assert len(caps) == len(set(poles))
    outline = world.transData.transform_path(_projected.boundary("world"))
    for cap, name in zip(caps, sorted(set(poles), reverse=True), strict=True):
        edge = cap.transData.transform(_projected.boundary(name).vertices)
        assert not outline.contains_points(edge).any()
        assert not cap.bbox.overlaps(bar.bbox)


def test_long_words_get_their_room():
    """A caption of many lines stays below the colour bar and the panels, a long title above the world."""
    with look.style():
        figure = maps.pattern_map(
            field(depth=4.0), title="A long title of a map " * 7, caption="Much small print. " * 60, poles=("north",)
        )
        assert overlaps(figure) == []
        assert outside(figure) == []
    title, small = (next(b for words, b in texts(figure) if words.startswith(s)) for s in ("A long", "Much"))
    assert title.y0 > panel(figure).bbox.y1
    assert small.y1 < min(axes.bbox.y0 for axes in figure.axes)


def site_labels(figure):
    """Of each name: its text, the display box, the display place of its own marker."""
    figure.canvas.draw()
    names = [text for text in panel(figure).texts if text.get_gid() == "site name"]
    return [(t.get_text(), t.get_window_extent(), panel(figure).transData.transform(t.xy)) for t in names]


def gap(box, spot):
    return np.hypot(*np.maximum(np.maximum(box.min - spot, spot - box.max), 0.0))


def test_a_name_is_nearest_to_its_own_marker_or_has_a_line_to_it():
    with look.style():
        figure = drawn(sites=SITES)
    labels = site_labels(figure)
    assert sorted(name for name, _, _ in labels) == sorted(SITES["site"])
    lines = [text for text in panel(figure).texts if text.get_gid() == "site line"]
    lined = {tuple(text.xy) for text in lines}
    back = panel(figure).transData.inverted()
    for name, box, own in labels:
        nearer = any(gap(box, spot) < gap(box, own) - 1.0 for _, _, spot in labels)
        has_line = any(np.allclose(back.transform(own), xy) for xy in lined)
        assert has_line or not nearer, name
        assert has_line or gap(box, own) < 16.0, name  # 9 points and the rim of the box


def test_lines_to_names_run_through_no_marker_nor_name():
    """Fifteen harbours in a bay: all are named, and every line is clear of the others."""
    turn = np.linspace(0.0, 2.0 * np.pi, 15, endpoint=False)
    bay = pd.DataFrame(
        {
            "site": [f"harbour number {n}" for n in range(15)],
            "lat": 5.0 + 8.0 * np.sin(turn),
            "lon": 200.0 + 8.0 * np.cos(turn),
        }
    )
    with look.style():
        figure = drawn(sites=bay)
        assert overlaps(figure) == []
    labels = site_labels(figure)
    assert len(labels) == 15
    lines = [text for text in panel(figure).texts if text.get_gid() == "site line"]
    assert lines
    for line in lines:
        start = panel(figure).transData.transform(line.xy)
        end = start + np.array(line.xyann) * figure.dpi / 72.0
        along = start + np.linspace(0.0, 1.0, 60)[:, None] * (end - start)
        for _, box, spot in labels:
            own = np.allclose(spot, start, atol=1e-6)
            assert own or np.hypot(*(along - spot).T).min() > 1.5
            assert own or not any(box.contains(x, y) for x, y in along)


def test_a_map_of_what_matters_to_a_site_shows_land_through():
    figure = drawn(field(depth=4.0), everywhere=True)
    assert maps.KERNEL_SCALE in all_words(figure)
    plain = drawn(field(depth=4.0))
    faces = [{patch.get_facecolor() for patch in panel(one).patches} for one in (figure, plain)]
    assert len(faces[1] - faces[0]) == 1  # the land's own colour


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
    with pytest.raises(InputError, match=r"poles: must be a list of poles, got the text 'north'\. Write \('north',\)"):
        drawn(poles="north")


def test_sites_are_left_as_they_are():
    before = SITES.copy(deep=True)
    drawn(sites=SITES)
    pd.testing.assert_frame_equal(SITES, before)
