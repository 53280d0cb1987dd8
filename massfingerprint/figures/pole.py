"""The pole seen from above the north: where it was observed, and where a mass change would take it.

Greenwich is up and 90 W to the right, as on a map of the Arctic with its centre at the pole.
"""

from typing import Any

import numpy as np
import pandas as pd
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.patheffects import withStroke
from matplotlib.ticker import MaxNLocator
from matplotlib.transforms import Bbox
from numpy.typing import NDArray

from massfingerprint.errors import InputError
from massfingerprint.figures import look
from massfingerprint.figures._labels import place_labels
from massfingerprint.figures._text import page, wrapped

Array = NDArray[np.float64]
_COLOURS = {"observed": "#1f5a8c", "computed": "#a8442f"}
_BIG, _SMALL = 3.9, 1.75  # inches: sides of the panel of tracks and of the one of the wobble
_LEFT, _UNDER, _ABOVE = 0.66, 0.42, 0.05  # inches: round the panel of tracks
_SECOND, _LEGEND = 5.3, 4.78  # inches from the left of the page to the other panel, and to the legend
_UP, _ACROSS = "x (towards 0 E), mas", "y (towards 90 W), mas"
_EDGES = (
    ("0 E", 0.5, 1.0, (0, -4)),
    ("180", 0.5, 0.0, (0, 4)),
    ("90 W", 1.0, 0.5, (-4, 0)),
    ("90 E", 0.0, 0.5, (4, 0)),
)
_MARGIN = 0.16  # of the side of a panel, free round what is drawn
_DATES = 6  # dated points of a track at most
_STEPS = (1, 2, 5, 10, 20, 50, 100, 200)  # years between them
_DAYS_PER_YEAR = 365.25


def pole_track(
    computed: pd.DataFrame, observed: pd.DataFrame | None, *, drifts: pd.DataFrame, title: str, caption: str
) -> Figure:
    """Draw the track of the pole that a mass change makes and the observed one, with the drifts fitted to both.

    Parameters
    ----------
    computed : DataFrame (time)
        Columns ``x``, ``y`` in mas (y towards 90 W), 0 at the first time; at least two times.
    observed : DataFrame (time) or None
        Columns ``x``, ``y`` as observed, ``smooth_x``, ``smooth_y`` without the cycles (NaN where there is none), from the same
        origin.
    drifts : DataFrame
        Index ``computed`` and, with an observed pole, ``observed``; columns ``x``, ``y`` in mas yr-1 and ``words`` for the legend.
    title, caption : str
        Head and small print.

    Returns
    -------
    Figure
        Page width: tracks with years; with an observed pole, beside them its wobble and what part of it the tracks are.

    Raises
    ------
    InputError
        If a table lacks a column or a row, times are not in order, or the computed track holds what is no number.
    """
    _check(computed, observed, drifts)
    figure, low = page(_BIG + _UNDER + _ABOVE, title=title, caption=caption)
    high = float(figure.get_figheight())
    axes = figure.add_axes((_LEFT / look.PAGE, (low + _UNDER) / high, _BIG / look.PAGE, _BIG / high))
    tracks = {"computed": computed[["x", "y"]]}
    if observed is not None:
        smooth = observed[["smooth_x", "smooth_y"]].set_axis(["x", "y"], axis=1).dropna()
        tracks = {"observed": smooth, **tracks}
    years = float((computed.index[-1] - computed.index[0]) / pd.Timedelta(days=_DAYS_PER_YEAR))
    ends = {str(name): (years * float(row["x"]), years * float(row["y"])) for name, row in drifts.iterrows()}
    corners = [track[["x", "y"]].to_numpy() for track in tracks.values() if len(track)]
    box = _square(np.vstack([*corners, np.zeros((1, 2)), *(np.array([end]) for end in ends.values())]))
    _frame(axes, box)
    for name, track in tracks.items():
        axes.plot(track["y"], track["x"], color=_COLOURS[name], linewidth=1.3, zorder=3, gid=name)
    for name, (up, across) in ends.items():
        _arrow(axes, up, across, _COLOURS[name])
    _dated(axes, tracks)
    if observed is not None:
        top = low + _UNDER + _BIG
        beside = figure.add_axes((_SECOND / look.PAGE, (top - _SMALL) / high, _SMALL / look.PAGE, _SMALL / high))
        _wobble(beside, observed, tracks["observed"], box)
    _legend(figure, drifts, top=low + _UNDER + (_BIG if observed is None else _BIG - _SMALL - 0.55))
    return figure


