"""What a figure must be, whatever it shows: no text over another, nothing outside the page."""

from matplotlib.text import Text

ROOM = 1.0  # pixels that boxes may share: fonts are measured in whole ones


def texts(figure):
    """Visible, non-empty texts of a figure with their boxes, after drawing it."""
    figure.canvas.draw()
    renderer = figure.canvas.get_renderer()
    beyond = _not_drawn(figure)
    found = [t for t in figure.findobj(Text) if t.get_visible() and t.get_text().strip() and t not in beyond]
    boxes = [(t.get_text(), t.get_window_extent(renderer)) for t in found]
    return [(words, box) for words, box in boxes if box.width > 0.0 and box.height > 0.0]


def _not_drawn(figure):
    """Labels of ticks beyond the ends of an axis: they are there, but not drawn."""
    out = set()
    for axis in (one for axes in figure.axes for one in (axes.xaxis, axes.yaxis)):
        low, high = sorted(axis.get_view_interval())
        room = 1e-9 * (high - low)
        for tick in (*axis.get_major_ticks(), *axis.get_minor_ticks()):
            if not axis.axes.axison or not low - room <= tick.get_loc() <= high + room:
                out |= {tick.label1, tick.label2}
    return out


def overlaps(figure):
    """Pairs of texts whose boxes share more than a rim."""
    found, out = texts(figure), []
    for number, (first, one) in enumerate(found):
        for second, two in found[:number]:
            wide = min(one.x1, two.x1) - max(one.x0, two.x0)
            high = min(one.y1, two.y1) - max(one.y0, two.y0)
            if wide > ROOM and high > ROOM:
                out.append((first, second))
    return out


def outside(figure):
    """Texts that leave the page."""
    page = figure.bbox
    return [
        words
        for words, box in texts(figure)
        if box.x0 < page.x0 - ROOM or box.y0 < page.y0 - ROOM or box.x1 > page.x1 + ROOM or box.y1 > page.y1 + ROOM
    ]


def all_words(figure):
    """Everything written on a figure."""
    return " | ".join(words for words, _ in texts(figure))
