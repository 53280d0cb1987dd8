"""Curves in time: contributions of mass sources at one site, stacked; the mass record of every source."""

from typing import NamedTuple

import numpy as np
import pandas as pd
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.dates import AutoDateLocator, ConciseDateFormatter, date2num
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.ticker import FixedFormatter, FixedLocator, MaxNLocator
from numpy.typing import NDArray

from massfingerprint.errors import InputError
from massfingerprint.figures import look
from massfingerprint.figures._text import POINTS, page, size_inches, wrapped
from massfingerprint.vocabulary import readable

Array = NDArray[np.float64]
Times = NDArray[np.datetime64]
_COLUMNS = 4  # panels beside each other in the figure of records
_BAND = 0.28  # opacity of a band in the colour of its line
_VEIL = 0.5  # opacity of the white band over coloured areas
_GAP = 1.7  # times the usual step of the record
_BODY, _ABOVE = 3.45, 0.08  # inches: the stacked figure without title and small print, and free above its axes
_TALL, _BETWEEN, _AXIS = 0.84, 0.16, 0.22  # inches: a panel, free between panels, for the years below
_PANEL_SIZE = look.SMALL_SIZE + 0.5
_MOST = 16  # areas that can still be told apart
_MARGIN = 0.01  # of the record, free at both ends
# what is tried, first to last, until a legend fits: size of type, lines of a name
_LEGEND = ((look.SMALL_SIZE + 0.5, 2), (look.SMALL_SIZE, 2), (look.SMALL_SIZE, 1), (look.SMALL_SIZE - 1.0, 1))
_YEAR_STEPS = (1, 2, 5, 10, 20, 50, 100, 200, 500)


def contributions(
    parts: pd.DataFrame, total: pd.DataFrame, *, title: str, caption: str, interval: str = "1 sigma", since: str
) -> Figure:
    """Draw what each mass source adds to relative sea level at a site, stacked, with the total and its band.

    Parameters
    ----------
    parts : DataFrame (time, source)
        mm, positive = rise; a time at which any source has no value is a gap. Beyond 16 sources the smallest are drawn as one.
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
        If the times of both differ or are not in order, a column is missing, or a value is infinite or no number.
    """
    figure, low = page(_BODY, title=title, caption=caption)
    high, left, across, under = float(figure.get_figheight()), 0.75, 4.42, 0.3
    axes = figure.add_axes(
        (left / look.PAGE, (low + under) / high, across / look.PAGE, (_BODY - under - _ABOVE) / high)
    )
    handles = draw_contributions(axes, parts, total, interval=interval, since=since)
    draw_legend(figure, handles, corner=(left + across + 0.12, low + _BODY - _ABOVE), room=(1.83, _BODY - _ABOVE))
    return figure


def draw_contributions(
    axes: Axes, parts: pd.DataFrame, total: pd.DataFrame, *, interval: str, since: str
) -> list[Artist]:
    """Stack contributions on axes; returns the handles of a legend, top of the stack first."""
    _check_contributions(parts, total)
    stack = _stack(parts)
    alone = _alone(stack.whole)
    rising: list[Artist] = []
    falling: list[Artist] = []
    for name, colour, value, ends in zip(stack.names, stack.colours, stack.last, stack.ends, strict=True):
        for low, high in ends:
            if np.any(high > low):
                axes.fill_between(stack.times, low, high, color=colour, linewidth=0.0, gid=name)
            if np.any((high > low)[alone]):
                axes.vlines(stack.times[alone], low[alone], high[alone], color=colour, linewidth=1.0)
        (rising if value >= 0.0 else falling).append(Patch(color=colour, label=readable(name), linewidth=0.0))
    times, columns = _with_gaps(_times(total.index), total[["value", "half_width"]].to_numpy(dtype=float))
    _line(axes, times, *columns.T, colours=(look.INK, look.PAPER))
    axes.axhline(0.0, color=look.QUIET, linewidth=0.6)
    room = size_inches(axes)[1] + 0.25
    axes.set_ylabel(wrapped(f"relative sea level since {since} [mm]", room, look.TEXT_SIZE))
    _time_axis(axes, _times(total.index), most=7)
    if not stack.whole.any():
        words = "no time at which every source has a value"
        axes.text(0.5, 0.75, words, transform=axes.transAxes, ha="center", va="center", color=look.QUIET)
    line = Line2D([], [], color=look.INK, linewidth=1.1, label="all sources")
    band = Patch(facecolor=look.PAPER, edgecolor=look.INK, label=f"+- {interval}", linewidth=0.4)
    return [line, band, *reversed(rising), *falling]


