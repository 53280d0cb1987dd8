"""Maps of a pattern as a multiple of the global mean: the world, and a pole where an ice sheet is the source."""

import textwrap
from collections.abc import Sequence
from functools import cache
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.cm import ScalarMappable
from matplotlib.colors import BoundaryNorm
from matplotlib.figure import Figure
from matplotlib.patches import Patch, PathPatch
from matplotlib.patheffects import withStroke
from matplotlib.transforms import Bbox
from numpy.typing import NDArray

from massfingerprint.arguments import one_of
from massfingerprint.bundled import open_bundled
from massfingerprint.errors import GridError, InputError
from massfingerprint.figures import _projected, look
from massfingerprint.figures._labels import place_labels

Array = NDArray[np.float64]
STEPS = np.round(np.arange(0.4, 1.65, 0.1), 1)  # of the colours, as far below 1 as above
CONTOURS = (0.0, 0.5, 0.8, 1.0, 1.1, 1.2, 1.3)
SCALE = "relative sea level as a multiple of the global mean [1]"
KERNEL_SCALE = "there, for ice lost here, over the global mean [1]"
FALLS = "hatched: relative sea level falls"
_ROWS = {"world": 180, "north": 360, "south": 360}  # rings of cells drawn, pole to pole
_WORLD, _POLAR = 3.45, 1.75  # inches: height of the world, across a polar panel
_ABOVE_FOOT = (0.9, 1.7, 1.9)  # inches between small print and world, with so many polar panels
_PALE = "#e3cdb5"  # of the hatching, which always lies on the darkest ochre
_TITLE_WIDTH, _TITLE_LINE = 80, 0.17  # characters, inches
_SEA = 0.5  # share of sea above which a cell gets contours


def pattern_map(
    ratio: xr.DataArray,
    *,
    title: str,
    caption: str,
    sites: pd.DataFrame | None = None,
    poles: Sequence[str] = (),
    everywhere: bool = False,
) -> Figure:
    """Draw relative sea level divided by the global mean.

    Parameters
    ----------
    ratio : DataArray (lat, lon)
        Dimensionless, on a regular global cell-centred grid, either longitude convention, either orientation.
    title, caption : str
        Head and small print.
    sites : DataFrame, optional
        Columns site, lat, lon: marked and named.
    poles : sequence of str
        ``north``, ``south``: panels of the polar cap below the world.
    everywhere : bool
        Show land too, as outlines: the field is what a loss here does at one site, not what it does here.

    Returns
    -------
    Figure
        Page width; draw and save it within ``look.style()``.

    Raises
    ------
    GridError, InputError
        If the field is not global and regular, a column or a pole is not known.
    """
    shown = [pole for pole in ("north", "south") if pole in _poles(poles)]
    values, marked = _ordered(ratio), _sites(sites)
    head = textwrap.wrap(title, _TITLE_WIDTH) or [""]
    foot = look.caption_height(caption) + 0.12
    low = foot + _ABOVE_FOOT[len(shown)]
    height = low + _WORLD + 0.23 + _TITLE_LINE * len(head)
    figure = look.new_figure(look.PAGE, height)
    figure.text(0.02, 1.0 - 0.12 / height, "\n".join(head), fontsize=look.TITLE_SIZE, va="top", weight="bold")
    world = figure.add_axes((0.01, low / height, 0.98, _WORLD / height))
    panels = {"world": world}
    for number, pole in enumerate(reversed(shown)):
        left = 1.0 - (_POLAR * (number + 1) + 0.1) / look.PAGE
        panels[pole] = figure.add_axes((left, foot / height, _POLAR / look.PAGE, _POLAR / height))
    for name, axes in panels.items():
        _frame(axes, name)
    names = _name_sites(world, marked, figure.axes[1:])  # sites stand on the world map alone
    clear = {name: names if axes is world else [] for name, axes in panels.items()}
    falls = [_fill(axes, name, values, clear[name], everywhere) for name, axes in panels.items()]
    words = KERNEL_SCALE if everywhere else SCALE
    _colour_bar(figure, foot, (0.62, 0.62, 0.42)[len(shown)], FALLS if any(falls) else "", words)
    look.caption(figure, caption)
    return figure


def _poles(poles: Sequence[str]) -> Sequence[str]:
    if isinstance(poles, str):
        raise InputError(f"poles: must be a list of poles, got the text {poles!r}. Write ({poles!r},).")
    for pole in poles:
        one_of(pole, ("north", "south"), argument="poles", kind="pole")
    return poles


