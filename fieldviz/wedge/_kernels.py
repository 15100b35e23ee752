"""Compiled loops of the wedge: halo filling, locating and sampling.

They raise nothing; the public functions around them check shapes and units.
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange

# A ghost centre this near to a cell centre, in cell widths, is that cell: its value is copied, so
# that cutting a grid into blocks changes no bit.
_SAME_PLACE = 1e-9


@njit(cache=True, nogil=True, inline="always")
def _interval(lines, value):
    """Index i with lines[i] <= value < lines[i + 1], clipped to the ends."""
    low, high = 0, lines.shape[0] - 1
    while high - low > 1:
        middle = (low + high) // 2
        if lines[middle] <= value:
            low = middle
        else:
            high = middle
    return low


@njit(cache=True, nogil=True, inline="always")
def _wrapped(phi, first, period):
    """Phi brought into [first, first + period)."""
    return first + (phi - first) - period * np.floor((phi - first) / period)


@njit(cache=True, nogil=True, inline="always")
def _lattice_block(r, theta, phi, r_lines, theta_lines, phi_lines, table):
    """Number of the block that covers a point known to lie inside."""
    return table[_interval(phi_lines, phi), _interval(theta_lines, theta), _interval(r_lines, r)]


@njit(cache=True, nogil=True, inline="always")
def _linear_weight(centres, value, with_halo):
    """Lower index and upper weight for linear interpolation between haloed centres."""
    n = centres.shape[0] - 2
    if not with_halo and n == 1:
        return 1, 0.0
    index = _interval(centres, value)
    if not with_halo:
        index = min(max(index, 1), n - 1)
    return index, (value - centres[index]) / (centres[index + 1] - centres[index])


@njit(cache=True, nogil=True, inline="always")
def _nearest(centres, value):
    """Index of the interior centre next to a value, and its distance in centre spacings."""
    n = centres.shape[0] - 2
    index = min(max(_interval(centres, value), 0), n)
    step = centres[index + 1] - centres[index]
    if value - centres[index] > 0.5 * step:
        index += 1
    return index, abs(value - centres[index]) / step


@njit(cache=True, nogil=True, inline="always")
def _trilinear(values, k, j, i, wk, wj, wi):
    """Trilinear mean of the eight values from (k, j, i) upwards."""
    low = (1 - wj) * ((1 - wi) * values[k, j, i] + wi * values[k, j, i + 1]) + wj * (
        (1 - wi) * values[k, j + 1, i] + wi * values[k, j + 1, i + 1]
    )
    high = (1 - wj) * ((1 - wi) * values[k + 1, j, i] + wi * values[k + 1, j, i + 1]) + wj * (
        (1 - wi) * values[k + 1, j + 1, i] + wi * values[k + 1, j + 1, i + 1]
    )
    return (1 - wk) * low + wk * high


@njit(cache=True, nogil=True)
def _neighbour_value(
    r, theta, phi, block, haloed, r_c, theta_c, phi_c, lines_r, lines_theta, lines_phi, table,
    level, positive,
):  # fmt: skip
    """Value at a ghost centre inside the wedge, from the block that covers it."""
    source = _lattice_block(r, theta, phi, lines_r, lines_theta, lines_phi, table)
    if level[source] == level[block]:
        i, di = _nearest(r_c[source], r)
        j, dj = _nearest(theta_c[source], theta)
        k, dk = _nearest(phi_c[source], phi)
        if di < _SAME_PLACE and dj < _SAME_PLACE and dk < _SAME_PLACE:
            return haloed[source, k, j, i]
    # Coarser blocks were completed before; of others only interior cells may be read.
    complete = level[source] < level[block]
    i, wi = _linear_weight(r_c[source], r, complete)
    j, wj = _linear_weight(theta_c[source], theta, complete)
    k, wk = _linear_weight(phi_c[source], phi, complete)
    if positive:
        wi, wj, wk = min(max(wi, 0.0), 1.0), min(max(wj, 0.0), 1.0), min(max(wk, 0.0), 1.0)
    return _trilinear(haloed[source], k, j, i, wk, wj, wi)


@njit(cache=True, nogil=True, inline="always")
def _beyond(first, second, c_ghost, c_first, c_second, positive):
    """Linear continuation past a wall; a positive quantity stays positive."""
    value = first + (first - second) * (c_ghost - c_first) / (c_first - c_second)
    if positive and value <= 0.0:
        return first
    return value


@njit(cache=True, nogil=True)
def fill_walls(values, r_c, theta_c, r_low, r_high, theta_low, theta_high, positive):
    """Continue one block's values past the inner, outer, upper and lower wall."""
    n_phi, n_theta, n_r = values.shape
    for k in range(n_phi):
        for j in range(n_theta):
            row = values[k, j]
            if r_low:
                inner = row[2] if n_r > 3 else row[1]
                row[0] = _beyond(row[1], inner, r_c[0], r_c[1], r_c[2], positive)
            if r_high:
                inner = row[n_r - 3] if n_r > 3 else row[n_r - 2]
                row[n_r - 1] = _beyond(
                    row[n_r - 2], inner, r_c[n_r - 1], r_c[n_r - 2], r_c[n_r - 3], positive
                )
        page = values[k]
        last = n_theta - 1
        for i in range(n_r):
            if theta_low:
                inner = page[2, i] if n_theta > 3 else page[1, i]
                page[0, i] = _beyond(
                    page[1, i], inner, theta_c[0], theta_c[1], theta_c[2], positive
                )
            if theta_high:
                inner = page[last - 2, i] if n_theta > 3 else page[last - 1, i]
                page[last, i] = _beyond(
                    page[last - 1, i], inner, theta_c[last], theta_c[last - 1], theta_c[last - 2],
                    positive,
                )  # fmt: skip


