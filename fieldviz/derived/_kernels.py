"""Compiled loops of vector calculus: weighted sums of cells, and ghost cells at level jumps.

They raise nothing; the public functions around them check what comes in. Values are
(n_blocks + extra, n_phi, n_theta, n_r): the extra blocks hold the ghost cells at level jumps.
`beyond` (n_blocks, 3 axes r theta phi, 2 sides, 2) says which block holds the cells across each
side, and at which index of that axis. Past a wall stand the last cells, whose weight is zero.
Weights are (n_blocks, 3, n), in the precision of the values: double ones for single values would
make the loops slower than memory. `start_*` is the first of the three cells, from -1.
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange

from fieldviz.wedge._kernels import _interval

# Rows of colatitude that one task works on.
_TILE = 64


@njit(cache=True, nogil=True, inline="always")
def _place(beyond, b, axis, index, n):
    """Block and index of a cell, index from -1 to n along one axis."""
    if index < 0:
        return beyond[b, axis, 0, 0], beyond[b, axis, 0, 1]
    if index >= n:
        return beyond[b, axis, 1, 0], beyond[b, axis, 1, 1]
    return b, index


@njit(cache=True, nogil=True, inline="always")
def _places(beyond, b, axis, first, n):
    """Blocks and indices of three cells along one axis, as six numbers."""
    b0, i0 = _place(beyond, b, axis, first, n)
    b1, i1 = _place(beyond, b, axis, first + 1, n)
    b2, i2 = _place(beyond, b, axis, first + 2, n)
    return b0, i0, b1, i1, b2, i2


@njit(cache=True, nogil=True, inline="always")
def _weights(weight, b, i):
    return weight[b, 0, i], weight[b, 1, i], weight[b, 2, i]


@njit(cache=True, nogil=True, inline="always")
def _scaled_weights(weight, b, i, factor):
    return factor * weight[b, 0, i], factor * weight[b, 1, i], factor * weight[b, 2, i]


@njit(cache=True, nogil=True, inline="always")
def _across_theta(f, at, w, k, i):
    """Weighted sum of three cells along theta, at the places `at`."""
    return (
        w[0] * f[at[0], k, at[1], i] + w[1] * f[at[2], k, at[3], i] + w[2] * f[at[4], k, at[5], i]
    )


@njit(cache=True, nogil=True, inline="always")
def _across_phi(f, at, w, j, i):
    """Weighted sum of three cells along phi, at the places `at`."""
    return (
        w[0] * f[at[0], at[1], j, i] + w[1] * f[at[2], at[3], j, i] + w[2] * f[at[4], at[5], j, i]
    )


@njit(cache=True, nogil=True, inline="always")
def _along_r(f, weight, b, k, j, i):
    """Weighted sum of three cells along r, off the ends of a row."""
    return (
        weight[b, 0, i] * f[b, k, j, i - 1] + weight[b, 1, i] * f[b, k, j, i]
        + weight[b, 2, i] * f[b, k, j, i + 1]
    )  # fmt: skip


@njit(cache=True, nogil=True)
def _along_r_at_end(f, beyond, weight, start, b, k, j, i):
    """Weighted sum of three cells along r, with those beyond the ends of the row."""
    at = _places(beyond, b, 0, start[b, i], f.shape[3])
    return (
        weight[b, 0, i] * f[at[0], k, j, at[1]] + weight[b, 1, i] * f[at[2], k, j, at[3]]
        + weight[b, 2, i] * f[at[4], k, j, at[5]]
    )  # fmt: skip


@njit(cache=True, nogil=True, inline="always")
def _task(task, shape):
    """Block, page, and first and last + 1 row of a task; tasks in the order of memory."""
    n_phi, n_theta = shape[1], shape[2]
    n_tiles = (n_theta + _TILE - 1) // _TILE
    page, tile = task // n_tiles, task % n_tiles
    return page // n_phi, page % n_phi, tile * _TILE, min((tile + 1) * _TILE, n_theta)


@njit(cache=True, nogil=True, inline="always")
def _n_tasks(shape):
    return shape[0] * shape[1] * ((shape[2] + _TILE - 1) // _TILE)


@njit(cache=True, nogil=True, parallel=True)
def curl_blocks(
    f_r, f_theta, f_phi, beyond, start_r, start_theta, start_phi, by_r, per_r, by_theta, by_sine,
    by_phi, per_sine, curl_r, curl_theta, curl_phi,
):  # fmt: skip
    """Curl of three fields, written to three arrays.

    `by_r` are the weights of d(r f)/dr / r, `by_theta` of df/dtheta, `by_sine` of
    d(sin f)/dtheta / sin, `by_phi` of df/dphi.
    """
    n_phi, n_theta, n_r = curl_r.shape[1:]
    for task in prange(_n_tasks(curl_r.shape)):
        b, k, first_row, end_row = _task(task, curl_r.shape)
        pages = _places(beyond, b, 2, start_phi[b, k], n_phi)
        for j in range(first_row, end_row):
            rows = _places(beyond, b, 1, start_theta[b, j], n_theta)
            v = _scaled_weights(by_phi, b, k, per_sine[b, j])
            w = _weights(by_sine, b, j)
            for i in range(n_r):
                curl_r[b, k, j, i] = per_r[b, i] * (
                    _across_theta(f_phi, rows, w, k, i) - _across_phi(f_theta, pages, v, j, i)
                )
            for i in range(1, n_r - 1):
                curl_theta[b, k, j, i] = per_r[b, i] * _across_phi(f_r, pages, v, j, i) - (
                    _along_r(f_phi, by_r, b, k, j, i)
                )
            w = _weights(by_theta, b, j)
            for i in range(1, n_r - 1):
                curl_phi[b, k, j, i] = _along_r(f_theta, by_r, b, k, j, i) - per_r[b, i] * (
                    _across_theta(f_r, rows, w, k, i)
                )
            for i in range(0, n_r, max(n_r - 1, 1)):
                along = _along_r_at_end(f_phi, beyond, by_r, start_r, b, k, j, i)
                curl_theta[b, k, j, i] = per_r[b, i] * _across_phi(f_r, pages, v, j, i) - along
                along = _along_r_at_end(f_theta, beyond, by_r, start_r, b, k, j, i)
                curl_phi[b, k, j, i] = along - per_r[b, i] * _across_theta(f_r, rows, w, k, i)


@njit(cache=True, nogil=True, parallel=True)
def divergence_blocks(
    f_r, f_theta, f_phi, beyond, start_r, start_theta, start_phi, by_r, per_r, by_sine, by_phi,
    per_sine, out,
):  # fmt: skip
    """Divergence of three fields; `by_r` are the weights of d(r^2 f)/dr / r^2."""
    n_phi, n_theta, n_r = out.shape[1:]
    for task in prange(_n_tasks(out.shape)):
        b, k, first_row, end_row = _task(task, out.shape)
        pages = _places(beyond, b, 2, start_phi[b, k], n_phi)
        for j in range(first_row, end_row):
            rows = _places(beyond, b, 1, start_theta[b, j], n_theta)
            v = _scaled_weights(by_phi, b, k, per_sine[b, j])
            w = _weights(by_sine, b, j)
            for i in range(1, n_r - 1):
                out[b, k, j, i] = _along_r(f_r, by_r, b, k, j, i)
            for i in range(0, n_r, max(n_r - 1, 1)):
                out[b, k, j, i] = _along_r_at_end(f_r, beyond, by_r, start_r, b, k, j, i)
            for i in range(n_r):
                out[b, k, j, i] += per_r[b, i] * (
                    _across_theta(f_theta, rows, w, k, i) + _across_phi(f_phi, pages, v, j, i)
                )


@njit(cache=True, nogil=True, parallel=True)
def gradient_blocks(
    f, beyond, start_r, start_theta, start_phi, by_r, per_r, by_theta, by_phi, per_sine, along_r,
    along_theta, along_phi,
):  # fmt: skip
    """Gradient of one field, written to three arrays."""
    n_phi, n_theta, n_r = along_r.shape[1:]
    for task in prange(_n_tasks(along_r.shape)):
        b, k, first_row, end_row = _task(task, along_r.shape)
        pages = _places(beyond, b, 2, start_phi[b, k], n_phi)
        for j in range(first_row, end_row):
            rows = _places(beyond, b, 1, start_theta[b, j], n_theta)
            v = _scaled_weights(by_phi, b, k, per_sine[b, j])
            w = _weights(by_theta, b, j)
            for i in range(1, n_r - 1):
                along_r[b, k, j, i] = _along_r(f, by_r, b, k, j, i)
            for i in range(0, n_r, max(n_r - 1, 1)):
                along_r[b, k, j, i] = _along_r_at_end(f, beyond, by_r, start_r, b, k, j, i)
            for i in range(n_r):
                along_theta[b, k, j, i] = per_r[b, i] * _across_theta(f, rows, w, k, i)
            for i in range(n_r):
                along_phi[b, k, j, i] = per_r[b, i] * _across_phi(f, pages, v, j, i)


@njit(cache=True, nogil=True)
def _window(centres, value, low_open, high_open, weights):
    """First of the haloed centres nearest to a value, and their weights of interpolation.

    Three centres give a parabola; fewer are there only where a block has fewer. Ghosts count where
    their side is open.
    """
    n = centres.shape[0] - 2
    lowest, highest = 0 if low_open else 1, n + 1 if high_open else n
    nearest = _interval(centres, value)
    step = centres[nearest + 1] - centres[nearest]
    # Half way between two centres the lower one is meant, however the middle was rounded.
    if value - centres[nearest] > (0.5 + 1e-6) * step:
        nearest += 1
    count = min(3, highest - lowest + 1)
    first = min(max(nearest - 1, lowest), highest - count + 1)
    for a in range(3):
        weights[a] = 1.0 if a < count else 0.0
        for other in range(count):
            if a < count and other != a:
                to = centres[first + a] - centres[first + other]
                weights[a] *= (value - centres[first + other]) / to
    return first


@njit(cache=True, nogil=True)
def _resolve(values, neighbour, b, k, j, i):
    """Value at haloed indices, from the neighbours of the same level; False where there is none."""
    n_phi, n_theta, n_r = values.shape[1:]
    if k < 1 or k > n_phi:
        b = neighbour[b, 2, 0 if k < 1 else 1]
        k = n_phi if k < 1 else 1
    if b >= 0 and (j < 1 or j > n_theta):
        b = neighbour[b, 1, 0 if j < 1 else 1]
        j = n_theta if j < 1 else 1
    if b >= 0 and (i < 1 or i > n_r):
        b = neighbour[b, 0, 0 if i < 1 else 1]
        i = n_r if i < 1 else 1
    if b < 0:
        return False, 0.0
    return True, np.float64(values[b, k - 1, j - 1, i - 1])


@njit(cache=True, nogil=True)
def _interpolated(values, neighbour, source, r, theta, phi, r_c, theta_c, phi_c, with_ghosts):
    """Parabolas through 3 x 3 x 3 cells of one level; False where one of them is not there."""
    wi, wj, wk = np.empty(3), np.empty(3), np.empty(3)
    open_ = neighbour[source] >= 0
    if not with_ghosts:
        open_[:] = False
    i0 = _window(r_c[source], r, open_[0, 0], open_[0, 1], wi)
    j0 = _window(theta_c[source], theta, open_[1, 0], open_[1, 1], wj)
    k0 = _window(phi_c[source], phi, open_[2, 0], open_[2, 1], wk)
    total = 0.0
    for k in range(3):
        for j in range(3):
            for i in range(3):
                weight = wk[k] * wj[j] * wi[i]
                if weight != 0.0:
                    there, value = _resolve(values, neighbour, source, k0 + k, j0 + j, i0 + i)
                    if not there:
                        return False, 0.0
                    total += weight * value
    return True, total


@njit(cache=True, nogil=True)
def _ghost_value(values, neighbour, r, theta, phi, r_c, theta_c, phi_c, lines, table):
    """Value at a ghost centre from the block of another level that covers it."""
    period = lines[2][-1] - lines[2][0]
    phi = phi - period * np.floor((phi - lines[2][0]) / period)
    source = table[_interval(lines[2], phi), _interval(lines[1], theta), _interval(lines[0], r)]
    there, value = _interpolated(
        values, neighbour, source, r, theta, phi, r_c, theta_c, phi_c, True
    )
    if not there:
        _, value = _interpolated(
            values, neighbour, source, r, theta, phi, r_c, theta_c, phi_c, False
        )
    return value


@njit(cache=True, nogil=True, parallel=True)
def fill_layers(sides, values, beyond, neighbour, r_c, theta_c, phi_c, lines, table):
    """Fill the ghost cells at level jumps; a row of `sides` is block, axis, side."""
    shape = values.shape
    for entry in prange(sides.shape[0]):
        b, axis, side = sides[entry]
        block, index = beyond[b, axis, side]
        # Haloed indices, and one value of the own axis.
        first, end = np.ones(3, np.int64), np.array([shape[3] + 1, shape[2] + 1, shape[1] + 1])
        first[axis] = side * end[axis]
        end[axis] = first[axis] + 1
        for k in range(first[2], end[2]):
            for j in range(first[1], end[1]):
                for i in range(first[0], end[0]):
                    value = _ghost_value(
                        values, neighbour, r_c[b, i], theta_c[b, j], phi_c[b, k], r_c, theta_c,
                        phi_c, lines, table,
                    )  # fmt: skip
                    if axis == 0:
                        values[block, k - 1, j - 1, index] = value
                    elif axis == 1:
                        values[block, k - 1, index, i - 1] = value
                    else:
                        values[block, index, j - 1, i - 1] = value
