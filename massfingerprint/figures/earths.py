"""Earths side by side: their Love numbers by degree, and how far sea level moves with the choice of one."""

from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.ticker import NullFormatter

from massfingerprint.errors import InputError
from massfingerprint.figures import look
from massfingerprint.figures._text import page

_COLOURS = (
    "#222222",
    "#1f5a8c",
    "#a8442f",
    "#5f7f2e",
    "#c28f3d",
    "#8c2f62",
    "#2e6f66",
    "#8c8c8c",
    "#5b93c7",
    "#d98a70",
)
_DASHES: tuple[object, ...] = ("-", (0, (5, 1.5)), (0, (1.5, 1.2)), (0, (5, 1.5, 1.2, 1.5)))
_PANELS = (("h_load", "-h'", 0, -1.0), ("l_load", "n l'", 1, 1.0), ("k_load", "-n k'", 1, -1.0))
_HIGH, _LEGEND, _UNDER = 2.5, 0.2, 0.42  # inches: a panel, a line of the legend, below the axes
_ROW, _GAP = 0.22, 0.24
_MARKERS = "xosD^vP*"


def _looks(names: Sequence[str]) -> dict[str, dict[str, Any]]:
    """Colour and dashes of each Earth."""
    return {
        name: {"color": _COLOURS[i % len(_COLOURS)], "linestyle": _DASHES[(i // 3) % len(_DASHES)], "linewidth": 1.1}
        for i, name in enumerate(names)
    }


def _mark(number: int) -> dict[str, Any]:
    return {
        "marker": _MARKERS[number % len(_MARKERS)],
        "markersize": 3.6,
        "markerfacecolor": "none",
        "markeredgewidth": 0.9,
    }


def _check(tables: dict[str, pd.DataFrame], columns: Sequence[str]) -> None:
    if not tables:
        raise InputError("tables: there is no Earth to draw.")
    for name, table in tables.items():
        missing = [column for column in columns if column not in table.columns]
        if missing or len(table) < 3:
            raise InputError(f"tables: {name!r} lacks {missing[0] if missing else 'degrees, at least 3 are needed'}.")


def _legend(figure: Figure, looks: dict[str, dict[str, Any]], top: float, *, dots: bool = False) -> None:
    """Names of the Earths in rows from ``top`` (inches from the foot) downwards, with the marks of the dots if there are any."""
    handles = [
        Line2D([], [], label=name, **drawn, **(_mark(number) if dots and number else {}))
        for number, (name, drawn) in enumerate(looks.items())
    ]
    high = float(figure.get_figheight())
    figure.legend(
        handles=handles,
        loc="upper left",
        bbox_to_anchor=(0.06, top / high),
        ncols=4,
        fontsize=look.SMALL_SIZE,
        handlelength=2.6,
        columnspacing=1.4,
        borderpad=0.0,
        borderaxespad=0.0,
    )


def _log_degrees(axes: Axes, first: int, last: int) -> None:
    axes.set_xscale("log")
    axes.set_xlim(first, last)
    axes.xaxis.set_minor_formatter(NullFormatter())
    ticks = [10**k for k in range(6) if first <= 10**k <= last]
    axes.set_xticks(ticks, [f"{tick:,}".replace(",", " ") for tick in ticks])
    axes.set_xlabel("spherical-harmonic degree", fontsize=look.SMALL_SIZE + 0.5)
    axes.tick_params(labelsize=look.SMALL_SIZE)


def love_curves(tables: dict[str, pd.DataFrame], *, title: str, caption: str) -> Figure:
    """Draw the load Love numbers of Earths against degree: -h', n l' and -n k'.

    Parameters
    ----------
    tables : dict of str to DataFrame
        Name of the Earth to a table indexed by degree with columns ``h_load``, ``l_load``, ``k_load``; degree 0 is left out.
    title, caption : str
        Head and small print.

    Returns
    -------
    Figure
        Page width, three panels.

    Raises
    ------
    InputError
        If there is no Earth or a table lacks a column.
    """
    _check(tables, [panel[0] for panel in _PANELS])
    rows = -(-len(tables) // 4)
    figure, low = page(_HIGH + _UNDER + rows * _LEGEND + _GAP, title=title, caption=caption)
    high = float(figure.get_figheight())
    last = max(int(table.index[-1]) for table in tables.values())
    looks = _looks(list(tables))
    for number, (column, label, power, sign) in enumerate(_PANELS):
        axes = figure.add_axes((0.065 + 0.325 * number, (low + _UNDER) / high, 0.265, _HIGH / high))
        for name, table in tables.items():
            held = table[table.index >= 1]
            degree = held.index.to_numpy(dtype=np.float64)
            axes.plot(degree, sign * held[column].to_numpy() * degree**power, label=name, **looks[name])
        _log_degrees(axes, 1, last)
        axes.set_title(label, fontsize=look.TEXT_SIZE)
        if number == 0:
            _legend(figure, looks, low + _UNDER + _HIGH + _GAP + rows * _LEGEND)
    return figure


def sensitivity(responses: dict[str, pd.Series], coasts: pd.DataFrame | None, *, title: str, caption: str) -> Figure:
    """Draw how the answer of the sea differs between Earths: by degree, and at coasts.

    Parameters
    ----------
    responses : dict of str to Series
        Name of the Earth to T_l indexed by degree; the first is what the others are held against.
    coasts : DataFrame or None
        Index coast, a column for each Earth but the first: change of relative sea level in mm yr-1.
    title, caption : str
        Head and small print.

    Returns
    -------
    Figure
        Page width: per cent against degree, and one row of dots a coast.

    Raises
    ------
    InputError
        If there are fewer than two Earths, or the coasts' columns are not the other Earths.
    """
    names = list(responses)
    if len(names) < 2:
        raise InputError(f"responses: at least two Earths are needed, got {', '.join(names) or 'none'}.")
    if coasts is not None and list(coasts.columns) != names[1:]:
        raise InputError(f"coasts: columns must be {', '.join(names[1:])}, got {', '.join(map(str, coasts.columns))}.")
    rows = -(-len(names) // 4)
    tall = _HIGH if coasts is None else max(_HIGH, _ROW * len(coasts))
    figure, low = page(tall + _UNDER + rows * _LEGEND + _GAP, title=title, caption=caption)
    high, looks = float(figure.get_figheight()), _looks(names)
    wide = 0.9 if coasts is None else 0.36
    axes = figure.add_axes((0.075, (low + _UNDER) / high, wide, tall / high))
    usual = responses[names[0]]
    for name in names:
        shared = usual.index[usual.index >= 1].intersection(responses[name].index)
        change = 100.0 * (responses[name].loc[shared] / usual.loc[shared] - 1.0)
        axes.plot(shared.to_numpy(dtype=np.float64), change.to_numpy(), label=name, **looks[name])
    _log_degrees(axes, 1, int(usual.index[-1]))
    axes.set_title(f"response of sea level, % more than {names[0]}", fontsize=look.TEXT_SIZE)
    _legend(figure, looks, low + _UNDER + tall + _GAP + rows * _LEGEND, dots=coasts is not None)
    if coasts is not None:
        beside = figure.add_axes((0.655, (low + _UNDER) / high, 0.325, tall / high))
        _dots(beside, coasts, looks)
    return figure


def _dots(axes: Axes, coasts: pd.DataFrame, looks: dict[str, dict[str, Any]]) -> None:
    places = np.arange(len(coasts))[::-1]
    axes.axvline(0.0, color=look.QUIET, linewidth=0.6)
    for number, name in enumerate(coasts.columns):
        colour = looks[name]["color"]
        axes.plot(coasts[name].to_numpy(), places, linestyle="none", color=colour, **_mark(number + 1))
    axes.set_yticks(places, [str(name) for name in coasts.index], fontsize=look.SMALL_SIZE)
    axes.set_ylim(-0.6, len(coasts) - 0.4)
    axes.grid(axis="y", color=look.FAINT, linewidth=0.4)
    axes.set_axisbelow(True)
    axes.tick_params(axis="x", labelsize=look.SMALL_SIZE)
    axes.tick_params(axis="y", length=0)
    axes.margins(x=0.08)
    axes.set_xlabel("change, mm/yr", fontsize=look.SMALL_SIZE + 0.5)
    axes.set_title("at coasts", fontsize=look.TEXT_SIZE)
