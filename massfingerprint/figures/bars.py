"""Bars: how much a gigatonne lost from each mass source does at one site."""

from collections.abc import Iterable
from typing import Any, NamedTuple

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfingerprint.arguments import real_number
from massfingerprint.errors import InputError
from massfingerprint.figures import look
from massfingerprint.figures._text import page, size_inches, width, wrapped
from massfingerprint.vocabulary import readable

Array = NDArray[np.float64]
PER = 1000.0  # Gt behind a bar: a single one moves a coast by micrometres
LABEL = "mm here per 1000 gigatonnes lost there"
NONE = "no value"
_NEEDED = ("value", "lowest", "highest")
_REACH = 0.3  # of the span of the bars: how far beyond them whiskers are drawn
_NAME_SIZE = look.SMALL_SIZE + 0.5
_NAME_ROOM, _NAME_SHARE = 2.55, 0.36  # inches at most, and of the width of a figure
_WORDS = 0.8  # of the axis at most for numbers beside the bars
_TWO_LINES = 0.22  # inches: rows from here on hold two lines
_PAD = 0.05  # inches between a bar and its number
_ROW, _HIGH_ROW, _OVER, _UNDER = (
    0.2,
    0.25,
    0.2,
    0.42,
)  # inches: a bar, one with two lines, above for the name of the mean, below


def per_gigatonne(table: pd.DataFrame, *, title: str, caption: str, mean: float) -> Figure:
    """Draw mm here per gigatonne lost there, ranked, with the range within each source.

    Parameters
    ----------
    table : DataFrame
        Index mass source; columns ``value``, ``lowest``, ``highest`` in mm Gt-1 for a loss, positive = rise; lowest and highest:
        if the loss sat in one cell of the source; NaN if not known.
    title, caption : str
        Head and small print.
    mean : float
        Global mean for a loss, mm Gt-1.

    Returns
    -------
    Figure
        Page width, as high as there are sources.

    Raises
    ------
    InputError
        If a column is missing, a source comes twice, a value is infinite or no number, or there is no source.
    """
    check_bars(table, mean)
    single = all("\n" not in name for name in _names(table.index, look.PAGE, _HIGH_ROW))
    row = _ROW if single else _HIGH_ROW
    rows = row * len(table)
    figure, low = page(_OVER + rows + _UNDER, title=title, caption=caption)
    high, left = float(figure.get_figheight()), 0.15 + names_width(table.index, look.PAGE, row=row)
    axes = figure.add_axes(
        (left / look.PAGE, (low + _UNDER) / high, (look.PAGE - left - 0.15) / look.PAGE, rows / high)
    )
    draw_bars(axes, table, mean=mean)
    return figure


def names_width(sources: Iterable[object], across: float, *, row: float) -> float:
    """Inches left of the bars that names take on a figure ``across`` wide, long ones on two lines where a row has the room."""
    lines = [line for name in _names(sources, across, row) for line in name.split("\n")]
    return 0.08 + max(width(line, _NAME_SIZE) for line in lines)


def draw_bars(axes: Axes, table: pd.DataFrame, *, mean: float, most: int | None = None) -> None:
    """Draw the bars on axes, the largest on top; ``most`` leaves those with the largest effect, of either sign."""
    check_bars(table, mean)
    shades = look.source_colours([str(name) for name in table.index])
    if most is not None and len(table) > most:
        table = table.loc[table["value"].abs().sort_values(ascending=False, kind="stable").index[:most]]
    ranked = table.sort_values("value", ascending=False, kind="stable", na_position="last").iloc[::-1]
    values, lowest, highest = (ranked[name].to_numpy(dtype=float) * PER for name in _NEEDED)
    rows = np.arange(len(ranked))
    axes.barh(rows, np.nan_to_num(values), color=[shades[str(name)] for name in ranked.index], height=0.7)
    axes.axvline(0.0, color=look.QUIET, linewidth=0.6)
    axes.axvline(mean * PER, color=look.INK, linewidth=0.9, linestyle=(0, (1.0, 1.6)), zorder=0.5, gid="global mean")
    edges = _edges(values, mean * PER)
    whiskers = _whiskers(axes, lowest, highest, edges)
    labels = _labels(values, whiskers, lowest, highest)
    inches, tall = size_inches(axes)
    names = _names(ranked.index, inches / axes.get_position().width, tall / len(ranked))
    limits = _limits(labels, (min(0.0, mean * PER), max(0.0, mean * PER)), inches)
    _number(axes, labels, mean * PER, (limits[1] - limits[0]) / inches)
    axes.set_xlim(*limits)
    axes.set_ylim(-0.6, len(ranked) - 0.4)
    axes.set_yticks(rows, names, linespacing=1.0)
    axes.tick_params(axis="y", length=0.0, labelsize=_NAME_SIZE, pad=3.0)
    axes.spines["left"].set_visible(False)
    axes.set_xlabel(wrapped(LABEL, inches, look.TEXT_SIZE))
    _name_mean(axes, mean * PER, limits, inches)


class _Label(NamedTuple):
    """Words at one end of a bar or whisker, in data units along it."""

    row: int
    end: float
    words: str
    right: bool


def _names(sources: Iterable[object], across: float, row: float) -> list[str]:
    room = min(_NAME_ROOM, _NAME_SHARE * across)
    return [wrapped(readable(str(name)), room, _NAME_SIZE, lines=2 if row >= _TWO_LINES else 1) for name in sources]


def _edges(values: Array, mean: float) -> tuple[float, float]:
    """Where whiskers are cut."""
    low, high = min(0.0, mean, *values[np.isfinite(values)]), max(0.0, mean, *values[np.isfinite(values)])
    return low - _REACH * (high - low), high + _REACH * (high - low)


