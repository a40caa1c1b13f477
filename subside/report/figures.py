"""The figures saved beside a result."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import xarray as xr

from subside.errors import InputError
from subside.export.atomic import whole
from subside.export.files import refuse_existing
from subside.report.bowl_map import figure_bowl
from subside.report.curves import figure_curves

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.figure import Figure

__all__ = ["figure_bowl", "figure_curves", "made_from", "refuse_figures", "save_figures"]


def save_figures(
    result: xr.Dataset, stem: Path, *, survey: pd.DataFrame | None = None, overwrite: bool
) -> list[Path]:
    """Save ``STEM-map.png`` and ``STEM-curves.png``; return the files.

    Parameters
    ----------
    result : xarray.Dataset
        A result. A figure it has nothing for (no map and no points) is left out.
    stem : path
        Folder and beginning of the file names.
    survey : DataFrame, optional
        Measured values, see `figure_curves`.
    overwrite : bool
        Replace files that are there; `made_from` tells where they came from.

    Raises
    ------
    InputError
        If a file is there and may not be replaced; then none is written.
    CannotDo
        If the disk is full, not writable, ...
    """
    figures: dict[Path, Figure] = {}
    if "subsidence" in result or result.sizes.get("point", 0) > 0:
        figures[_beside(stem, "map")] = figure_bowl(result)
    figures[_beside(stem, "curves")] = figure_curves(result, survey)
    refuse_existing(figures, overwrite)
    metadata = {"Software": "subside", "Source": str(result.attrs.get("scenario_file", ""))}
    for path, figure in figures.items():
        with whole(path) as part:
            figure.savefig(part, format="png", metadata=metadata)
    return list(figures)


def refuse_figures(stem: Path, source: str, overwrite: bool) -> None:
    """Raise `InputError` if a figure is there that was not made from the scenario `source`.

    Asked before a long run, so that nothing is computed in vain.
    """
    if not overwrite:
        refuse_existing((path for path in (_beside(stem, "map"), _beside(stem, "curves"))
                         if path.exists() and made_from(path) != source), overwrite)


def made_from(path: Path) -> str | None:
    """The scenario file a figure was made from; None if it is no figure of ours."""
    from PIL import Image, UnidentifiedImageError

    try:
        with Image.open(path) as image:
            text = getattr(image, "text", {})
    except (OSError, UnidentifiedImageError, SyntaxError):
        return None
    return text.get("Source") if text.get("Software") == "subside" else None


def _beside(stem: Path, kind: str) -> Path:
    if not stem.name:
        raise InputError(f"'{stem}' is no beginning of a file name for figures.")
    return stem.with_name(f"{stem.name}-{kind}.png")
