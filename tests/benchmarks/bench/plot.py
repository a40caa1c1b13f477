"""The picture of growth: seconds and memory of the whole job against cells, map and dates."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, NullLocator

__all__ = ["draw_growth"]

_RUN, _FILES, _MEMORY, _INK, _GUIDE = "#1f5fa8", "#b8651b", "#3c7d5a", "#22303a", "#9aa4ab"
_PANELS = (("cells", "cells in the file"), ("pixels", "pixels of the map"),
           ("dates", "dates of pressure"))


def draw_growth(section: dict[str, Any], path: Path) -> None:
    """Three columns: seconds above on log-log axes with a guide of slope 1, peak memory below."""
    result = section["result"]
    figure = Figure(figsize=(10.5, 5.2), facecolor="white", layout="constrained")
    figure.get_layout_engine().set(w_pad=0.08, h_pad=0.06)
    FigureCanvasAgg(figure)
    axes = figure.subplots(2, 3, sharex="col", sharey="row", height_ratios=(2.2, 1))
    for column, (name, label) in enumerate(_PANELS):
        rows = [r for r in result[name] if "failed" not in r]
        _seconds(axes[0, column], rows, column == 0)
        _memory(axes[1, column], rows, result["memory"] if column == 0 else None)
        axes[1, column].set_xlabel(label)
        axes[1, column].set_xticks([r["size"] for r in rows])
        words = _side if name == "pixels" else _count
        axes[1, column].xaxis.set_major_formatter(FuncFormatter(lambda v, _, w=words: w(v)))
        axes[1, column].xaxis.set_minor_locator(NullLocator())
    axes[0, 0].set_ylabel("seconds")
    axes[0, 0].yaxis.set_major_formatter(FuncFormatter(lambda v, _: f"{v:g}"))
    figure.legend(*axes[0, 0].get_legend_handles_labels(), frameon=False, fontsize=9, ncols=3,
                  loc="outside upper right")
    axes[1, 0].set_ylabel("peak memory, GB")
    top = max(r["peak_bytes"] for n, _ in _PANELS for r in result[n] if "failed" not in r) / 1e9
    axes[1, 0].set_ylim(0, 1.25 * top)
    facts = section["run"]
    trial = "QUICK TRIAL, do not quote. " if section["quick"] else ""
    axes[0, 0].set_title(f"{trial}{result['base']} with one size changed at a time", loc="left",
                         fontsize=10.5, color=_INK)
    figure.supxlabel(f"{facts['processor']}, {facts['cores']} cores, {facts['date']}; "
                     f"subside {facts.get('subside', '')} ({facts['commit']})",
                     x=0.01, ha="left", fontsize=8, color=_INK)
    figure.savefig(path, dpi=160)


def _seconds(ax: Axes, rows: list[dict[str, Any]], labelled: bool) -> None:
    size = np.array([r["size"] for r in rows], dtype=float)
    run = np.array([r["seconds"]["median"] for r in rows])
    spread = np.array([[r["seconds"]["median"] - r["seconds"]["lowest"],
                        r["seconds"]["highest"] - r["seconds"]["median"]] for r in rows]).T
    files = np.array([r["read_s"]["median"] + r["write_s"]["median"] for r in rows])
    names = ("subside run", "read + write the files", "slope 1") if labelled else ("",) * 3
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.plot(size, run[-1] * size / size[-1], color=_GUIDE, lw=1, ls=(0, (4, 3)),
            label=names[2], zorder=1)
    ax.plot(size, files, color=_FILES, marker="s", ms=5, mfc="white", lw=1.4, label=names[1])
    ax.errorbar(size, run, yerr=spread, color=_RUN, marker="o", ms=5.5, lw=1.8, capsize=2.5,
                label=names[0])
    # the guide may start far below what is measured: it does not set the axis
    ax.set_ylim(0.6 * min(run.min(), files.min()), 1.8 * max(run.max(), files.max()))
    ax.set_xlim(size[0] / 1.5, size[-1] * 1.5)
    _dress(ax)


def _memory(ax: Axes, rows: list[dict[str, Any]], budget: str | None) -> None:
    ax.plot([r["size"] for r in rows], [r["peak_bytes"] / 1e9 for r in rows], color=_MEMORY,
            marker="D", ms=4.5, lw=1.4)
    if budget is not None:
        ax.annotate(f"asked for: --memory {budget}", (0.03, 0.86), xycoords="axes fraction",
                    fontsize=8.5, color=_INK)
    _dress(ax)


def _dress(ax: Axes) -> None:
    ax.grid(True, which="major", color="#e4e7e9", lw=0.7)
    ax.set_axisbelow(True)
    ax.spines[["top", "right"]].set_visible(False)
    ax.spines[["left", "bottom"]].set_color(_INK)
    ax.tick_params(colors=_INK, labelsize=9)


def _side(pixels: float) -> str:
    return f"{round(pixels**0.5)}²"


def _count(value: float) -> str:
    for unit, name in ((1e6, " M"), (1e3, " k")):
        if value >= unit:
            return f"{value / unit:.3g}{name}"
    return f"{value:g}"
