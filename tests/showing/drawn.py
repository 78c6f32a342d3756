"""What a figure holds, looked at from outside: its texts, its lines, its panels."""

from itertools import combinations

import numpy as np
from matplotlib.collections import LineCollection
from matplotlib.text import Text

from morphotone.cable.assumptions import Assumptions
from morphotone.questions.marks import marks_of
from morphotone.questions.portrait import portrait_of
from morphotone.questions.survey import Prepared, Request, cells_of, prepare


def portrait(swc, assumptions=None, hz=0.0, colour=None, sites=None, name="cell.swc"):
    """Return the portrait of a cell from the text of its file."""
    assumptions = assumptions or Assumptions()
    request = Request(assumptions, keep_unfit=True)
    prepared = prepare(name, swc if isinstance(swc, bytes) else swc.encode(), request)
    assert isinstance(prepared, Prepared), prepared.sentence
    (cell,) = cells_of([prepared], request)
    marks = marks_of(prepared, sites, assumptions, hz)[0] if sites is not None else None
    return portrait_of(cell, hz, colour, marks)


def texts(figure):
    """Return text and extent in dots of everything written on a figure."""
    figure.draw_without_rendering()
    renderer = figure.canvas.get_renderer()
    found = [text for text in figure.findobj(Text) if text.get_visible() and text.get_text().strip()]
    # Ticks outside the limits of their axis keep a text that is not drawn.
    hidden = {
        label
        for axes in figure.axes
        for axis, limits in ((axes.xaxis, axes.get_xlim()), (axes.yaxis, axes.get_ylim()))
        for tick in axis.get_major_ticks()
        if not axes.axison or not min(limits) <= tick.get_loc() <= max(limits)
        for label in (tick.label1, tick.label2)
    }
    return [(text.get_text(), text.get_window_extent(renderer)) for text in found if text not in hidden]


def cut_off(figure):
    """Return the texts that do not lie on the page whole."""
    page = figure.bbox
    return [
        words
        for words, box in texts(figure)
        if box.x0 < page.x0 or box.y0 < page.y0 or box.x1 > page.x1 or box.y1 > page.y1
    ]


def overlapping(figure):
    """Return pairs of texts that lie on each other by more than a dot."""
    shrunk = [(words, box.padded(-1.0)) for words, box in texts(figure)]
    return [(one, other) for (one, a), (other, b) in combinations(shrunk, 2) if a.overlaps(b)]


def lines(figure, panel, name=None):
    """Return the polylines of a panel's collections, or of the one with a name; each of shape (points, 2)."""
    axes = next(axes for axes in figure.axes if axes.get_label() == panel)
    some = [each for each in axes.collections if isinstance(each, LineCollection)]
    return [line for each in some if name in (None, each.get_gid()) for line in each.get_segments()]


def in_mm(figure, panel):
    """Return data per mm across and up in a panel."""
    axes = next(axes for axes in figure.axes if axes.get_label() == panel)
    box = axes.get_position()
    width, height = figure.get_size_inches() * 25.4
    return np.array(
        [np.ptp(axes.get_xlim()) / box.width / width, np.ptp(axes.get_ylim()) / box.height / height]
    )
