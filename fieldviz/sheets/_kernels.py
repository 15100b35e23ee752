"""Compiled loops on columns along theta: smoothing, medians, zeros, concentrated current.

They raise nothing; the public functions around them check what comes in.
"""
# mypy: disable-error-code="no-untyped-def, no-untyped-call"

from __future__ import annotations

import numpy as np
from numba import njit, prange

_TURNED_ROWS = 32  # of one page, turned round at once: they fit into a processor's own memory


@njit(cache=True, nogil=True, parallel=True)
def smooth_middle_axis(values, weights, first, count, out):
    """Weighted means along the second axis of (pages, n, m); what is no number is left out.

    Row j takes `count[j]` rows from `first[j]` on with `weights[j]`. NaN where no
    row within reach has a number.
    """
    for page in prange(values.shape[0]):
        _smooth_rows(values[page], weights, first, count, out[page])


@njit(cache=True, nogil=True, parallel=True)
def smooth_last_axis(values, weights, first, count, out):
    """The same along the last axis of (pages, n, m): some rows at a time, turned round."""
    pages, n, m = values.shape
    for page in prange(pages):
        turned = np.empty((m, _TURNED_ROWS))
        smooth = np.empty((m, _TURNED_ROWS))
        for start in range(0, n, _TURNED_ROWS):
            for j in range(_TURNED_ROWS):
                # The last rows may be fewer: the very last one stands for those that are not.
                row = min(start + j, n - 1)
                for i in range(m):
                    turned[i, j] = values[page, row, i]
            _smooth_rows(turned, weights, first, count, smooth)
            for j in range(min(_TURNED_ROWS, n - start)):
                for i in range(m):
                    out[page, start + j, i] = smooth[i, j]


@njit(cache=True, nogil=True)
def _smooth_rows(values, weights, first, count, out):
    """Weighted means along the first axis of (n, m)."""
    n, m = values.shape
    total = np.empty(m)
    share = np.empty(m)
    known = np.zeros(n, dtype=np.int64)
    for row in range(n):
        for i in range(m):
            known[row] += 1 if values[row, i] - values[row, i] == 0.0 else 0
    for j in range(n):
        total[:] = 0.0
        share[:] = 0.0
        of_whole_rows = 0.0
        for step in range(count[j]):
            row, weight = first[j] + step, weights[j, step]
            if known[row] == m:
                of_whole_rows += weight
                for i in range(m):
                    total[i] += weight * values[row, i]
            elif known[row] > 0:
                for i in range(m):
                    x = values[row, i]
                    good = x - x == 0.0
                    total[i] += weight * x if good else 0.0
                    share[i] += weight if good else 0.0
        for i in range(m):
            all_of_it = share[i] + of_whole_rows
            out[j, i] = total[i] / all_of_it if all_of_it > 0.0 else np.nan


