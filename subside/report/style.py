"""The one look of all figures: colours, text, units of display.

Subsidence is blue, darker the deeper; uplift is amber to rust; no movement is paper. Colours are
set in OKLab, a space where equal distances look equally different (B. Ottosson, "A perceptual
color space for image processing", 2020; coefficients written down from memory, the tests check
white, the round trip to grey and even steps), and lightness alone orders each ramp, so that they
read in grey and with any colour vision.
"""

from __future__ import annotations

import textwrap
from dataclasses import dataclass

import numpy as np
import xarray as xr
from matplotlib import colors
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.text import Text
from matplotlib.ticker import MaxNLocator

from subside.names import CAUTIONS

__all__ = [
    "CAUTION", "CHIP", "DASH", "GREY", "INK", "LINES", "MEASURED_MARKERS", "PAPER", "SMALL",
    "DisplayUnit", "canvas", "caution", "diverging", "even_levels", "figure_of", "fit", "headline",
    "length_unit", "regions", "sequential", "text_on", "volume_unit",
]

INK = "#1f2a33"
GREY = "#66717b"
PAPER = "#f5f5f2"
SMALL = 8.0
CHIP = {"boxstyle": "round,pad=0.12,rounding_size=0.25", "fc": (1.0, 1.0, 1.0, 0.78), "lw": 0.0}
"""The ground of a label on a map."""
DASH = (0, (5, 2))
CAUTION = f"{CAUTIONS[0]} {CAUTIONS[-1]}"
"""The line below every figure."""

MEASURED_MARKERS = ("o", "s", "^", "D", "v", "h", "<", ">", "p")


# -- colour ------------------------------------------------------------------------------------


def _srgb(lightness: np.ndarray, chroma: np.ndarray, hue: np.ndarray) -> np.ndarray:
    """OKLCh (hue in degrees) to sRGB in 0..1, the last axis the channel."""
    a, b = chroma * np.cos(np.radians(hue)), chroma * np.sin(np.radians(hue))
    cone = np.stack([lightness + 0.3963377774 * a + 0.2158037573 * b,
                     lightness - 0.1055613458 * a - 0.0638541728 * b,
                     lightness - 0.0894841775 * a - 1.2914855480 * b], axis=-1) ** 3
    linear = cone @ np.array([[4.0767416621, -1.2684380046, -0.0041960863],
                              [-3.3077115913, 2.6097574011, -0.7034186147],
                              [0.2309699292, -0.3413193965, 1.7076147010]])
    linear = np.clip(linear, 0.0, 1.0)
    return np.where(linear <= 0.0031308, 12.92 * linear, 1.055 * linear ** (1 / 2.4) - 0.055)


def _arm(hue_pale: float, hue_dark: float, chroma: float) -> np.ndarray:
    """256 colours from paper to dark, equal steps in OKLab."""
    t = np.linspace(0.0, 1.0, 4001)
    light = 0.972 - 0.672 * t
    strength = 0.004 + chroma * np.sin(np.pi * np.clip(0.06 + 0.80 * t, 0.0, 1.0)) * t**0.35
    hue = hue_pale + (hue_dark - hue_pale) * t
    a, b = strength * np.cos(np.radians(hue)), strength * np.sin(np.radians(hue))
    walked = np.concatenate([[0.0], np.cumsum(np.sqrt(
        np.diff(light) ** 2 + np.diff(a) ** 2 + np.diff(b) ** 2))])
    even = np.interp(np.linspace(0.0, walked[-1], 256), walked, t)
    return _srgb(np.interp(even, t, light), np.interp(even, t, strength), np.interp(even, t, hue))


_DOWN = _arm(200.0, 272.0, 0.135)
_UP = _arm(88.0, 38.0, 0.135)


def sequential() -> colors.ListedColormap:
    """Paper to deep blue, for subsidence alone."""
    return colors.ListedColormap(_DOWN, name="subside-down")


def diverging() -> colors.ListedColormap:
    """Uplift (rust, amber), paper in the centre, subsidence (blue)."""
    return colors.ListedColormap(np.vstack([_UP[::-1], _DOWN]), name="subside-up-down")


def _wheel(light: list[float], hue: list[float], chroma: float) -> tuple[str, ...]:
    rgb = _srgb(np.array(light), np.full(len(hue), chroma), np.array(hue))
    return tuple(colors.to_hex(c) for c in rgb)


# Hue and lightness both change from line to line.
LINES = _wheel([0.56, 0.66, 0.50, 0.66, 0.42, 0.60, 0.58, 0.68],
               [255.0, 60.0, 350.0, 165.0, 300.0, 30.0, 215.0, 110.0], 0.125)


