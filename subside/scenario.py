"""The scenario file as types. Nothing is computed here.

`load_scenario` reads the TOML file, turns quantities into SI numbers and refuses what it does not
know, naming the key, the value and the nearest known word.
"""

from __future__ import annotations

import datetime as dt
import difflib
import glob
import hashlib
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    FiniteFloat,
    ValidationError,
    ValidationInfo,
)

from subside.errors import InputError, nearest
from subside.params import Parameter
from subside.units import parse_quantity

__all__ = [
    "ByRegion", "CellField", "CompactionTable", "EarthTable", "GridTable", "MapTable",
    "RockValue", "Scenario", "load_scenario", "parameter_value",
]


@dataclass(frozen=True)
class CellField:
    """A rock parameter taken cell by cell from a variable of the grid."""

    name: str


@dataclass(frozen=True)
class ByRegion:
    """A rock parameter with one SI value for each region."""

    values: Mapping[str, float]


RockValue = float | CellField | ByRegion
"""What a rock parameter may be: one SI number, a grid field, or a number for each region."""


def _quantity(si_unit: str, key: str, positive: bool = False) -> BeforeValidator:
    def convert(value: object) -> float:
        number = parse_quantity(value, si_unit, name=key)
        if positive and not number > 0:
            raise InputError(f"{key} = {value!r} must be above zero.")
        return number

    return BeforeValidator(convert)


def _date(value: object, info: ValidationInfo) -> dt.datetime:
    """A TOML date, or a string YYYY-MM-DD (optionally with a time), without time zone."""
    if isinstance(value, dt.datetime):
        parsed = value
    elif isinstance(value, dt.date):
        parsed = dt.datetime(value.year, value.month, value.day)
    else:
        try:
            parsed = dt.datetime.fromisoformat(str(value))
        except ValueError:
            raise InputError(f"{info.field_name} = {value!r} is not a date; "
                             "write YYYY-MM-DD, for example \"1990-01-01\".") from None
    if parsed.tzinfo is not None:
        raise InputError(f"{info.field_name} = '{value}' has a time zone; leave it out.")
    if not 1700 <= parsed.year <= 2250:
        raise InputError(f"{info.field_name} = {str(value)!r} lies outside the years 1700 to 2250.")
    return parsed


Date = Annotated[dt.datetime, BeforeValidator(_date)]


def _files(value: object) -> tuple[str, ...]:
    """One path or pattern, or a list of them."""
    listed = value if isinstance(value, list) else [value]
    if not listed or not all(isinstance(one, str) and one.strip() for one in listed):
        raise InputError(f"grid.file = {value!r} is no file; write a path, a pattern with * such "
                         "as \"pressure-*.nc\", or a list of them for files that continue each "
                         "other in time.")
    return tuple(listed)


class _Table(BaseModel):
    model_config = ConfigDict(extra="forbid", arbitrary_types_allowed=True, frozen=True)


class TimeTable(_Table):
    """`[time]`: when the laws start and results are zero."""

    start: Date | None = None


class GridTable(_Table):
    """`[[grid]]`: a pressure grid and how to read it.

    `file` holds paths, and patterns with ``*``: of several files each continues the one before it.
    """

    file: Annotated[tuple[str, ...], BeforeValidator(_files)]
    name: str = "main"
    crs: str | None = None
    initial_pressure: Any = None
    accept: list[str] = Field(default_factory=list)


class CompactionTable(BaseModel):
    """`[[compaction]]`: a law, the regions it holds for, and its rock parameters."""

    model_config = ConfigDict(extra="allow", frozen=True)

    law: str
    regions: list[str] | None = None
    horizontal_release: Any = "matched"
    apply_net_to_gross: bool = True

    @property
    def parameters(self) -> dict[str, Any]:
        """The keys that belong to the law, as written in the file."""
        return dict(self.model_extra or {})


class EarthTable(BaseModel):
    """`[earth]`: the elastic model, and the depth of the ground or seabed."""

    model_config = ConfigDict(extra="allow", frozen=True)

    model: str
    surface: Annotated[float, _quantity("m", "[earth] surface")] = 0.0
    layer: list[dict[str, Any]] = Field(default_factory=list)

    @property
    def parameters(self) -> dict[str, Any]:
        """The keys that belong to the model, as written in the file."""
        return dict(self.model_extra or {})


class MapTable(_Table):
    """`[map]`: the regular north-up map; lengths in metres, bounds in the CRS's own unit."""

    spacing: Annotated[float, _quantity("m", "[map] spacing", positive=True)] | None = None
    bounds: tuple[FiniteFloat, FiniteFloat, FiniteFloat, FiniteFloat] | None = None


