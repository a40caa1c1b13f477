"""Numbers of the whole bowl: largest movement and where, volumes."""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["extremes", "volumes"]

_ONE_CENTIMETRE = 0.01


def extremes(values: np.ndarray, x: np.ndarray, y: np.ndarray) -> dict[str, np.ndarray]:
    """Largest subsidence and uplift at each date, with their places.

    Parameters
    ----------
    values : array (nt, n)
        Subsidence in m, positive down.
    x, y : array (n,)
        Places.

    Returns
    -------
    dict
        `max_subsidence`, `max_uplift` (m, zero where nothing sinks or rises), and their
        `_x`, `_y`, each (nt,).
    """
    found: dict[str, np.ndarray] = {}
    dates = np.arange(values.shape[0])
    for name, sign, place in (("max_subsidence", 1.0, values.argmax(axis=1)),
                              ("max_uplift", -1.0, values.argmin(axis=1))):
        found[name] = np.maximum(sign * values[dates, place], 0.0)
        found[f"{name}_x"] = x[place]
        found[f"{name}_y"] = y[place]
    return found


def volumes(subsidence: np.ndarray, pixel_area: float,
            threshold: float = _ONE_CENTIMETRE) -> tuple[np.ndarray, np.ndarray]:
    """Volume of the bowl on a map, m3 (nt,): of all of it, and of what sinks by `threshold` (m).

    `subsidence` is (nt, pixel) in m, positive down.
    """
    every, deep = _sums(np.ascontiguousarray(subsidence, dtype=float), threshold)
    return every * pixel_area, deep * pixel_area


@njit(cache=True, nogil=True, fastmath={"reassoc", "contract"})
def _sums(values: np.ndarray, threshold: float) -> tuple[np.ndarray, np.ndarray]:
    every, deep = np.zeros(values.shape[0]), np.zeros(values.shape[0])
    for t in range(values.shape[0]):
        a, b = 0.0, 0.0
        for n in range(values.shape[1]):
            a += values[t, n]
            b += values[t, n] if values[t, n] >= threshold else 0.0
        every[t], deep[t] = a, b
    return every, deep
