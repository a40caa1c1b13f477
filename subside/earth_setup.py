"""From the scenario's `[earth]` table to an earth model."""

from __future__ import annotations

from typing import Any

from subside.errors import InputError, nearest
from subside.hooks.contracts import EarthModel
from subside.hooks.registry import registry
from subside.scenario import EarthTable, parameter_value

__all__ = ["make_earth"]


def make_earth(table: EarthTable) -> EarthModel:
    """The earth model of a scenario, with its parameters in SI.

    Raises
    ------
    InputError
        Unknown model or key, a missing key, a value outside its bounds.
    """
    cls = registry.get("earth-model", table.model, "[earth] model")
    declared = {p.name: p for p in cls.parameters}
    for key in table.parameters:
        if key not in declared:
            raise InputError(f"[earth]: model '{table.model}' has no key '{key}'."
                             + nearest(key, [*declared, "surface", "model"]))
    if table.layer:
        raise InputError(f"[earth]: model '{table.model}' takes no [[earth.layer]] tables.")
    values: dict[str, Any] = {}
    for name, parameter in declared.items():
        if name in table.parameters:
            value = parameter_value(table.parameters[name], parameter, "[earth]")
            if not isinstance(value, float):
                raise InputError(f"[earth] {name} must be one quantity, the earth does not vary "
                                 "from cell to cell.")
            values[name] = value
            if parameter.datum_depth:
                values[name] = value - table.surface
                if values[name] <= 0:
                    raise InputError(
                        f"[earth] {name} = {value:g} m is not below the ground or seabed "
                        f"(surface = {table.surface:g} m).")
        elif parameter.required:
            raise InputError(f"[earth]: model '{table.model}' needs the key '{name}' "
                             f"({parameter.meaning}); for example {name} = "
                             f"\"{parameter.example}\".")
        elif parameter.default is not None:
            values[name] = parameter.default
    model: EarthModel = cls(**values)
    return model
