"""Curves in time: contributions of mass sources at one site, stacked; the mass record of every source."""

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.dates import AutoDateLocator, ConciseDateFormatter
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch

from massfingerprint.errors import InputError
from massfingerprint.figures import look
from massfingerprint.vocabulary import readable

_COLUMNS = 4  # panels beside each other in the figure of records
_BAND = 0.28  # opacity
_GAP = 1.7  # times the usual step of the record


def contributions(
    parts: pd.DataFrame, total: pd.DataFrame, *, title: str, caption: str, interval: str, since: str
) -> Figure:
    """Draw what each mass source adds to relative sea level at a site, stacked, with the total and its band.

    Parameters
    ----------
    parts : DataFrame (time, source)
        mm; a time at which any source has no value is a gap.
    total : DataFrame (time)
        Columns ``value``, ``half_width``, mm.
    title, caption : str
        Head and small print.
    interval : str
        What the band stands for.
    since : str
        Where the values start from 0.

    Returns
    -------
    Figure
        Page width.

    Raises
    ------
    InputError
        If the times of both differ or a column is missing.
    """
    figure = look.new_figure(look.PAGE, 4.1)
    axes = figure.add_axes((0.085, 0.2, 0.625, 0.66))
    figure.text(0.02, 0.97, title, fontsize=look.TITLE_SIZE, va="top", weight="bold")
    handles = draw_contributions(axes, parts, total, interval=interval, since=since)
    figure.legend(handles=handles, loc="upper left", bbox_to_anchor=(0.72, 0.9), fontsize=look.SMALL_SIZE + 0.5,
                  borderaxespad=0.0, handlelength=1.2, labelspacing=0.32)  # fmt: skip
    look.caption(figure, caption)
    return figure


def draw_contributions(
    axes: Axes, parts: pd.DataFrame, total: pd.DataFrame, *, interval: str, since: str
) -> list[Patch | Line2D]:
    """Stack contributions on axes; returns the handles of a legend, top of the stack first."""
    _check(parts, total)
    parts, total = _broken(parts), _broken(total)
    whole = np.isfinite(parts.to_numpy()).all(axis=1)
    values = np.where(whole[:, None], parts.to_numpy(), np.nan)
    last = values[whole][-1] if whole.any() else np.zeros(values.shape[1])
    order = np.argsort(-np.abs(last), kind="stable")
    colours = look.source_colours([str(name) for name in parts.columns])
    ends = {True: np.zeros(len(parts)), False: np.zeros(len(parts))}
    patches: dict[bool, list[Patch]] = {True: [], False: []}
    for column in order:
        name, value = str(parts.columns[column]), values[:, column]
        for up in (True, False):
            step = np.where((value >= 0.0) == up, value, 0.0)
            if not np.any(np.nan_to_num(step)):
                continue
            axes.fill_between(
                parts.index, ends[up], ends[up] + step, where=list(whole), color=colours[name], linewidth=0.0, gid=name
            )
            ends[up] = ends[up] + np.nan_to_num(step)
        patches[bool(last[column] >= 0.0)].append(Patch(color=colours[name], label=readable(name)))
    low, high = (total["value"] + sign * total["half_width"] for sign in (-1.0, 1.0))
    axes.fill_between(total.index, low, high, color=look.INK, alpha=_BAND, linewidth=0.0, gid="band")
    axes.plot(total.index, total["value"], color=look.INK, linewidth=1.0, gid="total")
    axes.axhline(0.0, color=look.QUIET, linewidth=0.6)
    axes.set_ylabel(f"relative sea level since {since} [mm]")
    _time_axis(axes)
    line = Line2D([], [], color=look.INK, linewidth=1.0, label="all sources")
    band = Patch(color=look.INK, alpha=_BAND, label=f"+- {interval}", linewidth=0.0)
    return [line, band, *reversed(patches[True]), *patches[False]]


def _broken(frame: pd.DataFrame) -> pd.DataFrame:
    """The same with an empty row in every step that is longer than the record's usual one: a gap is not drawn across."""
    days = np.diff(frame.index.to_numpy()) / np.timedelta64(1, "D")
    if days.size < 2:
        return frame
    wide = np.flatnonzero(days > _GAP * np.median(days))
    middles = frame.index[wide] + (frame.index[wide + 1] - frame.index[wide]) / 2
    return frame.reindex(frame.index.union(middles))


def _check(parts: pd.DataFrame, total: pd.DataFrame) -> None:
    missing = [name for name in ("value", "half_width") if name not in total]
    if missing:
        raise InputError(f"total: lacks the column {missing[0]}. Give value and half_width.")
    if not parts.index.equals(total.index) or not isinstance(parts.index, pd.DatetimeIndex) or parts.empty:
        raise InputError("parts: must have sources as columns and the same times as total. Align them first.")


def _time_axis(axes: Axes) -> None:
    locator = AutoDateLocator(minticks=3, maxticks=7)
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(ConciseDateFormatter(locator, show_offset=False))
    axes.margins(x=0.0)


def ledger_curves(mass: pd.DataFrame, half_width: pd.DataFrame, *, title: str, caption: str, interval: str) -> Figure:
    """Draw cumulative mass change of every source, one panel each, with its band.

    Parameters
    ----------
    mass, half_width : DataFrame (time, source)
        Gt, negative = loss; NaN is a gap.
    title, caption : str
        Head and small print.
    interval : str
        What the band stands for.

    Returns
    -------
    Figure
        Page width, panels of one height.

    Raises
    ------
    InputError
        If both do not have the same times and sources.
    """
    if not mass.index.equals(half_width.index) or list(mass.columns) != list(half_width.columns) or mass.empty:
        raise InputError("half_width: must have the same times and sources as mass. Align them first.")
    mass, half_width = _broken(mass), _broken(half_width)
    rows = -(-mass.shape[1] // _COLUMNS)
    height = 0.95 + 1.25 * rows
    figure = look.new_figure(look.PAGE, height)
    figure.text(0.02, 1.0 - 0.1 / height, title, fontsize=look.TITLE_SIZE, va="top", weight="bold")
    figure.text(0.012, 0.5, "mass change [Gt]", rotation="vertical", va="center", ha="left", fontsize=look.TEXT_SIZE)
    colours = look.source_colours([str(name) for name in mass.columns])
    for number, name in enumerate(mass.columns):
        row, column = divmod(number, _COLUMNS)
        left, low = 0.085 + column * 0.232, 1.0 - (0.58 + 1.25 * row + 0.85) / height
        axes = figure.add_axes((left, low, 0.172, 0.85 / height))
        _record(axes, mass[name], half_width[name], colours[str(name)])
    words = f"Band: {interval}. {caption}"
    look.caption(figure, words)
    return figure


def _record(axes: Axes, mass: pd.Series, half_width: pd.Series, colour: str) -> None:
    axes.fill_between(mass.index, mass - half_width, mass + half_width, color=colour, alpha=_BAND, linewidth=0.0)
    axes.plot(mass.index, mass, color=colour, linewidth=0.9)
    axes.axhline(0.0, color=look.FAINT, linewidth=0.5, zorder=0)
    axes.set_title(readable(str(mass.name)), fontsize=look.SMALL_SIZE + 0.5, pad=3.0)
    axes.tick_params(labelsize=look.SMALL_SIZE, length=2.0)
    locator = AutoDateLocator(minticks=2, maxticks=4)
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(ConciseDateFormatter(locator, show_offset=False))
    axes.yaxis.get_major_locator().set_params(nbins=4)  # type: ignore[call-arg]
    axes.margins(x=0.02)
