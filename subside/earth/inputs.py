"""Checks shared by the kernels that take arrays from other modules."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import ArrayLike

from subside.errors import InputError, nearest

__all__ = ["require_finite", "require_known", "require_poisson_ratio", "require_positive"]


def require_known(what: str, word: str, known: Iterable[str]) -> None:
    """Raise `InputError` unless the word is one of those known."""
    known = tuple(known)
    if word not in known:
        raise InputError(f"There is no {what} '{word}'.{nearest(word, known)}")


def require_poisson_ratio(poisson_ratio: ArrayLike) -> None:
    """Raise `InputError` unless every Poisson's ratio (-) is at least 0 and below 0.5."""
    value = np.asarray(poisson_ratio, dtype=float)
    wrong = ~((value >= 0.0) & (value < 0.5))
    if wrong.any():
        raise InputError(
            f"Poisson's ratio is {value[wrong].flat[0]:g}; it must be at least 0 and below 0.5."
        )


def require_positive(name: str, unit: str, value: ArrayLike, *, zero: bool = False) -> None:
    """Raise `InputError` unless `value` is finite and above zero (or, with `zero`, not below)."""
    array = np.asarray(value, dtype=float)
    wrong = ~(np.isfinite(array) & ((array >= 0.0) if zero else (array > 0.0)))
    if wrong.any():
        bound = "zero or more" if zero else "above zero"
        raise InputError(f"The {name} is {array[wrong].flat[0]:g} {unit}; it must be {bound}.")


def require_finite(what: str, *values: np.ndarray) -> None:
    """Raise `InputError` if a result is not finite; `what` says where and what to do."""
    if not all(np.isfinite(value).all() for value in values):
        raise InputError(what)
