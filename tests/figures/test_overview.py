"""One sheet per site: everything on it, in its place, whatever the number and length of names."""

import numpy as np
import pandas as pd
import pytest
from matplotlib.path import Path

from massfingerprint.errors import InputError
from massfingerprint.figures import look, overview
from tests.figures.structure import all_words, outside, overlaps

TIME = pd.date_range("2003-01-01", periods=60, freq="MS") + pd.Timedelta(days=14)
LONG = "the very long name of a basin that nobody could read aloud in one breath at all, nor in two"


def sheet(count=12, *, name="source {}", **changes):
    """A sheet of so many sources, a third of them falling here."""
    names = [name.format(number) for number in range(count)]
    values = np.where(np.arange(count) % 3 == 0, -0.004, 0.003) + 1e-4 * np.arange(count)
    parts = pd.DataFrame(np.outer(np.arange(60.0), values), TIME, names)
    given = {
        "site": "Möwenfleth $1 $2",
        "lat": 53.9,
        "lon": 8.7,
        "sentence": "At Möwenfleth the mass sources together raise relative sea level by 1.23 +- 0.04 mm a year.",
        "table": pd.DataFrame(
            {
                "mass source": [*names, "all sources"],
                "mass, Gt/yr": ["-100.0 +- 3.0"] * (count + 1),
                "here, mm/yr": ["+0.123 +- 0.004"] * (count + 1),
                "mm per 1000 Gt lost": [*[f"{1000.0 * value:+.2f}" for value in values], ""],
            }
        ),
        "parts": parts,
        "total": pd.DataFrame({"value": parts.sum(axis=1), "half_width": 0.1}, index=TIME),
        "bars": pd.DataFrame({"value": values, "lowest": values - 5e-4, "highest": values + 5e-4}, index=names),
        "mean": 0.00276,
        "interval": "90 %",
        "since": "2003-01-15",
    }
    return overview.Sheet(**(given | changes))


def drawn(content, caption="For screening only. " * 20):
    with look.style():
        return overview.overview_sheet(content, title="Harbour note", caption=caption)


def legible(content):
    """A sheet on which nothing lies over another or off the page."""
    figure = drawn(content)
    with look.style():
        assert overlaps(figure) == []
        assert outside(figure) == []
    return figure


def test_a_sheet_is_one_upright_page_with_everything_on_it():
    figure = legible(sheet())
    assert tuple(figure.get_size_inches()) == (8.27, 11.69)
    words = all_words(figure).replace("\n", " ")
    for part in ("Harbour note", "Möwenfleth $1 $2", "53.90 N, 8.70 E", "raise relative sea level by 1.23 +- 0.04 mm a year.",
                 "mass, Gt/yr", "here, mm/yr", "all sources", "relative sea level since 2003-01-15 [mm]", "+- 90 %",
                 "mm here per 1000 gigatonnes lost there", "global mean +2.76", "For screening only."):  # fmt: skip
        assert part in words


@pytest.mark.parametrize(
    ("count", "name"),
    [(1, "source {}"), (3, f"{{}}, {LONG}"), (16, f"{{}}, {LONG}"), (40, "source {}"), (40, f"{{}}, {LONG}")],
)
def test_any_number_and_length_of_names_fits(count, name):
    words = all_words(legible(sheet(count, name=name)))
    assert ("more rows are in the tables of the study" in words) == (count > 19)
    assert ("strongest of" in words) == (count > 16)


def test_a_long_site_and_a_long_answer_fit():
    figure = legible(sheet(16, site=f"Harbour of {LONG}", sentence="It rose by 1.23 +- 0.04 mm a year. " * 15))
    title = next(text for text in figure.texts if text.get_text().startswith("Harbour of"))
    assert title.get_text().count("\n") == 1


def test_numbers_of_a_column_end_at_one_line_and_names_begin_at_one():
    figure = drawn(sheet())
    for column in ("mass, Gt/yr", "here, mm/yr", "mm per 1000 Gt lost"):
        cells = {column, *sheet().table[column]} - {""}
        found = [t for t in figure.texts if t.get_text() in cells]
        assert len(found) == sum(cell in cells for cell in [column, *sheet().table[column]])
        assert len({round(t.get_window_extent().x1) for t in found}) == 1
    names = [t for t in figure.texts if t.get_text() in set(sheet().table["mass source"])]
    assert len({t.get_position()[0] for t in names}) == 1


def test_rows_left_out_are_counted_and_the_total_stays():
    words = " ".join(text.get_text() for text in drawn(sheet(40)).texts)
    assert "21 more rows are in the tables of the study." in words  # 41 rows, 20 shown
    assert "all sources" in words


@pytest.mark.parametrize(
    ("lat", "lon", "place", "land"),
    [
        (45.0, 20.0, "45.00 N, 20.00 E", True),
        (-25.0, 225.0, "25.00 S, 135.00 W", False),
        (-25.0, 135.0, "25.00 S, 135.00 E", True),
        (0.0, 180.0, "0.00 N, 180.00 W", False),
        (-90.0, 0.0, "90.00 S, 0.00 E", True),
        (90.0, 0.0, "90.00 N, 0.00 E", False),
    ],
)
def test_the_globe_has_the_site_in_its_middle_on_land_or_sea(lat, lon, place, land):
    """Balkans, Australia and the South Pole are land; the Pacific and the North Pole are not."""
    figure = drawn(sheet(3, lat=lat, lon=lon))
    assert place in [text.get_text() for text in figure.texts]
    (axes,) = [a for a in figure.axes if any(line.get_gid() == "site" for line in a.lines)]
    (patch,) = [p for p in axes.findobj() if p.get_gid() == "land"]
    outlines = patch.get_path()
    assert (
        np.hypot(*outlines.vertices.T).max() <= 6.4e6
    )  # the sphere or the ellipsoid round it, nothing beyond the limb
    crossings = sum(Path(ring).contains_point((0.0, 0.0)) for ring in outlines.to_polygons())
    assert bool(crossings % 2) == land


def test_the_same_sheet_gives_the_same_bytes_and_inputs_are_left_alone():
    content = sheet()
    kept = [frame.copy() for frame in (content.table, content.parts, content.total, content.bars)]
    for kind in ("png", "pdf"):
        assert look.file_content(drawn(content), kind) == look.file_content(drawn(content), kind)
    for frame, before in zip((content.table, content.parts, content.total, content.bars), kept, strict=True):
        pd.testing.assert_frame_equal(frame, before)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"lat": 95.0}, "sheet: 'Möwenfleth .* needs a place in degrees"),
        ({"lon": np.nan}, "needs a place in degrees"),
        ({"lat": "53.9"}, "needs a place in degrees"),
        ({"table": pd.DataFrame()}, "and a table with rows"),
        ({"bars": pd.DataFrame({"value": [1.0]})}, "table: must have sources as rows"),
        ({"total": pd.DataFrame({"value": [1.0]}, index=TIME[:1])}, "total: lacks the column half_width"),
    ],
)
def test_bad_sheets_are_refused_in_one_line(changes, words):
    with pytest.raises(InputError, match=words) as caught:
        overview.overview_sheet(sheet(**changes), title="t", caption="c")
    assert "\n" not in str(caught.value)
