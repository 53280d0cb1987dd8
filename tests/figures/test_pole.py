"""The track of the pole, by structure: where things stand, no word over another, nothing outside."""

import numpy as np
import pandas as pd
import pytest

from massfingerprint.errors import InputError
from massfingerprint.figures import look, pole
from tests.figures.structure import all_words, outside, overlaps


def computed(years, *, drift=(2.0, 1.0), first=1990):
    time = pd.DatetimeIndex([pd.Timestamp(first + n // 10, 1 + n % 10, 1) for n in range(10 * years + 1)])
    t = np.arange(len(time)) / 10.0
    return pd.DataFrame({"x": drift[0] * t, "y": drift[1] * t}, index=time)


def observed(years, *, first=1990):
    frame = computed(years, drift=(3.0, -1.5), first=first)
    turn = 2.0 * np.pi * np.arange(len(frame)) / 11.9
    out = frame.add_prefix("smooth_")
    return out.assign(x=frame["x"] + 200.0 * np.cos(turn), y=frame["y"] + 200.0 * np.sin(turn))


def drifts(*names):
    rows = {
        "observed": (3.0, -1.5, "its drift, 10.4 cm/yr towards 27 E"),
        "computed": (2.0, 1.0, "its drift, 6.9 cm/yr"),
    }
    return pd.DataFrame.from_dict({n: rows[n] for n in names}, orient="index", columns=["x", "y", "words"])


def draw(track, record, **changes):
    names = ("computed",) if record is None else ("observed", "computed")
    words = {"drifts": drifts(*names), "title": "A title", "caption": "Small print. " * 40, **changes}
    return pole.pole_track(track, record, **words)


@pytest.mark.parametrize(("years", "seen"), [(1, True), (23, True), (60, False)])
def test_no_word_stands_over_another(years, seen):
    with look.style():
        figure = draw(computed(years), observed(years) if seen else None)
        assert overlaps(figure) == []
        assert outside(figure) == []
    assert len(figure.axes) == (2 if seen else 1)
    for axes in figure.axes:
        assert axes.get_aspect() == 1.0
        # the directions of the axes, as on a map centred at the north pole with Greenwich up
        assert axes.get_xlabel() == "y (towards 90 W), mas"
        assert axes.get_ylabel() == "x (towards 0 E), mas"


def test_greenwich_is_up_and_90_west_to_the_right():
    with look.style():
        figure = draw(computed(20), None)
    axes = figure.axes[0]
    line = next(one for one in axes.lines if one.get_gid() == "computed")
    np.testing.assert_allclose(line.get_xdata(), computed(20)["y"])
    np.testing.assert_allclose(line.get_ydata(), computed(20)["x"])
    places = {text.get_text(): text.get_window_extent() for text in axes.texts if text.get_gid() == "edge"}
    assert places["0 E"].y0 > places["180"].y1
    assert places["90 W"].x0 > places["90 E"].x1


def test_dates_arrows_and_legend():
    with look.style():
        figure = draw(computed(20), observed(20))
        words = all_words(figure)
    for word in (
        "observed, without its cycles",
        "towards 27 E",
        "computed",
        "2000",
        "A title",
        "the part of it on the left",
    ):
        assert word in words
    axes = figure.axes[0]
    dots = [line for line in axes.lines if line.get_gid() == "dates"]
    # 1990, 1995, ... 2010 of a track that ends on 2010-01-01
    assert [len(line.get_xdata()) for line in dots] == [5, 5]
    np.testing.assert_allclose(dots[1].get_xydata()[2], [10.0, 20.0], rtol=1e-3)
    colours = {line.get_color() for line in dots}
    names = [text for text in axes.texts if text.get_gid() == "site name"]
    assert {text.get_color() for text in names} == colours
    tips = [text.xy for text in axes.texts if text.get_gid() == "drift"]
    # twenty years of 365.25 days at the drift; y before x
    np.testing.assert_allclose(tips, [(-30.0, 60.0), (20.0, 40.0)], rtol=1e-3)


def test_the_wobble_holds_the_square_of_the_tracks():
    with look.style():
        figure = draw(computed(20), observed(20))
    tracks, wobble = figure.axes
    square = wobble.patches[0].get_bbox()
    assert (square.x0, square.x1) == pytest.approx(tracks.get_xlim())
    assert (square.y0, square.y1) == pytest.approx(tracks.get_ylim())
    low, high = wobble.get_xlim()
    assert low < observed(20)["y"].min()
    assert high > observed(20)["y"].max()


def test_a_smooth_pole_may_be_missing():
    record = observed(7)
    record[["smooth_x", "smooth_y"]] = np.nan
    with look.style():
        figure = draw(computed(7), record)
        assert overlaps(figure) == []
    assert len([line for line in figure.axes[0].lines if line.get_gid() == "dates"]) == 1


def test_a_pole_at_rest_and_a_track_between_two_new_years():
    time = pd.DatetimeIndex(["2001-02-01", "2001-11-01"])
    rest = pd.DataFrame({"x": [0.0, 0.0], "y": [0.0, 0.0]}, index=time)
    still = pd.DataFrame([(0.0, 0.0, "its drift: none")], index=["computed"], columns=["x", "y", "words"])
    with look.style():
        figure = draw(rest, None, drifts=still)
        assert look.file_content(figure, "png")[:4] == b"\x89PNG"


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda t, o, d: (t.drop(columns="y"), o, d), "computed: lacks the column y"),
        (lambda t, o, d: (t, o.drop(columns="smooth_x"), d), "observed: lacks the column smooth_x"),
        (lambda t, o, d: (t[::-1], o, d), "computed: times must be in order"),
        (lambda t, o, d: (t, None, d), "drifts: rows must be computed, got observed, computed"),
        (lambda t, o, d: (t, o, d.drop(index="computed")), "drifts: rows must be observed, computed, got observed"),
        (lambda t, o, d: (t.iloc[:1], o, d), "computed: must hold two times or more"),
        (lambda t, o, d: (t * np.nan, o, d), "computed: must hold two times or more, and numbers only"),
    ],
)
def test_refusals(change, message):
    track, record, table = change(computed(10), observed(10), drifts("observed", "computed"))
    with look.style(), pytest.raises(InputError, match=message):
        pole.pole_track(track, record, drifts=table, title="t", caption="c")
