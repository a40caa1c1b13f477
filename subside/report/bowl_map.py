"""The map of the bowl: filled subsidence with labelled contours, and what belongs on it."""

from __future__ import annotations

import numpy as np
import xarray as xr
from contourpy import contour_generator
from matplotlib.axes import Axes
from matplotlib.contour import QuadContourSet
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from matplotlib.transforms import Bbox
from scipy.ndimage import gaussian_filter

from subside.report import furniture, style
from subside.report.labels import Label, contour_spots, place
from subside.report.scale import Scale
from subside.report.scene import Scene, edges, gather, has_uplift, view

__all__ = ["figure_bowl"]

MAX_NAMED_POINTS = 25
_AXIS_UNIT = {"m": ("km", 1e3), "km": ("km", 1.0), "foot": ("1000 ft", 1e3),
              "US_survey_foot": ("1000 US survey ft", 1e3)}
_LARGEST = (6.4, 6.6)  # of the map, in inches


def figure_bowl(result: xr.Dataset, time: object = None) -> Figure:
    """The bowl at one date.

    Parameters
    ----------
    result : xarray.Dataset
        A result with `subsidence`, or `point_subsidence`, or both.
    time : date, optional
        One of the result's dates. Default: the date of the largest subsidence (the last of them).

    Raises
    ------
    InputError
        If there is neither a map nor points, or no such date.
    """
    scene = gather(result, time)
    down, up = scene.extreme(1.0), scene.extreme(-1.0)
    scale = Scale.of(up[0] if up else 0.0, down[0] if down else 0.0, has_uplift(result))
    west, east, south, north = view(scene)
    inches = min(_LARGEST[0] / (east - west), _LARGEST[1] / (north - south))
    frame = furniture.Frame((east - west) * inches, (north - south) * inches)
    figure = Figure(figsize=frame.size, dpi=150, facecolor="white")
    axes = figure.add_axes(frame.map_box)
    axes.set_facecolor(style.PAPER)
    axes.set_xlim(west, east)
    axes.set_ylim(south, north)
    axes.set_aspect("equal")
    _dress(axes, scene.xy_unit)

    taken = _draw_field(axes, scene, scale)
    _draw_outline(axes, scene)
    off, unnamed = _draw_points(axes, scene, scale, taken)
    furniture.colour_bar(figure.add_axes(frame.bar_box), scale)
    furniture.head(figure, result, scene, scale)
    furniture.foot(figure, scene, scale, 1000.0 / scene.metres * inches, frame.map_width,
                   off, unnamed)
    return figure


def _dress(axes: Axes, xy_unit: str) -> None:
    name, size = _AXIS_UNIT[xy_unit]
    for axis, word in ((axes.xaxis, "easting"), (axes.yaxis, "northing")):
        axis.set_major_locator(MaxNLocator(nbins=6, steps=[1, 2, 5, 10], prune="both"))
        axis.set_major_formatter(lambda value, _: f"{value / size:.10g}")
        axis.set_label_text(f"{word}, {name}", fontsize=style.SMALL, color=style.GREY)
    axes.tick_params(labelsize=style.SMALL, colors=style.GREY, length=3.0, width=0.6)
    axes.tick_params(axis="y", labelrotation=90.0)
    for label in axes.get_yticklabels():
        label.set_verticalalignment("center")
    for spine in axes.spines.values():
        spine.set_color(style.GREY)
        spine.set_linewidth(0.6)


def _to_the_edge(centres: np.ndarray) -> np.ndarray:
    """Pixel centres with the outer edges before and behind, for values padded by one."""
    outer = edges(centres)
    return np.concatenate([outer[:1], centres, outer[-1:]])


def _draw_field(axes: Axes, scene: Scene, scale: Scale) -> list[Bbox]:
    """Filled bands to the outer edges of the pixels, contour lines; boxes of their labels."""
    if scene.down is None:
        return []
    x, y = _to_the_edge(scene.x), _to_the_edge(scene.y)
    shown = np.ma.masked_invalid(np.pad(scene.down, 1, mode="edge") * scale.unit.per_si)
    if not scale.moved:
        axes.pcolormesh(edges(scene.x), edges(scene.y), np.ma.masked_invalid(scene.down),
                        cmap=style.sequential(), vmin=0.0, vmax=1.0, zorder=1)
        return []
    bands = [scale.uplift_tint, *(tuple(shade) for shade in scale.shades), tuple(scale.shades[-1])]
    axes.contourf(x, y, shown, scale.filled, colors=bands, extend="both", zorder=1)
    # Where the ground only sinks, zero is far out and its line mere noise.
    drawn = [level for level in scale.levels if level != 0.0 or scale.heaves]
    inside = [level for level in drawn if shown.min() < level < shown.max()]
    if not inside:
        return []
    lines = axes.contour(x, y, shown, inside, colors=style.INK, linewidths=0.55, alpha=0.75,
                         linestyles=["solid" if level else (0, (1, 1.5)) for level in inside],
                         zorder=2)
    return _label_contours(axes, scene, scale, lines)


