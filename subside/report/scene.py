"""What the map of a bowl shows, gathered from a result."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import xarray as xr

from subside.errors import InputError
from subside.export.grid_mapping import metres_per_unit

__all__ = ["OUTLINE_SHARE", "Scene", "edges", "gather", "has_uplift", "point_names", "view"]

UPLIFT_SHARE = 0.05
"""Uplift above this share of the largest subsidence gets colours of its own."""
OUTLINE_SHARE = 0.01
"""The reservoir is drawn where compaction exceeds this share of its largest value."""


@dataclass
class Scene:
    """What one map shows, in SI but for x and y, which are in the CRS's unit."""

    when: np.datetime64
    xy_unit: str
    x: np.ndarray
    y: np.ndarray
    down: np.ndarray | None  # (y, x), south first; None: no map
    outline: np.ndarray | None  # (y, x), true where the reservoir compacts
    point_x: np.ndarray
    point_y: np.ndarray
    point_down: np.ndarray
    point_name: tuple[str, ...]

    @property
    def metres(self) -> float:
        """Metres in one unit of x and y."""
        return metres_per_unit(self.xy_unit)

    def extreme(self, sign: float) -> tuple[float, float, float] | None:
        """Value, x and y of the largest subsidence (sign 1) or uplift (sign -1)."""
        found: list[tuple[float, float, float]] = []
        if self.down is not None and np.isfinite(self.down).any():
            row, column = np.unravel_index(np.nanargmax(sign * self.down), self.down.shape)
            found.append((float(self.down[row, column]), self.x[column], self.y[row]))
        if np.isfinite(self.point_down).any():
            n = int(np.nanargmax(sign * self.point_down))
            found.append((float(self.point_down[n]), self.point_x[n], self.point_y[n]))
        best = max(found, key=lambda item: sign * item[0], default=None)
        return best if best is not None and sign * best[0] > 0.0 else None


def on_the_ground(result: xr.Dataset) -> xr.Dataset:
    """The result without points in the rock, which are no part of the bowl.

    All are kept where there is nothing else to draw.
    """
    if "point_depth" not in result or "point" not in result.dims:
        return result
    ground = np.nonzero(~(result["point_depth"].values > 0.0))[0]
    return result.isel(point=ground) if ground.size or "subsidence" in result else result


def has_uplift(result: xr.Dataset) -> bool:
    """Whether the largest uplift exceeds 5 % of the largest subsidence, over all dates."""
    result = on_the_ground(result)
    down = up = 0.0
    for name in ("subsidence", "point_subsidence"):
        if name in result and result[name].size:
            down = max(down, float(result[name].max()))  # NaN loses every comparison
            up = max(up, -float(result[name].min()))
    if "max_uplift" in result and result["max_uplift"].size:
        up = max(up, float(result["max_uplift"].max()))
    return up > UPLIFT_SHARE * down and up > 0.0


def gather(result: xr.Dataset, time: object) -> Scene:
    """Gather what the map of a date shows.

    Raises
    ------
    InputError
        If there is neither a map nor points, no such date, or an unknown unit of x and y.
    """
    result = on_the_ground(result)
    has_map = "subsidence" in result
    has_points = "point_subsidence" in result and result.sizes.get("point", 0) > 0
    if not has_map and not has_points:
        raise InputError("this result has neither a map nor points, so there is no bowl to draw; "
                         "add [map] or [points] to the scenario and run again.")
    unit = str(result.attrs.get("xy_unit", "m"))
    if unit not in ("m", "km", "foot", "US_survey_foot"):
        raise InputError(f"xy_unit = '{unit}' is not a unit of maps; known are m, km, foot, "
                         "US_survey_foot.")
    times = result["time"].values
    n = _which(result, times, time, has_map, has_points)
    nothing: np.ndarray = np.empty(0)
    x, y, down, outline = nothing, nothing, None, None
    if has_map:
        ordered = result.sortby("y").sortby("x")
        down = ordered["subsidence"].isel(time=n).transpose("y", "x").values.astype(float)
        x, y = (ordered[name].values.astype(float) for name in ("x", "y"))
        outline = _outline(ordered)
    place_x, place_y, at_points = nothing, nothing, nothing
    names: tuple[str, ...] = ()
    if has_points:
        at_points = result["point_subsidence"].isel(time=n).values.astype(float)
        place_x, place_y = (result[name].values.astype(float) for name in ("point_x", "point_y"))
        names = point_names(result)
    return Scene(times[n], unit, x, y, down, outline, place_x, place_y, at_points, names)


def point_names(result: xr.Dataset) -> tuple[str, ...]:
    """Names of the points, or their numbers from 1."""
    if "point_name" in result.variables:
        return tuple(str(name) for name in result["point_name"].values)
    return tuple(str(n + 1) for n in range(result.sizes.get("point", 0)))


def _outline(result: xr.Dataset) -> np.ndarray | None:
    if "compaction" not in result:
        return None
    lost = np.nan_to_num(abs(result["compaction"]).max("time").transpose("y", "x").values)
    return lost > OUTLINE_SHARE * lost.max() if lost.size and lost.max() > 0.0 else None


def _which(
    result: xr.Dataset, times: np.ndarray, time: object, has_map: bool, has_points: bool
) -> int:
    """Index of the date asked for, or of the largest subsidence."""
    if time is not None:
        try:
            wanted = np.datetime64(time, "ns")  # type: ignore[call-overload]
        except (ValueError, TypeError) as error:
            raise InputError(f"time = {time!r} is not a date; write YYYY-MM-DD.") from error
        at = np.flatnonzero(times.astype("datetime64[ns]") == wanted)
        if not at.size:
            raise InputError(f"the result has no date {str(wanted)[:10]}; it has "
                             f"{', '.join(str(t)[:10] for t in times[:12])}"
                             f"{', ...' if len(times) > 12 else ''}.")
        return int(at[0])
    largest: np.ndarray = np.zeros(len(times))
    if has_map:
        largest = np.fmax(largest, result["subsidence"].max(("y", "x")).values)
    if has_points:
        largest = np.fmax(largest, result["point_subsidence"].max("point").values)
    return int(len(times) - 1 - np.argmax(largest[::-1]))


def view(scene: Scene) -> tuple[float, float, float, float]:
    """West, east, south, north of the picture: the map, or the points with a margin."""
    if scene.down is not None:
        west, east = edges(scene.x)[[0, -1]]
        south, north = edges(scene.y)[[0, -1]]
    else:
        west, east = scene.point_x.min(), scene.point_x.max()
        south, north = scene.point_y.min(), scene.point_y.max()
        margin = 0.12 * max(east - west, north - south) or 1000.0 / scene.metres
        west, east, south, north = west - margin, east + margin, south - margin, north + margin
    # A strip is shown with room beside it, so that title and footer keep theirs.
    wide, high = max(east - west, (north - south) / 1.35), max(north - south, (east - west) / 2.6)
    middle_x, middle_y = (west + east) / 2, (south + north) / 2
    return (middle_x - wide / 2, middle_x + wide / 2, middle_y - high / 2, middle_y + high / 2)


def edges(centres: np.ndarray) -> np.ndarray:
    """Outer edges of pixels; a single pixel counts as 100 units wide."""
    if centres.size == 1:
        return np.array([centres[0] - 50.0, centres[0] + 50.0])
    half = np.diff(centres) / 2
    return np.concatenate([[centres[0] - half[0]], centres[:-1] + half, [centres[-1] + half[-1]]])
