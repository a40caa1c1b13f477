"""What a plug-in of each kind must offer: one abstract class per kind.

Everything here speaks SI. Arrays given to a plug-in are read-only.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import SimpleNamespace
from typing import TYPE_CHECKING, Any, ClassVar

from subside.params import Parameter

if TYPE_CHECKING:
    import numpy as np
    import xarray as xr

    Array = np.ndarray

__all__ = [
    "COMMON_LAW_PARAMETERS", "EarthModel", "Exporter", "History", "Law", "Plugin", "Quantity",
    "Reader", "Rock",
]


class Plugin:
    """What every plug-in class declares about itself.

    Attributes
    ----------
    name : str
        The word a scenario or a command uses.
    summary : str
        One line, shown by ``subside plugins list``.
    source : str
        The publication the formula comes from, or where it was computed.
    parameters : tuple of Parameter
        What it takes from the scenario.
    """

    name: ClassVar[str] = ""
    summary: ClassVar[str] = ""
    source: ClassVar[str] = ""
    parameters: ClassVar[tuple[Parameter, ...]] = ()


Rock = SimpleNamespace
"""Parameters of a block of cells: each attribute a float or an array (cell,), SI."""


@dataclass(frozen=True)
class History:
    """What a block of cells went through, from the start of the scenario.

    Pressure is linear between the entries of `time`, which are the union of pressure dates and
    output dates; the first entry is the start, where rise and drop are zero.

    Attributes
    ----------
    time : array (nt,)
        Seconds since the start.
    pressure_drop : array (nt, cell)
        Depletion, Pa: initial minus current pressure, positive when pressure falls.
    stress_rise : array (nt, cell)
        Rise of vertical effective stress, Pa: Biot coefficient times depletion.
    fields : mapping of str to array
        Every field the law lists in `needs`, SI, (cell,) or (nt, cell).
    """

    time: Array
    pressure_drop: Array
    stress_rise: Array
    fields: Mapping[str, Array] = field(default_factory=dict)


COMMON_LAW_PARAMETERS: tuple[Parameter, ...] = (
    Parameter("biot", "1", "Biot coefficient: effective stress rises by biot times depletion",
              default=1.0, minimum=0.0, maximum=1.0, open_minimum=True, example="1.0"),
    Parameter("yield_biot", "1", "factor on depletion where yield and memory are tested "
              "(1: Terzaghi stress)", default=1.0, minimum=0.0, maximum=1.0, open_minimum=True,
              example="1.0"),
    Parameter("previous_stress_rise", "Pa", "largest rise of effective stress ever felt before "
              "the start, above the stress at the start", default=0.0, minimum=0.0,
              example="2 MPa"),
)
"""Every law takes these; a law need not list them."""


class Law(Plugin, ABC):
    """A compaction law: the uniaxial strain of each cell from its own history.

    A complete law:

    >>> from subside.hooks.contracts import History, Law, Rock
    >>> from subside.params import Parameter
    >>> class Elastic(Law):
    ...     name = "elastic-example"
    ...     summary = "strain = compressibility x stress rise"
    ...     source = "definition of the uniaxial compressibility"
    ...     parameters = (Parameter("compressibility", "1/Pa", "strain per stress rise",
    ...                             minimum=0.0, example="1e-5 1/bar"),)
    ...     linear_in = ("compressibility",)
    ...     def strain(self, history, rock):
    ...         return rock.compressibility * history.stress_rise
    >>> import numpy as np
    >>> rise = np.array([[0.0], [1e6]])
    >>> h = History(time=np.array([0.0, 3.2e7]), pressure_drop=rise, stress_rise=rise)
    >>> float(Elastic().strain(h, Rock(compressibility=1e-10))[1, 0])
    0.0001

    Attributes
    ----------
    needs : tuple of str
        Grid fields the law wants in `history.fields` (``"temperature"``, ...).
    linear_in : tuple of str
        Parameters the strain is proportional to, jointly.
    """

    needs: ClassVar[tuple[str, ...]] = ()
    linear_in: ClassVar[tuple[str, ...]] = ()

    @abstractmethod
    def strain(self, history: History, rock: Rock) -> Array:
        """Uniaxial strain (nt, cell), shortening positive, zero at the start.

        Causal (the strain at a time depends on nothing later) and cell by cell. Exact where the
        law has a closed form for pressure linear between times, so that cutting a step in two
        changes nothing. An `InputError` about one cell says which with its argument `cell`, the
        cell's number in these arrays; the host turns it into the place in the grid.
        """

    def check(self, rock: Rock) -> None:
        """Raise `InputError` (with `cell`, see `strain`) where parameters contradict each other.

        Called before a run.
        """
        return None

    def start(self, rock: Rock) -> Any:
        """What `advance` must remember at the start of the scenario, or None.

        Optional, with `advance`: a law that offers both lets the host go date by date, holding two
        dates of pressure instead of all of them. None, the default, says that the law only offers
        `strain`.

        Returns
        -------
        state : float, array (cell,), tuple of those, or None
            Whatever the law likes, as long as its arrays are scalar or (cell,).
        """
        return None

    def advance(
        self, state: Any, t0: float, t1: float, rise0: Array, rise1: Array,
        fields: Mapping[str, tuple[Array, Array]], rock: Rock,
    ) -> tuple[Any, Array]:
        """One step of the history, from one date to the next.

        Called for each pair of following dates in order, the first time with the state of `start`.
        Must agree with `strain` over the same dates to 1e-10 of the largest strain, and must not
        change `state` itself: the host may go back to it.

        Parameters
        ----------
        state
            From `start`, or from the previous `advance`.
        t0, t1 : float
            Seconds since the start, ``t0 < t1``.
        rise0, rise1 : array (cell,)
            Rise of vertical effective stress at both times, Pa: biot times depletion.
        fields : mapping of str to (array, array)
            Each field the law lists in `needs` at both times, SI, (cell,).
        rock : Rock

        Returns
        -------
        state
            For the next call.
        strain : array (cell,)
            Uniaxial strain at `t1` since the start of the scenario, shortening positive.
        """
        raise NotImplementedError(f"law '{self.name}' does not go date by date; use strain()")


class EarthModel(Plugin, ABC):
    """The elastic earth above and around the reservoir: displacement of point sources.

    An instance is one earth: it is made with the scenario's parameters (SI, keyword arguments) and
    `layers`. Depth is below the ground or the seabed, positive down.

    Sources, per unit strength: ``"contraction"`` (the nucleus of strain) and ``"closure"`` (a
    closing horizontal crack) per m3 of volume lost under uniaxial conditions, ``"vertical_force"``
    per newton, down positive.
    """

    interfaces: ClassVar[tuple[float, ...]] = ()

    @abstractmethod
    def displacement(
        self, source: str, radius: Array, observation_depth: Array, source_depth: Array
    ) -> tuple[Array, Array]:
        """`(outward, downward)` in m per unit strength; arguments in m broadcast together.

        `outward` is positive away from the axis of the source.
        """

    @abstractmethod
    def gradient(
        self, source: str, radius: Array, observation_depth: Array, source_depth: Array
    ) -> tuple[Array, Array, Array]:
        """Horizontal derivatives per unit strength, 1/m per unit.

        `(d outward/d radius, outward/radius, d downward/d radius)`; finite on the axis.
        """

    @abstractmethod
    def modulus_at(self, depth: Array) -> Array:
        """Uniaxial (constrained) modulus M in Pa at a depth.

        Raises `InputError` naming the key to give when the scenario has no `young_modulus`.
        """

    @abstractmethod
    def volume_ratio(self, source: str, source_depth: Array) -> Array:
        """Volume of the whole bowl over the source strength (m3 per m3), out to infinity."""

    @property
    @abstractmethod
    def far_field_power(self) -> float:
        """p where subsidence falls off as radius**-p far away (inf: faster than any power)."""

    @property
    def homogeneous_poisson_ratio(self) -> float | None:
        """Poisson's ratio of a homogeneous half-space, which then gets closed forms; else None."""
        return None

    @property
    def valid_depths(self) -> tuple[float, float]:
        """Depths (shallowest, deepest) in m at which sources may lie."""
        return (0.0, float("inf"))

    @property
    def has_modulus(self) -> bool:
        """Whether `modulus_at` can answer (the scenario gave the stiffness)."""
        return True


