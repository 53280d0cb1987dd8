"""Names beside markers, none over another: a place is tried round the marker, then farther off with a thin line to it."""

from collections.abc import Sequence
from itertools import product
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.patheffects import withStroke
from matplotlib.transforms import Bbox
from numpy.typing import NDArray

from massfingerprint.figures.look import INK, PAPER, QUIET, SMALL_SIZE

_TURNS = (0, 180, 45, -45, 135, -135, 90, -90)  # degrees round the marker, best first
_STEPS = (4.5, 10.0, 17.0, 26.0, 38.0)  # points from it
_LINE_FROM = 9.0  # points beyond which a line is drawn
MARKER = 3.6  # points
MOST = 25


def place_labels(axes: Axes, names: Sequence[str], points: NDArray[np.float64], *, taken: Sequence[Bbox] = ()) -> int:
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
    int
        How many found no place; their markers are drawn all the same.
    """
    look: dict[str, Any] = {"markersize": MARKER, "color": INK, "markeredgecolor": PAPER, "markeredgewidth": 0.6}
    axes.plot(*points.T, linestyle="none", marker="o", zorder=6, gid="sites", **look)
    scale = axes.get_figure(root=True).dpi / 72.0  # type: ignore[union-attr]
    half = 0.5 * MARKER * scale
    boxes = [*taken, *(Bbox([p - half, p + half]) for p in axes.transData.transform(points))]
    return sum(
        not _placed(axes, name, (float(x), float(y)), boxes) for name, (x, y) in zip(names[:MOST], points, strict=False)
    ) + max(0, len(names) - MOST)


def _placed(axes: Axes, name: str, point: tuple[float, float], boxes: list[Bbox]) -> bool:
    """Write a name at the first free place; its box joins the others."""
    halo = [withStroke(linewidth=1.8, foreground=PAPER)]
    text = axes.annotate(
        name,
        point,
        (0.0, 0.0),
        textcoords="offset points",
        fontsize=SMALL_SIZE,
        zorder=7,
        path_effects=halo,
        gid="site name",
    )
    for step, turn in product(_STEPS, _TURNS):
        dx, dy = np.cos(np.deg2rad(turn)), np.sin(np.deg2rad(turn))
        text.set_position((step * dx, step * dy))
        text.set_horizontalalignment("left" if dx > 0.3 else "right" if dx < -0.3 else "center")
        text.set_verticalalignment("bottom" if dy > 0.3 else "top" if dy < -0.3 else "center")
        box = text.get_window_extent().padded(1.0)
        frame = axes.bbox
        inside = frame.x0 <= box.x0 and box.x1 <= frame.x1 and frame.y0 <= box.y0 and box.y1 <= frame.y1
        if inside and not any(box.overlaps(other) for other in boxes):
            boxes.append(box)
            if step > _LINE_FROM:
                line = {"arrowstyle": "-", "linewidth": 0.4, "color": QUIET, "shrinkA": 0.0, "shrinkB": 1.0}
                axes.annotate("", point, text.get_position(), textcoords="offset points", arrowprops=line, zorder=5)
            return True
    text.remove()
    return False
