"""Stacked contributions and the mass record: what is drawn is what was given, and all of it can be read."""

import itertools

import numpy as np
import pandas as pd
import pytest
from matplotlib.dates import date2num, num2date

from massfingerprint.errors import InputError
from massfingerprint.figures import curves, look
from massfingerprint.vocabulary import readable
from tests.figures.structure import all_words, outside, overlaps

NAMES = ["greenland_northwest", "greenland_southeast", "west_antarctica_amundsen", "west_antarctica_bellingshausen",
         "antarctic_peninsula", "glaciers_01", "glaciers_03", "glaciers_06", "glaciers_13", "glaciers_17",
         "south_patagonian_icefield_and_cordillera_darwin", "Vatnajökull $own$ og Øksfjord"]  # fmt: skip
WORDS = {"title": "A harbour", "caption": "Small print of the study. " * 8, "interval": "90 %", "since": "2003-01-15"}
GAP = slice("2007-07-01", "2008-05-30")


@pytest.fixture
def parts():
    """Ten years by month, half of the sources falling, eleven months without values and one value missing alone."""
    time = pd.date_range("2003-01-01", periods=120, freq="MS") + pd.Timedelta(days=14)
    years = np.arange(120) / 12.0
    slopes = np.linspace(-1.0, 1.3, len(NAMES))
    frame = pd.DataFrame(np.outer(years, slopes) + 0.1 * np.sin(2.0 * np.pi * years)[:, None], time, NAMES)
    frame.loc[GAP] = np.nan
    frame.iloc[20, 3] = np.nan
    return frame


@pytest.fixture
def total(parts):
    return pd.DataFrame({"value": parts.sum(axis=1, skipna=False), "half_width": np.linspace(0.1, 2.0, len(parts))})


def drawn(parts, total, **changes):
    with look.style():
        return curves.contributions(parts, total, **(WORDS | changes))


def spans(axes, name):
    """Every area of a source as date number to (low, high)."""
    out = []
    for path in (p for c in axes.collections if c.get_gid() == name for p in c.get_paths()):
        area = {}
        for day, height in path.vertices:
            low, high = area.get(day, (np.inf, -np.inf))
            area[day] = min(low, height), max(high, height)
        out.append(area)
    return out


def test_everything_is_named_and_nothing_lies_over_another(parts, total):
    with look.style():
        figure = curves.contributions(parts, total, **WORDS)
        assert overlaps(figure) == []
        assert outside(figure) == []
    assert figure.axes[0].get_ylabel() == "relative sea level since 2003-01-15 [mm]"
    assert [label.get_text() for label in figure.axes[0].get_xticklabels()] == ["2004", "2006", "2008", "2010", "2012"]


def test_years_stand_at_their_beginning(parts, total):
    axes = drawn(parts, total).axes[0]
    dates = [num2date(place) for place in axes.get_xticks()]
    assert {(date.month, date.day) for date in dates} == {(1, 1)}
    assert [str(date.year) for date in dates] == [label.get_text() for label in axes.get_xticklabels()]


def test_drawn_areas_add_up_to_the_drawn_total_wherever_all_are_there(parts, total):
    axes = drawn(parts, total).axes[0]
    days = date2num(parts.index.to_numpy())
    sums = dict.fromkeys(days, 0.0)
    for name in NAMES:
        for area in spans(axes, name):
            for day in area.keys() & sums.keys():
                low, high = area[day]
                sums[day] += (high - low) * (1.0 if low >= -1e-9 else -1.0)
    (line,) = [one for one in axes.lines if one.get_gid() == "total"]
    heights = dict(zip(date2num(line.get_xdata()), line.get_ydata(), strict=True))
    whole = parts.notna().all(axis=1).to_numpy()
    assert whole.sum() == 108
    for day in days[whole]:
        assert sums[day] == pytest.approx(heights[day], abs=1e-9)