def _check(computed: pd.DataFrame, observed: pd.DataFrame | None, drifts: pd.DataFrame) -> None:
    tables = {"computed": (computed, ("x", "y")), "drifts": (drifts, ("x", "y", "words"))}
    if observed is not None:
        tables["observed"] = (observed, ("x", "y", "smooth_x", "smooth_y"))
    for name, (table, columns) in tables.items():
        missing = [column for column in columns if column not in table.columns]
        if missing:
            raise InputError(f"{name}: lacks the column {missing[0]}. It needs {', '.join(columns)}.")
        if name != "drifts" and not table.index.is_monotonic_increasing:
            raise InputError(f"{name}: times must be in order. Sort the table by time.")
    wanted = ["computed"] if observed is None else ["observed", "computed"]
    if sorted(drifts.index) != sorted(wanted):
        raise InputError(
            f"drifts: rows must be {', '.join(wanted)}, got {', '.join(map(str, drifts.index)) or 'none'}."
        )
    if len(computed) < 2 or not np.isfinite(computed[["x", "y"]].to_numpy(dtype=float)).all():
        raise InputError("computed: must hold two times or more, and numbers only. Leave gaps out.")


def _square(points: Array) -> tuple[float, float, float]:
    """Middle (x, y) and half the side, mas, of a square round points (n, 2) with room at its edges."""
    lowest, highest = points.min(axis=0), points.max(axis=0)
    half = max(float((highest - lowest).max()) / 2.0 / (1.0 - 2.0 * _MARGIN), 1e-3)
    x, y = 0.5 * (lowest + highest)
    return float(x), float(y), half


def _frame(axes: Axes, box: tuple[float, float, float]) -> None:
    """Square axes with directions at their edges and lines through the origin."""
    x, y, half = box
    axes.set_xlim(y - half, y + half)
    axes.set_ylim(x - half, x + half)
    axes.set_aspect("equal")
    for axis in (axes.xaxis, axes.yaxis):
        axis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))
    axes.axhline(0.0, color=look.FAINT, linewidth=0.6, zorder=0)
    axes.axvline(0.0, color=look.FAINT, linewidth=0.6, zorder=0)
    axes.tick_params(labelsize=look.SMALL_SIZE)
    axes.set_xlabel(_ACROSS, fontsize=look.SMALL_SIZE + 0.5, labelpad=2.0)
    axes.set_ylabel(_UP, fontsize=look.SMALL_SIZE + 0.5, labelpad=1.0)
    for words, across, up, away in _EDGES:
        place: dict[str, Any] = {
            "ha": {0.0: "left", 0.5: "center", 1.0: "right"}[across],
            "va": {0.0: "bottom", 0.5: "center", 1.0: "top"}[up],
            "xycoords": "axes fraction",
            "textcoords": "offset points",
        }
        halo = [withStroke(linewidth=2.0, foreground=look.PAPER)]
        style: dict[str, Any] = {"fontsize": look.SMALL_SIZE, "color": look.QUIET, "path_effects": halo, "gid": "edge"}
        axes.annotate(words, (across, up), away, zorder=8, **place, **style)


def _arrow(axes: Axes, up: float, across: float, colour: str) -> None:
    """The drift over the whole window, from the origin."""
    line = {"arrowstyle": "-|>,head_width=0.22,head_length=0.5", "linewidth": 0.9, "linestyle": (0, (3, 2))}
    shape: dict[str, Any] = {**line, "color": colour, "shrinkA": 0.0, "shrinkB": 0.0}
    axes.annotate("", (across, up), (0.0, 0.0), arrowprops=shape, zorder=2.5, gid="drift")


