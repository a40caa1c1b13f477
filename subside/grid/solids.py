"""The cells of a grid as bodies: read, judged, and those without volume dropped.

Everything here works on flat cells in metres with depth positive down, so a reader of another
kind of file can use `judge_corners` and `judge_boxes` as well.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from subside.grid.findings import Findings, declare
from subside.grid.geometry import Hexahedra, hexahedra, mirrored
from subside.grid.words import counted

__all__ = ["BOX", "Solids", "judge_boxes", "judge_corners"]

NO_GEOMETRY = declare("missing-geometry", "error")
UPSIDE_DOWN = declare("bottom-above-top", "error")
LEFT_HANDED = declare("left-handed", "warning")
NEGATIVE = declare("negative-volume", "error")
TWISTED = declare("twisted", "warning")

BOX = ("x", "y", "top", "bottom", "dx", "dy", "azimuth")
_THIN = 1e-7  # of the width: thinner is nothing
_FLAT = 1e-9  # of the cube of the extent: a smaller corner Jacobian is zero
_ABSURD = 1e8  # m: no map reaches so far
Place = Callable[[int], str]


@dataclass
class Solids:
    """Bodies of cells.

    Attributes
    ----------
    shape : dict of str to array
        ``corners`` (n, 8, 3), or the box variables, each (n,).
    volume : array (n,)
        m3, positive.
    centroid : array (n, 3)
        m.
    solid : array (m,) of bool
        Which of the m cells that were judged have a volume; the others are dropped here.
    """

    shape: dict[str, np.ndarray]
    volume: np.ndarray
    centroid: np.ndarray
    solid: np.ndarray = field(repr=False)


def judge_corners(corners: np.ndarray, place: Place, findings: Findings) -> Solids:
    """Measure hexahedra and refuse what is no body.

    Parameters
    ----------
    corners : array (m, 8, 3)
        x, y, depth in m of the active cells. May be changed in place: a left-handed grid is
        turned so that every corner Jacobian of a sound cell is positive.
    place : callable
        Number of a cell (0 to m - 1) to its place in the file.
    """
    reach = np.maximum(corners.max(axis=(1, 2)), -corners.min(axis=(1, 2)))
    missing = ~(reach < _ABSURD)  # so written, NaN counts as missing
    if missing.any():
        findings.add(NO_GEOMETRY, f"{counted(int(missing.sum()))} "
                     f"{_has(missing)} no corners (missing, or beyond {_ABSURD:g} m, as an "
                     f"undeclared fill value is), first {place(_first(missing))}; give them "
                     "corners or mark them inactive.")
    measured = hexahedra(corners)
    solid = ~measured.zero
    drop = corners[:, 4:, 2].sum(axis=1) - corners[:, :4, 2].sum(axis=1)
    wrong = solid & (drop < 0)
    if solid.any() and wrong.sum() > 0.5 * solid.sum():
        _upside_down(wrong, float(np.median(corners[solid, 0, 2])), drop / 4, place, findings)
    sign = 1.0
    if np.count_nonzero(measured.volume[solid] < 0) > 0.5 * np.count_nonzero(solid):
        findings.add(LEFT_HANDED, "the corners go round clockwise seen from above (a left-handed "
                     "grid: i or j runs the other way); volumes are taken as positive. Check that "
                     "x and y are not swapped.")
        sign = -1.0
        mirrored(corners)
    _refuse_folded(measured, sign, place, findings)
    kept = corners if solid.all() else corners[solid]
    return Solids({"corners": kept}, sign * measured.volume[solid], measured.centroid[solid], solid)


def _refuse_folded(measured: Hexahedra, sign: float, place: Place, findings: Findings) -> None:
    volume = sign * measured.volume
    folded = measured.least_jacobian < -_FLAT * measured.scale
    negative = (~measured.zero & (volume < 0)) | (measured.zero & folded)
    if negative.any():
        first = _first(negative)
        findings.add(NEGATIVE, f"{counted(int(negative.sum()))} {_has(negative)} a negative volume "
                     f"or {'is' if negative.sum() == 1 else 'are'} folded, first {place(first)}, "
                     f"volume {volume[first]:.6g} m3; check the order of its corners (top face "
                     "going round, then the bottom face in the same sense), or mark it inactive.")
    twisted = ~measured.zero & (volume > 0) & folded
    if twisted.any():
        first = _first(twisted)
        findings.add(TWISTED, f"{counted(int(twisted.sum()))} {_has(twisted)} a positive volume "
                     f"but {'is' if twisted.sum() == 1 else 'are'} twisted at a corner, first "
                     f"{place(first)}, corner Jacobian {measured.least_jacobian[first]:.3g} m3; "
                     "volume and centroid are exact all the same.")


def judge_boxes(box: dict[str, np.ndarray], place: Place, findings: Findings) -> Solids:
    """Measure boxes (x, y, top, bottom, dx, dy in m, azimuth in degrees) and refuse bad ones."""
    for name in BOX:
        missing = ~(np.abs(box[name]) < _ABSURD)
        if missing.any():
            findings.add(NO_GEOMETRY, f"variable '{name}' has no value in "
                         f"{counted(int(missing.sum()))} (missing, or beyond {_ABSURD:g}, as an "
                         f"undeclared fill value is), first {place(_first(missing))}; give it one "
                         "or mark the cell inactive.")
    for name in ("dx", "dy"):
        narrow = box[name] <= 0
        if narrow.any():
            first = _first(narrow)
            findings.add(NEGATIVE, f"{counted(int(narrow.sum()))} {_has(narrow)} {name} <= 0, "
                         f"first {place(first)} ({box[name][first]:g} m); a length is positive.")
    height = box["bottom"] - box["top"]
    thin = np.abs(height) <= _THIN * np.sqrt(box["dx"] * box["dy"])
    wrong = ~thin & (height < 0)
    if wrong.any():
        _upside_down(wrong, float(np.median(box["top"])), height, place, findings)
    solid = ~thin
    kept = {n: v[solid] for n, v in box.items()}
    middle = 0.5 * (kept["top"] + kept["bottom"])
    return Solids(kept, kept["dx"] * kept["dy"] * height[solid],
                  np.stack([kept["x"], kept["y"], middle], axis=1), solid)


def _upside_down(wrong: np.ndarray, depth: float, height: np.ndarray, place: Place,
                 findings: Findings) -> None:
    first = _first(wrong)
    text = (f"the bottom lies above the top in {counted(int(wrong.sum()))}, first {place(first)} "
            f"by {-height[first]:.6g} m; ")
    if depth < 0:
        text += (f"depths come out negative (median {depth:.6g} m), so the 'positive' attribute is "
                 "probably the wrong one of \"down\" (depth) and \"up\" (elevation).")
    else:
        text += ("swap top and bottom (of corners: the top face comes first), or check the "
                 "'positive' attribute.")
    findings.add(UPSIDE_DOWN, text)


def _first(flags: np.ndarray) -> int:
    return int(np.flatnonzero(flags)[0])


def _has(flags: np.ndarray) -> str:
    return "has" if np.count_nonzero(flags) == 1 else "have"
