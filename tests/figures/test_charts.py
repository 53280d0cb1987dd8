"""Curves, bars and sheets by structure: units, legends, gaps, sums, ranks; nothing over another."""

import numpy as np
import pandas as pd
import pytest

from massfingerprint.errors import InputError
from massfingerprint.figures import bars, curves, look, overview
from tests.figures.structure import all_words, outside, overlaps

NAMES = ["greenland_northwest", "greenland_southeast", "west_antarctica_amundsen", "antarctic_peninsula", "east_antarctica",
         "glaciers_01", "glaciers_03", "glaciers_06", "glaciers_13", "glaciers_17", "Vatnajökull $own$", "own basin"]  # fmt: skip


@pytest.fixture
def parts():
    """Monthly, twelve sources, some negative, eleven months left out of the axis, one value missing."""
    time = pd.date_range("2003-01-16", "2012-12-16", freq="30D")
    time = time[(time < "2007-07-01") | (time > "2008-05-30")]
    years = np.asarray((time - time[0]).days) / 365.25
    rng = np.random.default_rng(3)
    slopes = np.linspace(-0.6, 0.9, len(NAMES))
    values = np.outer(years, slopes) + 0.05 * rng.normal(size=(time.size, len(NAMES)))
    frame = pd.DataFrame(values, index=time, columns=NAMES)
    frame.iloc[20, 3] = np.nan
    return frame


@pytest.fixture
def total(parts):
    return pd.DataFrame({"value": parts.sum(axis=1, skipna=False), "half_width": np.linspace(0.1, 2.0, len(parts))})


@pytest.fixture
def lost():
    values = np.linspace(-0.02, 0.004, len(NAMES))
    return pd.DataFrame({"value": values, "lowest": values - 0.002, "highest": values + 0.003}, index=NAMES)


CHOICES = {"title": "A title", "caption": "Small print.", "interval": "90 %", "since": "2003-01-16"}


def test_contributions_say_what_they_are(parts, total):
    with look.style():
        figure = curves.contributions(parts, total, **CHOICES)
        assert overlaps(figure) == []
        assert outside(figure) == []
    words = all_words(figure)
    wanted = ("A title", "relative sea level since 2003-01-16 [mm]", "+- 90 %", "all sources", "Greenland northwest")
    for part in (*wanted, "Vatnajökull $own$"):
        assert part in words


def shade(axes, name, at):
    """Heights (low, high) of every area of a source at a date."""
    day = (np.datetime64(at) - np.datetime64("1970-01-01")) / np.timedelta64(1, "D")
    out = []
    for area in (c for c in axes.collections if c.get_gid() == name):
        for path in area.get_paths():
            near = path.vertices[np.abs(path.vertices[:, 0] - day) < 1e-6][:, 1]
            if near.size:
                out.append((near.min(), near.max()))
    return out


def test_stacked_parts_add_to_the_total_and_gaps_stay_open(parts, total):
    with look.style():
        axes = curves.contributions(parts, total, **CHOICES).axes[0]
    at = parts.index[70]
    heights = {name: sum(high - low for low, high in shade(axes, name, at)) for name in NAMES}
    for name in NAMES:
        assert heights[name] == pytest.approx(abs(parts.loc[at, name]), abs=1e-9)
    (line,) = [one for one in axes.lines if one.get_gid() == "total"]
    drawn = pd.Series(line.get_ydata(), index=pd.DatetimeIndex(line.get_xdata()))
    assert np.isnan(drawn.loc["2007-07-15":"2008-05-15"]).any()
    assert np.isnan(drawn.loc[parts.index[20]])
    assert drawn.loc[at] == pytest.approx(parts.loc[at].sum())
    assert shade(axes, NAMES[0], parts.index[20]) == []
    # of the areas of one source none reaches over the eleven months
    first = (np.datetime64("2007-08-01") - np.datetime64("1970-01-01")) / np.timedelta64(1, "D")
    for path in (p for c in axes.collections if c.get_gid() == NAMES[-1] for p in c.get_paths()):
        assert not path.vertices[:, 0].min() < first < path.vertices[:, 0].max()


def test_the_record_has_a_panel_for_every_source(parts):
    with look.style():
        figure = curves.ledger_curves(
            parts * -50.0, parts.abs() * 5.0, title="Record", caption="Small print.", interval="90 %"
        )
        assert overlaps(figure) == []
        assert outside(figure) == []
    words = all_words(figure)
    assert len(figure.axes) == len(NAMES)
    assert "mass change [Gt]" in words
    assert "Band: 90 %." in words
    assert all(np.isnan(axes.lines[0].get_ydata()).any() for axes in figure.axes)


