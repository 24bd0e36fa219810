"""What every picture is held to: all text on the page, and no two texts on one another."""

import itertools
import warnings

from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.text import Text


def drawn(make, folder):
    """A figure made and saved without a warning."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        figure = make()
        figure.savefig(folder / "f.png", dpi=80)
        figure.savefig(folder / "f.svg")
    return figure


def tick_labels(figure, axes=lambda ax: (ax.xaxis, ax.yaxis), minor=True):
    """Labels of the ticks of some axes, which matplotlib keeps apart by itself."""
    return {id(t) for ax in figure.axes for axis in axes(ax) for t in axis.get_majorticklabels() + (axis.get_minorticklabels() if minor else [])}


def check_texts(figure, apart_from):
    """All texts but those in ``apart_from`` lie on the page and apart; returns them with their boxes."""
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    renderer = canvas.get_renderer()
    left_out = apart_from(figure)
    boxes = [(t.get_text(), t.get_window_extent(renderer)) for t in figure.findobj(Text) if t.get_visible() and t.get_text().strip() and id(t) not in left_out]
    page = figure.bbox
    for text, box in boxes:
        assert box.x0 >= page.x0 - 1 and box.x1 <= page.x1 + 1 and box.y0 >= page.y0 - 1 and box.y1 <= page.y1 + 1, text
    for (a, first), (b, second) in itertools.combinations(boxes, 2):
        wide = min(first.x1, second.x1) - max(first.x0, second.x0)
        high = min(first.y1, second.y1) - max(first.y0, second.y0)
        assert wide <= 1.0 or high <= 2.5, (a, b)
    return boxes
