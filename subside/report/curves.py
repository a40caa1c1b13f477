"""Subsidence and volumes against time, measured values laid over."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.colors import to_hex
from matplotlib.dates import AutoDateLocator, ConciseDateFormatter, date2num
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from subside.errors import InputError
from subside.report import style
from subside.report.labels import spread
from subside.report.scene import point_names

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["figure_curves"]

LEFT = 0.85  # inches
MAX_POINTS = 8
MAX_REGIONS = 6
_BOWL = to_hex(style.sequential()(0.8))
_COLUMNS = ("point", "date", "value_m", "sigma_m")


class Line(NamedTuple):
    """Subsidence in m at one place against time."""

    name: str
    down: np.ndarray
    of_map: bool
    depth: float = 0.0

    @property
    def label(self) -> str:
        """A point in the rock moves otherwise than the ground: its depth is said."""
        return f"{self.name}, {self.depth:.0f} m deep" if self.depth > 0.0 else self.name


def figure_curves(result: xr.Dataset, survey: pd.DataFrame | None = None) -> Figure:
    """Subsidence of the deepest place and of up to 8 points; below, volumes.

    Parameters
    ----------
    result : xarray.Dataset
        A result; whatever it lacks is left out.
    survey : DataFrame, optional
        Measured subsidence since the start: columns `point`, `date` (datetime64), `value_m`
        (positive down), `sigma_m` (one standard deviation).

    Raises
    ------
    InputError
        If there is nothing to draw against time, or the survey lacks a column.
    """
    lines = _subsidence_lines(result, survey)
    bowl, regions = _volumes(result)
    if not lines and bowl is None and not regions:
        raise InputError("this result has no subsidence and no volume to draw against time.")
    panels = [bool(lines), bowl is not None or bool(regions)]
    height = 1.55 + 3.5 * panels[0] + 2.2 * panels[1] + 0.62 * all(panels)
    figure = Figure(figsize=(8.6, height), dpi=150, facecolor="white")
    left, wide = LEFT / 8.6, 6.15 / 8.6
    top = height - 0.95
    times = result["time"].values
    axes: list[Axes] = []
    if panels[0]:
        upper = figure.add_axes((left, (top - 3.5) / height, wide, 3.5 / height))
        _draw_lines(figure, upper, times, lines, survey)
        axes.append(upper)
        top -= 3.5 + 0.62
    if panels[1]:
        lower = figure.add_axes((left, (top - 2.2) / height, wide, 2.2 / height))
        _draw_volumes(figure, lower, times, bowl, regions)
        axes.append(lower)
    _share_time(axes, times, survey if lines else None)
    _words(figure, result, lines, survey)
    return figure


# -- gathering ---------------------------------------------------------------------------------


def _subsidence_lines(
    result: xr.Dataset, survey: pd.DataFrame | None
) -> list[Line]:
    """The deepest pixel of the map, then the points, the most moved first."""
    lines: list[Line] = []
    if "subsidence" in result and bool(result["subsidence"].notnull().any()):
        down = result["subsidence"]
        sinks = bool((down > 0.0).any())  # else it rises, or stays as it is
        place = abs(down).where(down > 0.0 if sinks else down.notnull(), -1.0).argmax(down.dims)
        series = down.isel({dim: place[dim] for dim in ("y", "x")}).values
        if np.nanmax(np.abs(series)) > 0.0 or "point_subsidence" not in result:
            lines.append(Line(f"{'deepest' if sinks else 'highest'} on the map", series, True))
    if "point_subsidence" in result and result.sizes.get("point", 0) > 0:
        values = result["point_subsidence"].transpose("time", "point").values
        names = point_names(result)
        measured = _measured(survey)
        most = np.nan_to_num(np.abs(values)).max(axis=0)
        order = sorted(range(len(names)), key=lambda n: (names[n] not in measured, -most[n]))
        chosen = sorted(order[:MAX_POINTS], key=lambda n: -most[n])
        depth = (result["point_depth"].values if "point_depth" in result
                 else np.zeros(len(names)))
        lines += [Line(names[n], values[:, n], False, float(depth[n])) for n in chosen]
    return lines


def _measured(survey: pd.DataFrame | None) -> set[str]:
    if survey is None:
        return set()
    lacking = [name for name in _COLUMNS if name not in survey.columns]
    if lacking:
        raise InputError(f"the survey has no column {', '.join(lacking)}; it needs "
                         f"{', '.join(_COLUMNS)}.")
    return {str(name) for name in survey["point"]}


def _volumes(result: xr.Dataset) -> tuple[np.ndarray | None, list[tuple[str, np.ndarray]]]:
    bowl = result["bowl_volume"].values if "bowl_volume" in result else None
    regions: list[tuple[str, np.ndarray]] = []
    if "region_compaction_volume" in result and result.sizes.get("region", 0) > 0:
        values = result["region_compaction_volume"].transpose("time", "region").values
        names = ([str(n) for n in result["region_name"].values]
                 if "region_name" in result.variables
                 else [f"region {n + 1}" for n in range(values.shape[1])])
        order = list(np.argsort(-np.abs(values).max(axis=0), kind="stable"))
        if len(order) > MAX_REGIONS:
            rest = order[MAX_REGIONS - 1:]
            order = order[:MAX_REGIONS - 1]
            regions.append((f"{len(rest)} others", values[:, rest].sum(axis=1)))
        regions = [(names[n], values[:, n]) for n in order] + regions
    return bowl, regions


# -- drawing -----------------------------------------------------------------------------------


def _draw_lines(
    figure: Figure, axes: Axes, times: np.ndarray, lines: list[Line],
    survey: pd.DataFrame | None,
) -> None:
    marks = _marks(survey, [line.name for line in lines if not line.of_map])
    largest = [float(np.nanmax(np.abs(line.down), initial=0.0)) for line in lines]
    largest += [float(np.abs(value).max()) for _, value, _ in marks.values()]
    unit = style.length_unit(max(largest))
    ends: list[tuple[float, str, str]] = []
    single = len(times) == 1
    for n, line in enumerate(lines):
        name, down, of_map, _ = line
        colour = style.INK if of_map else style.LINES[(n - lines[0].of_map) % len(style.LINES)]
        shown = down * unit.per_si
        axes.plot(times, shown, color=colour, lw=2.2 if of_map else 1.4, zorder=3 - n / 100,
                  marker="_" if single else None, ms=12.0, mew=2.0, solid_capstyle="round")
        if name in marks and not of_map:
            when, value, sigma = marks[name]
            axes.errorbar(when, value * unit.per_si, yerr=sigma * unit.per_si, fmt="none",
                          ecolor=colour, elinewidth=0.9, capsize=2.0, zorder=4, clip_on=False)
            axes.plot(when, value * unit.per_si, ls="none",
                      marker=style.MEASURED_MARKERS[n % len(style.MEASURED_MARKERS)], ms=4.6,
                      mfc="white", mec=colour, mew=1.1, zorder=5, clip_on=False)
        finite = shown[np.isfinite(shown)]
        ends.append((float(finite[-1]) if finite.size else 0.0, line.label, colour))
    _plain(axes)
    axes.invert_yaxis()  # the ground goes down
    if max(largest) == 0.0:
        axes.set_ylim(1.0, -1.0)
    axes.axhline(0.0, color=style.GREY, lw=0.7, zorder=1)
    axes.set_ylabel(f"subsidence, {unit.name}", fontsize=style.SMALL + 0.5, color=style.INK)
    axes.yaxis.set_label_coords(-0.085, 0.5)
    if marks:
        key = [Line2D([], [], color=style.GREY, lw=1.6, label="computed"),
               Line2D([], [], color=style.GREY, ls="none", marker="o", mfc="white", ms=4.6,
                      label="measured, ± 1 standard deviation (initial heights and\n"
                            "the datum of each survey fitted)")]
        low, high = sorted(axes.get_ylim())
        # in the corner where no line starts
        axes.legend(handles=key, loc="lower left" if high > -low else "upper left",
                    fontsize=style.SMALL - 0.5, frameon=False, labelcolor=style.INK)
    _name_ends(figure, axes, times[-1], ends)


def _marks(
    survey: pd.DataFrame | None, names: list[str]
) -> dict[str, tuple[np.ndarray, np.ndarray, np.ndarray]]:
    """Dates, values and standard deviations in m by point, for the points that are drawn."""
    marks: dict[str, tuple[np.ndarray, np.ndarray, np.ndarray]] = {}
    if survey is None:
        return marks
    for name, rows in survey.groupby(survey["point"].astype(str)):
        kept = rows.dropna(subset=["date", "value_m"]).sort_values("date")
        if str(name) in names and len(kept):
            marks[str(name)] = (kept["date"].to_numpy("datetime64[ns]"),
                                kept["value_m"].to_numpy(float),
                                np.nan_to_num(kept["sigma_m"].to_numpy(float)))
    return marks


def _draw_volumes(
    figure: Figure, axes: Axes, times: np.ndarray, bowl: np.ndarray | None,
    regions: list[tuple[str, np.ndarray]],
) -> None:
    series = [values for _, values in regions] + ([bowl] if bowl is not None else [])
    total = np.sum([values for _, values in regions], axis=0) if regions else np.zeros(1)
    unit = style.volume_unit(max(float(np.nanmax(np.abs(s))) for s in [*series, total]))
    ends: list[tuple[float, str, str]] = []
    shades = style.regions(len(regions))
    stacked = len(times) > 1 and all((values >= 0.0).all() for _, values in regions)
    base = np.zeros(len(times))
    for (name, values), shade in zip(regions, shades, strict=False):
        shown = values * unit.per_si
        if stacked:
            axes.fill_between(times, base, base + shown, color=shade, lw=0.0, zorder=1)
            axes.plot(times, base + shown, color="white", lw=0.8, zorder=2)
            ends.append((float(base[-1] + shown[-1] / 2), name, style.GREY))
            base = base + shown
        else:
            axes.plot(times, shown, color=style.GREY, lw=1.2, zorder=2,
                      marker="_" if len(times) == 1 else None, ms=12.0, mew=2.0)
            ends.append((float(shown[-1]), name, style.GREY))
    if bowl is not None:
        shown = bowl * unit.per_si
        axes.plot(times, shown, color=_BOWL, lw=2.0, zorder=4,
                  marker="_" if len(times) == 1 else None, ms=12.0, mew=2.0)
        ends.append((float(shown[-1]), "bowl, tail included", _BOWL))
    _plain(axes)
    axes.axhline(0.0, color=style.GREY, lw=0.7, zorder=3)
    low, high = axes.get_ylim()
    axes.set_ylim(0.0 if min(float(np.nanmin(s)) for s in series) >= 0.0 else low, high)
    axes.set_ylabel(f"volume, {unit.name}", fontsize=style.SMALL + 0.5, color=style.INK)
    axes.yaxis.set_label_coords(-0.085, 0.5)
    words = []
    if regions:
        words.append("volume lost by the reservoir, by region"
                     + (" (stacked)" if stacked and len(regions) > 1 else ""))
    if bowl is not None:
        words.append("volume of the bowl")
    text = " and ".join(words)
    axes.set_title(text[0].upper() + text[1:], fontsize=style.SMALL + 1.0, color=style.INK,
                   loc="left", pad=5.0)
    _name_ends(figure, axes, times[-1], ends)


def _name_ends(
    figure: Figure, axes: Axes, last: np.datetime64, ends: list[tuple[float, str, str]]
) -> None:
    """Names beside the right ends of the lines, kept apart, tied to the lines where moved."""
    box = axes.get_position()
    inches = box.height * figure.get_size_inches()[1]
    low, high = axes.get_ylim()
    share = [(value - low) / (high - low) for value, _, _ in ends]
    placed = spread(share, 0.158 / inches, 0.03, 0.97)
    for (_, name, colour), y, wanted in zip(ends, placed, share, strict=True):
        text = axes.text(1.045, y, name, transform=axes.transAxes, fontsize=style.SMALL,
                         color=colour, va="center", ha="left")
        style.fit(text, figure, 1.25)
        axes.plot([1.005, 1.018, 1.032, 1.040], [wanted, wanted, y, y], color=colour, lw=0.6,
                  transform=axes.transAxes, clip_on=False)


def _plain(axes: Axes) -> None:
    axes.grid(axis="y", color="#e3e6e8", lw=0.6, zorder=0)
    axes.set_axisbelow(True)
    axes.tick_params(labelsize=style.SMALL, colors=style.GREY, length=3.0, width=0.6)
    for side, spine in axes.spines.items():
        spine.set_visible(side in ("left", "bottom"))
        spine.set_color(style.GREY)
        spine.set_linewidth(0.6)


def _share_time(axes: list[Axes], times: np.ndarray, survey: pd.DataFrame | None) -> None:
    dates = times.astype("datetime64[ns]")
    if survey is not None:
        dates = np.concatenate([dates, survey["date"].dropna().to_numpy("datetime64[ns]")])
    first, last = dates.min(), dates.max()
    if first == last:
        first, last = first - np.timedelta64(365, "D"), last + np.timedelta64(365, "D")
    for one in axes:
        one.set_xlim(*date2num([first, last]))
        locator = AutoDateLocator(minticks=4, maxticks=9)
        one.xaxis.set_major_locator(locator)
        one.xaxis.set_major_formatter(ConciseDateFormatter(locator))


def _words(
    figure: Figure, result: xr.Dataset, lines: list[Line],
    survey: pd.DataFrame | None,
) -> None:
    words = "Subsidence against time" if lines else "Volumes against time"
    points = result.sizes.get("point", 0)
    if lines and points > MAX_POINTS:
        words += f"; {MAX_POINTS} of {points} points" + (
            ", measured ones first" if survey is not None else ", those that move most")
    unknown = _measured(survey) - set(point_names(result))
    if unknown:
        words += f"; {len(unknown)} surveyed points are not in the result"
    style.headline(figure, result, words, LEFT)
    style.caution(figure, LEFT)
