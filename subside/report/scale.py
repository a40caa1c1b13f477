"""From subsidence to colour: the unit, the levels, a colour for each band between levels."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from matplotlib import colors

from subside.report import style

__all__ = ["Scale"]

_NOISE = 2e-3
"""Uplift below this share of the largest subsidence is not shown as uplift."""


@dataclass(frozen=True)
class Scale:
    """Bands of colour; zero is paper, and both ways the same strength means the same movement.

    Attributes
    ----------
    unit : DisplayUnit
    levels : array (n + 1,)
        Round numbers in that unit, zero among them.
    shades : array (n, 4)
        RGBA of each band.
    norm : BoundaryNorm
    moved : bool
        False where nothing moves at all.
    split : bool
        Uplift has bands of its own.
    heaves : bool
        The ground rises somewhere, be it a little.
    """

    unit: style.DisplayUnit
    levels: np.ndarray
    shades: np.ndarray
    norm: colors.BoundaryNorm
    moved: bool
    split: bool
    heaves: bool

    @classmethod
    def of(cls, lowest: float, highest: float, split: bool) -> Scale:
        """The scale for subsidence in m from `lowest` (negative: uplift) to `highest`."""
        lowest, highest = min(lowest, 0.0), max(highest, 0.0)
        unit = style.length_unit(max(highest, -lowest))
        moved = highest > 0.0 or lowest < 0.0
        levels = np.array([0.0, 1.0])
        if split or highest > 0.0:
            levels = style.even_levels(lowest * unit.per_si if split else 0.0,
                                       highest * unit.per_si)
        norm = colors.BoundaryNorm(levels, levels.size - 1)
        return cls(unit, levels, _shades(levels, split), norm, moved, split,
                   heaves=lowest < -_NOISE * highest)

    @property
    def colours(self) -> colors.Colormap:
        """The bands as a colour map, with a tint for uplift that has no band of its own."""
        return colors.ListedColormap(self.shades).with_extremes(under=self.uplift_tint,
                                                                over=tuple(self.shades[-1]))

    @property
    def filled(self) -> np.ndarray:
        """The levels for filling: what little uplift is noise stays in the first band."""
        first = self.levels[0] if self.split else -_NOISE * self.levels[-1]
        return np.concatenate([[first], self.levels[1:]])

    @property
    def uplift_tint(self) -> str:
        """What little uplift is shown in."""
        return colors.to_hex(style.diverging()(0.46))

    @property
    def step(self) -> float:
        """From one level to the next."""
        return float(self.levels[1] - self.levels[0])


def _shades(levels: np.ndarray, split: bool) -> np.ndarray:
    """A colour for each band: nearly paper beside zero, the strongest at the far end."""
    near = np.minimum(np.abs(levels[:-1]), np.abs(levels[1:]))  # a band's edge beside zero
    step = levels[1] - levels[0]
    tint = (0.25 if split else 0.10) * step  # two sides of zero must differ, one need not
    share = (near + tint) / max(float(near.max()) + tint, 4.0 * step)
    if split:
        ramp, share = style.diverging(), 0.5 + 0.5 * np.sign(levels[:-1] + levels[1:]) * share
    else:
        ramp = style.sequential()
    return np.asarray(ramp(share))
