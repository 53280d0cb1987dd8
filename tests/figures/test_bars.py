"""Bars per gigatonne: ranked, with their numbers, ranges cut with an arrow where they would rule the scale."""

import numpy as np
import pandas as pd
import pytest
from matplotlib.colors import to_hex

from massfingerprint.errors import InputError
from massfingerprint.figures import bars, look
from massfingerprint.vocabulary import readable
from tests.figures.structure import all_words, outside, overlaps

NAMES = ["greenland_northwest", "west_antarctica_amundsen", "west_antarctica_bellingshausen", "glaciers_01", "glaciers_06",
         "south_patagonian_icefield_and_cordillera_darwin", "Vatnajökull $own$", "Øksfjord"]  # fmt: skip
MEAN = 1.0 / 361.8
VALUES = np.array([-0.0012, 0.0031, 0.0029, 0.0014, -0.0095, 0.0027, -0.0041, 0.0004])


@pytest.fixture
def table():
    return pd.DataFrame({"value": VALUES, "lowest": VALUES - 0.0004, "highest": VALUES + 0.0006}, index=NAMES)


def drawn(table, **changes):
    with look.style():
        return bars.per_gigatonne(table, **({"title": "A harbour", "caption": "Small print.", "mean": MEAN} | changes))


def legible(table):
    """A figure of the table on which nothing lies over another or off the page."""
    figure = drawn(table)
    with look.style():
        assert overlaps(figure) == []
        assert outside(figure) == []
    return figure


def numbers(axes):
    """Row to the words beside its bar."""
    return {text.get_position()[1]: text.get_text() for text in axes.texts if text.get_gid() == "number"}


def test_bars_are_ranked_and_in_mm_per_thousand_gigatonnes(table):
    axes = drawn(table).axes[0]
    widths = [patch.get_width() for patch in axes.patches]
    np.testing.assert_allclose(widths, np.sort(VALUES) * 1000.0)
    order = [NAMES[n] for n in np.argsort(VALUES)]
    assert [label.get_text().replace("\n", " ") for label in axes.get_yticklabels()] == [readable(n) for n in order]
    assert axes.get_ylim()[0] < axes.get_ylim()[1]  # the last bar drawn, the largest, is on top
    assert axes.get_xlabel() == "mm here per 1000 gigatonnes lost there"


def test_every_bar_has_its_number_outside_bar_and_range(table):
    axes = drawn(table).axes[0]
    ranked = table.sort_values("value")
    assert list(numbers(axes).values()) == [f"{v * 1000.0:+.2f}".replace("-", "−") for v in ranked["value"]]
    for text in (text for text in axes.texts if text.get_gid() == "number"):
        one, (x, row) = ranked.iloc[round(text.get_position()[1])] * 1000.0, text.get_position()
        assert x > one["highest"] if one["value"] > 0.0 else x < one["lowest"], row


def test_colours_are_those_of_the_sources_in_the_order_given(table):
    axes, shades = drawn(table).axes[0], look.source_colours(NAMES)
    assert [to_hex(patch.get_facecolor()) for patch in axes.patches] == [shades[NAMES[n]] for n in np.argsort(VALUES)]


def test_the_global_mean_is_a_dotted_line_with_its_number(table):
    figure = legible(table)
    (line,) = [one for one in figure.axes[0].lines if one.get_gid() == "global mean"]
    np.testing.assert_allclose(line.get_xdata(), MEAN * 1000.0)
    assert line.is_dashed()
    assert "global mean +2.76" in all_words(figure)


def test_ranges_are_drawn_from_lowest_to_highest(table):
    axes = drawn(table).axes[0]
    found = np.array([line.get_xdata() for line in axes.lines if line.get_gid() == "range"])
    np.testing.assert_allclose(found, table.sort_values("value")[["lowest", "highest"]] * 1000.0)


def test_a_range_off_the_scale_is_cut_with_an_arrow_and_its_number(table):
    whole = drawn(table).axes[0].get_xlim()
    table.loc["glaciers_06", "lowest"] = -3.2
    table.loc["Øksfjord", "lowest"] = -0.5
    axes = legible(table).axes[0]
    cut = next(line.get_xdata() for line in axes.lines if line.get_gid() == "range")
    arrows = [line for line in axes.lines if line.get_marker() == "<"]
    assert [list(line.get_xdata()) for line in arrows] == [[cut[0], cut[0]]]
    words = [text.get_text() for text in axes.texts if text.get_gid() == "number"]
    assert "−9.50 (range to −3200)" in words
    assert "(range to −500)" in words
    assert "+0.40" in words
    assert axes.get_xlim()[0] > 4.0 * whole[0]  # the far end does not press all bars against the zero line


