"""Texts placed beside their marks where they cover least of what else is drawn."""

from collections.abc import Sequence
from itertools import product

import numpy as np
from matplotlib.text import Annotation
from matplotlib.transforms import Bbox

ASIDE_PT = 8.0  # from a mark to its text
UP_PT = (0.0, -6.0, 6.0, -12.0, 12.0, -22.0, 22.0, -32.0, 32.0)  # of a text against its mark, the likeliest first
MARGIN_PT = 1.5  # around a text, white
# What a place costs, in points that a text would rather jut out of the axes:
ALL_OF_LINE_PT = 600.0  # than cover all of the line
OVERLAP_PT = 100.0  # than touch another text or mark
ASTRAY_PT = 20.0  # than stand so far up or down, by the square
OFF_PAGE = 4.0  # beyond the labels of the axes, where a page may end, each point counts so many more


def place_beside(axes, texts: Sequence[Annotation], line: np.ndarray) -> None:
    """Set side and height of annotations in offset points, one after the other.

    Each keeps off the line, off every line's markers, the labels of the axes' ticks and the texts placed before it.

    Parameters
    ----------
    line : (n, 2) in the axes' data
    """
    axes.apply_aspect()
    per_pt = axes.figure.dpi / 72
    points = axes.transData.transform(line)
    ticks = [text.get_window_extent() for text in (*axes.get_xticklabels(), *axes.get_yticklabels())]
    room = Bbox.union([axes.bbox, *ticks])
    taken = [*ticks, *_markers(axes, per_pt)]
    for text in texts:
        anchor = np.array(axes.transData.transform(text.xy))
        size = np.array(text.get_window_extent().size)

        def cost(place: tuple[float, int], anchor: np.ndarray = anchor, size: np.ndarray = size) -> float:
            box = _box(anchor, size, *place, per_pt)
            inside = np.all((box.min <= points) & (points <= box.max), axis=1).mean()
            return (
                place[0] ** 2 / ASTRAY_PT
                + ALL_OF_LINE_PT * inside
                + sum(OVERLAP_PT * (1 + _shared(box, other)) for other in taken if box.overlaps(other))
                + _beyond(box, axes.bbox) / per_pt
                + OFF_PAGE * _beyond(box, room) / per_pt
            )

        up_pt, side = min(product(UP_PT, (-1, 1)), key=cost)
        text.set_position((side * ASIDE_PT, up_pt))
        text.set_horizontalalignment("left" if side > 0 else "right")
        taken.append(_box(anchor, size, up_pt, side, per_pt))


def _box(anchor: np.ndarray, size: np.ndarray, up_pt: float, side: int, per_pt: float) -> Bbox:
    """Where a text of that size goes, in pixels."""
    near = anchor + np.array([side * ASIDE_PT, up_pt]) * per_pt
    width, height = size + 2 * MARGIN_PT * per_pt
    begin = near[0] - (width if side < 0 else 0.0)
    return Bbox.from_bounds(begin, near[1] - height / 2, width, height)


def _markers(axes, per_pt: float) -> list[Bbox]:
    """The boxes of the marks that stand alone, in pixels."""
    boxes = []
    for line in axes.lines:
        if len(line.get_xdata()) == 1:
            [(x, y)] = axes.transData.transform(np.column_stack([line.get_xdata(), line.get_ydata()]))
            half = (line.get_markersize() + line.get_markeredgewidth()) / 2 * per_pt
            boxes.append(Bbox.from_extents(x - half, y - half, x + half, y + half))
    return boxes


def _shared(box: Bbox, other: Bbox) -> float:
    """The share of the other box that is covered."""
    both = Bbox.intersection(box, other)
    return 0.0 if both is None else both.width * both.height / (other.width * other.height)


def _beyond(box: Bbox, room: Bbox) -> float:
    """By how much a box juts out."""
    return float(max(*np.subtract(room.min, box.min), *np.subtract(box.max, room.max), 0.0))
