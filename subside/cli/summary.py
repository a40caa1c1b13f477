"""The facts of a result: as JSON, and as the table a run prints."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import click
import numpy as np
import xarray as xr

from subside.names import CAUTIONS

__all__ = ["facts_of", "print_summary"]


def facts_of(result: xr.Dataset) -> dict[str, Any]:
    """The numbers one asks for first, SI, at the last output date and at the extremes."""
    step = int(result["max_subsidence"].values.argmax())
    lift = int(result["max_uplift"].values.argmax())
    last = result.sizes["time"] - 1
    facts: dict[str, Any] = {
        "title": result.attrs["title"],
        "start": result.attrs["time_start"][:10],
        "last_date": _day(result, last),
        "max_subsidence_m": float(result["max_subsidence"][step]),
        "max_subsidence_date": _day(result, step),
        "max_subsidence_x": float(result["max_subsidence_x"][step]),
        "max_subsidence_y": float(result["max_subsidence_y"][step]),
        "max_uplift_m": float(result["max_uplift"][lift]),
        "max_uplift_date": _day(result, lift),
        "bowl_volume_m3": float(result["bowl_volume"][last]),
        "region_compaction_volume_m3": {
            str(name): float(value) for name, value in zip(
                result["region_name"].values, result["region_compaction_volume"].values[last],
                strict=True)},
        "edge_depletion": float(result.attrs["edge_depletion"]),
        "earth_model": result.attrs["earth_model"],
        "solver_method": result.attrs["solver_method"],
        "solver_tolerance": float(result.attrs["solver_tolerance"]),
        "solver_error": float(result.attrs["solver_error"]),
        "warnings": [w for w in str(result.attrs["warnings"]).split("\n") if w != "none"],
        "cautions": list(CAUTIONS),
    }
    if "bowl_volume_map" in result:
        facts["bowl_volume_map_m3"] = float(result["bowl_volume_map"][last])
        facts["map_pixels"] = [result.sizes["y"], result.sizes["x"]]
        facts["map_spacing"] = float(abs(result["x"][1] - result["x"][0]))
    if "point_name" in result:
        facts["points"] = result.sizes["point"]
    return facts


def print_summary(result: xr.Dataset, files: Sequence[Path]) -> None:
    """The table of a run, with its warnings and cautions."""
    facts = facts_of(result)
    unit = result.attrs["xy_unit"]
    rows = [
        ("period", f"{facts['start']} to {facts['last_date']}"),
        ("largest subsidence", f"{_length(facts['max_subsidence_m'])} at x "
         f"{facts['max_subsidence_x']:.0f} {unit}, y {facts['max_subsidence_y']:.0f} {unit} on "
         f"{facts['max_subsidence_date']}"),
    ]
    if facts["max_uplift_m"] > 0.0005:
        rows.append(("largest uplift", f"{_length(facts['max_uplift_m'])} on "
                     f"{facts['max_uplift_date']}"))
    last = facts["last_date"]
    rows.append((f"bowl volume {last}", f"{_volume(facts['bowl_volume_m3'])} in all"
                 + (f", {_volume(facts['bowl_volume_map_m3'])} on the map"
                    if "bowl_volume_map_m3" in facts else "")))
    rows += [(f"volume lost by {name}", _volume(value))
             for name, value in facts["region_compaction_volume_m3"].items()]
    rows.append(("depletion at edge", f"{100 * facts['edge_depletion']:.1f} % of the largest"))
    if "map_pixels" in facts:
        height, width = facts["map_pixels"]
        rows.append(("map", f"{width} x {height} pixels of {facts['map_spacing']:g} {unit}"))
    if "points" in facts:
        rows.append(("points", f"{facts['points']}"))
    rows.append(("earth", str(facts["earth_model"])))
    rows.append(("solver", f"{facts['solver_method']}; error {facts['solver_error']:.1g} of the "
                 f"largest movement, {facts['solver_tolerance']:g} allowed"))
    rows += [("written" if n == 0 else "", _shown(file)) for n, file in enumerate(files)]
    width = max(len(label) for label, _ in rows)
    click.echo(facts["title"])
    for label, text in rows:
        click.echo(f"  {label:<{width}}  {text}")
    for warning in facts["warnings"]:
        click.echo(f"warning: {warning}")
    click.echo("Cautions: " + " ".join(facts["cautions"]))


def _shown(file: Path) -> str:
    """A path as seen from the working folder where it lies below it."""
    here = Path.cwd()
    return str(file.relative_to(here) if file.is_relative_to(here) else file)


def _day(result: xr.Dataset, step: int) -> str:
    return str(result["time"].values[step].astype("datetime64[D]"))


def _length(value_m: float) -> str:
    if abs(value_m) >= 1.0:
        return f"{value_m:.3f} m"
    return f"{100 * value_m:.2f} cm" if abs(value_m) >= 0.1 else f"{1000 * value_m:.1f} mm"


def _volume(value_m3: float) -> str:
    if not np.isfinite(value_m3):
        return "unknown"
    if abs(value_m3) >= 1e6:
        return f"{value_m3 / 1e6:.3f} million m3"
    return f"{value_m3:,.0f} m3"