def _ordered(ratio: xr.DataArray) -> Array:
    """Values (nlat, nlon) from south to north and from longitude 0 eastward."""
    if not isinstance(ratio, xr.DataArray) or set(ratio.dims) != {"lat", "lon"}:
        found = ratio.dims if isinstance(ratio, xr.DataArray) else type(ratio).__name__
        raise GridError(f"ratio: must be a DataArray (lat, lon), got {found}. Select one field first.")
    field = ratio.assign_coords(lon=ratio["lon"] % 360.0).sortby(["lat", "lon"]).transpose("lat", "lon")
    steps = np.diff(field["lon"].values), np.diff(field["lat"].values)
    even = all(step.size and np.allclose(step, step[0], rtol=1e-4) for step in steps)
    if not even or abs(field["lat"].values[0] + 90.0 - steps[1][0] / 2.0) > 1e-3:
        raise GridError("ratio: must lie on a regular global cell-centred grid. Use solve_fingerprints' own grid.")
    start = field["lon"].values[0]
    shift = round((start - steps[0][0] / 2.0) / steps[0][0])
    values = np.roll(np.asarray(field.values, dtype=np.float64), shift, axis=1)
    if not np.isfinite(values).all():
        raise GridError("ratio: holds values that are not finite. Fields are defined everywhere, land included.")
    return values


def _sites(sites: pd.DataFrame | None) -> pd.DataFrame:
    if sites is None:
        return pd.DataFrame({"site": [], "lat": [], "lon": []})
    missing = [name for name in ("site", "lat", "lon") if name not in sites]
    if missing:
        raise InputError(f"sites: lacks the column {missing[0]}. Name the columns site, lat and lon.")
    return sites


