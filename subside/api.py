"""All that a plug-in may import.

>>> from subside.api import Law, Parameter, hookimpl
"""

from __future__ import annotations

from subside.errors import CannotDo, CheckFailed, InputError, PluginError, SubsideError
from subside.hooks.contracts import (
    COMMON_LAW_PARAMETERS,
    EarthModel,
    Exporter,
    History,
    Law,
    Quantity,
    Reader,
    Rock,
)
from subside.hooks.specs import hookimpl
from subside.params import Parameter
from subside.units import parse_quantity, scale_to_si

__all__ = [
    "API_VERSION",
    "COMMON_LAW_PARAMETERS",
    "CannotDo",
    "CheckFailed",
    "EarthModel",
    "Exporter",
    "History",
    "InputError",
    "Law",
    "Parameter",
    "PluginError",
    "Quantity",
    "Reader",
    "Rock",
    "SubsideError",
    "hookimpl",
    "parse_quantity",
    "scale_to_si",
]

API_VERSION = "1"
