"""The strip by structure: segments add to the mark, regions beyond twelve are one, nothing over another."""

import numpy as np
import pandas as pd
import pytest

from massfingerprint.errors import InputError
from massfingerprint.figures import look, strip
from tests.figures.structure import all_words, outside, overlaps

REGIONS = [
    "greenland_north",
    "west_antarctica_amundsen",
    "antarctic_peninsula_palmer",
    *(f"glaciers_{n:02d}" for n in range(1, 17)),
]


@pytest.fixture
def table():
    values = np.random.default_rng(2).normal(size=(5, len(REGIONS)))
    return pd.DataFrame(values, index=["Nordsee", "Åland", "a harbour with a long name", "$5", "x"], columns=REGIONS)


@pytest.mark.parametrize("sites", [1, 5])
@pytest.mark.parametrize("regions", [1, 12, 19])
def test_segments_add_to_the_mark_and_words_keep_clear(table, sites, regions):
    part = table.iloc[:sites, :regions]
    with look.style():
        figure = strip.cumulative_strip(part, title="A title", caption="Small print. " * 20)
        assert overlaps(figure) == []
        assert outside(figure) == []
    axes = figure.axes[0]
    drawn = np.array([bar.get_width() for bar in axes.patches]).reshape(-1, sites).sum(axis=0)
    np.testing.assert_allclose(drawn, part.sum(axis=1), atol=1e-12)
    np.testing.assert_allclose(axes.lines[0].get_xdata(), part.sum(axis=1), atol=1e-12)
    words = all_words(figure)
    assert strip.LABEL in words
    assert "sum" in words
    assert ("other regions" in words) == (regions > 12)


def test_input_is_left_alone_and_bad_input_refused(table):
    kept = table.copy()
    with look.style():
        strip.cumulative_strip(table, title="t", caption="c")
    pd.testing.assert_frame_equal(table, kept)
    for bad in (table.iloc[:0], table.iloc[:, :0], table.where(table < 0.5)):
        with pytest.raises(InputError, match="table: must have sites as rows"):
            strip.cumulative_strip(bad, title="t", caption="c")
