"""What tests of figures share: every word that is drawn, and where."""

from __future__ import annotations

import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.text import Text


def drawn_words(figure):
    """All words that are drawn with their boxes on paper, and the size of that."""
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    drawn = [*figure.texts]
    for legend in figure.legends:
        drawn += legend.get_texts()
    for axes in figure.axes:
        legend = axes.get_legend()
        drawn += [*axes.texts, axes.title, axes._left_title, *(legend.get_texts() if legend else ())]
        drawn += [legend.get_title()] if legend else []
        for axis in (axes.xaxis, axes.yaxis) if axes.axison else ():
            low, high = sorted(axis.get_view_interval())
            ticks = zip(axis.get_majorticklocs(), axis.get_majorticklabels(), strict=False)
            drawn += [axis.get_label(), *(label for at, label in ticks if low <= at <= high)]
    boxes = [
        (text.get_text(), Text.get_window_extent(text, canvas.get_renderer()))
        for text in drawn
        if text.get_text() and text.get_visible()
    ]
    return boxes, canvas.get_width_height()


@pytest.fixture
def assert_readable():
    """Fails if words overlap or leave the paper."""

    def check(figure):
        boxes, (width, height) = drawn_words(figure)
        off = [text for text, box in boxes if min(box.x0, box.y0) < 0 or box.x1 > width or box.y1 > height]
        pairs = [
            (one[0], other[0]) for i, one in enumerate(boxes) for other in boxes[i + 1 :] if one[1].overlaps(other[1])
        ]
        assert (off, pairs) == ([], [])

    return check
