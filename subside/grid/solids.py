"""The cells of a grid as bodies: read, judged, and those without volume dropped.

Everything here works on flat cells in metres with depth positive down, so a reader of another
kind of file can use `judge_corners` and `judge_boxes` as well.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from subside.grid.body_pass import measure_boxes
from subside.grid.findings import Findings, declare
from subside.grid.geometry import ABSURD, Hexahedra, hexahedra, mirrored
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
    measured = hexahedra(corners)
    missing = measured.missing
    count = int(missing.sum())
    if count:
        findings.add(NO_GEOMETRY, f"{counted(count)} {_has(count)} no corners (missing, or beyond "
                     f"{ABSURD:g} m, as an undeclared fill value is), first "
                     f"{place(_first(missing))}; give them corners or mark them inactive.")
    solid = ~measured.zero
    drop = measured.drop
    wrong = solid & (drop < 0)
    if solid.any() and wrong.sum() > 0.5 * solid.sum():
        first = _first(wrong)
        _upside_down(int(wrong.sum()), first, float(np.median(corners[solid, 0, 2])),
                     float(drop[first] / 4), place, findings)
    sign = 1.0
    if np.count_nonzero(measured.volume[solid] < 0) > 0.5 * np.count_nonzero(solid):
        findings.add(LEFT_HANDED, "the corners go round clockwise seen from above (a left-handed "
                     "grid: i or j runs the other way); volumes are taken as positive. Check that "
                     "x and y are not swapped.")
        sign = -1.0
        mirrored(corners)
    _refuse_folded(measured, sign, place, findings)
    if solid.all():
        return Solids({"corners": corners}, sign * measured.volume, measured.centroid, solid)
    return Solids({"corners": corners[solid]}, sign * measured.volume[solid],
                  measured.centroid[solid], solid)


def _refuse_folded(measured: Hexahedra, sign: float, place: Place, findings: Findings) -> None:
    volume = sign * measured.volume
    folded = measured.least_jacobian < -_FLAT * measured.scale
    negative = (~measured.zero & (volume < 0)) | (measured.zero & folded)
    count = int(negative.sum())
    if count:
        first = _first(negative)
        findings.add(NEGATIVE, f"{counted(count)} {_has(count)} a negative volume or "
                     f"{'is' if count == 1 else 'are'} folded, first {place(first)}, volume "
                     f"{volume[first]:.6g} m3; check the order of its corners (top face going "
                     "round, then the bottom face in the same sense), or mark it inactive.")
    twisted = ~measured.zero & (volume > 0) & folded
    count = int(twisted.sum())
    if count:
        first = _first(twisted)
        findings.add(TWISTED, f"{counted(count)} {_has(count)} a positive volume but "
                     f"{'is' if count == 1 else 'are'} twisted at a corner, first {place(first)}, "
                     f"corner Jacobian {measured.least_jacobian[first]:.3g} m3; volume and "
                     "centroid are exact all the same.")


def judge_boxes(box: dict[str, np.ndarray], place: Place, findings: Findings) -> Solids:
    """Measure boxes (x, y, top, bottom, dx, dy in m, azimuth in degrees) and refuse bad ones."""
    n = len(box["x"])
    volume, centroid, solid = np.empty(n), np.empty((n, 3)), np.empty(n, bool)
    counts, firsts = np.zeros(len(BOX) + 3, np.int64), np.zeros(len(BOX) + 3, np.int64)
    measure_boxes(box["x"], box["y"], box["top"], box["bottom"], box["dx"], box["dy"],
                  box["azimuth"], ABSURD, _THIN, volume, centroid, solid, counts, firsts)
    found = [(int(c), int(f)) for c, f in zip(counts, firsts, strict=True)]
    for name, (count, first) in zip(BOX, found, strict=False):
        if count:
            findings.add(NO_GEOMETRY, f"variable '{name}' has no value in {counted(count)} "
                         f"(missing, or beyond {ABSURD:g}, as an undeclared fill value is), first "
                         f"{place(first)}; give it one or mark the cell inactive.")
    for name, (count, first) in zip(("dx", "dy"), found[len(BOX):], strict=False):
        if count:
            findings.add(NEGATIVE, f"{counted(count)} {_has(count)} {name} <= 0, first "
                         f"{place(first)} ({box[name][first]:g} m); a length is positive.")
    count, first = found[-1]
    if count:
        _upside_down(count, first, float(np.median(box["top"])),
                     float(box["bottom"][first] - box["top"][first]), place, findings)
    if not solid.all():
        box = {name: values[solid] for name, values in box.items()}
        volume, centroid = volume[solid], centroid[solid]
    # the same numbers: of many cells they need not be kept twice
    return Solids({**box, "x": centroid[:, 0], "y": centroid[:, 1]}, volume, centroid, solid)


def _upside_down(count: int, first: int, depth: float, height: float, place: Place,
                 findings: Findings) -> None:
    text = (f"the bottom lies above the top in {counted(count)}, first {place(first)} "
            f"by {-height:.6g} m; ")
    if depth < 0:
        text += (f"depths come out negative (median {depth:.6g} m), so the 'positive' attribute is "
                 "probably the wrong one of \"down\" (depth) and \"up\" (elevation).")
    else:
        text += ("swap top and bottom (of corners: the top face comes first), or check the "
                 "'positive' attribute.")
    findings.add(UPSIDE_DOWN, text)


def _first(flags: np.ndarray) -> int:
    return int(np.flatnonzero(flags)[0])


def _has(count: int) -> str:
    return "has" if count == 1 else "have"