class Reader(Plugin, ABC):
    """Reads one kind of pressure grid file into a cell dataset.

    Attributes
    ----------
    suffixes : tuple of str
        File name endings it reads, with the dot.
    """

    suffixes: ClassVar[tuple[str, ...]] = ()

    @abstractmethod
    def read(self, path: Path, options: Mapping[str, Any]) -> xr.Dataset:
        """The cell dataset; see `subside.names.CELL_VARIABLES` for its variables.

        `options` holds the scenario's `[[grid]]` keys that concern reading: `crs`, `accept`.
        """


class Quantity(Plugin, ABC):
    """A further variable of the result, computed from those that are there.

    Attributes
    ----------
    unit, long_name : str
        Written with the variable.
    needs : tuple of str
        Result variables it reads.
    looks_back : int or None
        How many dates before a date its value there depends on, 0 or 1, where it reads maps only:
        it is then given some dates at a time. None, the default: it wants all dates at once, and
        what it needs is held in memory.
    """

    unit: ClassVar[str] = ""
    long_name: ClassVar[str] = ""
    needs: ClassVar[tuple[str, ...]] = ()
    looks_back: ClassVar[int | None] = None

    @abstractmethod
    def compute(self, result: xr.Dataset) -> xr.DataArray:
        """The variable, (time, y, x) or (time, point), SI."""


class Exporter(Plugin, ABC):
    """Writes a result as files of another kind."""

    @abstractmethod
    def export(
        self, result: xr.Dataset, folder: Path, overwrite: bool,
        variables: tuple[str, ...] | None = None,
    ) -> list[Path]:
        """Write into `folder` (which exists) and return the files, or raise before writing any.

        `variables` names the result variables to write; None means all that this kind can hold.
        A file that exists is an `InputError` unless `overwrite` is true.
        """
