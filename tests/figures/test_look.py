"""The look: colours that mean what they say, files that are the same each time."""

import numpy as np
import pytest

from massfingerprint.figures import look
from massfingerprint.vocabulary import readable
from tests.figures.structure import outside, overlaps


def lightness(colours):
    """CIE L* of sRGB colours (n, 3), from the definitions (IEC 61966-2-1, CIE 15)."""
    linear = np.where(colours <= 0.04045, colours / 12.92, ((colours + 0.055) / 1.055) ** 2.4)
    y = linear @ np.array([0.2126, 0.7152, 0.0722])
    return 116.0 * np.where(y > 0.008856, np.cbrt(y), 7.787 * y + 16.0 / 116.0) - 16.0


def test_two_sides_darken_evenly_and_alike():
    """Monotone on each side; both sides within 5 of each other at equal distance from the middle; the middle is near white."""
    steps = np.linspace(0.0, 1.0, 41)
    light = lightness(look.RATIO_COLOURS(steps)[:, :3])
    assert light[20] > 94.0
    assert (np.diff(light[:21]) > 0.0).all()
    assert (np.diff(light[20:]) < 0.0).all()
    assert np.abs(light[:20] - light[:20:-1]).max() < 5.0


def test_sides_differ_for_red_green_blind_readers():
    """Blue minus yellow, what protanopes and deuteranopes see, has opposite signs on the two sides (ochre yellow, teal blue)."""
    left, right = look.RATIO_COLOURS([0.1, 0.3])[:, :3], look.RATIO_COLOURS([0.9, 0.7])[:, :3]
    assert (left[:, 2] - 0.5 * (left[:, 0] + left[:, 1]) < -0.1).all()
    assert (right[:, 2] - 0.5 * (right[:, 0] + right[:, 1]) > 0.05).all()


def test_every_source_has_a_colour_and_neighbours_differ():
    names = [
        "greenland_west",
        "greenland_east",
        "west_antarctica",
        "antarctic_peninsula",
        "glaciers_01",
        "glaciers_17",
        "my own",
    ]
    colours = look.source_colours(names)
    assert list(colours) == names
    assert len(set(colours.values())) == len(names)
    assert len(look.source_colours([f"glaciers_{n:02d}" for n in range(1, 20)])) == 19


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("greenland_northwest", "Greenland northwest"),
        ("west_antarctica_amundsen", "West Antarctica Amundsen"),
        ("antarctic_peninsula", "Antarctic Peninsula"),
        ("glaciers_01", "Glaciers 01"),
        ("Vatnajökull $x$", "Vatnajökull $x$"),
        ("", ""),
    ],
)
def test_names_for_people(name, words):
    assert readable(name) == words


@pytest.mark.parametrize("kind", look.FORMATS)
def test_the_same_figure_gives_the_same_bytes(kind):
    def content():
        with look.style():
            figure = look.new_figure(2.0, 1.0)
            figure.text(0.1, 0.5, "costs $5 and $6")
            look.caption(figure, "small print")
        return look.file_content(figure, kind)

    first = content()
    assert first == content()
    assert first.startswith({"png": b"\x89PNG", "pdf": b"%PDF", "svg": b"<?xml"}[kind])


def test_the_users_own_settings_do_not_matter():
    import matplotlib as mpl  # noqa: PLC0415

    with look.style():
        plain = mpl.rcParams["font.size"]
    with mpl.rc_context({"font.size": 30.0, "axes.grid": True}), look.style():
        assert mpl.rcParams["font.size"] == plain


def test_an_overlap_and_an_outlier_would_be_noticed():
    figure = look.new_figure(2.0, 1.0)
    figure.text(0.1, 0.5, "first words")
    figure.text(0.15, 0.52, "second words")
    figure.text(0.9, 0.1, "leaves the page")
    assert overlaps(figure) == [("second words", "first words")]
    assert outside(figure) == ["leaves the page"]
