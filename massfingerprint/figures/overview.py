"""One sheet per site: the answer in a sentence, where it is, the table, the stacked curve, the bars."""

import textwrap
from dataclasses import dataclass, field
from functools import cache

import cartopy.crs as ccrs
import numpy as np
import pandas as pd
import shapely
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Circle, PathPatch
from matplotlib.path import Path

from massfingerprint.bundled import open_bundled
from massfingerprint.errors import InputError
from massfingerprint.figures import look
from massfingerprint.figures.bars import draw_bars
from massfingerprint.figures.curves import draw_contributions

WIDTH, HEIGHT = 8.27, 11.69  # A4, inches
_MOST_ROWS = 20
_STEP = 0.165  # inches a row


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
        Contents.
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
        If the place is none, or the table is empty.
    """
    if not (-90.0 <= sheet.lat <= 90.0 and -180.0 <= sheet.lon <= 360.0) or sheet.table.empty:
        raise InputError(f"sheet: {sheet.site!r} needs a place in degrees and a table with rows.")
    figure = look.new_figure(WIDTH, HEIGHT)
    figure.text(0.06, 0.968, title, fontsize=look.TEXT_SIZE, color=look.QUIET, va="top")
    figure.text(0.06, 0.95, sheet.site, fontsize=18.0, weight="bold", va="top")
    where = f"{abs(sheet.lat):.2f} {'N' if sheet.lat >= 0 else 'S'}, {_east(sheet.lon)}"
    figure.text(0.06, 0.918, where, fontsize=look.TEXT_SIZE, color=look.QUIET, va="top")
    figure.text(0.06, 0.893, "\n".join(textwrap.wrap(sheet.sentence, 72)), fontsize=11.0, va="top", linespacing=1.35)
    _globe(figure.add_axes((0.785, 0.832, 0.16, 0.16 * WIDTH / HEIGHT)), sheet.lat, sheet.lon)
    rows = min(len(sheet.table), _MOST_ROWS)
    below = 0.805 - (rows + 1.6) * _STEP / HEIGHT
    _table(figure, sheet.table, 0.805)
    middle = figure.add_axes((0.1, below - 0.225, 0.6, 0.205))
    handles = draw_contributions(middle, sheet.parts, sheet.total, interval=sheet.interval, since=sheet.since)
    figure.legend(handles=handles, loc="upper left", bbox_to_anchor=(0.715, below - 0.012), fontsize=look.SMALL_SIZE,
                  borderaxespad=0.0, handlelength=1.2, labelspacing=0.3)  # fmt: skip
    lower = figure.add_axes((0.3, 0.088, 0.64, below - 0.225 - 0.06 - 0.088))
    draw_bars(lower, sheet.bars, mean=sheet.mean)
    look.caption(figure, caption, left=0.06)
    return figure


def _east(longitude: float) -> str:
    turned = (longitude + 180.0) % 360.0 - 180.0
    return f"{abs(turned):.2f} {'E' if turned >= 0 else 'W'}"


def _table(figure: Figure, table: pd.DataFrame, top: float) -> None:
    """Rows of text under thin rules; the first column to the left, the others to the right; the last row stands out."""
    step = _STEP / HEIGHT
    widths = np.array(
        [max(len(str(name)), *(len(str(cell)) for cell in table[name].tolist())) + 2.0 for name in table.columns]
    )
    rights = 0.06 + 0.88 * np.cumsum(widths) / widths.sum()
    shown = pd.concat([table.iloc[: _MOST_ROWS - 1], table.iloc[-1:]]) if len(table) > _MOST_ROWS else table
    lines = [
        [str(name) for name in table.columns],
        *([str(cell) for cell in row] for row in shown.itertuples(index=False)),
    ]
    for number, cells in enumerate(lines):
        y, strong = top - step * number, number in (0, len(lines) - 1)
        for column, cell in enumerate(cells):
            place = (0.06, "left") if column == 0 else (rights[column], "right")
            figure.text(
                place[0],
                y,
                cell,
                ha=place[1],
                va="top",
                fontsize=look.SMALL_SIZE + 0.5,
                weight="bold" if strong else "normal",
            )
        if number in (0, len(lines) - 2):
            rule = y - 0.82 * step
            figure.add_artist(_rule(rule))
    hidden = len(table) - len(shown)
    if hidden:
        words = f"{hidden} smaller rows are in the tables of the study."
        figure.text(0.06, top - step * len(lines), words, fontsize=look.SMALL_SIZE, color=look.QUIET, va="top")


def _rule(y: float) -> PathPatch:
    return PathPatch(Path([(0.06, y), (0.94, y)]), edgecolor=look.QUIET, linewidth=0.5, facecolor="none")


def _globe(axes: Axes, lat: float, lon: float) -> None:
    """The half of the Earth round a site, the site marked in its middle."""
    axes.set_aspect("equal")
    axes.set_axis_off()
    limit = 6.4e6
    axes.set_xlim(-limit, limit)
    axes.set_ylim(-limit, limit)
    axes.add_artist(Circle((0.0, 0.0), 6.371e6, facecolor=look.SHELF, edgecolor=look.QUIET, linewidth=0.5))
    projection = ccrs.Orthographic(lon, lat)
    shapes = [projection.project_geometry(piece, ccrs.PlateCarree()) for piece in _coarse_land()]
    for polygon in (part for shape in shapes for part in shapely.get_parts(shape) if not part.is_empty):
        outline = Path(np.asarray(polygon.exterior.coords)[:, :2], closed=True)
        axes.add_artist(PathPatch(outline, facecolor=look.LAND, edgecolor=look.QUIET, linewidth=0.25))
    axes.plot([0.0], [0.0], marker="o", markersize=5.0, color="#a8442f", markeredgecolor=look.PAPER, gid="site")


@cache
def _coarse_land() -> list[shapely.Geometry]:
    pieces = open_bundled("land_110m.geojson.gz").geometry.buffer(0.0).simplify(0.5)
    return [piece for piece in pieces if not piece.is_empty and piece.area > 2.0]
