"""The look of every figure, described once: sizes, type, ink, colours, caption, how it becomes a file.

Two-sided palette: ochre for less than the global mean, teal for more, white at 1 x. Equal steps of lightness on both sides (built
in the OKLab space of Ottosson 2020), so that it prints in grey by size and is told apart by colour-blind readers by hue and side.
Mass sources: one hue per family (Greenland blue, Antarctica violet, its west magenta, glaciers ochre to green, other grey).
"""

import io
import textwrap
from collections.abc import Sequence
from contextlib import AbstractContextManager
from typing import Any

from matplotlib import rc_context
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure

INK, QUIET, FAINT, PAPER = "#222222", "#6b6b6b", "#d5d3cf", "#ffffff"
LAND, SHELF, SEA = "#ece9e2", "#dde6ea", "#ffffff"
COLUMN, PAGE = 3.5, 7.2  # inches: one column and the full width of a page
TITLE_SIZE, TEXT_SIZE, SMALL_SIZE = 10.0, 8.0, 6.5
_CHARACTERS = 20.5  # of small print an inch
_FOOT, _LINE = 0.05, 1.25  # of small print: inches from the edge, distance of lines

_LESS = ("#704000", "#925f18", "#b28146", "#cda67a", "#e3cdb5")
_MORE = ("#b3d9db", "#72bdc0", "#2d9ea3", "#007d84", "#005d63")
RATIO_COLOURS = LinearSegmentedColormap.from_list("less_or_more", [*_LESS, "#f5f5f5", *_MORE])

_FAMILIES = {
    "greenland": ("#1f5a8c", "#5b93c7", "#9cc3e6", "#2f7bb5", "#7fb0da", "#134468", "#b9d6ee"),
    "west_antarctica": ("#8c2f62", "#c0679a", "#e2abcb", "#a64a7d", "#d48ab3"),
    "antarctic": ("#5a3d8c", "#9077c0", "#c3b3e2", "#74559f", "#aa93d3", "#402a68", "#d8cdee"),
    "glaciers": ("#8a5a12", "#c28f3d", "#e0bf85", "#5f7f2e", "#93b05c", "#c2d59a", "#a8442f", "#d98a70", "#6d3b1f"),
    "": ("#4d4d4d", "#8c8c8c", "#bfbfbf", "#2e6f66", "#79b5ab"),
}
_STYLE: dict[Any, Any] = {
    "font.family": "DejaVu Sans",
    "font.size": TEXT_SIZE,
    "axes.titlesize": TITLE_SIZE,
    "axes.titlelocation": "left",
    "axes.edgecolor": QUIET,
    "axes.linewidth": 0.6,
    "axes.labelcolor": INK,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "xtick.color": QUIET,
    "ytick.color": QUIET,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "text.color": INK,
    "text.parse_math": False,  # a dollar sign in a name is a dollar sign
    "legend.frameon": False,
    "hatch.linewidth": 0.4,
    "svg.fonttype": "none",
    "svg.hashsalt": "massfingerprint",
    "pdf.fonttype": 3,
    "pdf.compression": 2,  # three times as fast as the usual 6, files a few per cent larger
}
FORMATS = ("png", "pdf", "svg")


def style() -> AbstractContextManager[None]:
    """Context in which figures are drawn: the look, whatever the user's own matplotlib settings."""
    return rc_context(_STYLE)


def new_figure(width: float, height: float) -> Figure:
    """Empty figure of a size in inches, on white, not registered with any window system."""
    figure = Figure(figsize=(width, height), facecolor=PAPER)
    FigureCanvasAgg(figure)
    return figure


def source_colours(sources: Sequence[str]) -> dict[str, str]:
    """Colour of each mass source; the family is read from the name, further members go round the family's shades."""
    taken = dict.fromkeys(_FAMILIES, 0)
    out = {}
    for source in sources:
        family = next(word for word in _FAMILIES if word in source.casefold())
        shades = _FAMILIES[family]
        out[source] = shades[taken[family] % len(shades)]
        taken[family] += 1
    return out


def caption(figure: Figure, text: str, *, left: float = 0.02) -> None:
    """Small print at the foot of a figure, wrapped to its width; ``left`` is the margin as a share of the width."""
    figure.text(
        left,
        _FOOT / float(figure.get_figheight()),
        "\n".join(_wrapped(text, float(figure.get_figwidth()), left)),
        fontsize=SMALL_SIZE,
        color=QUIET,
        va="bottom",
        ha="left",
        linespacing=_LINE,
    )


def caption_height(text: str, *, width: float = PAGE, left: float = 0.02) -> float:
    """Inches from the foot of a figure of a width to the top of its caption."""
    return _FOOT + len(_wrapped(text, width, left)) * _LINE * SMALL_SIZE / 72.0


def _wrapped(text: str, width: float, left: float) -> list[str]:
    return textwrap.wrap(text, int(_CHARACTERS * width * (1.0 - 2.0 * left)))


def file_content(figure: Figure, kind: str, *, dpi: int = 150) -> bytes:
    """Bytes of a figure as ``png``, ``pdf`` or ``svg``; the same figure gives the same bytes, no date inside.

    Parameters
    ----------
    figure : Figure
        Drawn within :func:`style`.
    kind : str
        One of ``FORMATS``.
    dpi : int
        Dots per inch of a PNG and of rasterised parts.
    """
    nothing = {"png": {"Software": None}, "pdf": {"CreationDate": None, "Creator": None}, "svg": {"Date": None}}
    buffer = io.BytesIO()
    with style():
        more: dict[str, Any] = {"pil_kwargs": {"compress_level": 3}} if kind == "png" else {}  # as for PDF
        figure.savefig(buffer, format=kind, dpi=dpi, metadata=nothing[kind], **more)
    return buffer.getvalue()