def draw_legend(
    figure: Figure, handles: list[Artist], *, corner: tuple[float, float], room: tuple[float, float]
) -> None:
    """Legend right of the curves: ``corner`` (left, top) and ``room`` (width, height) in inches; long names on two lines."""
    words, widest = [str(handle.get_label()) for handle in handles], room[0]
    for size, most in _LEGEND:
        labels = [wrapped(word, widest - 2.1 * size / POINTS, size, lines=most) for word in words]
        lines = sum(label.count("\n") + 1 for label in labels)
        if (1.12 * lines + 0.3 * len(labels)) * size / POINTS <= room[1]:
            break
    across, high = figure.get_size_inches()
    figure.legend(
        handles=handles,
        labels=labels,
        loc="upper left",
        bbox_to_anchor=(corner[0] / across, corner[1] / high),
        fontsize=size,
        borderaxespad=0.0,
        borderpad=0.0,
        handlelength=1.3,
        handletextpad=0.6,
        labelspacing=0.3,
    )


class _Stack(NamedTuple):
    """Areas from the zero line outwards: at each side a low and a high edge per source, NaN where nothing is drawn."""

    times: Times
    whole: NDArray[np.bool_]
    names: list[str]
    colours: list[str]
    last: Array
    ends: list[tuple[tuple[Array, Array], tuple[Array, Array]]]


def _stack(parts: pd.DataFrame) -> _Stack:
    times, values = _with_gaps(_times(parts.index), parts.to_numpy(dtype=float))
    whole = np.asarray(np.isfinite(values).all(axis=1))
    values[~whole] = np.nan
    last = values[whole][-1] if whole.any() else np.zeros(values.shape[1])
    order = np.argsort(-np.abs(last), kind="stable")
    sources = [str(name) for name in parts.columns]
    shades = look.source_colours(sources)
    names, colours = [sources[n] for n in order], [shades[sources[n]] for n in order]
    values, last = values[:, order], last[order]
    if len(names) > _MOST:
        keep = _MOST - 1
        names = [*names[:keep], f"{len(names) - keep} smaller sources"]
        colours = [*colours[:keep], look.FAINT]
        values = np.column_stack([values[:, :keep], values[:, keep:].sum(axis=1)])
        last = np.append(last[:keep], last[keep:].sum())
    up, down = np.maximum(values, 0.0), np.minimum(values, 0.0)
    tops, floors = np.cumsum(up, axis=1), np.cumsum(down, axis=1)
    ends = [((tops[:, n] - up[:, n], tops[:, n]), (floors[:, n], floors[:, n] - down[:, n])) for n in range(len(names))]
    return _Stack(times, whole, names, colours, last, ends)


def ledger_curves(
    mass: pd.DataFrame, half_width: pd.DataFrame, *, title: str, caption: str, interval: str = "1 sigma"
) -> Figure:
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
        If both do not have the same times and sources, times are not in order, or a value is infinite or no number.
    """
    _check_frame(mass, "mass")
    _check_frame(half_width, "half_width")
    if not mass.index.equals(half_width.index) or list(mass.columns) != list(half_width.columns):
        raise InputError("half_width: must have the same times and sources as mass. Align them first.")
    across = min(_COLUMNS, mass.shape[1])
    pitch = (look.PAGE - 0.22) / across
    wide, tall = pitch - 0.54, _TALL if mass.shape[1] > across else 2.0 * _TALL
    names = [wrapped(readable(str(name)), pitch - 0.12, _PANEL_SIZE) for name in mass.columns]
    heads = [max(name.count("\n") + 1 for name in names[n : n + across]) for n in range(0, len(names), across)]
    steps = [tall + _BETWEEN + 0.13 * lines for lines in heads]
    figure, low = page(sum(steps) + _AXIS, title=title, caption=f"Band: {interval}. {caption}")
    high, shades = float(figure.get_figheight()), look.source_colours([str(name) for name in mass.columns])
    for number, name in enumerate(mass.columns):
        row, column = divmod(number, across)
        left, bottom = 0.7 + pitch * column, low + _AXIS + sum(steps[row + 1 :])
        axes = figure.add_axes((left / look.PAGE, bottom / high, wide / look.PAGE, tall / high))
        axes.set_title(names[number], fontsize=_PANEL_SIZE, x=-0.42 / wide, y=1.0 + 0.06 / tall, pad=0.0)
        _record(axes, mass[name], half_width[name], colour=shades[str(name)])
        axes.xaxis.set_visible(number + across >= mass.shape[1])
    middle = (low + _AXIS + 0.5 * sum(steps)) / high
    figure.text(0.012, middle, "mass change [Gt]", rotation="vertical", va="center", ha="left")
    return figure


def _record(axes: Axes, mass: pd.Series, half_width: pd.Series, *, colour: str) -> None:
    """One panel."""
    both = np.column_stack([mass.to_numpy(dtype=float), half_width.to_numpy(dtype=float)])
    times, columns = _with_gaps(_times(mass.index), both)
    _line(axes, times, *columns.T, colours=(colour, colour))
    axes.axhline(0.0, color=look.FAINT, linewidth=0.5, zorder=0)
    axes.tick_params(labelsize=look.SMALL_SIZE, length=2.0, pad=2.0)
    _time_axis(axes, _times(mass.index), most=4)
    low, high = axes.get_ylim()
    axes.set_ylim(low, high)
    years = axes.xaxis.get_majorticklocs()
    axes.vlines(years, low, high, color=look.FAINT, linewidth=0.4, zorder=0, gid="years")
    ticks = MaxNLocator(3).tick_values(low, high)
    axes.yaxis.set_major_locator(FixedLocator([tick for tick in ticks if low <= tick <= high]))
    for axis in (axes.xaxis, axes.yaxis):
        axis.set_label_coords(0.0, 0.0)  # there is no label; its place need not be looked for, which takes long


def _line(axes: Axes, times: Times, value: Array, half_width: Array, *, colours: tuple[str, str]) -> None:
    """A line and its band in two colours; a value between two gaps is a dot, its band an upright."""
    line, band = colours
    veil = band == look.PAPER
    opacity, edge = (_VEIL, line) if veil else (_BAND, "none")
    low, high = value - half_width, value + half_width
    axes.fill_between(times, low, high, facecolor=band, alpha=opacity, linewidth=0.0, gid="band")
    if veil:  # on white paper a white band would not be seen
        axes.plot(times, np.column_stack([low, high]), color=edge, linewidth=0.4, gid="band edge")
    axes.plot(times, value, color=line, linewidth=1.1, gid="total")
    alone = _alone(np.isfinite(value))
    if alone.any():
        axes.vlines(times[alone], low[alone], high[alone], color=line, linewidth=0.6)
        axes.plot(times[alone], value[alone], color=line, marker="o", markersize=1.8, linestyle="none")


def _alone(there: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Where something is there with nothing beside it."""
    padded = np.concatenate([[False], there, [False]])
    return there & ~padded[:-2] & ~padded[2:]