@njit(cache=True, nogil=True)
def _median(some, n):
    """Median of the first n values, which are put into another order; NaN of none."""
    if n == 0:
        return np.nan
    high = n // 2
    low, top = 0, n - 1
    # Quickselect: everything left of `high` ends up no larger than it.
    while low < top:
        pivot = some[(low + top) // 2]
        a, b = low, top
        while a <= b:
            while some[a] < pivot:
                a += 1
            while some[b] > pivot:
                b -= 1
            if a <= b:
                some[a], some[b] = some[b], some[a]
                a += 1
                b -= 1
        if high <= b:
            top = b
        elif high >= a:
            low = a
        else:
            break
    value = some[high]
    if n % 2 == 0:
        below = some[0]
        for m in range(1, high):
            below = max(below, some[m])
        value = 0.5 * (value + below)
    return value


@njit(cache=True, nogil=True, parallel=True)
def first_axis_medians(values, out):
    """Medians along the first axis of (pages, n, m); what is no number is left out."""
    pages, n, m = values.shape
    for j in prange(n):
        row = np.empty((m, pages))
        count = np.zeros(m, dtype=np.int64)
        for page in range(pages):
            for i in range(m):
                x = values[page, j, i]
                if x == x:
                    row[i, count[i]] = x
                    count[i] += 1
        for i in range(m):
            out[j, i] = _median(row[i], count[i])


@njit(cache=True, nogil=True, parallel=True)
def running_medians(values, first, last, out):
    """Medians of values[j, first[i] : last[i]] for every j and i; what is no number is left out."""
    n, m = values.shape
    for j in prange(n):
        some = np.empty(m)
        for i in range(m):
            count = 0
            for other in range(first[i], last[i]):
                x = values[j, other]
                if x == x:
                    some[count] = x
                    count += 1
            out[j, i] = _median(some, count)


@njit(cache=True, nogil=True, parallel=True)
def nearest_zeros(values, heights, out):
    """Height nearest to 0 at which each column of (pages, n, m) changes sign; NaN where none does.

    Linear between two rows; rows that are zero between two signs count as the zero, at their
    middle. Beside a row without a number there is none.
    """
    pages, n, m = values.shape
    for page in prange(pages):
        before = np.full(m, -1)
        for i in range(m):
            out[page, i] = np.inf
        for j in range(n):
            for i in range(m):
                x = values[page, j, i]
                if x == 0.0:
                    continue
                last = before[i]
                before[i] = j
                if last < 0:
                    continue
                y = values[page, last, i]
                if not ((x > 0.0 and y < 0.0) or (x < 0.0 and y > 0.0)):
                    continue
                if j - last > 1:
                    zero = 0.5 * (heights[last + 1] + heights[j - 1])
                else:
                    zero = heights[last] + y / (y - x) * (heights[j] - heights[last])
                if abs(zero) < abs(out[page, i]):
                    out[page, i] = zero
        for i in range(m):
            if out[page, i] == np.inf:
                out[page, i] = np.nan


@njit(cache=True, nogil=True, parallel=True)
def sums_of_squares(a, b, c, root, out):
    """a^2 + b^2 + c^2, or its root, in double precision; arrays (pages, n, m)."""
    pages, n, m = a.shape
    for page in prange(pages):
        for j in range(n):
            for i in range(m):
                x, y, z = (
                    np.float64(a[page, j, i]), np.float64(b[page, j, i]), np.float64(c[page, j, i])
                )  # fmt: skip
                total = x * x + y * y + z * z
                out[page, j, i] = np.sqrt(total) if root else total


@njit(cache=True, nogil=True, parallel=True)
def current_in_sheets(
    strength, square, running, side, mu0, steep, strong, volumes, chi, contrast, in_sheet, sums
):
    """Where current is concentrated; `sums` (pages, 6): volume, |J| and |J|^2, of all and within.

    `square` is B^2 around each cell, `running` (n, m) the usual |J|, `volumes` three factors.
    """
    of_phi, of_theta, of_r = volumes
    pages, n, m = strength.shape
    for page in prange(pages):
        sums[page] = 0.0
        for j in range(n):
            area = of_phi[page] * of_theta[j]
            for i in range(m):
                x = strength[page, j, i]
                chi[page, j, i] = mu0 * x * side[page, j, i] / np.sqrt(square[page, j, i])
                contrast[page, j, i] = x / running[j, i]
                inside = chi[page, j, i] > steep or contrast[page, j, i] > strong
                in_sheet[page, j, i] = inside
                if x - x == 0.0:
                    volume = area * of_r[i]
                    sums[page, 0] += volume
                    sums[page, 1] += volume * x
                    sums[page, 2] += volume * x * x
                    if inside:
                        sums[page, 3] += volume
                        sums[page, 4] += volume * x
                        sums[page, 5] += volume * x * x


@njit(cache=True, nogil=True, parallel=True)
def highest_rows(values, rows):
    """First row of the largest finite value of each column of (pages, n, m); 0 without any."""
    pages, n, m = values.shape
    for page in prange(pages):
        best = np.full(m, -np.inf)
        rows[page] = 0
        for j in range(n):
            for i in range(m):
                x = values[page, j, i]
                if x - x == 0.0 and x > best[i]:
                    best[i] = x
                    rows[page, i] = j