def _reduced(values: Array, rows: int) -> Array:
    """Block means on about so many rings."""
    factor = max(1, values.shape[0] // rows)
    while values.shape[0] % factor or values.shape[1] % factor:
        factor -= 1
    shape = (values.shape[0] // factor, factor, values.shape[1] // factor, factor)
    return values.reshape(shape).mean(axis=(1, 3))


def _cells(name: str, values: Array) -> Array:
    """Cells of a view, from its south to its north and from its first longitude eastward."""
    view, cells = _projected.VIEWS[name], _reduced(values, _ROWS[name])
    step = 180.0 / cells.shape[0]
    rows = slice(round((view.south + 90.0) / step), round((view.north + 90.0) / step))
    return np.roll(cells[rows], -round(view.first_longitude / (360.0 / cells.shape[1])), axis=1)


def _frame(axes: Axes, name: str) -> None:
    """Limits of a view."""
    axes.set_aspect("equal")
    axes.set_axis_off()
    x, y = np.asarray(_projected.boundary(name).vertices).T
    axes.set_xlim(*_padded(x))
    axes.set_ylim(*_padded(y))
    axes.apply_aspect()  # places in pixels are asked for before anything is drawn


def _fill(axes: Axes, name: str, values: Array, names: Sequence[Bbox], everywhere: bool) -> bool:
    """Field, hatching, contours clear of the names, land, outline; returns whether the sea falls in this view."""
    cells = _cells(name, values)
    wet = (_like(_cells(name, _sea()), cells.shape) >= _SEA) | everywhere
    edge = PathPatch(_projected.boundary(name), facecolor="none", edgecolor=look.QUIET, linewidth=0.6, zorder=5)
    axes.add_artist(edge)  # add_patch would measure it, slowly
    nodes, field = _projected.nodes(name, *cells.shape), _projected.on_nodes(cells)
    fill = axes.contourf(*nodes, field, levels=STEPS, cmap=look.RATIO_COLOURS, norm=_norm(), extend="both", zorder=1)
    fill.set(edgecolor="face", linewidth=0.2, rasterized=True)
    falls = bool((cells[wet] < 0.0).any())
    if falls:
        hatch = axes.contourf(*nodes, field, levels=[-1e9, 0.0], colors="none", hatches=["////"], zorder=2)
        hatch.set(edgecolor=_PALE, linewidth=0.0, gid="falls")
        hatch.set_clip_path(edge)
    dry = _projected.on_nodes(wet.astype(float)) < _SEA
    _contours(axes, name, np.ma.masked_where(dry, _projected.on_nodes(_calmed(cells))), names)
    face, line = ("none", 0.45) if everywhere else (look.LAND, 0.25)
    ground = PathPatch(_projected.land(name), facecolor=face, edgecolor=look.QUIET, linewidth=line, zorder=4)
    axes.add_artist(ground)
    for artist in (fill, ground):
        artist.set_clip_path(edge)
    return falls


def _calmed(cells: Array) -> Array:
    """Means over neighbours weighted 1 2 1: a line does not curl where the field ripples with its highest degrees."""
    wide = np.pad(np.pad(cells, ((1, 1), (0, 0)), mode="edge"), ((0, 0), (1, 1)), mode="wrap")
    rows = 0.25 * (wide[:-2] + wide[2:]) + 0.5 * wide[1:-1]
    return np.asarray(0.25 * (rows[:, :-2] + rows[:, 2:]) + 0.5 * rows[:, 1:-1])


def _name_sites(axes: Axes, sites: pd.DataFrame, beside: Sequence[Axes]) -> list[Bbox]:
    """Mark and name sites, clear of other panels and of the words that count the rest; boxes of the names and markers."""
    if not len(sites):
        return []
    points = np.column_stack(_projected.places("world", sites["lon"].to_numpy(), sites["lat"].to_numpy()))
    rest = axes.text(0.0, 0.0, "(+000 more sites)", transform=axes.transAxes, fontsize=look.SMALL_SIZE)
    taken = [rest.get_window_extent(), *(panel.bbox for panel in beside)]
    names = place_labels(axes, [str(site) for site in sites["site"]], points, taken=taken)
    rest.set_text(f"(+{len(sites) - len(names)} more sites)")
    rest.set_visible(len(names) < len(sites))
    return [*names, *(Bbox([spot, spot]).padded(3.0) for spot in axes.transData.transform(points))]


def _padded(values: Array) -> tuple[float, float]:
    room = 0.004 * (values.max() - values.min())
    return float(values.min() - room), float(values.max() + room)


def _contours(axes: Axes, name: str, wet: "np.ma.MaskedArray[Any, Any]", names: Sequence[Bbox]) -> None:
    """Lines at sea; a label stays if it is inside the view and free, and off land where its level has one that is."""
    if wet.count() == 0 or wet.min() == wet.max():
        return
    nodes = _projected.nodes(name, wet.shape[0] - 2, wet.shape[1] - 2)
    lines = axes.contour(*nodes, wet, levels=list(CONTOURS), colors=look.INK, linewidths=0.5, zorder=3)
    texts = axes.clabel(lines, fmt="%.1f", fontsize=look.SMALL_SIZE, inline=False) or []
    outline, land = (axes.transData.transform_path(shape(name)) for shape in (_projected.boundary, _projected.land))
    boxes = {text: text.get_window_extent().padded(2.0) for text in texts}
    on_land = {text: int(land.contains_points(box.corners()).sum()) for text, box in boxes.items()}
    kept, named = list(names), set()
    for text in sorted(texts, key=lambda one: on_land[one]):  # those at sea choose first
        text.set_path_effects([withStroke(linewidth=2.4, foreground=look.PAPER)])
        inside = outline.contains_points(boxes[text].corners()).all()
        idle = on_land[text] > 1 and text.get_text() in named
        if inside and not idle and not any(boxes[text].overlaps(other) for other in kept):
            kept.append(boxes[text])
            named.add(text.get_text())
        else:
            text.remove()


def _like(cells: Array, shape: tuple[int, ...]) -> Array:
    """Cells of the nearest place on a grid of another size."""
    rows, columns = ((np.arange(n) + 0.5) * have / n for n, have in zip(shape, cells.shape, strict=True))
    return cells[np.ix_(rows.astype(int), columns.astype(int))]


def _norm() -> BoundaryNorm:
    return BoundaryNorm(STEPS, look.RATIO_COLOURS.N, extend="both")


@cache
def _sea() -> Array:
    """Ocean fraction (720, 1440) from south to north and from longitude 0 eastward."""
    return _ordered(open_bundled("ocean_fraction_0.25deg.nc")["ocean_fraction"])


def _colour_bar(figure: Figure, foot: float, width: float, falls: str, words: str) -> None:
    height = float(figure.get_figheight())
    bar = figure.add_axes((0.04, (foot + 0.27) / height, width, 0.11 / height))
    shown = figure.colorbar(
        ScalarMappable(_norm(), look.RATIO_COLOURS), cax=bar, orientation="horizontal", extend="both"
    )
    shown.set_ticks([0.4, 0.6, 0.8, 1.0, 1.2, 1.4, 1.6])
    shown.outline.set_linewidth(0.4)
    bar.tick_params(length=2.0, labelsize=look.TEXT_SIZE)
    bar.set_title(words, fontsize=look.TEXT_SIZE, loc="left", pad=3.0)
    if falls:
        patch = Patch(facecolor=look.RATIO_COLOURS(0.0), edgecolor=_PALE, hatch="//////", linewidth=0.0, label=falls)
        figure.legend(handles=[patch], loc="lower left", bbox_to_anchor=(0.03, (foot + 0.65) / height), fontsize=look.TEXT_SIZE,
                      borderaxespad=0.0, handlelength=1.6)  # fmt: skip
