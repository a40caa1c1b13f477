"""Which methods of superposition there are."""

from __future__ import annotations

from subside.errors import InputError, nearest

__all__ = ["METHODS", "refuse_method"]

METHODS = ("auto", "direct", "lattice")
"""What a scenario may ask for."""


def refuse_method(method: str) -> None:
    """Raise `InputError` for a method that does not exist."""
    if method not in METHODS:
        raise InputError(f"[solver] method = '{method}' is not known." + nearest(method, METHODS))