def test_areas_touch_without_overlap_from_the_zero_line_outwards(parts, total):
    """The largest last value lies at the zero line; each next one begins where the one before ends."""
    axes = drawn(parts, total).axes[0]
    day = date2num(parts.index[-1])
    last = parts.iloc[-1]
    order = last.abs().sort_values(ascending=False, kind="stable").index
    for sign in (1.0, -1.0):
        edge = 0.0
        for name in (name for name in order if last[name] * sign > 0.0):
            low, high = next(area[day] for area in spans(axes, name) if day in area and np.ptp(area[day]) > 0.0)
            near, far = (low, high) if sign > 0 else (high, low)
            assert near == pytest.approx(edge, abs=1e-9)
            edge = far
        assert edge == pytest.approx(last[last * sign > 0.0].sum())


def test_the_legend_follows_the_stack(parts, total):
    figure = drawn(parts, total)
    labels = [text.get_text().replace("\n", " ") for text in figure.legends[0].get_texts()]
    last = parts.iloc[-1].sort_values(key=abs, kind="stable")
    rising, falling = [n for n in last.index if last[n] > 0.0], [n for n in last.index[::-1] if last[n] < 0.0]
    assert labels == ["all sources", "+- 90 %", *(readable(name) for name in [*rising, *falling])]


def test_a_time_without_all_values_is_a_gap(parts, total):
    axes = drawn(parts, total).axes[0]
    (line,) = [one for one in axes.lines if one.get_gid() == "total"]
    heights = pd.Series(line.get_ydata(), pd.DatetimeIndex(line.get_xdata()))
    assert heights.loc[GAP].isna().all()
    assert np.isnan(heights.iloc[20])
    lonely, inside = date2num(parts.index[20]), date2num(pd.Timestamp("2007-12-01"))
    for area in itertools.chain(*(spans(axes, name) for name in NAMES)):
        assert not min(area) <= lonely <= max(area)
        assert not min(area) <= inside <= max(area)


def test_times_left_out_of_the_record_are_a_gap_too(parts, total):
    there = parts.notna().all(axis=1)
    axes = drawn(parts[there], total[there]).axes[0]
    inside = date2num(pd.Timestamp("2007-12-01"))
    areas = spans(axes, NAMES[0])
    assert any(max(area) < inside for area in areas)
    assert not any(min(area) <= inside <= max(area) for area in areas)


def test_a_month_between_two_gaps_is_still_seen(parts, total):
    parts.iloc[[29, 31], 0] = np.nan
    total.iloc[[29, 31]] = np.nan
    axes = drawn(parts, total).axes[0]
    dots = [line for line in axes.lines if line.get_marker() == "o"]
    assert [list(line.get_ydata()) for line in dots] == [[pytest.approx(total["value"].iloc[30])]]


def test_the_band_is_the_half_width(parts, total):
    axes = drawn(parts, total).axes[0]
    days = date2num(parts.index.to_numpy())
    areas = spans(axes, "band")
    for number in (0, 40, 119):
        low, high = next(area[days[number]] for area in areas if days[number] in area)
        assert high - low == pytest.approx(2.0 * total["half_width"].iloc[number])
        assert high + low == pytest.approx(2.0 * total["value"].iloc[number])


def test_more_sources_than_colours_are_drawn_as_one_and_keep_the_sum(parts, total):
    many = pd.concat([parts.add_suffix(suffix) for suffix in ("", "_b", "_c")], axis=1)
    with look.style():
        figure = curves.contributions(many, total * 3.0, **WORDS)
        assert overlaps(figure) == []
        assert outside(figure) == []
    axes, day = figure.axes[0], date2num(parts.index[-1])
    assert len(figure.legends[0].get_texts()) == 2 + 16
    names = {c.get_gid() for c in axes.collections} - {"band", None}
    assert "21 smaller sources" in names
    ends = [(low, high) for name in names for area in spans(axes, name) if day in area for low, high in [area[day]]]
    assert sum((high - low) * (1.0 if low >= -1e-9 else -1.0) for low, high in ends) == pytest.approx(
        3.0 * total["value"].iloc[-1]
    )


@pytest.mark.parametrize("rows", [slice(0, 1), slice(0, 2), slice(0, 9), slice(54, 56)])
def test_short_and_empty_records_are_drawn(parts, total, rows):
    with look.style():
        figure = curves.contributions(parts.iloc[rows], total.iloc[rows], **WORDS)
        assert overlaps(figure) == []
        assert outside(figure) == []
    empty = not parts.iloc[rows].notna().all(axis=1).any()
    assert ("no time at which every source has a value" in all_words(figure)) == empty


