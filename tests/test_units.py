"""Units against exact definitions and an independent library (UDUNITS through cf-units)."""

from __future__ import annotations

import cf_units
import pytest

from subside import units
from subside.errors import InputError
from subside.units import parse_memory, parse_quantity, same_dimension, scale_to_si

# Exact by definition: bar, foot, US survey foot (1200/3937 m), pound-force (0.45359237 kg x
# 9.80665 m/s2), barrel (42 gallons of 231 cubic inches); darcy from the SPE Metric Standard (1984).
PSI = 0.45359237 * 9.80665 / 0.0254**2
EXACT = [
    ("bar", "Pa", 1e5), ("barsa", "Pa", 1e5), ("bara", "Pa", 1e5), ("MPa", "Pa", 1e6),
    ("kPa", "Pa", 1e3), ("psi", "Pa", PSI), ("psia", "Pa", PSI), ("PSI", "Pa", PSI),
    ("atm", "Pa", 101325.0), ("kgf/cm2", "Pa", 98066.5), ("ft", "m", 0.3048),
    ("US_survey_foot", "m", 1200 / 3937), ("usft", "m", 1200 / 3937), ("inch", "m", 0.0254),
    ("1/bar", "1/Pa", 1e-5), ("bar-1", "1/Pa", 1e-5), ("psi-1", "1/Pa", 1 / PSI),
    ("mD", "m2", 9.869233e-16), ("darcy", "m2", 9.869233e-13),
    ("bbl", "m3", 42 * 231 * 0.0254**3), ("stb", "m3", 42 * 231 * 0.0254**3),
    ("mm/year", "m/s", 1e-3 / (365.25 * 86400)), ("mm year-1", "m/s", 1e-3 / (365.25 * 86400)),
    ("kg m-3", "kg m-3", 1.0), ("%", "1", 0.01), ("1e-3", "1", 1e-3), ("fraction", "1", 1.0),
    ("bar/year", "Pa/s", 1e5 / (365.25 * 86400)),
]


@pytest.mark.parametrize(("unit", "si", "factor"), EXACT)
def test_factor_is_the_definition(unit: str, si: str, factor: float) -> None:
    assert scale_to_si(unit, si) == (pytest.approx(factor, rel=1e-14), 0.0)


@pytest.mark.parametrize("unit", ["bar", "psi", "kPa", "atm", "ft", "US_survey_foot", "inch",
                                  "bar-1", "psi-1", "darcy", "kg m-3"])
def test_agrees_with_udunits(unit: str) -> None:
    si = {"bar": "Pa", "psi": "Pa", "kPa": "Pa", "atm": "Pa", "bar-1": "Pa-1", "psi-1": "Pa-1",
          "darcy": "m2", "kg m-3": "kg m-3"}.get(unit, "m")
    theirs = cf_units.Unit(unit).convert(1.0, cf_units.Unit(si))
    assert scale_to_si(unit, si)[0] == pytest.approx(theirs, rel=1e-9)


def test_temperature_has_an_offset() -> None:
    factor, offset = scale_to_si("degC", "K")
    assert (20 * factor + offset) == pytest.approx(293.15)


@pytest.mark.parametrize(("unit", "says"), [
    ("barg", "gauge"), ("psig", "gauge"), ("md", "mD"), ("mpa", "MPa"), ("a", "year"),
    ("mm a-1", "year"), ("barrr", "known are"), ("9**9**9**9", "known are"),
    ("m**999999999", "known are"), ("m" * 500, "known are"), ("__import__('os')", "known are"),
])
def test_a_doubtful_unit_is_refused_with_the_way_out(unit: str, says: str) -> None:
    with pytest.raises(InputError, match=says):
        scale_to_si(unit, "Pa")


def test_another_dimension_is_refused() -> None:
    with pytest.raises(InputError, match="not a unit of length"):
        scale_to_si("bar", "m")
    assert not same_dimension("bar", "m") and same_dimension("ft", "m")