class PointsTable(_Table):
    """`[points]`: a CSV file of benchmarks or other places."""

    file: str


class SurveyTable(_Table):
    """`[survey]`: measured values, drawn over the curves."""

    file: str


class SolverTable(_Table):
    """`[solver]`: how the superposition is done and how exact it must be."""

    method: str = "auto"
    tolerance: Annotated[float, Field(ge=1e-9, le=1e-2)] = 1e-4


class OutputTable(_Table):
    """`[output]`: the result file, its dates and its further variables."""

    file: str | None = None
    times: Literal["all"] | list[Date] = "all"
    quantities: list[str] = Field(default_factory=list)


class _File(_Table):
    title: str = ""
    time: TimeTable = TimeTable()
    grid: list[GridTable]
    compaction: list[CompactionTable]
    earth: EarthTable
    map: MapTable | None = None
    points: list[PointsTable] = Field(default_factory=list)
    survey: SurveyTable | None = None
    solver: SolverTable = SolverTable()
    output: OutputTable = OutputTable()
    plugins: list[str] = Field(default_factory=list)


class Scenario(_File):
    """A scenario as read: typed tables, its own path, text and checksum."""

    path: Path
    text: str
    checksum: str

    def resolve(self, file: str) -> Path:
        """A path of the scenario, relative to the scenario file."""
        try:
            path = (self.path.parent / file).resolve()
            path.exists()
        except (OSError, RuntimeError, ValueError) as error:
            raise InputError(f"scenario '{self.path}': '{file[:200]}' cannot be a file: {error}."
                             ) from None
        return path

    def grid_files(self) -> dict[str, Path]:
        """Files of the pressure grid by their names in the scenario, patterns written out.

        Raises
        ------
        InputError
            If a pattern matches nothing, or a file comes twice.
        """
        files: dict[str, Path] = {}
        for written in self.grid[0].file:
            names = [written] if "*" not in written else self._matching(written)
            for name in names:
                path = self.resolve(name)
                if path in files.values():
                    raise InputError(f"scenario '{self.path}': grid.file names '{name}' twice; "
                                     "each file adds its own dates, so name it once.")
                files[name] = path
        return files

    def _matching(self, pattern: str) -> list[str]:
        """Files that a pattern matches, as seen from the scenario; only ``*`` is special in it."""
        text = glob.escape(pattern).replace("[*]", "*")
        folder = self.path.parent
        found = sorted(n for n in glob.glob(text, root_dir=folder) if (folder / n).is_file())
        if not found:
            raise InputError(f"scenario '{self.path}': grid.file = '{pattern}' matches no file in "
                             f"'{folder.resolve()}'; check the pattern, which is relative to the "
                             "scenario file.")
        return found


def load_scenario(path: str | Path) -> Scenario:
    """Read a scenario file.

    Parameters
    ----------
    path : str or Path
        A TOML file.

    Raises
    ------
    InputError
        If the file cannot be read, is not TOML, or has an unknown key, a missing key or a value
        of the wrong kind or unit.
    """
    path = Path(path)
    try:
        raw = path.read_bytes()
        text = raw.decode("utf-8-sig")
        data = tomllib.loads(text)
    except FileNotFoundError:
        raise InputError(f"scenario '{path}' does not exist; `subside init DIR` writes one to "
                         "start from.") from None
    except OSError as error:
        raise InputError(f"scenario '{path}' cannot be read: {error.strerror}.") from None
    except UnicodeDecodeError:
        raise InputError(f"scenario '{path}' is not text in UTF-8.") from None
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"scenario '{path}' is not valid TOML: {error}.") from None
    for key in ("grid", "compaction", "points"):
        if isinstance(data.get(key), dict):
            data[key] = [data[key]]
    earth = data.get("earth")
    if isinstance(earth, dict) and isinstance(earth.get("layer"), dict):
        earth["layer"] = [earth["layer"]]
    try:
        _File.model_validate(data)
        scenario = Scenario.model_validate(
            data | {"path": path, "text": text, "checksum": hashlib.sha256(raw).hexdigest()}
        )
    except ValidationError as error:
        raise InputError(f"scenario '{path}': {_explain(error, data)}") from None
    except InputError as error:
        raise InputError(f"scenario '{path}': {error}") from None
    if not scenario.grid:
        raise InputError(f"scenario '{path}': [[grid]] is empty; name at least one pressure grid.")
    if len(scenario.grid) > 1:
        raise InputError(f"scenario '{path}': it has {len(scenario.grid)} [[grid]] tables; this "
                         "version takes one pressure grid. Run the fields one by one and add "
                         "their maps.")
    return scenario


