"""Compiled loops that move the points of lines about."""

from __future__ import annotations

import numpy as np
from numba import njit, prange


@njit(cache=True, nogil=True, parallel=True)
def gather_rows(points, counts, starts, gathered):
    """Copy the filled part of each line's buffer to its place."""
    for n in prange(counts.shape[0]):
        for m in range(counts[n]):
            for axis in range(3):
                gathered[starts[n] + m, axis] = points[n, m, axis]


@njit(cache=True, nogil=True, parallel=True)
def lay_out(points, counts, starts, firsts, step, line_points):
    """Lay points found from the seed outwards into their lines, forwards (+1) or backwards (-1)."""
    for n in prange(counts.shape[0]):
        for m in range(counts[n]):
            for axis in range(3):
                line_points[firsts[n] + step * m, axis] = points[starts[n] + m, axis]


@njit(cache=True, nogil=True)
def largest_number(values):
    """Largest size of a finite value, 0 without one."""
    largest = 0.0
    for value in values:
        size = abs(value)
        if np.isfinite(size) and size > largest:
            largest = size
    return largest
