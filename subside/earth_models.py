"""The built-in earth models: the kernels of `subside.earth` with the face of a plug-in."""

from __future__ import annotations

import math
from typing import ClassVar

import numpy as np

from subside.api import EarthModel, InputError, Parameter, hookimpl
from subside.earth import half_space, rigid_basement

__all__ = ["HalfSpace", "RigidBasement", "subside_earth_models"]

_POISSON = Parameter("poisson_ratio", "1", "Poisson's ratio of the earth", minimum=0.0,
                     maximum=0.5, open_maximum=True, varies=False, example="0.25")
_YOUNG = Parameter("young_modulus", "Pa", "Young's modulus of the earth; displacement of matched "
                   "sources does not need it", required=False, minimum=0.0, open_minimum=True,
                   varies=False, example="10 GPa")


class _Uniform(EarthModel):
    """One stiffness everywhere above the base."""

    def __init__(self, *, poisson_ratio: float, young_modulus: float | None = None) -> None:
        self.poisson_ratio = poisson_ratio
        self.young_modulus = young_modulus

    @property
    def has_modulus(self) -> bool:
        return self.young_modulus is not None

    def modulus_at(self, depth: np.ndarray) -> np.ndarray:
        """M = (1-nu) E/((1+nu)(1-2nu)), the inverse of the uniaxial compressibility."""
        if self.young_modulus is None:
            raise InputError("[earth] young_modulus is missing; horizontal_release = \"own\" and "
                             "stress need it, for example young_modulus = \"10 GPa\".")
        nu = self.poisson_ratio
        modulus = (1 - nu) * self.young_modulus / ((1 + nu) * (1 - 2 * nu))
        return np.full(np.shape(depth), modulus)

    def _shear_modulus(self) -> float | None:
        if self.young_modulus is None:
            return None
        return self.young_modulus / (2 * (1 + self.poisson_ratio))


class HalfSpace(_Uniform):
    """Homogeneous elastic half-space: closed forms everywhere."""

    name = "half-space"
    summary = "homogeneous elastic half-space"
    source = ("Mindlin and Cheng 1950, Sen 1950, Geertsma 1973 (nucleus); Okada 1985, 1992 "
              "(crack); Mindlin 1936 (force)")
    parameters: ClassVar[tuple[Parameter, ...]] = (_POISSON, _YOUNG)
    far_field_power = 3.0

    @property
    def homogeneous_poisson_ratio(self) -> float:
        return self.poisson_ratio

    def displacement(self, source: str, radius: np.ndarray, observation_depth: np.ndarray,
                     source_depth: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        return half_space.displacement(source, radius, observation_depth, source_depth,
                                       self.poisson_ratio, self._shear_modulus())

    def gradient(self, source: str, radius: np.ndarray, observation_depth: np.ndarray,
                 source_depth: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        return half_space.gradient(source, radius, observation_depth, source_depth,
                                   self.poisson_ratio, self._shear_modulus())

    def volume_ratio(self, source: str, source_depth: np.ndarray) -> np.ndarray:
        """2(1-nu) for the nucleus, 1 for the crack, whatever the depth."""
        return np.full(np.shape(source_depth),
                       half_space.volume_ratio(source, self.poisson_ratio))


class RigidBasement(_Uniform):
    """Homogeneous layer welded to a rigid basement."""

    name = "rigid-basement"
    summary = "homogeneous layer welded to a rigid basement"
    source = "the problem of van Opstal 1974; Hankel kernels derived, checked by layer propagation"
    parameters: ClassVar[tuple[Parameter, ...]] = (
        _POISSON, _YOUNG,
        Parameter("basement_depth", "m", "depth of the rigid basement in the grid's vertical datum",
                  datum_depth=True, varies=False, example="4 km"),
    )
    far_field_power = math.inf

    def __init__(self, *, poisson_ratio: float, basement_depth: float,
                 young_modulus: float | None = None) -> None:
        super().__init__(poisson_ratio=poisson_ratio, young_modulus=young_modulus)
        self.basement_depth = basement_depth

    @property
    def valid_depths(self) -> tuple[float, float]:
        return (0.0, self.basement_depth)

    def _at_surface(self, observation_depth: np.ndarray) -> None:
        if np.any(np.asarray(observation_depth) != 0.0):
            raise InputError("earth model 'rigid-basement' gives displacement at the surface only.")

    def displacement(self, source: str, radius: np.ndarray, observation_depth: np.ndarray,
                     source_depth: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        self._at_surface(observation_depth)
        return rigid_basement.displacement(source, radius, source_depth, self.poisson_ratio,
                                           self.basement_depth, self._shear_modulus())

    def gradient(self, source: str, radius: np.ndarray, observation_depth: np.ndarray,
                 source_depth: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        self._at_surface(observation_depth)
        return rigid_basement.gradient(source, radius, source_depth, self.poisson_ratio,
                                       self.basement_depth, self._shear_modulus())

    def volume_ratio(self, source: str, source_depth: np.ndarray) -> np.ndarray:
        """1 for both sources: nothing is lost below a base that does not move."""
        return np.full(np.shape(source_depth),
                       rigid_basement.volume_ratio(source, self.poisson_ratio))


@hookimpl
def subside_earth_models() -> list[type[EarthModel]]:
    return [HalfSpace, RigidBasement]
