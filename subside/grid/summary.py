"""What is in a grid, in numbers: for ``inspect`` and for the run summary."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from subside.grid.check_geometry import depth_range
from subside.grid.fields import require_field

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["CUT_OFF", "cut_off_text", "edge_depletion", "initial_pressure_of", "summarise"]

CUT_OFF = 0.05
"""Share of the largest depletion on the outer edge above which a grid is too small."""


def initial_pressure_of(cells: xr.Dataset, given: float | np.ndarray | None = None) -> np.ndarray:
    """Initial pressure (cell,), Pa: what is given, else the dataset's, else the first step."""
    if given is not None:
        return np.broadcast_to(np.asarray(given, dtype=float), (cells.sizes["cell"],))
    first = cells["pressure"].values[0]
    if "initial_pressure" in cells:
        return require_field(cells, "initial_pressure", "Pa", "the summary").values
    return np.asarray(first)


def edge_depletion(cells: xr.Dataset, initial_pressure: float | np.ndarray | None = None) -> float:
    """Largest change of pressure on the grid's outer edge over the largest anywhere.

    Parameters
    ----------
    initial_pressure : float or array (cell,), optional
        Pa; the dataset's own, or the first step, when left out.

    Returns
    -------
    float
        0 to 1, over all steps; 0 where pressure changes nowhere.
    """
    on_edge, anywhere = _largest_changes(cells, initial_pressure_of(cells, initial_pressure))
    return on_edge / anywhere if anywhere > 0 else 0.0


def _largest_changes(cells: xr.Dataset, initial: np.ndarray) -> tuple[float, float]:
    edge = cells["edge"].values
    on_edge = anywhere = 0.0
    for pressure in cells["pressure"].values:  # a step at a time: no second copy of the history
        change = np.abs(initial - pressure)
        anywhere = max(anywhere, float(change.max()))
        on_edge = max(on_edge, float(change[edge].max(initial=0.0)))
    return on_edge, anywhere


def cut_off_text(share: float) -> str | None:
    """What to say of the edge depletion `share`: a sentence, or None where the grid is wide enough.
    """
    if share <= CUT_OFF:
        return None
    return (f"the depleted area is cut off by the grid: on its outer edge pressure changes by "
            f"{100 * share:.0f} % of the largest change anywhere, so subsidence there and beyond "
            "is too small; extend the grid or add the water leg.")


def summarise(cells: xr.Dataset, initial_pressure: float | np.ndarray | None = None
              ) -> dict[str, Any]:
    """The contents of a grid, ready for JSON; the unit is part of each key.

    Parameters
    ----------
    initial_pressure : float or array (cell,), optional
        Pa; the dataset's own, or the first step, when left out.

    Returns
    -------
    dict
        Mean pressures are weighted with volume. `largest_depletion_bar` is the largest fall below
        the initial pressure at any step (negative where pressure only rises). Pore volume is
        bulk volume times porosity times net to gross (1 where the grid has none), and None where
        there is no usable porosity. `cut_off` is a sentence or None.
    """
    initial = initial_pressure_of(cells, initial_pressure)
    time = np.datetime_as_string(cells["time"].values, unit="D").tolist()
    share = edge_depletion(cells, initial)
    names = [str(n) for n in cells["region_name"].values]
    region = cells["region"].values
    attrs = cells.attrs
    return {
        "file": str(attrs.get("source_file", "")),
        "layout": attrs.get("layout", ""),
        "shape_k_j_i": [int(n) for n in attrs.get("shape", ())],
        "cells_in_file": int(attrs.get("cells_in_file", cells.sizes["cell"])),
        "active_cells": int(cells.sizes["cell"]),
        "dropped": {n.removeprefix("dropped_"): int(v) for n, v in attrs.items()
                    if n.startswith("dropped_")},
        "crs": attrs.get("crs_name") or None,
        "vertical_datum": attrs.get("vertical_datum") or None,
        "extent_m": _extent(cells),
        "dates": time,
        "regions": {name: _part(cells, region == n, initial) for n, name in enumerate(names)},
        "total": _part(cells, np.ones(cells.sizes["cell"], dtype=bool), initial),
        "edge_depletion_share": share,
        "cut_off": cut_off_text(share),
        "warnings": list(attrs.get("warnings", [])),
    }


def _extent(cells: xr.Dataset) -> dict[str, float]:
    if "corners" in cells:
        places = cells["corners"].values[:, :, :2]
        low, high = places.min(axis=(0, 1)), places.max(axis=(0, 1))
    else:
        angle = np.radians(cells["azimuth"].values)
        sine, cosine = np.abs(np.sin(angle)), np.abs(np.cos(angle))
        dx, dy = cells["dx"].values, cells["dy"].values
        half = 0.5 * np.stack([dx * cosine + dy * sine, dx * sine + dy * cosine])
        centre = np.stack([cells["x"].values, cells["y"].values])
        low, high = (centre - half).min(axis=1), (centre + half).max(axis=1)
    return {"x_min": float(low[0]), "x_max": float(high[0]),
            "y_min": float(low[1]), "y_max": float(high[1])}


def _part(cells: xr.Dataset, own: np.ndarray, initial: np.ndarray) -> dict[str, Any]:
    """One region's numbers; `own` (cell,) says which cells are its."""
    volume = cells["volume"].values[own]
    shallowest, deepest = (d[own] for d in depth_range(cells))
    pressure = cells["pressure"]
    largest = max(float((initial[own] - step[own]).max()) for step in pressure.values)
    return {
        "cells": int(np.count_nonzero(own)),
        "bulk_volume_m3": float(volume.sum()),
        "pore_volume_m3": _pore_volume(cells, own),
        "shallowest_m": float(shallowest.min()),
        "deepest_m": float(deepest.max()),
        "mean_thickness_m": _mean_thickness(cells, own),
        "mean_initial_pressure_bar": float(np.average(initial[own], weights=volume)) / 1e5,
        "mean_last_pressure_bar": float(
            np.average(pressure.values[-1][own], weights=volume)) / 1e5,
        "largest_depletion_bar": largest / 1e5,
    }


def _pore_volume(cells: xr.Dataset, own: np.ndarray) -> float | None:
    if "porosity" not in cells:
        return None
    content = cells["volume"].values[own] * cells["porosity"].values[own]
    if "net_to_gross" in cells:
        content = content * cells["net_to_gross"].values[own]
    return float(content.sum()) if np.isfinite(content).all() else None


def _mean_thickness(cells: xr.Dataset, own: np.ndarray) -> float:
    """Mean over cells of the vertical thickness: of boxes, or over the corners."""
    if "corners" in cells:
        depth = cells["corners"].values[own][:, :, 2]
        return float((depth[:, 4:].mean(axis=1) - depth[:, :4].mean(axis=1)).mean())
    return float((cells["bottom"].values[own] - cells["top"].values[own]).mean())