@njit(cache=True, nogil=True, parallel=True)
def fill_halos(
    blocks, haloed, r_c, theta_c, phi_c, lines_r, lines_theta, lines_phi, table, level, positive
):
    """Fill the ghost layer of `blocks`, all of one level, whose coarser neighbours are complete."""
    first, period = lines_phi[0], lines_phi[-1] - lines_phi[0]
    r_in, r_out = lines_r[0], lines_r[-1]
    theta_up, theta_down = lines_theta[0], lines_theta[-1]
    n_phi, n_theta, n_r = haloed.shape[1:]
    for number in prange(blocks.shape[0]):
        block = blocks[number]
        for k in range(n_phi):
            phi = _wrapped(phi_c[block, k], first, period)
            for j in range(n_theta):
                theta = theta_c[block, j]
                if theta < theta_up or theta > theta_down:
                    continue
                shell = k == 0 or k == n_phi - 1 or j == 0 or j == n_theta - 1
                for i in range(0, n_r, 1 if shell else n_r - 1):
                    r = r_c[block, i]
                    if r < r_in or r > r_out:
                        continue
                    if shell or i == 0 or i == n_r - 1:
                        haloed[block, k, j, i] = _neighbour_value(
                            r, theta, phi, block, haloed, r_c, theta_c, phi_c, lines_r,
                            lines_theta, lines_phi, table, level, positive,
                        )  # fmt: skip
        fill_walls(
            haloed[block], r_c[block], theta_c[block], r_c[block, 0] < r_in,
            r_c[block, n_r - 1] > r_out, theta_c[block, 0] < theta_up,
            theta_c[block, n_theta - 1] > theta_down, positive,
        )  # fmt: skip


@njit(cache=True, nogil=True, parallel=True)
def locate_points(
    points, r_c, theta_c, phi_c, lines_r, lines_theta, lines_phi, table, cells, weights
):
    """Block, lower cell and weights of each point; block -1 outside the wedge."""
    first, period = lines_phi[0], lines_phi[-1] - lines_phi[0]
    for p in prange(points.shape[0]):
        r, theta, phi = points[p, 0], points[p, 1], points[p, 2]
        cells[p, 0] = -1
        # Written so that NaN fails.
        inside = lines_r[0] <= r <= lines_r[-1] and lines_theta[0] <= theta <= lines_theta[-1]
        if not (inside and np.isfinite(phi)):
            continue
        phi = _wrapped(phi, first, period)
        block = _lattice_block(r, theta, phi, lines_r, lines_theta, lines_phi, table)
        i, wi = _linear_weight(r_c[block], r, True)
        j, wj = _linear_weight(theta_c[block], theta, True)
        k, wk = _linear_weight(phi_c[block], phi, True)
        cells[p, 0], cells[p, 1], cells[p, 2], cells[p, 3] = block, k, j, i
        weights[p, 0], weights[p, 1], weights[p, 2] = wk, wj, wi


@njit(cache=True, nogil=True, parallel=True)
def gather(haloed, cells, weights, outside, values):
    """Trilinear values at located points."""
    for p in prange(cells.shape[0]):
        block = cells[p, 0]
        if block < 0:
            values[p] = outside
            continue
        values[p] = _trilinear(
            haloed[block], cells[p, 1], cells[p, 2], cells[p, 3],
            weights[p, 0], weights[p, 1], weights[p, 2],
        )  # fmt: skip


@njit(cache=True, nogil=True, parallel=True)
def rotate_to_cartesian(v_r, v_theta, v_phi, sin_t, cos_t, sin_p, cos_p, vectors):
    """Spherical cell components of one block to Cartesian vectors (n_phi, n_theta, n_r, 3)."""
    n_phi, n_theta, n_r = v_r.shape
    for row in prange(n_phi * n_theta):
        k, j = row // n_theta, row % n_theta
        sine, cosine, cos_phi, sin_phi = sin_t[j], cos_t[j], cos_p[k], sin_p[k]
        along_r, along_theta, along_phi = v_r[k, j], v_theta[k, j], v_phi[k, j]
        out = vectors[k, j]
        for i in range(n_r):
            v_R = along_r[i] * sine + along_theta[i] * cosine
            out[i, 0] = v_R * cos_phi - along_phi[i] * sin_phi
            out[i, 1] = v_R * sin_phi + along_phi[i] * cos_phi
            out[i, 2] = along_r[i] * cosine - along_theta[i] * sine


@njit(cache=True, nogil=True, parallel=True)
def nodes_to_cartesian(r, sin_t, cos_t, sin_p, cos_p, points):
    """Cartesian nodes (n_phi, n_theta, n_r, 3) of a block from its edges."""
    n_theta = sin_t.shape[0]
    for row in prange(sin_p.shape[0] * n_theta):
        k, j = row // n_theta, row % n_theta
        x, y, z = sin_t[j] * cos_p[k], sin_t[j] * sin_p[k], cos_t[j]
        for i in range(r.shape[0]):
            points[k, j, i, 0] = r[i] * x
            points[k, j, i, 1] = r[i] * y
            points[k, j, i, 2] = r[i] * z