def _label_contours(
    axes: Axes, scene: Scene, scale: Scale, lines: QuadContourSet
) -> list[Bbox]:
    """Write each level on its line where most room is left; boxes of the labels."""
    avoid = [np.column_stack([scene.point_x, scene.point_y])]
    avoid += [np.array([extreme[1:]]) for extreme in (scene.extreme(1.0), scene.extreme(-1.0))
              if extreme is not None]
    avoid += _outline_lines(scene)
    spots = contour_spots(axes, list(lines.levels), lines.allsegs, avoid)
    beside = np.vstack([scale.shades[:1], scale.shades, scale.shades[-1:]])
    boxes: list[Bbox] = []
    renderer = style.canvas(style.figure_of(axes)).get_renderer()
    for level, places in spots:
        n = int(np.searchsorted(scale.levels, level))
        shade = (beside[n] + beside[n + 1]) / 2
        texts = axes.clabel(lines, [level], fontsize=7.0, fmt="%g", inline_spacing=3, zorder=4,
                            colors=style.text_on(shade), manual=places)
        boxes += [text.get_window_extent(renderer) for text in texts]
    return boxes


def _outline_lines(scene: Scene) -> list[np.ndarray]:
    """Edge of the pixels that compact, rounded by about a pixel: lines (n, 2) in x and y."""
    if scene.outline is None or min(scene.outline.shape) < 2:
        return []
    mask = np.pad(scene.outline.astype(float), 1)
    for pixels in (1.3, 0.7, 0.4):  # less for a reservoir of a few pixels, lest it vanish
        smooth = gaussian_filter(mask, pixels, mode="constant")
        if smooth.max() > 0.75:
            break
    generator = contour_generator(_to_the_edge(scene.x), _to_the_edge(scene.y), smooth)
    return [np.asarray(line) for line in generator.lines(0.5)]


def _draw_outline(axes: Axes, scene: Scene) -> None:
    for line in _outline_lines(scene):
        axes.plot(line[:, 0], line[:, 1], color="white", lw=2.6, alpha=0.7, zorder=3)
        axes.plot(line[:, 0], line[:, 1], color=style.INK, lw=1.3, ls=style.DASH, zorder=3)


def _draw_points(axes: Axes, scene: Scene, scale: Scale, taken: list[Bbox]) -> tuple[int, int]:
    """Benchmarks, extremes, their labels; how many lie off the map and how many lack a name."""
    west, east = axes.get_xlim()
    south, north = axes.get_ylim()
    inside = ((scene.point_x >= west) & (scene.point_x <= east) & (scene.point_y >= south)
              & (scene.point_y <= north))
    x, y = scene.point_x[inside], scene.point_y[inside]
    alone, few = scene.down is None, x.size <= MAX_NAMED_POINTS
    if alone:  # no map beneath: the points carry the colours
        axes.scatter(x, y, s=70.0 if few else 26.0, c=scene.point_down[inside] * scale.unit.per_si,
                     cmap=scale.colours, norm=scale.norm, edgecolors=style.INK, linewidths=0.7,
                     zorder=6)
    else:
        axes.scatter(x, y, s=17.0 if few else 7.0, facecolors="white", edgecolors=style.INK,
                     linewidths=0.8, zorder=6)
    labels: list[Label] = []
    boxes = [*taken, *(_box(axes, px, py, 6.0 if alone else 4.0)
                       for px, py in zip(x, y, strict=True))]
    extremes = [(scene.extreme(1.0), "deepest", "v")]
    if scale.split:
        extremes.append((scene.extreme(-1.0), "uplift", "^"))
    for extreme, word, marker in extremes:
        if extreme is None:
            continue
        value, at_x, at_y = extreme
        if not alone:
            axes.plot([at_x], [at_y], marker, ms=7.5, mfc=style.INK, mec="white", mew=1.0, zorder=7)
        labels.append(Label(at_x, at_y, f"{word} {scale.unit.text(abs(value))}", bold=True))
        boxes.append(_box(axes, at_x, at_y, 5.0))
    if few:
        names = np.array(scene.point_name, dtype=object)[inside]
        labels += [Label(px, py, name[:24]) for px, py, name in zip(x, y, names, strict=True)]
    left_out = place(axes, labels, boxes)
    return int((~inside).sum()), left_out if few else int(x.size)


def _box(axes: Axes, x: float, y: float, points: float) -> Bbox:
    middle = axes.transData.transform((x, y))
    half = points * style.figure_of(axes).dpi / 72.0
    return Bbox.from_bounds(middle[0] - half, middle[1] - half, 2 * half, 2 * half)
