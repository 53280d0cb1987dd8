"""Names beside markers: none over another, none nearer to a stranger's marker; a name farther off has a thin line to its own.

Every name has a hundred possible places. They are given out greedily in several orders, and the order that costs least is kept.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.patheffects import withStroke
from matplotlib.text import Annotation
from matplotlib.transforms import Bbox
from numpy.typing import NDArray

from massfingerprint.figures.look import INK, PAPER, SMALL_SIZE

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
MARKER = 3.6  # points
MOST = 25
_STEPS = (4.5, 10.0, 17.0, 26.0, 38.0, 52.0, 70.0, 95.0)  # points from the marker
_TURNS = (0.0, 180.0, 45.0, -45.0, 135.0, -135.0, 90.0, -90.0, 22.5, -22.5, 157.5, -157.5, 67.5, -67.5, 112.5, -112.5)
_STEP, _TURN = (grid.ravel() for grid in np.meshgrid(_STEPS, np.deg2rad(_TURNS), indexing="ij"))
_WAY = np.column_stack([np.cos(_TURN), np.sin(_TURN)])
_SIDE = np.where(_WAY > 0.3, 0.0, np.where(_WAY < -0.3, -1.0, -0.5))  # which end of the name is at the place
_FAR = 9.0  # points beyond which a line is drawn
_STRANGER = 60.0  # points farther that a name may go rather than be nearer to another marker
_AGAIN = 6  # attempts from one order
_NOWHERE = 1e4  # points that no place at all is worth


@dataclass(frozen=True)
class _Places:
    """Possible places of one name, in pixels: boxes (n, 4), whether lined (n), ends of lines (n, 2), cost (n), inf: not free."""

    spot: Array
    boxes: Array
    lined: Flags
    ends: Array
    cost: Array


def place_labels(axes: Axes, names: Sequence[str], points: Array, *, taken: Sequence[Bbox] = ()) -> list[Bbox]:
    """Mark points and name them.

    Parameters
    ----------
    axes : Axes
        Of a figure that can be measured; names stay inside it.
    names : sequence of str
        In order of importance; the first 25 are named.
    points : (n, 2) array
        Data coordinates.
    taken : sequence of Bbox
        Display boxes that must stay free.

    Returns
    -------
    list of Bbox
        Display boxes of the names that found a place; every marker is drawn.
    """
    look: dict[str, Any] = {"markersize": MARKER, "color": INK, "markeredgecolor": PAPER, "markeredgewidth": 0.6}
    axes.plot(*points.T, linestyle="none", marker="o", zorder=6, gid="sites", **look)
    dot = float(axes.figure.dpi) / 72.0  # pixels a point
    spots = axes.transData.transform(points)
    half = 0.5 * MARKER * dot
    busy = np.vstack([np.column_stack([spots - half, spots + half]), *(box.extents for box in taken)])
    texts = [_text(axes, name, point) for name, point in zip(names[:MOST], points, strict=False)]
    choices = [_places(text, number, spots, busy, dot) for number, text in enumerate(texts)]
    best = min(_attempts(choices, spots[:MOST]), key=lambda found: _cost(choices, found))
    for number, text in enumerate(texts):
        if number in best:
            _settle(text, choices[number], best[number], dot)
        else:
            text.remove()
    return [Bbox.from_extents(*choices[number].boxes[place]) for number, place in best.items()]


def _text(axes: Axes, name: str, point: Array) -> Annotation:
    halo = [withStroke(linewidth=1.8, foreground=PAPER)]
    more: dict[str, Any] = {"fontsize": SMALL_SIZE, "zorder": 7, "path_effects": halo, "gid": "site name"}
    return axes.annotate(name, (float(point[0]), float(point[1])), (0.0, 0.0), textcoords="offset points", **more)


def _places(text: Annotation, number: int, spots: Array, busy: Array, dot: float) -> _Places:
    """Where a name may stand as far as markers and what is taken go."""
    spot, size = spots[number], np.asarray(text.get_window_extent().size) + 2.0 * dot
    low = spot + dot * _STEP[:, None] * _WAY + _SIDE * size
    boxes = np.hstack([low, low + size])
    gap = np.maximum(boxes[:, None, :2] - spots, spots - boxes[:, None, 2:]).clip(min=0.0)
    away = np.hypot(gap[..., 0], gap[..., 1])
    stranger = (np.delete(away, number, axis=1) < away[:, [number]] + dot).any(axis=1)
    lined = (_STEP > _FAR) | stranger
    ends = np.where(lined[:, None], np.clip(spot, boxes[:, :2], boxes[:, 2:]), spot)
    frame = text.axes.bbox.extents  # type: ignore[union-attr]
    free = (boxes[:, :2] >= frame[:2]).all(axis=1) & (boxes[:, 2:] <= frame[2:]).all(axis=1)
    # a line cannot keep clear of markers that its own one overlaps
    apart = np.delete(busy, np.flatnonzero(np.hypot(*(spots - spot).T) < MARKER * dot), axis=0)
    free &= ~(_meet(boxes, busy).any(axis=1) | _cut(spot[None], ends, apart).any(axis=1))
    return _Places(spot, boxes, lined, ends, np.where(free, _STEP + _STRANGER * stranger, np.inf))


def _attempts(choices: Sequence[_Places], spots: Array) -> Iterator[dict[int, int]]:
    """Places given out in each order, and again with those first that had found none."""
    for order in _orders(spots):
        for _ in range(_AGAIN):
            found = _given_out(choices, order)
            yield found
            missed = np.array([number not in found for number in order])
            if not missed.any():
                break
            order = np.concatenate([order[missed], order[~missed]])  # noqa: PLW2901


def _orders(spots: Array) -> Iterator[NDArray[np.intp]]:
    """As given; those with near neighbours first; from each side of the map."""
    apart = np.hypot(*(spots[:, None] - spots[None]).transpose(2, 0, 1)) + np.diag(np.full(len(spots), np.inf))
    yield np.arange(len(spots))
    for by in (apart.min(axis=1, initial=np.inf), spots[:, 0], -spots[:, 0], spots[:, 1], -spots[:, 1]):
        yield np.argsort(np.round(by, 3), kind="stable")


def _given_out(choices: Sequence[_Places], order: NDArray[np.intp]) -> dict[int, int]:
    """Place of each name that finds one, when they choose in an order."""
    found: dict[int, int] = {}
    for number in map(int, order):
        mine = choices[number]
        cost = mine.cost.copy()
        if found:
            there = [(choices[other], place) for other, place in found.items()]
            boxes = np.array([one.boxes[place] for one, place in there])
            starts, ends = np.array([one.spot for one, _ in there]), np.array([one.ends[place] for one, place in there])
            hit = _meet(mine.boxes, boxes) | _cut(mine.spot[None], mine.ends, boxes)
            hit |= _cut(starts, ends, mine.boxes).T | _cross(mine.spot, mine.ends, starts, ends)
            cost[hit.any(axis=1)] = np.inf
        best = int(np.argmin(cost))
        if np.isfinite(cost[best]):
            found[number] = best
    return found


def _cost(choices: Sequence[_Places], found: dict[int, int]) -> float:
    missed = len(choices) - len(found)
    return _NOWHERE * missed + float(sum(choices[number].cost[place] for number, place in found.items()))


def _meet(boxes: Array, others: Array) -> Flags:
    """Whether boxes (n, 4) and others (m, 4) share anything, (n, m)."""
    return np.asarray(((boxes[:, None, :2] < others[:, 2:]) & (boxes[:, None, 2:] > others[:, :2])).all(axis=2))


def _cut(starts: Array, ends: Array, boxes: Array) -> Flags:
    """Whether lines from starts (n or 1, 2) to ends (n, 2) run through boxes (m, 4), (n, m); a line without length does not."""
    way = (ends - starts)[:, None]
    with np.errstate(divide="ignore", invalid="ignore"):
        one, two = (boxes[:, :2] - starts[:, None]) / way, (boxes[:, 2:] - starts[:, None]) / way
    enter, leave = np.fmin(one, two).max(axis=2), np.fmax(one, two).min(axis=2)
    return (np.maximum(enter, 0.0) < np.minimum(leave, 1.0)) & way.any(axis=2)


def _cross(start: Array, ends: Array, others: Array, other_ends: Array) -> Flags:
    """Whether lines from a start (2) to ends (n, 2) cross lines from others (m, 2) to their ends (m, 2), (n, m)."""

    def turn(way: Array, of: Array) -> Array:
        return np.asarray(way[..., 0] * of[..., 1] - way[..., 1] * of[..., 0])

    way, line = (ends - start)[:, None], other_ends - others
    sides = turn(line, start - others) * turn(line, ends[:, None] - others)
    return (sides < 0.0) & (turn(way, others - start) * turn(way, other_ends - start) < 0.0)


def _settle(text: Annotation, places: _Places, place: int, dot: float) -> None:
    """Move a name to a place; far from its marker with a thin line that a pale rim shows on dark colours."""
    x, y = _STEP[place] * _WAY[place]
    text.set_position((float(x), float(y)))
    across, up = _SIDE[place]
    text.set_horizontalalignment("left" if across == 0.0 else "right" if across == -1.0 else "center")
    text.set_verticalalignment("bottom" if up == 0.0 else "top" if up == -1.0 else "center")
    if places.lined[place]:
        rim = [withStroke(linewidth=1.6, foreground=PAPER)]
        line = {"arrowstyle": "-", "linewidth": 0.5, "color": INK, "shrinkA": 0.0, "shrinkB": 0.0, "path_effects": rim}
        x, y = (places.ends[place] - places.spot) / dot
        words: dict[str, Any] = {"textcoords": "offset points", "arrowprops": line, "zorder": 5.5, "gid": "site line"}
        text.axes.annotate("", text.xy, (float(x), float(y)), **words)  # type: ignore[union-attr]
