"""Quantities with units, to and from SI.

`pint` does the arithmetic. Added here are the spellings that flow simulators and rock laboratories
use (barsa, psia, mD, ...), the exponent style of CF files (``kg m-3``), and refusals of the few
names that general libraries read as something else without saying so.
"""

from __future__ import annotations

import functools
import re
from typing import Any

from subside.errors import InputError

__all__ = ["parse_memory", "parse_quantity", "same_dimension", "scale_to_si"]

# Exact factors: 1 darcy = 9.869233e-13 m2 (SPE Metric Standard, 1984); 1 oil barrel = 42 US gal.
_DEFINITIONS = """
barsa = bar
bara = bar
psia = psi
PSI = psi
PSIA = psi
kgf_per_cm2 = kgf / cm ** 2
mD = 9.869233e-16 m**2
millidarcy = mD
darcy_unit = 9.869233e-13 m**2
US_survey_foot = 1200/3937 m = usft = ftUS
stb = 0.158987294928 m**3 = STB
fraction = []
""".strip().splitlines()

# What nearly every run needs, in the syntax of pint: reading its own thousand units takes a quarter
# of a second. No prefixes, so that a word means what is written here or is looked up in the whole
# registry. By definition a pound is 0.45359237 kg, an inch 0.0254 m, standard gravity 9.80665 m/s2.
_EVERYDAY = """
meter = [length] = m = metre = meters = metres
millimeter = 1e-3 * meter = mm
centimeter = 1e-2 * meter = cm
kilometer = 1e3 * meter = km
inch = 0.0254 * meter
foot = 0.3048 * meter = ft = feet
US_survey_foot = 1200 / 3937 * meter = usft = ftUS
second = [time] = s
day = 86400 * second = _ = days
year = 365.25 * day = _ = years
kilogram = [mass] = kg
pascal = kilogram / meter / second ** 2 = Pa
kilopascal = 1e3 * pascal = kPa
megapascal = 1e6 * pascal = MPa
gigapascal = 1e9 * pascal = GPa
bar = 1e5 * pascal = barsa = bara
psi = 0.45359237 * 9.80665 / 0.0254 ** 2 * pascal = psia = PSI = PSIA
atm = 101325 * pascal
kelvin = [temperature] = K
degree_Celsius = kelvin; offset: 273.15 = degC
mD = 9.869233e-16 * meter ** 2 = millidarcy
darcy_unit = 9.869233e-13 * meter ** 2
stb = 0.158987294928 * meter ** 3 = STB
fraction = []
percent = 1e-2
radian = []
degree = 0.017453292519943295 * radian
bit = []
byte = 8 * bit = B
kB = 1e3 * byte
MB = 1e6 * byte
GB = 1e9 * byte
TB = 1e12 * byte
KiB = 1024 * byte
MiB = 1048576 * byte
GiB = 1073741824 * byte
TiB = 1099511627776 * byte
""".strip().splitlines()
_MEMORY = ("B", "kB", "MB", "GB", "TB", "KiB", "MiB", "GiB", "TiB")

_REFUSED = {
    "barg": "a gauge pressure; add the atmosphere and give 'bar' (absolute)",
    "psig": "a gauge pressure; add the atmosphere and give 'psi' (absolute)",
    "md": "ambiguous (a milli-day elsewhere); write 'mD' for millidarcy",
    "mpa": "ambiguous; write 'MPa' for megapascal or 'mPa' for millipascal",
    "a": "ambiguous (year or are); write 'year'",
    "m/a": "ambiguous; write 'm/year'",
}
_ALIASES = {"bbl": "stb", "%": "percent", "kgf/cm2": "kgf_per_cm2", "D": "darcy_unit",
            "darcy": "darcy_unit", "yr": "year", "°": "degree", "degrees": "degree",
            "barrel": "stb", "per year": "1/year", "": "dimensionless", "1": "dimensionless"}
_COMMON = ("Pa, kPa, MPa, bar, barsa, psi, psia, atm, m, ft, km, mD, 1/bar, 1/psi, day, year, "
           "mm/year")
