"""Which cells stand in one upright pillar."""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["pillars"]

_SAME = 1e-6  # m


def pillars(shape: dict[str, np.ndarray], bucket: np.ndarray | None = None) -> np.ndarray:
    """Number (n,) of the pillar that each cell stands in, from 0 without gaps.

    Cells share a pillar if their outlines are the same to 1e-6 m. A cell whose own edges lean has
    a pillar of its own.

    Parameters
    ----------
    shape : dict of str to array
        ``corners`` (n, 8, 3), or the box variables, each (n,); see `subside.grid.solids.Solids`.
    bucket : array (n,) of int, optional
        Only cells of one bucket are compared, such as those of one j and i; found from the
        outlines when left out.
    """
    if "corners" in shape:
        corners = shape["corners"]
        if bucket is None:
            bucket = _buckets(corners[:, 0, 0] + corners[:, 2, 0], corners[:, 0, 1]
                              + corners[:, 2, 1])
        return _by_corners(corners, bucket, int(bucket.max(initial=0)) + 1)
    if bucket is None:
        bucket = _buckets(shape["x"], shape["y"])
    return _by_boxes(shape["x"], shape["y"], shape["dx"], shape["dy"], shape["azimuth"], bucket,
                     int(bucket.max(initial=0)) + 1)


def _buckets(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """Numbers that are the same for the same place, to the nearest 10 um."""
    place = np.round(x * 1e5).astype(np.int64) * 0x9E3779B97F4A7C1 + np.round(y * 1e5).astype(
        np.int64)
    return np.unique(place, return_inverse=True)[1]


@njit(cache=True, nogil=True)
def _by_boxes(x, y, dx, dy, azimuth, bucket, buckets):  # type: ignore[no-untyped-def]
    n = len(x)
    column = np.empty(n, np.int32)
    newest = np.full(buckets, -1, np.int32)  # of each bucket
    cell = np.empty(n, np.int32)  # that began a column
    older = np.empty(n, np.int32)
    count = 0
    for c in range(n):
        known = newest[bucket[c]]
        while known >= 0:
            o = cell[known]
            turn = abs(azimuth[c] - azimuth[o]) * (dx[c] + dy[c]) * (np.pi / 180.0)
            if (abs(x[c] - x[o]) <= _SAME and abs(y[c] - y[o]) <= _SAME
                    and abs(dx[c] - dx[o]) <= _SAME and abs(dy[c] - dy[o]) <= _SAME
                    and turn <= _SAME):
                break
            known = older[known]
        if known < 0:
            known = count
            cell[count] = c
            older[count] = newest[bucket[c]]
            newest[bucket[c]] = count
            count += 1
        column[c] = known
    return column


@njit(cache=True, nogil=True)
def _by_corners(corners, bucket, buckets):  # type: ignore[no-untyped-def]
    n = len(corners)
    column = np.empty(n, np.int32)
    newest = np.full(buckets, -1, np.int32)
    cell = np.empty(n, np.int32)
    older = np.empty(n, np.int32)
    count = 0
    for c in range(n):
        upright = True
        for m in range(4):
            for axis in range(2):
                if abs(corners[c, m, axis] - corners[c, m + 4, axis]) > _SAME:
                    upright = False
        known = newest[bucket[c]] if upright else -1
        while known >= 0:
            o = cell[known]
            same = True
            for m in range(4):
                for axis in range(2):
                    if abs(corners[c, m, axis] - corners[o, m, axis]) > _SAME:
                        same = False
            if same:
                break
            known = older[known]
        if known < 0:
            known = count
            cell[count] = c
            if upright:
                older[count] = newest[bucket[c]]
                newest[bucket[c]] = count
            count += 1
        column[c] = known
    return column