def test_bars_are_ranked_with_value_and_range(lost):
    with look.style():
        figure = bars.per_gigatonne(lost, title="Bars", caption="Small print.", mean=0.00276)
        assert overlaps(figure) == []
        assert outside(figure) == []
    axes = figure.axes[0]
    widths = [patch.get_width() for patch in axes.patches]
    assert widths == sorted(widths)
    np.testing.assert_allclose(sorted(widths), np.sort(lost["value"]) * bars.PER)
    ranges = [line.get_xdata() for line in axes.lines if line.get_gid() == "range"]
    assert len(ranges) == len(NAMES)
    assert axes.get_xlabel() == "mm here per 1000 gigatonnes lost there"
    words = all_words(figure)
    assert "global mean" in words
    assert "Greenland northwest  -20.00" in words


def test_a_range_off_the_scale_gets_an_arrow_and_a_missing_one_nothing(lost):
    lost.loc[NAMES[0], "lowest"] = -9.0
    lost.loc[NAMES[1], ["lowest", "highest"]] = np.nan
    with look.style():
        axes = bars.per_gigatonne(lost, title="Bars", caption="c", mean=0.00276).axes[0]
    assert sum(line.get_marker() == "<" for line in axes.lines) == 1
    assert sum(line.get_gid() == "range" for line in axes.lines) == len(NAMES) - 1


def sheet(parts, total, lost, rows=12, **changes):
    cells = pd.DataFrame(
        {
            "mass source": [f"source {n}" for n in range(rows)] + ["all sources"],
            "mass, Gt/yr": ["-100.0 +- 3.0"] * (rows + 1),
            "here, mm/yr": ["+0.123 +- 0.004"] * (rows + 1),
        }
    )
    given = {
        "site": "Möwen $1",
        "lat": 53.9,
        "lon": 8.7,
        "sentence": "At Möwen the sea rose by 1.23 +- 0.04 mm a year. " * 2,
    }
    given |= {
        "table": cells,
        "parts": parts,
        "total": total,
        "bars": lost,
        "mean": 0.00276,
        "interval": "90 %",
        "since": "2003",
    }
    return overview.Sheet(**(given | changes))


@pytest.mark.parametrize("rows", [3, 40])
def test_a_sheet_holds_everything(parts, total, lost, rows):
    with look.style():
        figure = overview.overview_sheet(sheet(parts, total, lost, rows), title="Study", caption="Small print.")
        assert overlaps(figure) == []
        assert outside(figure) == []
    words = all_words(figure)
    for part in (
        "Möwen $1",
        "53.90 N, 8.70 E",
        "At Möwen the sea rose",
        "here, mm/yr",
        "all sources",
        "[mm]",
        "Small print.",
    ):
        assert part in words
    assert ("smaller rows are in the tables" in words) == (rows > 20)


def test_the_same_twice_and_inputs_left_alone(parts, total, lost):
    kept = parts.copy(), total.copy(), lost.copy()

    def content():
        with look.style():
            return look.file_content(overview.overview_sheet(sheet(parts, total, lost), title="t", caption="c"), "png")

    assert content() == content()
    for frame, before in zip((parts, total, lost), kept, strict=True):
        pd.testing.assert_frame_equal(frame, before)


def test_bad_input_is_refused(parts, total, lost):
    with pytest.raises(InputError, match="total: lacks the column half_width"):
        curves.contributions(parts, total[["value"]], **CHOICES)
    with pytest.raises(InputError, match="parts: must have sources as columns and the same times"):
        curves.contributions(parts.iloc[1:], total, **CHOICES)
    with pytest.raises(InputError, match="half_width: must have the same times"):
        curves.ledger_curves(parts, parts.iloc[:, 1:], title="t", caption="c", interval="90 %")
    with pytest.raises(InputError, match="table: must have sources as rows and the columns value, lowest, highest"):
        bars.per_gigatonne(lost[["value"]], title="t", caption="c", mean=0.003)
    with pytest.raises(InputError, match="needs a place in degrees and a table"):
        overview.overview_sheet(sheet(parts, total, lost, lat=95.0), title="t", caption="c")