def test_no_range_is_no_whisker_and_no_value_is_said(table):
    table.loc["glaciers_01", ["lowest", "highest"]] = np.nan
    table.loc["Øksfjord"] = np.nan
    axes = legible(table).axes[0]
    assert sum(line.get_gid() == "range" for line in axes.lines) == len(NAMES) - 2
    assert numbers(axes)[0] == "no value"
    assert axes.get_yticklabels()[0].get_text() == "Øksfjord"
    table[["lowest", "highest"]] = np.nan
    assert not [line for line in drawn(table).axes[0].lines if line.get_gid() == "range"]


@pytest.mark.parametrize("value", [0.0, 0.0028, -0.0028])
def test_a_single_source_is_drawn(value):
    alone = pd.DataFrame({"value": [value], "lowest": [np.nan], "highest": [np.nan]}, index=["greenland"])
    low, high = legible(alone).axes[0].get_xlim()
    assert low <= min(0.0, value * 1000.0) < high


@pytest.mark.parametrize("extreme", [0.0, -40.0])
def test_a_column_holds_bars_and_numbers(table, extreme):
    """3.5 inches: names on two lines, numbers inside the page, bars still longer than nothing."""
    table.loc["glaciers_06", "lowest"] += extreme
    with look.style():
        figure = look.new_figure(look.COLUMN, 2.8)
        left = bars.names_width(table.index, look.COLUMN, row=0.245) / look.COLUMN
        axes = figure.add_axes((left + 0.02, 0.2, 0.95 - left, 0.7))
        bars.draw_bars(axes, table, mean=MEAN)
        assert overlaps(figure) == []
        assert outside(figure) == []
    low, high = axes.get_xlim()
    # words take at most 0.8 of the axis, whiskers 1.6 times the bars of what is left: 0.2 / 1.6
    assert np.ptp(VALUES) * 1000.0 > 0.12 * (high - low)


def test_only_the_strongest_keep_their_colours(table):
    with look.style():
        axes = look.new_figure(7.0, 3.0).add_axes((0.4, 0.2, 0.5, 0.7))
        bars.draw_bars(axes, table, mean=MEAN, most=3)
    strongest = ["glaciers_06", "Vatnajökull $own$", "west_antarctica_amundsen"]
    shades = look.source_colours(NAMES)
    assert [to_hex(patch.get_facecolor()) for patch in axes.patches] == [shades[name] for name in strongest]


def test_long_names_take_two_lines_and_stay_on_the_page(table):
    table.index = [f"{name}, seen from the far side of the mountains beyond the great ice stream" for name in NAMES]
    labels = [label.get_text() for label in legible(table).axes[0].get_yticklabels()]
    assert {label.count("\n") for label in labels} == {1}


def test_drawing_twice_gives_the_same_bytes_and_leaves_the_input(table):
    kept = table.copy()
    for kind in ("png", "pdf"):
        assert look.file_content(drawn(table), kind) == look.file_content(drawn(table), kind)
    pd.testing.assert_frame_equal(table, kept)


@pytest.mark.parametrize(
    ("change", "mean", "words"),
    [
        (lambda t: t[["value", "lowest"]], MEAN, "table: must have sources as rows and the columns .*; it has no highest"),
        (lambda t: t.iloc[:0], MEAN, "table: must have sources as rows .*; it has no row"),
        (lambda t: pd.concat([t, t.iloc[:1]]), MEAN, "table: has two rows 'greenland_northwest'"),
        (lambda t: t.assign(value=np.inf), MEAN, "table: column 'value' must hold finite numbers"),
        (lambda t: t.astype(str), MEAN, "table: column 'value' must hold finite numbers"),
        (lambda t: t, np.nan, "mean: must be a number of mm per Gt, got nan"),
    ],
)  # fmt: skip
def test_bad_tables_are_refused_in_one_line(table, change, mean, words):
    with pytest.raises(InputError, match=words) as caught:
        bars.per_gigatonne(change(table), title="t", caption="c", mean=mean)
    assert "\n" not in str(caught.value)
