"""Compiled loops of the symmetry of the wind: sums over each side, and values at mirror points.

They raise nothing; the public functions around them check what comes in.
"""

# mypy: disable-error-code="no-untyped-def, no-untyped-call"
# Numba infers the types of kernels; the public functions around them are typed.

from __future__ import annotations

import math

import numpy as np
from numba import njit


@njit(cache=True, nogil=True)
def side_planes(
    fields, start, stop, sine, cosine, volumes, kepler, spin, band, disc, compared, shares,
    sums, totals,
):  # fmt: skip
    """Sums over the azimuths `start` to `stop` of a block, one set of numbers for each.

    `fields` are three or five arrays (n_phi, n_theta, n_r) of one type: rho, v_r, v_theta, and
    B_r, B_theta. `volumes` per radian and `kepler` sqrt(GM/R) are (n_theta, n_r), `spin` (n_r,)
    sqrt(GM r), `band` (n_r,) the band of each column or -1. `disc` (n_theta,) rows between the
    cones, `compared` (n_theta,) their share within what both sides reach, `shares` (2, n_theta)
    of the wind of each side. Adds to `sums` (n_phi, 2, 5, n_bands): bend, weight, Kepler speed,
    lean, its weight; and to `totals` (n_phi, 4): inflow, its angular momentum, |rho v_p| compared
    and not. Gives the cells in bands that are no numbers.
    """
    _, n_theta, n = fields[0].shape
    left_out = 0
    for k in range(start, stop):
        for j in range(n_theta):
            row_momentum = 0.0
            for i in range(n):
                if band[i] < 0:
                    continue
                v_r, v_theta = np.float64(fields[1][k, j, i]), np.float64(fields[2][k, j, i])
                mass = np.float64(fields[0][k, j, i])
                together = mass + v_r + v_theta
                # Infinity minus itself is no number, and neither is NaN.
                if together - together != 0.0:
                    left_out += 1
                    continue
                mass *= volumes[j, i]
                momentum = mass * math.sqrt(v_r * v_r + v_theta * v_theta)
                row_momentum += momentum
                if disc[j]:
                    totals[k, 0] -= mass * v_r
                    totals[k, 1] -= mass * v_r * spin[i]
                upward = v_r * cosine[j] - v_theta * sine[j]
                side = 0 if upward > 0.0 else 1
                weight = shares[side, j] * momentum
                if weight == 0.0 or upward == 0.0:
                    continue
                b = band[i]
                sums[k, side, 0, b] += weight * (v_r * sine[j] + v_theta * cosine[j])
                sums[k, side, 1, b] += weight
                sums[k, side, 2, b] += weight * kepler[j, i]
                if len(fields) > 3:
                    b_r = np.float64(fields[len(fields) - 2][k, j, i])
                    b_theta = np.float64(fields[len(fields) - 1][k, j, i])
                    angle = _lean(b_r, b_theta, sine[j], cosine[j])
                    if angle == angle:
                        sums[k, side, 3, b] += weight * (angle if side == 0 else -angle)
                        sums[k, side, 4, b] += weight
            totals[k, 2] += row_momentum * compared[j]
            totals[k, 3] += row_momentum * min(max(1.0 - compared[j], 0.0), 1.0)
    return left_out


@njit(cache=True, nogil=True)
def _lean(b_r, b_theta, sine, cosine):
    """Angle of the poloidal field from the vertical, degrees, outward positive above."""
    across = b_r * sine + b_theta * cosine
    upward = b_r * cosine - b_theta * sine
    if upward < 0.0:
        across = -across
    return math.atan2(across, abs(upward)) * (180.0 / math.pi)


@njit(cache=True, nogil=True)
def unknown_cells(first, second, start, stop, band):
    """Count the cells in bands at which one of two fields is no number."""
    count = 0
    for k in range(start, stop):
        for j in range(first.shape[1]):
            for i in range(first.shape[2]):
                a, b = first[k, j, i], second[k, j, i]
                count += (band[i] >= 0) & ((a - a != 0.0) | (b - b != 0.0))
    return count


@njit(cache=True, nogil=True)
def mass_flux_size(density, v_r, v_theta, start, stop, size):
    """|rho v_p| of some azimuths."""
    for k in range(start, stop):
        for j in range(size.shape[1]):
            for i in range(size.shape[2]):
                a, b = np.float64(v_r[k, j, i]), np.float64(v_theta[k, j, i])
                size[k, j, i] = np.float64(density[k, j, i]) * math.sqrt(a * a + b * b)


@njit(cache=True, nogil=True)
def add_mirrored(
    mirrored, first, cells, less, take_log, azimuths, columns, used, row_start, rows, weights
):  # fmt: skip
    """Add what one block gives to values at mirror points of another.

    `mirrored` (n, m, n_r) are azimuths from `first` on; `cells` of the giving block, in it the
    place of each of our `azimuths` and `columns`, or -1; `used` (n_phi, n_r) which of its columns
    give; `row_start`, `rows`, `weights` a sparse matrix (m, n_theta). Values are cells - less, or
    the logarithms of the cells.
    """
    for k in range(len(mirrored)):
        own_k = azimuths[first + k]
        if own_k < 0:
            continue
        for row in range(mirrored.shape[1]):
            for place in range(row_start[row], row_start[row + 1]):
                j, weight = rows[place], weights[place]
                for i in range(mirrored.shape[2]):
                    own_i = columns[i]
                    if own_i < 0 or not used[own_k, own_i]:
                        continue
                    value = np.float64(cells[own_k, j, own_i])
                    value = np.log(value) if take_log else value - less[j, own_i]
                    mirrored[k, row, i] += weight * value


@njit(cache=True, nogil=True)
def add_energies(
    mirrored, first, cells, less, take_log, rows, turns, weights, base, sign, band, energies
):  # fmt: skip
    """Add w (f +- s f*)^2/4 of azimuths from `first` on to `energies` (n_phi, 2, n_bands).

    `mirrored` (n, m, n_r) holds f*, `cells` and `less` f as of `add_mirrored`, in `rows` (m,).
    `turns` (n_phi,) times `weights` (m, n_r) is w, `base` (m, n_r) is taken off both f and f*.
    """
    for k in range(len(mirrored)):
        for row in range(len(rows)):
            j = rows[row]
            for i in range(mirrored.shape[2]):
                weight = turns[first + k] * weights[row, i]
                if band[i] < 0 or not weight > 0.0:
                    continue
                f = np.float64(cells[first + k, j, i])
                f = np.log(f) if take_log else f - less[j, i]
                f -= base[row, i]
                other = sign * (mirrored[k, row, i] - base[row, i])
                if f - f == 0.0 and other - other == 0.0:
                    energies[first + k, 0, band[i]] += weight * (0.5 * (f + other)) ** 2
                    energies[first + k, 1, band[i]] += weight * (0.5 * (f - other)) ** 2
