"""The cell dataset, put together from what a reader found."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from subside.grid.findings import Findings
from subside.grid.pillars import pillars
from subside.grid.solids import Solids
from subside.names import CELL_VARIABLES

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["CellParts", "assemble", "attributes", "on_edge"]


@dataclass
class CellParts:
    """What a reader hands over: active cells only, SI, depth positive down.

    Attributes
    ----------
    time : array (nt,) of datetime64[ns]
    solids : Solids
        Bodies of the n cells.
    region : array (n,) of int
        Index into `region_names`.
    layout : str
        For people.
    shape : tuple of int
        Of the file's cells: (nk, nj, ni), or (rows,).
    kept : array (n,) of int
        Flat numbers of the cells in the file.
    fields : dict
        Name to `(dims, values, attrs)`.
    ids : dict of str to array (n,)
        ``k``, ``j``, ``i`` from 0, or ``cell_id``.
    attrs : dict
        Attributes of the dataset.
    """

    time: np.ndarray
    solids: Solids
    region: np.ndarray
    region_names: list[str]
    layout: str
    shape: tuple[int, ...]
    kept: np.ndarray
    ids: dict[str, np.ndarray]
    fields: dict[str, tuple[tuple[str, ...], np.ndarray, dict[str, str]]] = field(
        default_factory=dict)
    attrs: dict[str, Any] = field(default_factory=dict)


def assemble(parts: CellParts, findings: Findings) -> xr.Dataset:
    """The cell dataset without its variables in time; see `subside.names.CELL_VARIABLES`."""
    import xarray as xr

    values: dict[str, np.ndarray] = {
        **parts.solids.shape, "volume": parts.solids.volume,
        "centroid": parts.solids.centroid, "region": parts.region,
        **{n: v.astype(np.int32, copy=False) if n in "kji" else v for n, v in parts.ids.items()},
        "edge": _edge(parts), "column": _column(parts),
    }
    variables: dict[str, Any] = {}
    for name, array in values.items():
        known = CELL_VARIABLES.get(name)
        variables[name] = (("cell",), array) if known is None else (
            known.dims, array, attributes(name))
    for name, (dims, array, own) in parts.fields.items():
        variables[name] = (dims, array, {**attributes(name), **own})
    shape = parts.shape if len(parts.shape) == 3 else (1, 1, parts.shape[0])
    return xr.Dataset(
        variables,
        coords={"time": parts.time, "region_name": (("region",), np.array(parts.region_names,
                                                                          dtype=object))},
        attrs={**parts.attrs, "layout": parts.layout, "shape": shape,
               "warnings": list(findings.warnings)},
    )


def attributes(name: str) -> dict[str, Any]:
    """Attributes of a variable of the cell dataset; none where it is no declared one."""
    known = CELL_VARIABLES.get(name)
    if known is None:
        return {}
    found = {"units": known.unit, "long_name": known.long_name}
    return found | ({"comment": known.comment} if known.comment else {})


def _column(parts: CellParts) -> np.ndarray:
    pillar = None
    if len(parts.shape) == 3:
        pillar = parts.ids["j"].astype(np.int64) * parts.shape[2] + parts.ids["i"]
    return pillars(parts.solids.shape, pillar)


def _edge(parts: CellParts) -> np.ndarray:
    if len(parts.shape) == 3:
        _, nj, ni = parts.shape
        j, i = parts.ids["j"], parts.ids["i"]
        return (j == 0) | (j == nj - 1) | (i == 0) | (i == ni - 1)
    shape = parts.solids.shape
    if "top" in shape:
        area = shape["dx"] * shape["dy"]
    else:
        corners = shape["corners"]
        area = parts.solids.volume / np.abs(corners[:, 4:, 2].mean(1) - corners[:, :4, 2].mean(1))
    return on_edge(parts.solids.centroid[:, :2], np.sqrt(area))


def on_edge(places: np.ndarray, width: np.ndarray) -> np.ndarray:
    """Cells within 0.7 of their width of the convex hull of all centres.

    Parameters
    ----------
    places : array (n, 2)
        Centres x, y, m.
    width : array (n,)
        Of the cells, m.
    """
    from scipy.spatial import ConvexHull, QhullError

    try:
        sides = ConvexHull(places - places.mean(axis=0)).equations
    except (QhullError, ValueError):  # fewer than three cells, or all in one line
        return np.ones(len(places), dtype=bool)
    local = places - places.mean(axis=0)
    inside = np.full(len(places), np.inf)
    for a, b, c in sides:
        np.minimum(inside, -(local[:, 0] * a + local[:, 1] * b + c), out=inside)
    return inside <= 0.7 * width