def _dated(axes: Axes, tracks: dict[str, pd.DataFrame]) -> None:
    """Dots on the tracks at round years, each named."""
    held = {name: track for name, track in tracks.items() if len(track) > 1}
    dots = {name: _at_years(track) for name, track in held.items()}
    names = [str(year) for years, _ in dots.values() for year in years]
    points = np.vstack([places for _, places in dots.values()])
    if not names:
        return
    edges = [text for text in axes.texts if text.get_gid() == "edge"]
    taken: list[Bbox] = [text.get_window_extent() for text in edges]
    place_labels(axes, names, points, taken=taken)
    for name, (_, places) in dots.items():
        axes.plot(
            *places.T, linestyle="none", marker="o", markersize=3.6, color=_COLOURS[name], zorder=6.5, gid="dates"
        )
        for text in axes.texts:
            if text.get_gid() == "site name" and (np.asarray(text.xy) == places).all(axis=1).any():  # type: ignore[attr-defined]
                text.set_color(_COLOURS[name])


def _at_years(track: pd.DataFrame) -> tuple[list[int], Array]:
    """Round years within a track and its places (n, 2) then, y before x."""
    first, last = track.index[0], track.index[-1]
    for step in _STEPS:
        years = [year for year in range(first.year, last.year + 1) if year % step == 0]
        years = [year for year in years if first <= pd.Timestamp(year, 1, 1) <= last]
        if len(years) <= _DATES:
            break
    days = (track.index - first) / pd.Timedelta(days=1)
    at = np.array([(pd.Timestamp(year, 1, 1) - first) / pd.Timedelta(days=1) for year in years])
    return years, np.column_stack([np.interp(at, days, track[axis].to_numpy()) for axis in ("y", "x")])


def _wobble(axes: Axes, observed: pd.DataFrame, smooth: pd.DataFrame, box: tuple[float, float, float]) -> None:
    """The observed pole with its cycles, and the square that the tracks are drawn in."""
    x, y, half = box
    corners = np.array([[x - half, y - half], [x + half, y + half]])
    _frame(axes, _square(np.vstack([observed[["x", "y"]].to_numpy(), corners])))
    axes.plot(observed["y"], observed["x"], color=_COLOURS["observed"], linewidth=0.35, alpha=0.6, gid="wobble")
    axes.plot(smooth["y"], smooth["x"], color=_COLOURS["observed"], linewidth=1.3)
    axes.add_patch(
        Rectangle((y - half, x - half), 2.0 * half, 2.0 * half, fill=False, edgecolor=look.INK, linewidth=0.7)
    )


def _legend(figure: Figure, drifts: pd.DataFrame, *, top: float) -> None:
    """What the lines are; its top in inches from the foot of the page."""
    size, handles = look.SMALL_SIZE + 0.5, []
    labels: list[str] = []

    def entry(words: str, **style: Any) -> None:
        handles.append(Line2D([], [], **style))
        labels.append(words)

    for name, colour in _COLOURS.items():
        if name not in drifts.index:
            continue
        if name == "observed":
            entry("observed, means of 0.1 year", color=colour, linewidth=0.5)
        entry(f"{name}{', without its cycles' if name == 'observed' else ''}", color=colour, linewidth=1.3)
        entry(str(drifts.loc[name, "words"]), color=colour, linewidth=0.9, linestyle=(0, (3, 2)))
    entry("the part of it on the left", color=look.INK, linewidth=0.0, marker="s", markersize=6, markerfacecolor="none")
    if "observed" not in drifts.index:
        handles.pop(), labels.pop()
    room, high = look.PAGE - _LEGEND - 0.45, float(figure.get_figheight())
    artists: list[Artist] = list(handles)
    figure.legend(
        handles=artists,
        labels=[wrapped(words, room, size, lines=3) for words in labels],
        loc="upper left",
        bbox_to_anchor=(_LEGEND / look.PAGE, top / high),
        fontsize=size,
        borderaxespad=0.0,
        borderpad=0.0,
        handlelength=2.0,
        labelspacing=0.45,
    )