def _times(index: pd.Index) -> Times:
    """Times without a zone."""
    return np.asarray(pd.DatetimeIndex(index).tz_localize(None).to_numpy())


def _with_gaps(times: Times, columns: Array) -> tuple[Times, Array]:
    """The same with an empty row in every step longer than the record's usual one: a gap is not drawn across."""
    steps = np.diff(times)
    if steps.size < 2:
        return times, columns.copy()
    wide = np.flatnonzero(steps > _GAP * np.median(steps))
    return np.insert(times, wide + 1, times[wide] + steps[wide] // 2), np.insert(columns, wide + 1, np.nan, axis=0)


def _time_axis(axes: Axes, times: Times, *, most: int) -> None:
    """Whole years below the axis, few enough to be read; months where the record is short."""
    days = np.asarray(date2num(times[[0, -1]]))
    spare = 15.0 if times.size == 1 else _MARGIN * (days[1] - days[0])
    limits = float(days[0] - spare), float(days[1] + spare)
    axes.set_xlim(*limits)
    first, last = (int(str(time.astype("datetime64[Y]"))) for time in times[[0, -1]])
    step = next((step for step in _YEAR_STEPS if (last - first) / step <= most), _YEAR_STEPS[-1])
    years = [year for year in range(first, last + 2) if year % step == 0]
    places = np.asarray(date2num(np.array([f"{year:04d}" for year in years], dtype="datetime64[D]")), dtype=float)
    inside = (places >= limits[0]) & (places <= limits[1])
    if inside.sum() >= 2:
        axes.xaxis.set_major_locator(FixedLocator(list(places[inside])))
        axes.xaxis.set_major_formatter(FixedFormatter([str(y) for y, here in zip(years, inside, strict=True) if here]))
        return
    locator = AutoDateLocator(minticks=2, maxticks=most)
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(ConciseDateFormatter(locator, show_offset=False))


def _check_contributions(parts: pd.DataFrame, total: pd.DataFrame) -> None:
    missing = [name for name in ("value", "half_width") if name not in total]
    if missing:
        raise InputError(f"total: lacks the column {missing[0]}. Give value and half_width.")
    _check_frame(parts, "parts")
    _check_frame(total[["value", "half_width"]], "total")
    if not parts.index.equals(total.index):
        raise InputError("parts: must have sources as columns and the same times as total. Align them first.")


def _check_frame(frame: pd.DataFrame, argument: str) -> None:
    """Refuse what is no table of numbers in time."""
    if frame.empty:
        raise InputError(f"{argument}: is empty. Give at least one time and one column.")
    index = frame.index
    if (
        not isinstance(index, pd.DatetimeIndex)
        or index.hasnans
        or not (index.is_monotonic_increasing and index.is_unique)
    ):
        raise InputError(
            f"{argument}: rows must be times in rising order, each once, got {type(index).__name__}. Sort them."
        )
    twice = frame.columns[frame.columns.duplicated()]
    if len(twice):
        raise InputError(f"{argument}: has two columns {str(twice[0])!r}. Give every column its own name.")
    for name in frame.columns:
        column = frame[name]
        if not pd.api.types.is_numeric_dtype(column.dtype) or np.isinf(column.to_numpy(dtype=float)).any():
            raise InputError(
                f"{argument}: column {str(name)!r} must hold finite numbers, or NaN for none. Convert it first."
            )
