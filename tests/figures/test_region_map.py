"""The map of regions: complete, legible, and written whole."""

import itertools

import numpy as np
import pytest
from matplotlib.image import imread

from massfingerprint.errors import RegionError
from massfingerprint.figures.region_map import region_map, write_region_map
from massfingerprint.load.regions import region_names, regions


@pytest.fixture(scope="module")
def table():
    return regions(*region_names())


@pytest.fixture(scope="module")
def drawn(table):
    figure = region_map(table)
    figure.canvas.draw()
    return figure


def test_every_region_without_sectors_is_labelled_once(drawn, table):
    labels = [text.get_text() for axes in drawn.axes for text in axes.texts]
    parents = set(table.parent) - {""}
    leaves = [name for name in table.source if name not in parents and name != "glaciers_20"]
    assert len(labels) == len(leaves) == len(set(labels)) == 7 + 15 + 19
    assert all(any(name.endswith(label) for name in leaves) for label in labels)


def test_no_label_covers_another_or_leaves_its_panel(drawn):
    renderer = drawn.canvas.get_renderer()
    for axes in drawn.axes:
        frame = axes.get_window_extent(renderer)
        boxes = {text.get_text(): text.get_window_extent(renderer) for text in axes.texts}
        for (one, box), (other, second) in itertools.combinations(boxes.items(), 2):
            assert not box.overlaps(second), (one, other)
        for name, box in boxes.items():
            assert frame.x0 <= box.x0, name
            assert box.x1 <= frame.x1, name
            assert frame.y0 <= box.y0, name
            assert box.y1 <= frame.y1, name


def test_file_is_written_whole(table, tmp_path):
    few = table[table.source.isin(["greenland_north", "glaciers_06"])]
    write_region_map(few, tmp_path / "map.png", dpi=40)
    image = imread(tmp_path / "map.png")
    assert image.shape[:2] == (408, 360)
    assert np.ptp(image[..., 0]) > 0.5
    assert [path.name for path in tmp_path.iterdir()] == ["map.png"]


def test_a_table_without_parents_is_refused(table):
    with pytest.raises(RegionError, match="lacks column parent"):
        region_map(table.drop(columns="parent"))