def _explain(error: ValidationError, data: dict[str, Any]) -> str:
    """The first thing wrong, as one sentence with the way out."""
    first = error.errors()[0]
    location = [part for part in first["loc"] if not (isinstance(part, str) and "[" in part)]
    words = ".".join(str(p) for p in location if not isinstance(p, int))
    if first["type"] == "extra_forbidden":
        return f"unknown key '{words}'.{nearest(str(location[-1]), _known_keys(location))}"
    if first["type"] == "missing":
        return (f"key '{words}' is missing; add it (`subside init DIR` writes a scenario that "
                "shows how).")
    value = first.get("input")
    shown = f" = {value!r}" if isinstance(value, (str, int, float, bool, list)) else ""
    return f"{words}{shown}: {first['msg'][0].lower()}{first['msg'][1:]}."


def _known_keys(location: list[Any]) -> list[str]:
    tables: dict[str, type[BaseModel]] = {
        "time": TimeTable, "grid": GridTable, "map": MapTable, "points": PointsTable,
        "survey": SurveyTable, "solver": SolverTable, "output": OutputTable,
    }
    named = [p for p in location if isinstance(p, str)]
    model = tables.get(named[0], _File) if len(named) > 1 else _File
    return list(model.model_fields)


def parameter_value(
    raw: Any, parameter: Parameter, where: str, regions: list[str] | None = None
) -> RockValue:
    """A parameter of the file as an SI number, a field, or numbers by region; bounds checked.

    Parameters
    ----------
    raw : object
        As written: a quantity, or one of the tables ``{ field = ... }``, ``{ by_region = ... }``,
        ``{ distribution = ..., central = ... }``.
    parameter : Parameter
        Its declaration.
    where : str
        The table it stands in, for the message.
    regions : list of str, optional
        Names of the grid's regions, to refuse unknown ones.

    Raises
    ------
    InputError
        Unknown form, wrong unit, outside bounds.
    """
    key = f"{where} {parameter.name}"
    if not isinstance(raw, dict):
        number = parse_quantity(raw, parameter.unit, name=key, unit_needed=parameter.unit_needed)
        parameter.check(number, number, where)
        return number
    if "distribution" in raw:
        if "central" not in raw:
            raise InputError(f"{key}: a distribution needs the key 'central', the value that "
                             "`run` uses.")
        _check_distribution(raw, key)
        return parameter_value(raw["central"], parameter, where, regions)
    if not parameter.varies:
        raise InputError(f"{key} must be one quantity, it may not vary from cell to cell.")
    if set(raw) == {"field"}:
        return CellField(str(raw["field"]))
    if set(raw) == {"by_region"} and isinstance(raw["by_region"], dict):
        values: dict[str, float] = {}
        for region, text in raw["by_region"].items():
            if regions is not None and region not in regions:
                raise InputError(f"{key}: the grid has no region '{region}'."
                                 + nearest(region, regions))
            number = parse_quantity(text, parameter.unit, name=f"{key}.by_region.{region}",
                                    unit_needed=parameter.unit_needed)
            parameter.check(number, number, f"{where} by_region.{region}")
            values[region] = number
        return ByRegion(values)
    if "correlation" in raw or "from" in raw:
        form = "correlation" if "correlation" in raw else "from"
        raise InputError(f"{key}: the form {{ {form} = ... }} is not available in this version; "
                         "give a quantity, { field = ... } or { by_region = ... }.")
    raise InputError(f"{key} = {raw!r} is none of: a quantity such as \"{parameter.example}\", "
                     "{ field = NAME }, { by_region = { NAME = QUANTITY } }.")


def _check_distribution(raw: dict[str, Any], key: str) -> None:
    """Refuse a distribution that scipy.stats does not know, and keys it does not take."""
    from scipy import stats

    name = str(raw["distribution"])
    known = [n for n in dir(stats) if isinstance(getattr(stats, n), stats.rv_continuous)]
    if name not in known:
        close = difflib.get_close_matches(name, known, n=1)
        hint = f" Did you mean '{close[0]}'?" if close else ""
        raise InputError(f"{key}: distribution = '{name}' is not a continuous distribution of "
                         f"scipy.stats, such as 'norm', 'lognorm', 'uniform'.{hint}")
    shapes = getattr(stats, name).shapes
    allowed = {"distribution", "central", "loc", "scale",
               *(shapes.replace(" ", "").split(",") if shapes else ())}
    for word in raw:
        if word not in allowed:
            raise InputError(f"{key}: distribution '{name}' has no key '{word}'."
                             + nearest(word, allowed))
