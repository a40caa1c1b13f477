"""Compiled passes over the numbers of kept cells: no temporaries of the size of a grid."""

from __future__ import annotations

from numba import njit

__all__ = ["in_layers", "kept_numbers", "places"]


@njit(cache=True, nogil=True)
def kept_numbers(state, wanted, numbers):  # type: ignore[no-untyped-def]
    """Flat numbers (n,) of the cells whose `state` is `wanted`, ascending."""
    n = 0
    for cell in range(len(state)):
        if state[cell] == wanted:
            numbers[n] = cell
            n += 1


@njit(cache=True, nogil=True)
def places(numbers, nj, ni, k, j, i):  # type: ignore[no-untyped-def]
    """k, j, i (n,) of cells by their flat numbers."""
    for n in range(len(numbers)):
        row = numbers[n] // ni
        i[n] = numbers[n] - row * ni
        k[n] = row // nj
        j[n] = row - k[n] * nj


@njit(cache=True, nogil=True)
def in_layers(values, numbers, start, stop, out):  # type: ignore[no-untyped-def]
    """What is the same in every layer, `values` of one, for the cells `start` to ``stop - 1``."""
    size = len(values)
    for n in range(start, stop):
        out[n] = values[numbers[n] % size]
