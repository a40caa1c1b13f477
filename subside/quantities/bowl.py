"""Numbers of the whole bowl: largest movement and where, volumes."""

from __future__ import annotations

import numpy as np

__all__ = ["bowl_volume", "extremes", "volume_above"]

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
    for name, signed in (("max_subsidence", values), ("max_uplift", -values)):
        place = signed.argmax(axis=1)
        found[name] = np.maximum(signed[np.arange(values.shape[0]), place], 0.0)
        found[f"{name}_x"] = x[place]
        found[f"{name}_y"] = y[place]
    return found


def bowl_volume(moments: dict[str, np.ndarray], ratio: dict[str, np.ndarray]) -> np.ndarray:
    """Volume of the bowl out to infinity, m3 (nt,): moments times the earth's volume ratio.

    Parameters
    ----------
    moments : dict of source kind to array (nt, cell)
        m3 of volume lost.
    ratio : dict of source kind to array (cell,)
        Bowl volume per m3.
    """
    return np.asarray(sum(moment @ ratio[source] for source, moment in moments.items()))


def volume_above(subsidence: np.ndarray, pixel_area: float,
                 threshold: float = _ONE_CENTIMETRE) -> np.ndarray:
    """Volume over the pixels that sink by `threshold` (m) or more, m3 (nt,)."""
    inside = subsidence >= threshold
    return np.asarray(np.where(inside, subsidence, 0.0).sum(axis=(1, 2)) * pixel_area)