_NUMBER = r"[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?"
_EXPONENT = re.compile(r"(?<![\w.])([A-Za-z_%°µ]+)\^?(-?\d+)(?![\w.])")


@functools.cache
def _everyday_words() -> frozenset[str]:
    """The words that `_EVERYDAY` explains."""
    names = [re.split(r"\s+=\s+", line) for line in _EVERYDAY]
    return frozenset({"dimensionless"}.union(*({first, *others} for first, _, *others in names))
                     - {"_"})


@functools.cache
def _registry(everyday: bool) -> Any:
    """Units by name: the few that nearly every run needs, or all that pint knows and ours."""
    import pint

    if everyday:
        return pint.UnitRegistry(_EVERYDAY, case_sensitive=True, cache_folder=None)
    registry: Any = pint.UnitRegistry(case_sensitive=True, cache_folder=None)
    for line in _DEFINITIONS:
        registry.define(line)
    return registry


def _tidy(unit: str) -> str:
    """``kg m-3`` to ``kg*m**-3``, known aliases to their one name."""
    text = unit.strip()
    if text in _ALIASES:
        return _ALIASES[text]
    text = text.replace("·", "*").replace("²", "**2").replace("³", "**3").replace("^", "**")
    words = set(re.findall(r"[A-Za-z_%°µ]+", text))
    for word in words & _REFUSED.keys():
        raise InputError(f"unit '{unit}' is {_REFUSED[word]}.")
    if "**" not in text:
        text = _EXPONENT.sub(r"\1**\2", text)
    text = re.sub(r"(?<=[\w)])\s+(?=[A-Za-z(])", "*", text)
    for word in words & _ALIASES.keys():
        text = re.sub(rf"(?<![\w]){re.escape(word)}(?![\w])", _ALIASES[word], text)
    return text


@functools.lru_cache(maxsize=512)
def _readable(unit: str) -> str:
    """The expression to hand to pint; refused if ambiguous or a danger."""
    if unit.strip() in _REFUSED:
        raise InputError(f"unit '{unit}' is {_REFUSED[unit.strip()]}.")
    text = _tidy(unit)
    # A unit comes from a file: nothing that could keep the machine busy (9**9**9**9) goes further.
    if len(text) > 80 or re.search(r"\d\s*\)*\s*\*\*|\*\*\s*\(?\s*[-+]?\d{2,}", text):
        raise InputError(f"unknown unit '{unit[:80]}'; known are for example {_COMMON}.")
    return text


def _everyday(text: str) -> bool:
    """True if every word of an expression is an everyday one."""
    words = filter(None, re.findall(rf"{_NUMBER}|([^\W\d]\w*)", text))
    return _everyday_words().issuperset(words) and "°" not in text


@functools.lru_cache(maxsize=512)
def _parsed(unit: str, everyday: bool) -> Any:
    """The pint quantity (1 unit), or a clear error for a name nobody knows."""
    registry = _registry(everyday)
    try:
        quantity = registry.parse_expression(_readable(unit))
    except InputError:
        raise
    except Exception as error:
        raise InputError(
            f"unknown unit '{unit}'; known are for example {_COMMON}."
        ) from error
    if isinstance(quantity, (int, float)):
        quantity = registry.Quantity(quantity, "")
    return quantity


@functools.lru_cache(maxsize=512)
def scale_to_si(unit: str, si_unit: str) -> tuple[float, float]:
    """`(factor, offset)` such that ``si = value * factor + offset``.

    Parameters
    ----------
    unit : str
        What the file or the user says, such as ``"barsa"`` or ``"1/psi"``.
    si_unit : str
        The SI unit of the thing, such as ``"Pa"``; ``"1"`` for a plain number.

    Raises
    ------
    InputError
        If the unit is unknown, refused as ambiguous, or of another dimension.
    """
    everyday = _everyday(_readable(unit)) and _everyday(_readable(si_unit))
    quantity = _parsed(unit, everyday)
    target = _parsed(si_unit, everyday)
    if not quantity.is_compatible_with(target.units):
        raise InputError(f"unit '{unit}' is not a unit of {_what(si_unit)} (such as '{si_unit}').")
    if str(quantity.units) in {"degree_Celsius", "degree_Fahrenheit"}:
        registry = _registry(everyday)
        low = registry.Quantity(0.0, quantity.units).to(target.units).magnitude
        high = registry.Quantity(1.0, quantity.units).to(target.units).magnitude
        return float(high - low), float(low)
    return float(quantity.to(target.units).magnitude / target.magnitude), 0.0


