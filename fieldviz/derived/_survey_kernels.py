"""Compiled loops over all cells of a block: sums along azimuth, extremes, shares, divergence.

They raise nothing; the public functions around them check what comes in.
"""
# mypy: disable-error-code="no-untyped-def, no-untyped-call"
# Numba infers the types of kernels; the public functions around them are typed.

from __future__ import annotations

import numpy as np
from numba import njit, prange


@njit(cache=True, nogil=True, parallel=True)
def azimuth_sums(values, steps, out):
    """Sum along the first axis of values times `steps`, in double precision and in order."""
    n_phi, n_theta, n_r = values.shape
    for j in prange(n_theta):
        total = np.zeros(n_r)
        for k in range(n_phi):
            for i in range(n_r):
                total[i] += steps[k] * values[k, j, i]
        out[j] = total


@njit(cache=True, nogil=True, parallel=True)
def survey(values, found):
    """For each page: number of cells without a number, smallest and largest positive value."""
    n_phi, n_theta, n_r = values.shape
    for k in prange(n_phi):
        bad, low, high = 0, np.inf, -np.inf
        for j in range(n_theta):
            for i in range(n_r):
                x = np.float64(values[k, j, i])
                if x - x != 0.0:
                    bad += 1
                elif x > 0.0:
                    low = min(low, x)
                    high = max(high, x)
        found[k, 0], found[k, 1], found[k, 2] = bad, low, high


@njit(cache=True, nogil=True, parallel=True)
def share_below(values, limit, of_phi, of_cell, found):
    """For each page: volume and number of the cells that are finite and not above a limit."""
    n_phi, n_theta, n_r = values.shape
    for k in prange(n_phi):
        volume, count = 0.0, 0
        for j in range(n_theta):
            for i in range(n_r):
                x = values[k, j, i]
                if x - x == 0.0 and x <= limit:
                    volume += of_cell[j, i]
                    count += 1
        found[k, 0], found[k, 1] = volume * of_phi[k], count


@njit(cache=True, nogil=True, parallel=True)
def quality_share(field, density, inside, scale, of_phi, threshold, of_volume, of_cell, found):
    """For each page: volume of the cells inside that have a number, and of those above a threshold.

    The number is |field|/sqrt(density) times `scale` (n_theta, n_r) times `of_phi` (n_phi,).
    """
    n_phi, n_theta, n_r = field.shape
    for k in prange(n_phi):
        total, above = 0.0, 0.0
        for j in range(n_theta):
            for i in range(n_r):
                if not inside[j, i] or not density[k, j, i] > 0.0:
                    continue
                q = abs(field[k, j, i]) / np.sqrt(np.float64(density[k, j, i]))
                q *= scale[j, i] * of_phi[k]
                if q - q == 0.0:
                    total += of_cell[j, i]
                    if q > threshold:
                        above += of_cell[j, i]
        found[k, 0], found[k, 1] = total * of_volume[k], above * of_volume[k]


@njit(cache=True, nogil=True, parallel=True)
def face_divergence(b_r, b_theta, b_phi, area_r, area_theta, area_phi, steps, found):
    """For each page: largest |sum of fluxes| over the sum of |fluxes| of a cell, and bad cells.

    `area_r` (n_theta, n_r + 1) and `area_theta` (n_theta + 1, n_r) are for a unit of azimuth.
    """
    n_phi, n_theta, n_r = len(steps), area_r.shape[0], area_theta.shape[1]
    for k in prange(n_phi):
        largest, bad = 0.0, 0
        for j in range(n_theta):
            for i in range(n_r):
                inner = steps[k] * area_r[j, i] * b_r[k, j, i]
                outer = steps[k] * area_r[j, i + 1] * b_r[k, j, i + 1]
                north = steps[k] * area_theta[j, i] * b_theta[k, j, i]
                south = steps[k] * area_theta[j + 1, i] * b_theta[k, j + 1, i]
                west = area_phi[j, i] * b_phi[k, j, i]
                east = area_phi[j, i] * b_phi[k + 1, j, i]
                size = abs(inner) + abs(outer) + abs(north) + abs(south) + abs(west) + abs(east)
                if size - size != 0.0:
                    bad += 1
                elif size > 0.0:
                    total = (east - west) + (south - north) + (outer - inner)
                    largest = max(largest, abs(total) / size)
        found[k, 0], found[k, 1] = largest, bad


@njit(cache=True, nogil=True, parallel=True)
def cell_divergence(
    b_r, b_theta, b_phi, area_r, area_theta, area_phi, cell, side, side_phi, steps, inner, found
):
    """For each page: sum of squares, number and largest of |div B| dx_min/|B|, and bad cells.

    Faces are means of the cells beside them. `area_phi`, `cell`, `side` (n_theta, n_r); `side_phi`
    (n_theta, n_r) times the step is the cell's length along phi. `inner` is the first and last page
    that have neighbours; one page alone has no derivative along phi.
    """
    n_phi, n_theta, n_r = b_r.shape
    for k in prange(n_phi):
        squares, count, largest, bad = 0.0, 0, 0.0, 0
        if inner[0] <= k <= inner[1]:
            for j in range(1, n_theta - 1):
                for i in range(1, n_r - 1):
                    r, theta, phi = (
                        np.float64(b_r[k, j, i]), np.float64(b_theta[k, j, i]),
                        np.float64(b_phi[k, j, i]),
                    )  # fmt: skip
                    flux = area_r[j, i + 1] * (r + b_r[k, j, i + 1])
                    flux -= area_r[j, i] * (r + b_r[k, j, i - 1])
                    flux += area_theta[j + 1, i] * (theta + b_theta[k, j + 1, i])
                    flux -= area_theta[j, i] * (theta + b_theta[k, j - 1, i])
                    flux *= steps[k]
                    shortest = side[j, i]
                    if n_phi > 1:
                        flux += area_phi[j, i] * (
                            np.float64(b_phi[k + 1, j, i]) - np.float64(b_phi[k - 1, j, i])
                        )
                        shortest = min(shortest, side_phi[j, i] * steps[k])
                    strength = np.sqrt(r * r + theta * theta + phi * phi)
                    value = 0.5 * abs(flux) / (cell[j, i] * steps[k]) * shortest
                    if value - value != 0.0 or strength - strength != 0.0:
                        bad += 1
                    elif strength > 0.0:
                        value /= strength
                        squares += value * value
                        count += 1
                        largest = max(largest, value)
        found[k, 0], found[k, 1], found[k, 2], found[k, 3] = squares, count, largest, bad
