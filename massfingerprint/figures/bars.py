"""Bars: how much a gigatonne lost from each mass source does at one site."""

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from massfingerprint.errors import InputError
from massfingerprint.figures import look
from massfingerprint.vocabulary import readable

PER = 1000.0  # Gt behind a bar: a single one moves a coast by micrometres
LABEL = "mm here per 1000 gigatonnes lost there"
_NEEDED = ("value", "lowest", "highest")
_ROOM = 1.35  # of the longest bar: how far whiskers are drawn


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
        If a column is missing or there is no source.
    """
    height = 1.25 + 0.2 * max(3, len(table))
    figure = look.new_figure(look.PAGE, height)
    figure.text(0.02, 1.0 - 0.1 / height, title, fontsize=look.TITLE_SIZE, va="top", weight="bold")
    axes = figure.add_axes((0.27, 0.78 / height, 0.69, 1.0 - 1.25 / height))
    draw_bars(axes, table, mean=mean)
    look.caption(figure, caption)
    return figure


def draw_bars(axes: Axes, table: pd.DataFrame, *, mean: float) -> None:
    """Draw the bars on axes, the largest on top."""
    missing = [name for name in _NEEDED if name not in table]
    if missing or table.empty:
        raise InputError(f"table: must have sources as rows and the columns {', '.join(_NEEDED)}.")
    ranked = table.sort_values("value", ascending=True, kind="stable")
    values = ranked["value"].to_numpy() * PER
    colours = look.source_colours([str(name) for name in table.index])
    rows = range(len(ranked))
    axes.barh(rows, values, color=[colours[str(name)] for name in ranked.index], height=0.72)
    low, high = min(0.0, values.min(), mean * PER), max(0.0, values.max(), mean * PER)
    span = high - low
    left, right = low - (_ROOM - 1.0) * span * (low < 0.0), high + (_ROOM - 1.0) * span
    axes.axvline(0.0, color=look.QUIET, linewidth=0.6)
    axes.axvline(mean * PER, color=look.INK, linewidth=0.8, linestyle=":", zorder=0)
    axes.text(mean * PER, len(ranked) - 0.35, "global mean", fontsize=look.SMALL_SIZE, ha="center", va="bottom")
    for row, (_, one) in zip(rows, ranked.iterrows(), strict=True):
        _whisker(axes, row, one["lowest"] * PER, one["highest"] * PER, (left, right))
    axes.set_xlim(left, right)
    axes.set_ylim(-0.6, len(ranked) - 0.4)
    axes.set_yticks(
        rows, [f"{readable(str(name))}  {value:+.2f}" for name, value in zip(ranked.index, values, strict=True)]
    )
    axes.tick_params(axis="y", length=0.0, labelsize=look.SMALL_SIZE + 0.5)
    axes.spines["left"].set_visible(False)
    axes.set_xlabel(LABEL)


def _whisker(axes: Axes, row: int, lowest: float, highest: float, limits: tuple[float, float]) -> None:
    """Thin line of the range; an arrow head where it goes on beyond the axes."""
    if not np.isfinite([lowest, highest]).all():
        return
    ends = max(lowest, limits[0]), min(highest, limits[1])
    axes.plot(ends, [row, row], color=look.INK, linewidth=0.7, solid_capstyle="butt", gid="range")
    for end, beyond, mark in ((ends[0], lowest < limits[0], "<"), (ends[1], highest > limits[1], ">")):
        axes.plot([end], [row], color=look.INK, marker=mark if beyond else "|", markersize=3.0 if beyond else 4.0, linestyle="none",
                  markeredgewidth=0.7, clip_on=False)  # fmt: skip
