"""How much volume cells lose, and how much of it works as which kind of source.

A source closes vertically and releases horizontal stress. Both are carried as moments in m3, and
every elastic kernel is put together from a closing crack and a nucleus of strain::

    field = closure moment x crack + contraction moment x nucleus
    contraction moment = g e V,   closure moment = (1 - g) e V

with e the strain of the law, V the net bulk volume and g the horizontal release: 1 where the
reservoir is as stiff as its host ("matched"), G_res/G_host for a reservoir that releases
horizontal stress by its own stiffness ("own"). With the secant stiffness of the law,
G_res = (1-2nu)/(2(1-nu)) a Dp/e, the second becomes g e V = a Dp V / M_host, with no division by a
strain that may vanish.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from subside.api import EarthModel
from subside.compaction.rock import Block, Part

__all__ = ["Strength", "released", "releases_all"]


@dataclass(frozen=True)
class Strength:
    """What the cells of a storage block do at the n output dates of a leg.

    Attributes
    ----------
    volume_lost : array (n, cell)
        Strain times net bulk volume, m3.
    contraction : array (n, cell)
        Moment in m3; the same array as `volume_lost` where the block has no closure.
    closure : array (n, cell) or None
        Moment in m3; None where no cell of the block has any.
    strain : array (n, cell) or None
        Uniaxial strain, shortening positive; only where it was asked for.
    """

    volume_lost: np.ndarray
    contraction: np.ndarray
    closure: np.ndarray | None = None
    strain: np.ndarray | None = None

    @classmethod
    def empty(cls, dates: int, cells: int, closure: bool, strain: bool) -> Strength:
        """Room for so many dates and cells, to be filled by `put`."""
        shape = (dates, cells)
        lost = np.empty(shape)
        return cls(lost, np.empty(shape) if closure else lost,
                   np.empty(shape) if closure else None, np.empty(shape) if strain else None)

    @property
    def moments(self) -> dict[str, np.ndarray]:
        """Moments by source kind; a kind that no cell of the block uses is left out."""
        found = {"contraction": self.contraction}
        if self.closure is not None:
            found["closure"] = self.closure
        return found

    def put(self, start: int, columns: Part, strain: np.ndarray, net: np.ndarray,
            contraction: np.ndarray | None) -> None:
        """Fill some dates, from `start` on, and cells.

        Parameters
        ----------
        start : int
        columns : slice or array of int (c,)
        strain : array (n, c)
        net : array (c,)
            Net bulk volume, m3.
        contraction : array (n, c) or None
            Strain of the contraction part, g e; None for all of it.
        """
        here = (slice(start, start + strain.shape[0]), columns)
        if isinstance(columns, slice):
            np.multiply(strain, net, out=self.volume_lost[here])
        else:
            self.volume_lost[here] = strain * net
        if self.strain is not None:
            self.strain[here] = strain
        if self.closure is not None:
            lost = self.volume_lost[here]
            part = lost if contraction is None else contraction * net
            self.contraction[here] = part
            self.closure[here] = lost - part


def releases_all(block: Block) -> bool:
    """Whether every cell of a law's block is as stiff as its host, so that nothing is closure."""
    release = block.release
    if isinstance(release, str):
        return release == "matched"
    return bool(np.all(np.equal(release, 1.0)))


def released(block: Block, part: Part, strain: np.ndarray, rise: np.ndarray, earth: EarthModel,
             depth: np.ndarray) -> np.ndarray | None:
    """g e, the strain of the contraction part (n, c); None where that is all of it.

    `strain` and stress `rise` (Pa) are (n, c), `depth` (c,) m.
    """
    release = block.release
    if isinstance(release, np.ndarray):
        return np.asarray(strain * release[part])
    if release == "matched":
        return None
    if release == "own":
        return np.asarray(rise / earth.modulus_at(depth))
    return np.asarray(strain * release)
