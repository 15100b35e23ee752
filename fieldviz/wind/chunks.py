"""A block handed to a compiled loop in chunks, on several threads."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from fieldviz.derived.azimuth_blocks import shared_out
from fieldviz.wedge.typing import Array

__all__ = ["by_chunks", "same_type"]

_CHUNK_CELLS = 40_000  # worth a call of a compiled loop


def same_type(arrays: Sequence[Array]) -> tuple[Array, ...]:
    """Arrays as a compiled loop takes them: all in single precision, or else all in double."""
    single = all(array.dtype == np.float32 for array in arrays)
    dtype = np.float32 if single else np.float64
    return tuple(np.ascontiguousarray(array, dtype=dtype) for array in arrays)


def by_chunks(count: int, n_cells: int, work: Callable[[int, int], Array | int]) -> Array:
    """Share rows or azimuths of a block out to threads, and add up what they give.

    Parameters
    ----------
    count : int
        Rows or azimuths.
    n_cells : int
        Of all of them.
    work : function of (start, stop)
        Works these out. It runs on several threads at once, so it must write for its own only;
        what it gives must not depend on the order of summation: counts.

    Returns
    -------
    array
    """
    size = max(1, _CHUNK_CELLS * count // n_cells)
    starts = range(0, count, size)

    def some(chunks: Sequence[int]) -> Array:
        parts = [np.asarray(work(starts[n], min(starts[n] + size, count))) for n in chunks]
        return np.sum(parts, axis=0)

    return np.asarray(np.sum(shared_out(some, len(starts), n_cells), axis=0))
