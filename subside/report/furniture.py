"""What surrounds the map: colour bar, title, scale bar, north arrow, key, caution."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Polygon, Rectangle

from subside.report import style
from subside.report.scale import Scale
from subside.report.scene import OUTLINE_SHARE, Scene

__all__ = ["Frame", "colour_bar", "foot", "head"]

LEFT, RIGHT, TOP, BOTTOM = 0.85, 1.15, 0.98, 1.56
"""Room around the map in inches."""
_STRIP = 1.10
Entry = tuple[dict[str, Any], str]


@dataclass(frozen=True)
class Frame:
    """Where things are, from the size of the map in inches."""

    map_width: float
    map_height: float

    @property
    def size(self) -> tuple[float, float]:
        """Of the whole figure, in inches."""
        return LEFT + self.map_width + RIGHT, BOTTOM + self.map_height + TOP

    def _box(self, left: float, low: float, width: float, height: float
             ) -> tuple[float, float, float, float]:
        wide, high = self.size
        return left / wide, low / high, width / wide, height / high

    @property
    def map_box(self) -> tuple[float, float, float, float]:
        """Of the map, as shares of the figure."""
        return self._box(LEFT, BOTTOM, self.map_width, self.map_height)

    @property
    def bar_box(self) -> tuple[float, float, float, float]:
        """Of the colour bar, as shares of the figure."""
        tall = min(self.map_height, 4.2)
        return self._box(LEFT + self.map_width + 0.16, BOTTOM + self.map_height - tall, 0.17, tall)


def colour_bar(bar: Axes, scale: Scale) -> None:
    """Bands of equal height, subsidence growing downward as the ground does."""
    levels = scale.levels
    bar.set_xlim(0.0, 1.0)
    bar.set_ylim(levels[-1], levels[0])
    bar.set_xticks([])
    for spine in bar.spines.values():
        spine.set_visible(False)
    if not scale.moved:
        bar.set_axis_off()
        return
    for n, shade in enumerate(scale.shades):
        bar.add_patch(Rectangle((0.0, levels[n]), 1.0, levels[n + 1] - levels[n],
                                fc=tuple(shade), ec=style.INK, lw=0.4))
    if scale.heaves and not scale.split:  # a little uplift, too little for bands of its own
        peak = levels[0] - 0.35 * scale.step
        bar.add_patch(Polygon([(0.0, levels[0]), (1.0, levels[0]), (0.5, peak)], lw=0.4,
                              fc=scale.uplift_tint, ec=style.INK, clip_on=False))
    bar.yaxis.tick_right()
    bar.set_yticks(levels, [f"{level:g}" for level in levels])
    bar.tick_params(labelsize=style.SMALL, colors=style.INK, length=0.0, pad=3.0)
    words = "subsidence (uplift negative)" if scale.split else "subsidence"
    bar.text(3.7, 0.5, f"{words}, {scale.unit.name}", transform=bar.transAxes, rotation=90.0,
             ha="left", va="center", fontsize=style.SMALL + 0.5, color=style.INK)


def head(figure: Figure, result: xr.Dataset, scene: Scene, scale: Scale) -> None:
    """Title, and what is shown."""
    words = f"Subsidence on {str(scene.when)[:10]}"
    if result.attrs.get("time_start"):
        words += f" since {str(result.attrs['time_start'])[:10]}"
    if not scale.moved:
        words += "; no movement at this date"
    elif scene.down is not None:
        words += f"; contours every {scale.step:g} {scale.unit.name}"
    style.headline(figure, result, words, LEFT)


def foot(
    figure: Figure, scene: Scene, scale: Scale, per_km: float, map_width: float, off: int,
    unnamed: int,
) -> None:
    """Scale bar, north arrow and key below the map; the caution below them.

    `per_km` is the length of a kilometre on the map in inches, `off` and `unnamed` the number of
    points off the map and without a name.
    """
    wide, high = figure.get_size_inches()
    strip = figure.add_axes((0.0, 0.0, 1.0, _STRIP / high))
    strip.set_xlim(0.0, wide)
    strip.set_ylim(0.0, _STRIP)
    strip.axis("off")
    kilometres = _round_down(0.24 * map_width / per_km)
    length = kilometres * per_km
    for start, fill in ((LEFT, style.INK), (LEFT + length / 2, "white")):
        strip.add_patch(Rectangle((start, 0.60), length / 2, 0.06, fc=fill, ec=style.INK, lw=0.7))
    shown = f"{kilometres:g} km" if kilometres >= 0.5 else f"{1000.0 * kilometres:g} m"
    for x, words in ((LEFT, "0"), (LEFT + length, shown)):
        strip.text(x, 0.72, words, fontsize=style.SMALL, color=style.INK, ha="center")
    x = LEFT + length + 0.55
    for side, fill in ((-0.075, style.INK), (0.075, "white")):
        strip.add_patch(Polygon([(x, 0.86), (x + side, 0.56), (x, 0.62)], fc=fill, ec=style.INK,
                                lw=0.5))
    strip.text(x + 0.13, 0.70, "grid\nnorth", fontsize=6.5, color=style.INK, va="center",
               linespacing=0.95)
    _key(figure, strip, x + 0.75, _entries(scene, scale, off, unnamed))
    style.caution(figure, LEFT)


def _entries(scene: Scene, scale: Scale, off: int, unnamed: int) -> list[Entry]:
    """Looks and words of the key."""
    entries: list[Entry] = []
    if scene.outline is not None and min(scene.outline.shape) > 1:
        entries.append(({"color": style.INK, "lw": 1.3, "ls": style.DASH},
                        f"reservoir: compaction above {100.0 * OUTLINE_SHARE:g} % of its largest"))
    mark = {"color": "none", "mfc": style.INK, "mec": "white", "ms": 7.0}
    if scene.down is not None and scene.extreme(1.0) is not None:
        entries.append(({"marker": "v", **mark}, "deepest point"))
    if scene.down is not None and scale.split and scene.extreme(-1.0) is not None:
        entries.append(({"marker": "^", **mark}, "largest uplift"))
    if scene.point_x.size:
        shown = scene.point_x.size - off
        extra = [f"{off} off the map"] if off else []
        if unnamed:
            extra += [f"{shown - unnamed} of {shown} named" if unnamed < shown else f"{shown}"]
        if scene.down is None:
            extra += ["in the colour of their subsidence"]
        entries.append(({"marker": "o", "color": "none", "mfc": "white", "mec": style.INK,
                         "ms": 4.5}, "benchmarks" + (f" ({', '.join(extra)})" if extra else "")))
    return entries


def _key(figure: Figure, strip: Axes, x: float, entries: list[Entry]) -> None:
    step = 0.19 if len(entries) < 4 else 0.165
    for n, (look, words) in enumerate(entries):
        y = 0.70 + step * ((len(entries) - 1) / 2 - n)
        where = [x, x + 0.32] if "lw" in look else [x + 0.16]
        strip.add_line(Line2D(where, [y] * len(where), **look))
        text = strip.text(x + 0.42, y, words, fontsize=7.5, color=style.INK, va="center")
        style.fit(text, figure, figure.get_size_inches()[0] - x - 0.52)


def _round_down(value: float) -> float:
    """The largest of 1, 2, 5 times a power of ten that is not above the value."""
    power = 10.0 ** np.floor(np.log10(value))
    return float(max(step * power for step in (1.0, 2.0, 5.0) if step * power <= value * 1.000001))
