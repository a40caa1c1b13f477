"""Labels that do not cover each other."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.transforms import Bbox

from subside.report.style import CHIP, INK, canvas, figure_of

__all__ = ["Label", "contour_spots", "place", "spread"]


@dataclass(frozen=True)
class Label:
    """A name at a place of the axes; bold ones are placed first and always."""

    x: float
    y: float
    text: str
    bold: bool = False


def place(axes: Axes, labels: Sequence[Label], taken: Sequence[Bbox], size: float = 7.5) -> int:
    """Write labels beside their places where there is room; return how many were left out.

    `taken` are boxes, in pixels, that no label may cover. A bold label that finds no free room is
    written at the place that covers least.
    """
    figure = figure_of(axes)
    renderer = canvas(figure).get_renderer()
    inside = axes.get_window_extent(renderer)
    pixel = figure.dpi / 72.0
    busy = list(taken)
    left_out = 0
    for label in sorted(labels, key=lambda item: not item.bold):
        text = axes.text(label.x, label.y, label.text, fontsize=size + (0.5 if label.bold else 0.0),
                         fontweight="bold" if label.bold else "normal", color=INK, zorder=9,
                         bbox=CHIP, parse_math=False)
        box = text.get_window_extent(renderer)
        anchor = axes.transData.transform((label.x, label.y))
        best, least = None, np.inf
        for reach in (6.0, 9.0, 13.0):
            for candidate in _around(anchor, box.width, box.height, reach * pixel):
                cover = _covered(candidate, busy, inside)
                if cover < least:
                    best, least = candidate, cover
            if least == 0.0:
                break
        if best is None or (least > 0.0 and not label.bold):
            text.remove()
            left_out += 1
            continue
        busy.append(best.padded(1.5 * pixel))
        corner = (anchor[0] + best.x0 - box.x0, anchor[1] + best.y0 - box.y0)
        at = axes.transData.inverted().transform(corner)
        text.set_position((float(at[0]), float(at[1])))
    return left_out


def _around(anchor: np.ndarray, width: float, height: float, reach: float) -> list[Bbox]:
    """Boxes round a place: right, left, above, below, and the corners."""
    x, y = anchor
    side = 0.7 * reach
    spots = [(x + reach, y - height / 2), (x - reach - width, y - height / 2),
             (x - width / 2, y + reach), (x - width / 2, y - reach - height),
             (x + side, y + side), (x + side, y - side - height),
             (x - side - width, y + side), (x - side - width, y - side - height)]
    return [Bbox.from_bounds(left, low, width, height) for left, low in spots]


def _covered(box: Bbox, busy: Sequence[Bbox], inside: Bbox) -> float:
    """Area in square pixels that the box shares with busy ones, or that lies outside."""
    total = 0.0
    for other in busy:
        common = Bbox.intersection(box, other)
        total += 0.0 if common is None else common.width * common.height
    kept = Bbox.intersection(box, inside)
    kept_area = 0.0 if kept is None else kept.width * kept.height
    outside = box.width * box.height - kept_area
    return total + 100.0 * (outside if outside > 1e-6 * box.width * box.height else 0.0)


def contour_spots(
    axes: Axes, levels: Sequence[float], lines: Sequence[Sequence[np.ndarray]],
    avoid: Sequence[np.ndarray],
) -> list[tuple[float, list[tuple[float, float]]]]:
    """Where on the contour lines their values have most room.

    Parameters
    ----------
    axes : Axes
    levels : sequence of float
    lines : sequence of sequence of array (n, 2)
        The lines of each level, in data coordinates.
    avoid : sequence of array (n, 2)
        Places the labels should keep away from, in data coordinates.

    Returns
    -------
    list of (level, places)
        One place on the longest line of a level and on others at least half as long; none on lines
        too short for a label.
    """
    pixel = figure_of(axes).dpi / 72.0
    frame = axes.bbox
    busy = [axes.transData.transform(places) for places in avoid if len(places)]
    spots: list[tuple[float, list[tuple[float, float]]]] = []
    for level, of_level in sorted(zip(levels, lines, strict=True), key=lambda pair: -abs(pair[0])):
        shown = [axes.transData.transform(line) for line in of_level if len(line) > 4]
        length = [float(np.hypot(*np.diff(line, axis=0).T).sum()) for line in shown]
        places: list[tuple[float, float]] = []
        for line, long in zip(shown, length, strict=True):
            if long < max(60.0 * pixel, 0.5 * max(length)):
                continue
            candidates = line[:: max(1, len(line) // 80)]
            border = np.minimum(candidates - frame.min, frame.max - candidates).min(axis=1)
            room = np.minimum(border, 60.0 * pixel)
            for others in busy:
                gap = np.hypot(*(candidates[:, None, :] - others[None, :, :]).transpose(2, 0, 1))
                room = np.minimum(room, gap.min(axis=1))
            best = candidates[int(np.argmax(room))]
            busy.append(best[None, :])
            at = axes.transData.inverted().transform(best)
            places.append((float(at[0]), float(at[1])))
        if places:
            spots.append((float(level), places))
    return spots


def spread(wanted: Sequence[float], gap: float, low: float, high: float) -> list[float]:
    """Positions as near to the wanted ones as a least distance allows, in the same order.

    Neighbours that are too close form a group that shares its room about its mean.
    """
    if not wanted:
        return []
    gap = min(gap, (high - low) / max(len(wanted) - 1, 1))
    order = np.argsort(wanted, kind="stable")
    groups: list[list[float]] = []  # mean of the first member's position, count
    for rank in order:
        groups.append([float(wanted[rank]), 1.0])
        while True:
            first, count = groups[-1]
            # The group must fit between low and high ...
            first = min(max(first, low), high - gap * (count - 1.0))
            groups[-1] = [first, count]
            # ... and stay clear of the one below.
            if len(groups) < 2 or groups[-2][0] + gap * groups[-2][1] <= first + 1e-12:
                break
            below, below_count = groups[-2]
            joined = (below * below_count + (first - gap * below_count) * count) / (
                below_count + count)
            groups[-2:] = [[joined, below_count + count]]
    placed = np.empty(len(wanted))
    flat = [first + gap * n for first, count in groups for n in range(int(count))]
    placed[order] = flat
    return [float(p) for p in placed]