def same_dimension(unit: str, si_unit: str) -> bool:
    """True if `unit` is known and measures the same thing as `si_unit`."""
    try:
        scale_to_si(unit, si_unit)
    except InputError:
        return False
    return True


def parse_quantity(value: object, si_unit: str, *, name: str, unit_needed: bool = False) -> float:
    """A quantity of the scenario as an SI number.

    Parameters
    ----------
    value : str, int or float
        ``"1.1e-5 1/bar"``, ``"2.9 km"``, or a plain number, which is taken as SI.
    si_unit : str
        The SI unit wanted, ``"1"`` for a plain number.
    name : str
        What is being read (a key), for the message.
    unit_needed : bool
        Refuse plain numbers (times and rates, where SI seconds are never what was meant).

    Raises
    ------
    InputError
        Naming the key, the value and the way out.
    """
    if isinstance(value, bool) or not isinstance(value, (int, float, str)):
        raise InputError(f"{name} = {value!r} is not a quantity; write \"NUMBER UNIT\", "
                         f"for example \"1 {si_unit}\".")
    if isinstance(value, (int, float)):
        if unit_needed and value != 0:
            example = {"s": "year", "Pa/s": "bar/year", "1/s": "1/year"}.get(si_unit, si_unit)
            raise InputError(f"{name} = {value!r} has no unit; times and rates need one, "
                             f"for example \"{value} {example}\".")
        number, unit = float(value), si_unit
    else:
        match = re.fullmatch(rf"\s*({_NUMBER}|[-+]?inf|nan)\s*(.*?)\s*", value)
        if not match:
            raise InputError(f"{name} = {value!r} is not a quantity; write \"NUMBER UNIT\", "
                             f"for example \"1 {si_unit}\".")
        number, unit = float(match[1]), match[2]
        if not unit:
            if si_unit != "1":
                raise InputError(f"{name} = {value!r} has no unit; write for example "
                                 f"\"{match[1]} {si_unit}\".")
            unit = "1"
    if not abs(number) < float("inf"):
        raise InputError(f"{name} = {value!r} is not a finite number.")
    try:
        factor, offset = scale_to_si(unit, si_unit)
    except InputError as error:
        raise InputError(f"{name} = {value!r}: {error}") from None
    return number * factor + offset


def parse_memory(text: str, *, name: str) -> int:
    """An amount of memory, ``"2 GB"`` or ``"512MiB"``, in bytes.

    Raises
    ------
    InputError
        Naming the option, the value and the way out.
    """
    match = re.fullmatch(rf"\s*({_NUMBER})\s*(\S*)\s*", text)
    number, unit = (float(match[1]), match[2]) if match else (0.0, "")
    if unit not in _MEMORY:
        raise InputError(f"{name} = '{text}' is not an amount of memory; write a number and one of "
                         f"{', '.join(_MEMORY)}, for example \"2 GB\".")
    if not 0.0 < number < float("inf"):
        raise InputError(f"{name} = '{text}' must be above zero and finite, for example \"2 GB\".")
    return int(number * scale_to_si(unit, "B")[0])


def _what(si_unit: str) -> str:
    return {
        "Pa": "pressure or stress", "1/Pa": "compressibility", "m": "length", "m2": "area",
        "s": "time", "1": "a plain number", "Pa/s": "stress rate", "m3": "volume",
        "degree": "angle", "Pa/m": "pressure gradient", "m/s": "rate", "kg m-3": "density",
    }.get(si_unit, f"the kind of '{si_unit}'")
