"""One sheet per site: the answer in a sentence, where it is, the table, the stacked curve, the bars."""

from dataclasses import dataclass, field
from functools import cache

import cartopy.crs as ccrs
import numpy as np
import pandas as pd
import shapely
from matplotlib.axes import Axes
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure
from matplotlib.patches import Circle, PathPatch
from matplotlib.path import Path

from massfingerprint.bundled import open_bundled
from massfingerprint.errors import InputError
from massfingerprint.figures import look
from massfingerprint.figures._text import POINTS, foot_height, width, wrapped
from massfingerprint.figures.bars import draw_bars, names_width
from massfingerprint.figures.curves import draw_contributions, draw_legend

WIDTH, HEIGHT = 8.27, 11.69  # A4, inches
_LEFT, _RIGHT = 0.5, 7.77  # inches, where the contents begin and end
_GLOBE = 1.3  # inches across
_MOST_ROWS, _MOST_BARS = 20, 16
_BAR, _LEAST_BAR, _HIGH = 0.165, 0.135, 3.1  # inches: a bar, the lowest that can be read, the highest curve
_STEP, _MORE = 0.148, 0.11  # inches a row, and for a second line in it
_CELL = look.SMALL_SIZE + 0.5
_APART = 0.22  # inches between columns
_LONG = 12  # rows beyond which each takes one line
_RADIUS = 6.371e6  # metres, of the globe drawn


@dataclass(frozen=True)
class Sheet:
    """What a sheet shows.

    Parameters
    ----------
    site : str
        Name; ``lat``, ``lon`` in degrees.
    sentence : str
        The answer.
    table : DataFrame
        Finished text cells, a row per source, the last one the total.
    parts, total : DataFrame
        As for ``curves.contributions``.
    bars : DataFrame
        As for ``bars.per_gigatonne``.
    mean : float
        Global mean for a loss, mm Gt-1.
    interval, since : str
        As for ``curves.contributions``.
    """

    site: str
    lat: float
    lon: float
    sentence: str
    table: pd.DataFrame = field(repr=False)
    parts: pd.DataFrame = field(repr=False)
    total: pd.DataFrame = field(repr=False)
    bars: pd.DataFrame = field(repr=False)
    mean: float
    interval: str
    since: str


def overview_sheet(sheet: Sheet, *, title: str, caption: str) -> Figure:
    """Draw the sheet of one site on an upright page.

    Parameters
    ----------
    sheet : Sheet
        Contents. Rows beyond 20 and bars beyond 16 are left out, and the sheet says so.
    title : str
        Of the study.
    caption : str
        Small print.

    Returns
    -------
    Figure
        A4, upright.

    Raises
    ------
    InputError
        If the place is none, the table is empty, or a frame cannot be drawn (see `contributions`, `per_gigatonne`).
    """
    placed = isinstance(sheet.lat, int | float) and isinstance(sheet.lon, int | float)
    if not (placed and -90.0 <= sheet.lat <= 90.0 and -180.0 <= sheet.lon <= 360.0) or sheet.table.empty:
        raise InputError(f"sheet: {sheet.site!r} needs a place in degrees and a table with rows.")
    figure = look.new_figure(WIDTH, HEIGHT)
    top = _table(figure, sheet.table, _head(figure, sheet, title)) - 0.18
    share = _LEFT / WIDTH
    look.caption(figure, caption, left=share)
    low = foot_height(caption, WIDTH, left=share) + 0.5
    free = top - low - 1.0
    curve = min(max(0.47 * free, free - _BAR * min(len(sheet.bars), _MOST_BARS)), _HIGH)
    rows = max(1, min(len(sheet.bars), _MOST_BARS, int((free - curve) / _LEAST_BAR)))
    high = min(_BAR * rows, free - curve)
    _subhead(figure, top, "What each mass source added here")
    axes = _axes(figure, 1.0, top - 0.22 - curve, 4.75, curve)
    handles = draw_contributions(axes, sheet.parts, sheet.total, interval=sheet.interval, since=sheet.since)
    draw_legend(figure, handles, corner=(5.87, top - 0.22), room=(_RIGHT - 5.87, curve + 0.25))
    below = top - 0.22 - curve - 0.45
    fewer = f", the {rows} strongest of {len(sheet.bars)} sources" if rows < len(sheet.bars) else ""
    _subhead(figure, below, f"What ice lost elsewhere does here{fewer}")
    left = _LEFT + names_width(sheet.bars.index, WIDTH, row=high / rows)
    draw_bars(_axes(figure, left, below - 0.36 - high, _RIGHT - left, high), sheet.bars, mean=sheet.mean, most=rows)
    return figure


def _axes(figure: Figure, left: float, low: float, wide: float, high: float) -> Axes:
    return figure.add_axes((left / WIDTH, low / HEIGHT, wide / WIDTH, high / HEIGHT))


def _subhead(figure: Figure, y: float, words: str) -> None:
    figure.text(_LEFT / WIDTH, y / HEIGHT, words, fontsize=look.TEXT_SIZE + 0.5, weight="bold", va="top")