@pytest.mark.parametrize(("text", "si", "value"), [
    ("1.1e-5 1/bar", "1/Pa", 1.1e-10), ("2.9 km", "m", 2900.0), ("10GPa", "Pa", 1e10),
    ("0.0226 MPa/m", "Pa/m", 22600.0), (0.25, "1", 0.25), ("0.25", "1", 0.25), (5, "m", 5.0),
    ("-300 m", "m", -300.0),
])
def test_quantities(text: object, si: str, value: float) -> None:
    assert parse_quantity(text, si, name="key") == pytest.approx(value, rel=1e-14)


@pytest.mark.parametrize(("text", "si", "says"), [
    ("5", "m", "no unit"), ("abc", "m", "not a quantity"), (True, "m", "not a quantity"),
    ([1], "m", "not a quantity"), ("inf m", "m", "not a finite number"), ("3 bar", "m", "length"),
    ("1e400 m", "m", "not a finite number"),
])
def test_what_is_no_quantity_names_the_key(text: object, si: str, says: str) -> None:
    with pytest.raises(InputError, match=says) as caught:
        parse_quantity(text, si, name="[map] spacing")
    assert "[map] spacing" in str(caught.value)


def test_times_need_a_unit() -> None:
    with pytest.raises(InputError, match="times and rates need one"):
        parse_quantity(3, "s", name="delay_time", unit_needed=True)


@pytest.mark.parametrize("word", sorted(units._everyday_words()))
def test_everyday_words_mean_what_pint_says(word: str) -> None:
    """The short list that is read first against the whole registry, factor and dimension."""
    short, whole = (units._registry(everyday).Quantity(1.0, word) for everyday in (True, False))
    if word == "degC":
        short, whole = short.to("K"), whole.to("K")
    short, whole = short.to_base_units(), whole.to_base_units()
    assert short.magnitude == pytest.approx(whole.magnitude, rel=1e-14)
    assert dict(short.dimensionality) == dict(whole.dimensionality)


@pytest.mark.parametrize(("unit", "si", "factor"), [
    # Prefixes and rarer words are not in the short list; ms is no plural of the metre.
    ("ms", "s", 1e-3), ("hPa", "Pa", 100.0), ("min", "s", 60.0), ("cd/cd", "1", 1.0),
    ("meters", "m", 1.0), ("hours", "s", 3600.0), ("mile", "m", 1609.344), ("µm", "m", 1e-6),
    ("days", "s", 86400.0), ("m/days", "m/s", 1 / 86400),
])
def test_words_outside_the_short_list_are_whole_too(unit: str, si: str, factor: float) -> None:
    assert scale_to_si(unit, si)[0] == pytest.approx(factor, rel=1e-14)


def test_everyday_units_leave_the_whole_registry_alone() -> None:
    """Reading the whole registry takes a quarter of a second of every start."""
    units._registry.cache_clear()
    units.scale_to_si.cache_clear()
    units._parsed.cache_clear()
    for unit, si in [("barsa", "Pa"), ("1/psi", "1/Pa"), ("kg m-3", "kg m-3"), ("mm/year", "m/s"),
                     ("%", "1"), ("1e-3", "1"), ("ft", "m"), ("mD", "m2"), ("degC", "K")]:
        scale_to_si(unit, si)
    assert units._registry.cache_info().currsize == 1


@pytest.mark.parametrize(("text", "size"), [
    ("2 GB", 2 * 10**9), ("4GB", 4 * 10**9), ("1.5 TB", 15 * 10**11), ("512MiB", 512 * 2**20),
    (" .5 GiB ", 2**29), ("8e9 B", 8 * 10**9), ("700 kB", 700_000),
])
def test_memory_in_bytes(text: str, size: int) -> None:
    """SI prefixes are decimal, Ki, Mi, Gi, Ti are binary (IEC 80000-13)."""
    assert parse_memory(text, name="--memory") == size


@pytest.mark.parametrize("text", ["2", "", "GB", "2 gb", "2 Gb", "2 m", "two GB", "-1 GB", "0 GB",
                                  "inf GB", "nan GB", "2 GB 3", "1e400 GB", "50 %", "2,5 GB"])
def test_what_is_no_memory_names_the_option(text: str) -> None:
    with pytest.raises(InputError, match=r'--memory = .*for example "2 GB"'):
        parse_memory(text, name="--memory")