def test_the_record_has_a_named_panel_for_every_source(parts):
    with look.style():
        figure = curves.ledger_curves(
            parts * -300.0, parts.abs() * 30.0, title="Record", caption="Small print.", interval="90 %"
        )
        assert overlaps(figure) == []
        assert outside(figure) == []
    assert [axes.get_title(loc="left").replace("\n", " ") for axes in figure.axes] == [readable(n) for n in NAMES]
    assert "mass change [Gt]" in all_words(figure)
    assert "Band: 90 %." in all_words(figure)
    assert len({axes.get_xlim() for axes in figure.axes}) == 1


def test_panels_show_values_bands_and_gaps(parts):
    with look.style():
        figure = curves.ledger_curves(parts * -300.0, parts.abs() * 30.0, title="Record", caption="c", interval="90 %")
    for axes, name in zip(figure.axes, NAMES, strict=True):
        (line,) = [one for one in axes.lines if one.get_gid() == "total"]
        np.testing.assert_array_equal(line.get_ydata(), parts[name] * -300.0)
        day = date2num(parts.index[-1])
        low, high = next(area[day] for area in spans(axes, "band") if day in area)
        assert high - low == pytest.approx(60.0 * abs(parts[name].iloc[-1]))


@pytest.mark.parametrize("count", [1, 3, 5])
def test_few_sources_fill_the_page(parts, count):
    few = parts.iloc[:, :count]
    with look.style():
        figure = curves.ledger_curves(few, few.abs(), title="Record", caption="Small print.")
        assert overlaps(figure) == []
        assert outside(figure) == []
    assert max(axes.get_position().x1 for axes in figure.axes) > 0.95
    labelled = [axes for axes in figure.axes if axes.xaxis.get_visible()]
    assert len(labelled) == min(count, 4)  # years below the lowest panel of each column


def test_drawing_twice_gives_the_same_bytes_and_leaves_the_input(parts, total):
    kept = parts.copy(), total.copy()
    for kind in ("png", "pdf"):
        assert look.file_content(drawn(parts, total), kind) == look.file_content(drawn(parts, total), kind)
    pd.testing.assert_frame_equal(parts, kept[0])
    pd.testing.assert_frame_equal(total, kept[1])


def spoilt(frame, number, column, value):
    out = frame.copy()
    out.iloc[number, column] = value
    return out


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda p, t: (p, t[["value"]]), "total: lacks the column half_width"),
        (lambda p, t: (p.iloc[1:], t), "parts: must have sources as columns and the same times"),
        (lambda p, t: (p.iloc[::-1], t), "parts: rows must be times in rising order"),
        (lambda p, t: (p.reset_index(drop=True), t), "parts: rows must be times in rising order, each once, got RangeIndex"),
        (lambda p, t: (p.iloc[:, :0], t), "parts: is empty"),
        (lambda p, t: (p[[NAMES[0], NAMES[0]]], t), "parts: has two columns 'greenland_northwest'"),
        (lambda p, t: (spoilt(p, 0, 0, np.inf), t), "parts: column 'greenland_northwest' must hold finite numbers"),
        (lambda p, t: (p.astype(str), t), "parts: column 'greenland_northwest' must hold finite numbers"),
        (lambda p, t: (p, spoilt(t, 0, 1, np.inf)), "total: column 'half_width' must hold finite numbers"),
    ],
)  # fmt: skip
def test_bad_contributions_are_refused_in_one_line(parts, total, change, words):
    with pytest.raises(InputError, match=words) as caught:
        curves.contributions(*change(parts, total), **WORDS)
    assert "\n" not in str(caught.value)


def test_a_record_whose_errors_do_not_match_is_refused(parts):
    for other in (parts.iloc[:, 1:], parts.iloc[1:]):
        with pytest.raises(InputError, match="half_width: must have the same times and sources as mass"):
            curves.ledger_curves(parts, other, title="t", caption="c")
