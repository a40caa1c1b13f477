"""What a run says about its strains: found block by block, put together in any order."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

import numpy as np
import xarray as xr

from subside.compaction.fields import place
from subside.compaction.rock import Block

__all__ = ["Findings"]

_STRAIN_ALARM = 0.005
_FELL = 0.1


@dataclass
class Findings:
    """The largest strain, and how stiff the cells were at the last date.

    Attributes
    ----------
    strain : float
        The largest of all cells and output dates, shortening positive.
    date, cell : int
        Where it is; the first date of equal ones, the lowest cell of that date.
    stiffness : dict
        Number of the law's block to pairs of float32 arrays (n,): stress rise at the last output
        date, Pa, and strain over stress rise times the modulus of the host.
    """

    strain: float = 0.0
    date: int = -1
    cell: int = -1
    stiffness: dict[int, list[tuple[np.ndarray, np.ndarray]]] = field(default_factory=dict)

    def see_strain(self, strain: np.ndarray, date: int, cells: np.ndarray) -> bool:
        """Note the largest strain (n, cell) of output dates from `date` on.

        Returns
        -------
        bool
            False where a value is not finite.
        """
        top = float(strain.max(initial=0.0))
        if not np.isfinite(top + strain.sum()):
            return bool(np.isfinite(strain).all())
        if top > max(_STRAIN_ALARM, self.strain):
            row, column = np.unravel_index(int(strain.argmax()), strain.shape)
            self._take(top, date + int(row), int(cells[column]))
        return True

    def see_stiffness(self, block: int, strain: np.ndarray, rise: np.ndarray,
                      modulus: np.ndarray) -> None:
        """Note the stiffness of some cells: strain and stress rise (cell,) at the last date."""
        fell = rise > _FELL * max(float(rise.max(initial=0.0)), 1.0)
        if fell.any():
            ratio = strain[fell] / rise[fell] * np.broadcast_to(modulus, rise.shape)[fell]
            self.stiffness.setdefault(block, []).append(
                (rise[fell].astype(np.float32), ratio.astype(np.float32)))

    def merge(self, other: Findings) -> None:
        """Add what was found elsewhere."""
        if other.cell >= 0:
            self._take(other.strain, other.date, other.cell)
        for block, found in other.stiffness.items():
            self.stiffness.setdefault(block, []).extend(found)

    @classmethod
    def together(cls, parts: Iterable[Findings]) -> Findings:
        """All of them in one."""
        whole = cls()
        for part in parts:
            whole.merge(part)
        return whole

    def warnings(self, blocks: Sequence[Block], dataset: xr.Dataset) -> list[str]:
        """What there is to say."""
        found = [self._mismatch(number, block) for number, block in enumerate(blocks)]
        return [text for text in (*found, self._alarm(dataset)) if text]

    def _take(self, strain: float, date: int, cell: int) -> None:
        if (strain, -date, -cell) > (self.strain, -self.date, -self.cell):
            self.strain, self.date, self.cell = strain, date, cell

    def _alarm(self, dataset: xr.Dataset) -> str | None:
        """Sandstone production strain is normally below 0.5 % (common practice, no source)."""
        if self.strain <= _STRAIN_ALARM:
            return None
        return (f"strain reaches {100 * self.strain:.2g} % in {place(dataset, self.cell)}; "
                "sandstone normally stays below 0.5 %: check the compressibility and its unit.")

    def _mismatch(self, number: int, block: Block) -> str | None:
        """Says when a reservoir unlike its host is treated as if it were alike."""
        found = self.stiffness.get(number)
        if not found:
            return None
        rise = np.concatenate([part[0] for part in found])
        ratios = np.concatenate([part[1] for part in found])
        # each part left out what is little beside its own largest; now beside that of all
        ratio = float(np.median(ratios[rise > _FELL * max(float(rise.max()), 1.0)]))
        if 0.5 <= ratio <= 2.0:
            return None
        word = "softer" if ratio > 1 else "stiffer"
        return (f"{block.where}: strain over stress rise is {ratio:.2g} times 1/M of the host: the "
                f"reservoir is {word} than its host, and horizontal_release = \"matched\" then "
                "misstates the shape of the bowl (up to about 25 % of the peak at a "
                "compressibility 3 times the host's, computed independently by finite elements); "
                "consider horizontal_release = \"own\".")
