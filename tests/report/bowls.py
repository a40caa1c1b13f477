"""Bowls made from Gaussian bells, for looking at and for tests; no real field is meant."""

from __future__ import annotations

import numpy as np
import pandas as pd
import xarray as xr


def bowl(kind: str = "ellipse", nx: int = 90, ny: int = 70, years: int = 16, points: int = 9,
         scale: float = 1.0, origin: tuple[float, float] = (512_000.0, 5_871_000.0)) -> xr.Dataset:
    """`ellipse`, `two` lobes, `ring` (within a ring of uplift) or `faint` (a faint one)."""
    spacing = 250.0
    x = origin[0] + spacing * (np.arange(nx) + 0.5)
    y = origin[1] + spacing * (np.arange(ny)[::-1] + 0.5)
    middle = origin[0] + 0.52 * spacing * nx, origin[1] + 0.47 * spacing * ny
    radius = 0.14 * spacing * max(nx, ny)

    def shape(px: np.ndarray, py: np.ndarray, width: float) -> np.ndarray:
        u, v = (px - middle[0]) / radius, (py - middle[1]) / radius
        u, v = 0.9 * u + 0.45 * v, 0.9 * v - 0.45 * u
        if kind == "two":
            return (np.exp(-(((u - 1.1) / 0.9) ** 2 + (v / 0.8) ** 2) / width)
                    + 0.62 * np.exp(-(((u + 1.2) / 0.8) ** 2 + ((v - 0.3) / 0.9) ** 2) / width))
        r2 = ((u / 1.35) ** 2 + (v / 0.85) ** 2) / width
        depth = {"ring": 1.3, "faint": 0.25}.get(kind, 0.0)
        return np.exp(-r2) * (1.0 - depth * r2)

    dates = np.array([f"{1990 + 2 * n}-01-01" for n in range(years)], "datetime64[ns]")
    growth = scale * 0.137 * (1.0 - np.exp(-np.arange(years) / 6.0)) if years > 1 else np.array(
        [scale * 0.137])
    grid_x, grid_y = np.meshgrid(x, y)
    down = growth[:, None, None] * shape(grid_x, grid_y, 2.0)
    inner = shape(grid_x, grid_y, 0.45)
    thick = growth[:, None, None] * 2.0 * np.where(inner > 0.1, inner, 0.0)
    rng = np.random.default_rng(7)
    px = middle[0] + radius * rng.uniform(-2.2, 2.2, points)
    py = middle[1] + radius * rng.uniform(-1.8, 1.8, points)
    at_points = growth[:, None] * shape(px, py, 2.0)
    volume = growth * 2 * np.pi * radius**2
    return xr.Dataset(
        {
            "subsidence": (("time", "y", "x"), down),
            "compaction": (("time", "y", "x"), thick),
            "point_subsidence": (("time", "point"), at_points),
            "point_x": ("point", px), "point_y": ("point", py),
            "max_uplift": ("time", np.maximum(0.0, -down.min(axis=(1, 2)))),
            "bowl_volume": ("time", volume),
            "region_compaction_volume": (("time", "region"),
                                         np.outer(volume, [0.37, 0.2, 0.11])),
        },
        coords={"time": dates, "y": y, "x": x,
                "point_name": ("point", np.array([f"BM{100 + 7 * n}" for n in range(points)])),
                "region_name": ("region", np.array(["north", "centre", "south"]))},
        attrs={"title": "Heron Flats, base case", "xy_unit": "m", "crs_wkt": "",
               "scenario_file": "heron-flats.toml", "time_start": "1990-01-01"},
    )


def survey(result: xr.Dataset, every: int = 3, sigma: float = 0.004) -> pd.DataFrame:
    """Values at every third date that scatter about the computed ones."""
    rng = np.random.default_rng(3)
    rows = [(str(name), when, float(result["point_subsidence"][t, p]) + rng.normal(0.0, sigma),
             sigma)
            for p, name in enumerate(result["point_name"].values[:5])
            for t, when in enumerate(result["time"].values) if t % every == 0 and t]
    return pd.DataFrame(rows, columns=["point", "date", "value_m", "sigma_m"])