def regions(count: int) -> tuple[str, ...]:
    """Earth tones for stacked regions, pale to dark."""
    return _wheel(list(np.linspace(0.90, 0.62, max(count, 1))), [75.0] * max(count, 1), 0.055)


def text_on(colour: object) -> str:
    """Ink or white, whichever reads better on a colour."""
    red, green, blue = colors.to_rgb(colour)  # type: ignore[arg-type]
    return INK if 0.2126 * red + 0.7152 * green + 0.0722 * blue > 0.5 else "white"


# -- numbers -----------------------------------------------------------------------------------


@dataclass(frozen=True)
class DisplayUnit:
    """A unit to show and how many of it make one SI unit."""

    name: str
    per_si: float

    def text(self, value: float) -> str:
        """A value given in SI, to three digits, with the unit."""
        shown = value * self.per_si
        digits = max(0, 2 - int(np.floor(np.log10(abs(shown))))) if shown else 0
        return f"{shown:.{min(digits, 3)}f} {self.name}"


def length_unit(largest: float) -> DisplayUnit:
    """mm, cm or m (µm for next to nothing), by the largest movement in m."""
    if largest < 1e-4:
        return DisplayUnit("µm", 1e6) if largest > 0.0 else DisplayUnit("mm", 1e3)
    if largest < 0.5:
        return DisplayUnit("mm", 1e3)
    return DisplayUnit("cm", 1e2) if largest < 3.0 else DisplayUnit("m", 1.0)


def volume_unit(largest: float) -> DisplayUnit:
    """m³, thousand m³ or million m³, by the largest volume in m3."""
    if largest < 1e4:
        return DisplayUnit("m³", 1.0)
    return (DisplayUnit("thousand m³", 1e-3) if largest < 2e6
            else DisplayUnit("million m³", 1e-6))


def even_levels(low: float, high: float, count: int = 12) -> np.ndarray:
    """Round contour levels, zero among them, that hold `low` and `high`."""
    locator = MaxNLocator(nbins=count, steps=[1, 2, 2.5, 5, 10])
    return np.asarray(locator.tick_values(min(low, 0.0), max(high, 0.0)))


# -- text --------------------------------------------------------------------------------------


def figure_of(axes: Axes) -> Figure:
    """The figure that axes belong to."""
    figure = axes.get_figure(root=True)
    assert figure is not None
    return figure


def canvas(figure: Figure) -> FigureCanvasAgg:
    """The figure's Agg canvas, made where there is none yet."""
    current = figure.canvas
    return current if isinstance(current, FigureCanvasAgg) else FigureCanvasAgg(figure)


def width_of(artist: Artist, figure: Figure) -> float:
    """Width of an artist in inches."""
    box = artist.get_window_extent(canvas(figure).get_renderer())
    return box.width / figure.dpi


def fit(text: Text, figure: Figure, inches: float, lines: int = 1, smallest: float = 6.5) -> None:
    """Make a text fit a width: smaller, then wrapped, then cut with an ellipsis."""
    text.set_parse_math(False)  # a title may hold a dollar sign
    whole = text.get_text()
    if not whole:
        return
    size = float(text.get_fontsize())
    least = max(smallest, 0.7 * size)
    while width_of(text, figure) > inches and size > least:
        size -= 0.25
        text.set_fontsize(size)
    room = len(whole)
    while width_of(text, figure) > inches and room > 8:
        room -= max(1, room // 40)
        wrapped = textwrap.wrap(whole, room, max_lines=lines, placeholder=" …",
                                break_long_words=True)
        text.set_text("\n".join(wrapped))


def headline(figure: Figure, result: xr.Dataset, words: str, left: float) -> None:
    """The result's title and, below it, what the figure shows; `left` in inches."""
    wide, high = figure.get_size_inches()
    title = str(result.attrs.get("title") or "Land subsidence")
    for text, down, size, colour, weight in ((title, 0.38, 14.0, INK, "bold"),
                                             (words, 0.69, 10.0, GREY, "normal")):
        fit(figure.text(left / wide, 1.0 - down / high, text, fontsize=size, fontweight=weight,
                        color=colour, va="center"), figure, wide - left - 0.25)


def caution(figure: Figure, left: float) -> None:
    """The caution along the lower edge."""
    wide, high = figure.get_size_inches()
    text = figure.text(left / wide, 0.17 / high, CAUTION, fontsize=7.0, color=GREY, va="center",
                       style="italic")
    fit(text, figure, wide - left - 0.25, lines=2, smallest=6.0)
