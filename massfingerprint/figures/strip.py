"""Strip: what an even loss over every region adds up to at each site, region by region."""

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from massfingerprint.errors import InputError
from massfingerprint.figures import look
from massfingerprint.figures._text import page, width
from massfingerprint.vocabulary import readable

LABEL = "mm here for 1 m of water lost evenly from each region"
_ROW, _UNDER, _LEGEND = 0.34, 0.5, 0.16  # inches: a site, below the axis, a line of the legend
_COLUMNS = 4
_NAMED = 12  # regions with a colour of their own; the others are one


def cumulative_strip(table: pd.DataFrame, *, title: str, caption: str) -> Figure:
    """Draw one strip a site: rises stacked to the right of zero, falls to the left, the sum as a mark.

    Parameters
    ----------
    table : DataFrame (site, region)
        mm, positive = rise.
    title, caption : str
        Head and small print.

    Returns
    -------
    Figure
        Page width. The twelve regions that matter most have their own colours, the others share one.

    Raises
    ------
    InputError
        If there is no site or region, or a value is no number.
    """
    values = table.to_numpy(dtype=np.float64)
    if values.size == 0 or not np.isfinite(values).all():
        raise InputError("table: must have sites as rows, regions as columns, and a finite number in every cell.")
    kept = table.columns[np.argsort(-np.abs(values).max(axis=0), kind="stable")[:_NAMED]]
    shown = table[list(kept)].copy()
    if len(kept) < table.shape[1]:
        shown["others"] = table.drop(columns=list(kept)).sum(axis=1)
    lines = -(-(shown.shape[1] + 1) // _COLUMNS)
    body = _ROW * len(table) + _UNDER + 0.2 + _LEGEND * lines
    figure, low = page(body, title=title, caption=caption)
    high = float(figure.get_figheight())
    left = 0.2 + max(width(str(site), look.SMALL_SIZE + 0.5) for site in table.index)
    bottom = low + _LEGEND * lines + _UNDER
    axes = figure.add_axes((left / look.PAGE, bottom / high, 1.0 - (left + 0.15) / look.PAGE, _ROW * len(table) / high))
    handles = _stack(axes, shown)
    figure.legend(handles=handles, loc="lower left", bbox_to_anchor=(0.02, low / high), ncols=_COLUMNS, fontsize=look.SMALL_SIZE,
                  borderaxespad=0.0, handlelength=1.0, columnspacing=1.2, labelspacing=0.25, markerscale=0.6)  # fmt: skip
    return figure


def _stack(axes: Axes, shown: pd.DataFrame) -> list:
    """Segments of every site, the largest at zero; returns the handles of the legend."""
    colours = look.source_colours([str(name) for name in shown.columns if name != "others"]) | {"others": look.FAINT}
    rows = np.arange(len(shown))
    ends = {True: np.zeros(len(shown)), False: np.zeros(len(shown))}
    handles = []
    for name in shown.columns:
        value = shown[name].to_numpy(dtype=np.float64)
        for up in (True, False):
            step = np.where((value >= 0.0) == up, value, 0.0)
            words = "other regions" if name == "others" else readable(str(name))
            part = axes.barh(rows, step, left=ends[up], height=0.62, color=colours[str(name)], label=words)
            ends[up] = ends[up] + step
            if up:
                handles.append(part)
    (mark,) = axes.plot(shown.sum(axis=1), rows, linestyle="none", marker="|", markersize=13.0, markeredgewidth=1.6, color=look.INK,
                        label="sum")  # fmt: skip
    axes.axvline(0.0, color=look.QUIET, linewidth=0.6)
    axes.set_yticks(rows, [str(site) for site in shown.index])
    axes.tick_params(axis="y", length=0.0, labelsize=look.SMALL_SIZE + 0.5)
    axes.set_ylim(len(shown) - 0.5, -0.5)
    axes.spines["left"].set_visible(False)
    axes.set_xlabel(LABEL)
    return [mark, *handles]
