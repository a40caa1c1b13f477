"""One declaration of a parameter, used by the scenario, the help, calibration and ensembles."""

from __future__ import annotations

import math
from dataclasses import dataclass

from subside.errors import InputError, PluginError
from subside.units import scale_to_si

__all__ = ["Parameter"]


@dataclass(frozen=True)
class Parameter:
    """A number a law, an earth model or another plug-in takes from the scenario.

    Attributes
    ----------
    name : str
        The key in the scenario.
    unit : str
        Its SI unit, such as ``"1/Pa"``; ``"1"`` for a plain number.
    meaning : str
        One line for the help, saying the sign where there is one.
    default : float or None
        SI value when the key is left out; None with `required` False means "not given".
    required : bool
        Whether leaving the key out is an error.
    minimum, maximum : float
        Bounds in SI. `open_minimum` and `open_maximum` exclude the bound itself.
    varies : bool
        Whether it may differ from cell to cell or region to region.
    datum_depth : bool
        A depth in the grid's vertical datum; whoever takes it gets it below the ground or seabed.
    unit_needed : bool
        Refuse plain numbers (times and rates).
    example : str
        A value a practitioner might write.
    """

    name: str
    unit: str
    meaning: str
    default: float | None = None
    required: bool = True
    minimum: float = -math.inf
    maximum: float = math.inf
    open_minimum: bool = False
    open_maximum: bool = False
    varies: bool = True
    datum_depth: bool = False
    unit_needed: bool = False
    example: str = ""

    def __post_init__(self) -> None:
        if not self.name.isidentifier():
            raise PluginError(f"parameter name {self.name!r} is not a plain word")
        scale_to_si(self.unit, self.unit)
        if self.default is not None and self.required:
            object.__setattr__(self, "required", False)

    def check(self, low: float, high: float, where: str) -> None:
        """Raise `InputError` if values from `low` to `high` (SI) leave the bounds."""
        for value in (low, high):
            below = value < self.minimum or (self.open_minimum and value <= self.minimum)
            above = value > self.maximum or (self.open_maximum and value >= self.maximum)
            if below or above or math.isnan(value):
                raise InputError(
                    f"{where}: {self.name} = {value:g} {self._unit()}is outside its bounds, "
                    f"{self.bounds_text()}; {self.meaning}."
                )

    def bounds_text(self) -> str:
        """The bounds in words, ``"above 0 1/Pa"``."""
        parts = []
        unit = f" {self.unit}" if self.unit != "1" else ""
        if math.isfinite(self.minimum):
            word = "above" if self.open_minimum else "at least"
            parts.append(f"{word} {self.minimum:g}{unit}")
        if math.isfinite(self.maximum):
            word = "below" if self.open_maximum else "at most"
            parts.append(f"{word} {self.maximum:g}{unit}")
        return " and ".join(parts) or "any number"

    def _unit(self) -> str:
        return f"{self.unit} " if self.unit != "1" else ""