def _head(figure: Figure, sheet: Sheet, title: str) -> float:
    """Study, site, place, sentence and globe; returns where they end, inches from below."""
    room = _RIGHT - _LEFT - _GLOBE - 0.25
    where = f"{abs(sheet.lat):.2f} {'N' if sheet.lat >= 0 else 'S'}, {_east(sheet.lon)}"
    size = next((size for size in (18.0, 15.0) if width(sheet.site, size, weight="bold") <= room), 13.0)
    blocks = (
        (title, look.TEXT_SIZE, look.QUIET, "normal", 0.08),
        (sheet.site, size, look.INK, "bold", 0.08),
        (where, look.TEXT_SIZE, look.QUIET, "normal", 0.16),
        (sheet.sentence, 11.0, look.INK, "normal", 0.2),
    )
    y = HEIGHT - 0.42
    for text, letters, colour, weight, after in blocks:
        words = wrapped(text, room, letters, lines=6 if text is sheet.sentence else 2, weight=weight)
        figure.text(
            _LEFT / WIDTH, y / HEIGHT, words, fontsize=letters, color=colour, weight=weight, va="top", linespacing=1.3
        )
        y -= 1.3 * 1.17 * letters / POINTS * (words.count("\n") + 1) + after - 0.04
    _globe(_axes(figure, _RIGHT - _GLOBE, HEIGHT - 0.45 - _GLOBE, _GLOBE, _GLOBE), sheet.lat, sheet.lon)
    return min(y, HEIGHT - 0.45 - _GLOBE - 0.15)


def _east(longitude: float) -> str:
    turned = (longitude + 180.0) % 360.0 - 180.0
    return f"{abs(turned):.2f} {'E' if turned >= 0 else 'W'}"


def _table(figure: Figure, table: pd.DataFrame, top: float) -> float:
    """Rows of text under thin rules, the first column to the left, the others to the right, the last row strong.

    Returns where it ends, inches from below.
    """
    shown = pd.concat([table.iloc[: _MOST_ROWS - 1], table.iloc[-1:]]) if len(table) > _MOST_ROWS else table
    lines = [[str(name) for name in table.columns], *([str(c) for c in row] for row in shown.itertuples(index=False))]
    size, rights, room = _columns(lines)
    y, rules = top, []
    for number, cells in enumerate(lines):
        weight = "bold" if number in (0, len(lines) - 1) else "normal"
        cells[0] = wrapped(cells[0], room, size, lines=1 if len(lines) > _LONG else 2, weight=weight)
        for column, cell in enumerate(cells):
            x, side = (_LEFT, "left") if column == 0 else (rights[column], "right")
            if cell:
                figure.text(x / WIDTH, y / HEIGHT, cell, ha=side, va="top", fontsize=size, weight=weight)
        y -= _STEP + _MORE * cells[0].count("\n")
        strong = number in (0, len(lines) - 2)
        rules.append((y + 0.022, look.QUIET if strong else look.FAINT))
    ends = [[(_LEFT / WIDTH, rule / HEIGHT), (_RIGHT / WIDTH, rule / HEIGHT)] for rule, _ in rules[:-1]]
    figure.add_artist(
        LineCollection(ends, colors=[colour for _, colour in rules[:-1]], linewidths=0.5, transform=figure.transFigure)
    )
    hidden = len(table) - len(shown)
    if hidden:
        words = f"{hidden} more rows are in the tables of the study."
        figure.text(_LEFT / WIDTH, y / HEIGHT, words, fontsize=look.SMALL_SIZE, color=look.QUIET, va="top")
        y -= _STEP
    return y


def _columns(lines: list[list[str]]) -> tuple[float, list[float], float]:
    """Size of type, right ends of the columns and room of the first one, inches, so that the table fits the page."""
    across = _RIGHT - _LEFT
    for size in (_CELL, _CELL - 1.0, _CELL - 2.0):
        widths = [max(width(line[n], size, weight="bold") for line in lines) for n in range(len(lines[0]))]
        others = sum(widths[1:]) + _APART * (len(widths) - 1)
        if others <= 0.7 * across:
            break
    spare = max(0.0, across - widths[0] - others) / max(1, len(widths) - 1)
    rights = [0.0] * len(widths)
    right = _RIGHT
    for column in range(len(widths) - 1, 0, -1):
        rights[column] = right
        right -= widths[column] + _APART + spare
    return size, rights, max(1.0, right - _LEFT + spare)


def _globe(axes: Axes, lat: float, lon: float) -> None:
    """The half of the Earth round a site, the site marked in its middle."""
    axes.set_aspect("equal")
    axes.set_axis_off()
    limit = 1.01 * _RADIUS
    axes.set_xlim(-limit, limit)
    axes.set_ylim(-limit, limit)
    axes.add_artist(Circle((0.0, 0.0), _RADIUS, facecolor=look.SHELF, edgecolor=look.QUIET, linewidth=0.5))
    land = _land_from(lat, lon)
    axes.add_artist(PathPatch(land, facecolor=look.LAND, edgecolor=look.QUIET, linewidth=0.25, gid="land"))
    axes.plot([0.0], [0.0], marker="o", markersize=5.0, color="#a8442f", markeredgecolor=look.PAPER, gid="site")


def _land_from(lat: float, lon: float) -> Path:
    """Outlines of the land seen from above a place, metres from it."""
    projection = ccrs.Orthographic(lon, lat)
    shapes = [projection.project_geometry(piece, ccrs.PlateCarree()) for piece in _coarse_land()]
    polygons = [part for part in shapely.get_parts(shapes) if not part.is_empty]
    rings = [ring for polygon in shapely.get_parts(polygons) for ring in (polygon.exterior, *polygon.interiors)]
    return Path.make_compound_path(*(Path(np.asarray(ring.coords)[:, :2], closed=True) for ring in rings))


@cache
def _coarse_land() -> list[shapely.Geometry]:
    pieces = (
        open_bundled("land_110m.geojson.gz").geometry.buffer(0.0).simplify(0.7)
    )  # degrees: a dot of the small globe
    return [piece for piece in pieces if not piece.is_empty and piece.area > 3.0]
