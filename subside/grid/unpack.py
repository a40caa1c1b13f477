"""Compiled passes from the bytes of a storage chunk to the values of chosen cells.

A chunk comes as it leaves the inflater: plain, or with its bytes shuffled (all first bytes of the
values, then all second bytes, ...). Byte b of value n stands at ``places[b] + n * step``: that one
rule covers both orders and both endiannesses. Values are moved as bit patterns; every function
releases the GIL.
"""

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["ABSENT", "KEPT", "byte_places", "columns", "exponent_bits", "gather", "nan_bits",
           "number_cells", "runs_of", "strays"]

KEPT, ABSENT = 1, 2
"""States of a cell of the file: in the dataset; enabled but without a value at the first date."""


def byte_places(count: int, size: int, shuffled: bool, swapped: bool) -> tuple[np.ndarray, int]:
    """Where the bytes of a value stand, the least significant first, and the step between values.

    Parameters
    ----------
    count : int
        Values in the chunk.
    size : int
        Bytes of a value.
    swapped : bool
        Big-endian.
    """
    places = np.arange(size, dtype=np.int64)
    if swapped:
        places = places[::-1]
    return (places * count, 1) if shuffled else (places.copy(), size)


def nan_bits(size: int) -> np.unsignedinteger:
    """The pattern of NaN in a float of `size` bytes."""
    return np.uint32(0x7FC00000) if size == 4 else np.uint64(0x7FF8000000000000)


def exponent_bits(size: int) -> np.unsignedinteger:
    """The pattern of infinity in a float of `size` bytes: ones in all of the exponent."""
    return np.uint32(0x7F800000) if size == 4 else np.uint64(0x7FF0000000000000)


@njit(cache=True, nogil=True)
def runs_of(state, box, chunk, wanted, ends, runs, fill):  # type: ignore[no-untyped-def]
    """Find stretches of cells that lie one after the other in a chunk and in the selection.

    Called twice: with `fill` false it counts into `ends` (chunks,), with `fill` true `ends` holds
    where each chunk's stretches begin in `runs` (r, 4): number in the chunk, number in the
    selection, length, flat number in the file.
    """
    j0, j1, i0, i1 = box
    ck, cj, ci = chunk
    nk, nj, ni = state.shape
    jc0, ic0 = j0 // cj, i0 // ci
    njc, nic = (j1 - 1) // cj - jc0 + 1, (i1 - 1) // ci - ic0 + 1
    open_source = np.full(len(ends), -1, np.int64)  # where the last stretch of a chunk ended
    open_number = np.full(len(ends), -1, np.int64)
    number = 0
    for k in range(nk):
        for j in range(j0, j1):
            row = ((k // ck) * njc + j // cj - jc0) * nic - ic0
            base = ((k % ck) * cj + j % cj) * ci
            i = i0
            while i < i1:
                if state[k, j, i] != wanted:
                    i += 1
                    continue
                start = i
                stop = min(i1, (i // ci + 1) * ci)
                while i < stop and state[k, j, i] == wanted:
                    i += 1
                n = row + start // ci
                source = base + start % ci
                joined = (open_source[n] == source and open_number[n] == number
                          and wanted == KEPT)
                if fill:
                    if joined:
                        runs[ends[n] - 1, 2] += i - start
                    else:
                        runs[ends[n], 0] = source
                        runs[ends[n], 1] = number
                        runs[ends[n], 2] = i - start
                        runs[ends[n], 3] = (k * nj + j) * ni + start
                if not joined:
                    ends[n] += 1
                number += i - start
                open_source[n] = source + i - start
                open_number[n] = number


@njit(cache=True, nogil=True)
def number_cells(state, box, first, numbers):  # type: ignore[no-untyped-def]
    """Write the dataset's numbers of a box's kept cells; `first` (k, j) moves on past the box."""
    j0, j1, i0, i1 = box
    n = 0
    for k in range(state.shape[0]):
        for j in range(j0, j1):
            number = first[k, j]
            for i in range(i0, i1):
                if state[k, j, i] == KEPT:
                    numbers[n] = number
                    n += 1
                    number += 1
            first[k, j] = number


@njit(cache=True, nogil=True)
def gather(raw, places, step, runs, layer, first, last, missing, nan, out, row):  # type: ignore[no-untyped-def]
    """Dates first to last - 1 of a chunk of `layer` values a date, into rows of `out` from `row`.

    `missing` (4,) are patterns that mean no value; they become `nan`.
    """
    size = len(places)
    kind = out.dtype.type
    a, b, c, d = missing[0], missing[1], missing[2], missing[3]
    for date in range(first, last):
        line = out[row + date - first]
        for r in range(len(runs)):
            source, number, length = date * layer + runs[r, 0], runs[r, 1], runs[r, 2]
            target = line[number:number + length]
            if step == 1:
                p0 = raw[places[0] + source:places[0] + source + length]
                p1 = raw[places[1] + source:places[1] + source + length]
                p2 = raw[places[2] + source:places[2] + source + length]
                p3 = raw[places[3] + source:places[3] + source + length]
                for n in range(length):
                    target[n] = (kind(p0[n]) | (kind(p1[n]) << kind(8))
                                 | (kind(p2[n]) << kind(16)) | (kind(p3[n]) << kind(24)))
                if size == 8:
                    p0 = raw[places[4] + source:places[4] + source + length]
                    p1 = raw[places[5] + source:places[5] + source + length]
                    p2 = raw[places[6] + source:places[6] + source + length]
                    p3 = raw[places[7] + source:places[7] + source + length]
                    for n in range(length):
                        target[n] |= ((kind(p0[n]) << kind(32)) | (kind(p1[n]) << kind(40))
                                      | (kind(p2[n]) << kind(48)) | (kind(p3[n]) << kind(56)))
            else:
                for n in range(length):
                    value = kind(0)
                    for byte in range(size):
                        value |= kind(raw[places[byte] + (source + n) * step]) << kind(8 * byte)
                    target[n] = value
            for n in range(length):
                value = target[n]
                if value == a or value == b or value == c or value == d:  # noqa: SIM109
                    target[n] = nan


@njit(cache=True, nogil=True)
def columns(raw, places, step, runs, inner, missing, nan, out):  # type: ignore[no-untyped-def]
    """A chunk of cells with several numbers each into `out` (cells, numbers).

    `inner` (numbers in the chunk,) says to which column each goes, -1 for none.
    """
    size, count = len(places), len(inner)
    kind = out.dtype.type
    for r in range(len(runs)):
        for n in range(runs[r, 2]):
            source = (runs[r, 0] + n) * count
            target = runs[r, 1] + n
            for e in range(count):
                if inner[e] < 0:
                    continue
                value = kind(0)
                for byte in range(size):
                    value |= kind(raw[places[byte] + (source + e) * step]) << kind(8 * byte)
                for m in range(len(missing)):
                    if value == missing[m]:
                        value = nan
                out[target, inner[e]] = value


@njit(cache=True, nogil=True)
def strays(values, full, runs, counts, lowest):  # type: ignore[no-untyped-def]
    """Count the finite values in (dates, cells of the runs); note the lowest file number.

    `full` has ones where the exponent is: all of them mean infinite or NaN.
    """
    for date in range(len(values)):
        for r in range(len(runs)):
            for n in range(runs[r, 2]):
                if values[date, runs[r, 1] + n] & full != full:
                    flat = runs[r, 3] + n
                    if counts[date] == 0 or flat < lowest[date]:
                        lowest[date] = flat
                    counts[date] += 1