def _whiskers(axes: Axes, lowest: Array, highest: Array, edges: tuple[float, float]) -> Array:
    """Draw thin lines of the ranges, with an arrow head where one goes on; returns their drawn ends (row, 2), NaN for none."""
    known = np.isfinite(lowest) & np.isfinite(highest)
    ends = np.where(known[:, None], np.clip(np.column_stack([lowest, highest]), *edges), np.nan)
    rows = np.flatnonzero(known)
    for colour, thick, gid in ((look.PAPER, 2.2, "rim"), (look.INK, 0.7, "range")):  # seen on dark bars too
        axes.plot(ends[rows].T, np.stack([rows, rows]), color=colour, linewidth=thick, solid_capstyle="butt", gid=gid)
    beyond = np.column_stack([lowest < edges[0], highest > edges[1]])
    look_of: dict[str, Any] = {"color": look.INK, "linestyle": "none", "markeredgewidth": 0.7}
    for side, arrow in ((0, "<"), (1, ">")):
        for mark, size, here in (("|", 4.0, known & ~beyond[:, side]), (arrow, 3.0, known & beyond[:, side])):
            if here.any():
                axes.plot(ends[here, side], np.flatnonzero(here), marker=mark, markersize=size, **look_of)
    return ends


def _labels(values: Array, ends: Array, lowest: Array, highest: Array) -> list[_Label]:
    """The value at the end of each bar, beyond its whisker; how far a cut whisker goes at its arrow."""
    out = []
    for row, value in enumerate(values):
        right = bool(value >= 0.0 or np.isnan(value))
        words = {right: NONE if np.isnan(value) else _signed(value), not right: ""}
        cut = {False: ends[row, 0] > lowest[row], True: ends[row, 1] < highest[row]}
        for side, extreme in ((False, lowest[row]), (True, highest[row])):
            if cut[side]:
                words[side] = f"{words[side]} (range to {_signed(extreme)})".strip()
        for side in (False, True):
            if words[side]:
                reach = [0.0, np.nan_to_num(value), *ends[row][np.isfinite(ends[row])]]
                out.append(_Label(row, max(reach) if side else min(reach), words[side], side))
    return out


def _number(axes: Axes, labels: list[_Label], mean: float, unit: float) -> None:
    """Write every label on one line with its bar; ``unit`` is an inch of the axis."""
    for label in labels:
        sign = 1.0 if label.right else -1.0
        start = label.end + sign * _PAD * unit
        end = start + sign * width(label.words, look.SMALL_SIZE) * unit
        crossed = min(start, end) - _PAD * unit < mean < max(start, end) + _PAD * unit
        box = {"facecolor": look.PAPER, "edgecolor": "none", "pad": 0.6} if crossed else None
        axes.text(
            start,
            label.row,
            label.words,
            ha="left" if label.right else "right",
            va="center_baseline",
            fontsize=look.SMALL_SIZE,
            bbox=box,
            gid="number",
        )


def _signed(value: float) -> str:
    return f"{value:+.{2 if abs(value) < 100.0 else 0}f}".replace("-", "−")


def _limits(labels: list[_Label], shown: tuple[float, float], inches: float) -> tuple[float, float]:
    """Limits of the axis within which every label has its place."""
    ends = min(shown[0], *(one.end for one in labels), 0.0), max(shown[1], *(one.end for one in labels), 0.0)
    low, high = ends if ends[1] > ends[0] else (-1.0, 1.0)
    rooms = np.array([width(label.words, look.SMALL_SIZE) + 2.0 * _PAD for label in labels])
    right = np.array([label.right for label in labels])
    widest = rooms[right].max(initial=0.0) + rooms[~right].max(initial=0.0)
    rooms *= min(1.0, _WORDS * inches / widest)  # on too narrow a page bars keep their part, words do not
    places = np.array([label.end for label in labels])
    for _ in range(30):  # the scale widens as words take their room; each round comes closer by that share
        unit = (high - low) / inches
        low = min(ends[0], (places - rooms * unit)[~right].min(initial=ends[0]))
        high = max(ends[1], (places + rooms * unit)[right].max(initial=ends[1]))
    return float(low), float(max(high, low + 1e-9))


def _name_mean(axes: Axes, mean: float, limits: tuple[float, float], inches: float) -> None:
    """Name the dotted line above it, within the axes."""
    words = f"global mean {_signed(mean)}"
    half = 0.5 * width(words, look.SMALL_SIZE) * (limits[1] - limits[0]) / inches
    middle = min(max(mean, limits[0] + half), limits[1] - half)
    axes.annotate(
        words, (middle, 1.0), (0.0, 2.0), xycoords=axes.get_xaxis_transform(), textcoords="offset points", ha="center",
        va="bottom", fontsize=look.SMALL_SIZE,
    )  # fmt: skip


def check_bars(table: pd.DataFrame, mean: float) -> None:
    """Refuse a table that cannot be drawn as bars; see `per_gigatonne`."""
    missing = [name for name in _NEEDED if name not in table]
    if missing or table.empty:
        what = f"no {missing[0]}" if missing else "no row"
        raise InputError(f"table: must have sources as rows and the columns {', '.join(_NEEDED)}; it has {what}.")
    twice = table.index[table.index.duplicated()]
    if len(twice):
        raise InputError(f"table: has two rows {str(twice[0])!r}. Give every source one row.")
    for name in _NEEDED:
        if not pd.api.types.is_numeric_dtype(table[name].dtype) or np.isinf(table[name].to_numpy(dtype=float)).any():
            raise InputError(f"table: column {name!r} must hold finite numbers, or NaN for none. Convert it first.")
    real_number(mean, argument="mean", allowed="a number of mm per Gt")
