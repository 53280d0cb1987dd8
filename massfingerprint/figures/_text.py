"""How wide words are on paper, and how they are broken to fit: known before anything is drawn."""

from functools import cache

from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties, findfont, get_font

from massfingerprint.figures import look

POINTS = 72.0  # an inch
_REFERENCE = 100.0  # points at which letters are measured
_SPARE = 1.07  # screens round letters to whole dots, and letters of a word are moved together or apart
_LINE = 1.25  # of the size of type: from line to line
_EDGE = 0.1  # inches between head and edge


def width(text: str, size: float, *, weight: str = "normal") -> float:
    """Width in inches of one line in the type of the figures."""
    return _SPARE * size / _REFERENCE / POINTS * sum(_advance(letter, weight) for letter in text)


@cache
def _advance(letter: str, weight: str) -> float:
    """Points from a letter to the next."""
    font = get_font(findfont(FontProperties(family="DejaVu Sans", weight=weight)))
    font.set_size(_REFERENCE, POINTS)
    return float(font.load_char(ord(letter)).linearHoriAdvance) / 65536.0


def wrapped(text: str, room: float, size: float, *, lines: int = 2, weight: str = "normal") -> str:
    """Text broken between words, or within one that is too long, to fit a width in inches; what remains ends in an ellipsis."""
    done, line = [], ""
    for word in text.split():
        rest = word
        longer = f"{line} {rest}" if line else rest
        if line and width(longer, size, weight=weight) > room:
            done.append(line)
            longer = rest
        while width(longer, size, weight=weight) > room and len(longer) > 1:
            count = _fitting(longer, room, size, weight)
            done.append(longer[:count])
            longer = longer[count:]
        line = longer
    done.append(line)
    if len(done) > lines:
        last = done[lines - 1]
        while last and width(f"{last}…", size, weight=weight) > room:
            last = last[:-1]
        done = [*done[: lines - 1], f"{last}…"]
    return "\n".join(done)


def _fitting(text: str, room: float, size: float, weight: str) -> int:
    """How many letters fit, at least one."""
    count = len(text)
    while count > 1 and width(text[:count], size, weight=weight) > room:
        count -= 1
    return count


def size_inches(axes: Axes) -> tuple[float, float]:
    """Width and height of axes on paper."""
    box = axes.get_window_extent().transformed(axes.get_figure(root=True).dpi_scale_trans.inverted())  # type: ignore[union-attr]
    return float(box.width), float(box.height)


def page(body: float, *, title: str, caption: str) -> tuple[Figure, float]:
    """Figure of page width round a body of so many inches, with its title and small print; also where the body begins, inches."""
    head = wrapped(title, 0.96 * look.PAGE, look.TITLE_SIZE, lines=3, weight="bold")
    low = foot_height(caption, look.PAGE)
    high = low + body + 2.0 * _EDGE + _lines(head, look.TITLE_SIZE)
    figure = look.new_figure(look.PAGE, high)
    figure.text(0.02, 1.0 - _EDGE / high, head, fontsize=look.TITLE_SIZE, va="top", weight="bold")
    look.caption(figure, caption)
    return figure, low


def foot_height(caption: str, across: float, *, left: float = 0.02) -> float:
    """Inches that small print takes at the foot of a figure of a width."""
    scratch = look.new_figure(across, 1.0)
    look.caption(scratch, caption, left=left)
    return _EDGE + _lines(scratch.texts[0].get_text(), look.SMALL_SIZE)


def _lines(text: str, size: float) -> float:
    return _LINE * size / POINTS * (text.count("\n") + 1)
