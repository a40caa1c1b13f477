"""Results made from formulas, for the tests of writing and drawing; no real field is meant."""

from __future__ import annotations

import numpy as np
import xarray as xr
from pyproj import CRS

from subside.export.grid_mapping import axis_unit, projected_crs

ORIGINS = {32631: (500_000.0, 5_900_000.0), 28992: (230_000.0, 580_000.0),
           3035: (4_000_000.0, 3_300_000.0), 2276: (2_500_000.0, 7_000_000.0)}
"""Lower left corner of a map inside the area of use of the CRS, in its own unit."""


def control_value(step: int, row: int, column: int) -> float:
    """Subsidence in m that no mirror, shift or transposition reproduces."""
    return 0.002 + 0.1 * step + 0.1 * (row + 10 * column) / 32.0


def control_result(epsg: int | None, spacing: float = 100.0, ny: int = 5, nx: int = 7,
                   times: int = 3) -> xr.Dataset:
    """A small result whose subsidence at (time, row from north, column) is `control_value`."""
    x0, y0 = ORIGINS[epsg] if epsg else (0.0, 0.0)
    dates = np.array(["2001-01-01", "2011-01-01", "2021-01-01"], "datetime64[ns]")[:times]
    t, r, c = np.meshgrid(np.arange(times), np.arange(ny), np.arange(nx), indexing="ij")
    down = control_value(t, r, c)  # type: ignore[arg-type]
    wkt = CRS.from_epsg(epsg).to_wkt() if epsg else ""
    per_time = np.arange(times, dtype=float)
    return xr.Dataset(
        {
            "subsidence": (("time", "y", "x"), down),
            "displacement_east": (("time", "y", "x"), -0.1 * down),
            "displacement_north": (("time", "y", "x"), 0.2 * down),
            "compaction": (("time", "y", "x"), 1.5 * down),
            "region_subsidence": (("time", "region", "y", "x"),
                                  np.stack([0.25 * down, 0.75 * down], axis=1)),
            "tilt": (("time", "y", "x"), 1e-4 * down),
            "subsidence_rate": (("time", "y", "x"), 1e-9 * down),
            "point_subsidence": (("time", "point"), np.outer(per_time, [0.01, 0.02])),
            "point_displacement_east": (("time", "point"), np.outer(per_time, [0.001, 0.002])),
            "point_displacement_north": (("time", "point"), np.outer(per_time, [0.003, 0.004])),
            "point_x": ("point", x0 + np.array([120.0, 380.0])),
            "point_y": ("point", y0 + np.array([220.0, 140.0])),
            "point_depth": ("point", np.zeros(2)),
            "max_subsidence": ("time", 0.3 * per_time),
            "max_subsidence_x": ("time", np.full(times, x0 + 50.0)),
            "max_subsidence_y": ("time", np.full(times, y0 + 50.0)),
            "max_uplift": ("time", np.zeros(times)),
            "max_uplift_x": ("time", np.full(times, np.nan)),
            "max_uplift_y": ("time", np.full(times, np.nan)),
            "bowl_volume": ("time", 2e5 * per_time),
            "bowl_volume_map": ("time", 1.9e5 * per_time),
            "bowl_volume_1cm": ("time", 1.8e5 * per_time),
            "region_compaction_volume": (("time", "region"), np.outer(per_time, [1e5, 2e5])),
            "cell_compaction": (("time", "cell"), np.outer(per_time, [0.1, 0.2, 0.3])),
            "k": ("cell", np.array([0, 0, 1])),
        },
        coords={
            "time": dates,
            "y": y0 + spacing * (np.arange(ny)[::-1] + 0.5),
            "x": x0 + spacing * (np.arange(nx) + 0.5),
            "region_name": ("region", np.array(["north", "south"])),
            "point_name": ("point", np.array(["B1", "Bühl 2"])),
        },
        attrs={"title": "Reed Hollow, made up", "crs_wkt": wkt,
               "xy_unit": axis_unit(projected_crs(wkt)) if wkt else "m",
               "scenario_file": "reed-hollow.toml", "scenario_text": "title = 'Grüße'\n" * 20},
    )
