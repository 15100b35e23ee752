"""Compiled loops of the wind: sums along azimuth of what flows, and of the lean where mass leaves.

They raise nothing; the public functions around them check what comes in.
"""

# mypy: disable-error-code="no-untyped-def, no-untyped-call"
# Numba infers the types of kernels; the public functions around them are typed.

from __future__ import annotations

import math

import numpy as np
from numba import njit


@njit(cache=True, nogil=True)
def flux_rows(
    fields, there, start, stop, steps, lever, kepler, well, slopes, groups, mu0, heat,
    cover, sums,
):  # fmt: skip
    """Sum fluxes along azimuth over the rows `start` to `stop` of a block.

    `fields` are eight arrays (n_phi, n_theta, n_r) of one type: rho, P, v and B along r, theta,
    phi; those not `there` are never looked at. `steps` (n_phi,) widths in azimuth, `lever`
    (n_theta, n_r) R, `kepler` and `well` (n_r,) sqrt(GM r) and -GM/r, `slopes` (n_theta, n_r) of
    the surface, `groups` (4,) which of gas, field, both and heat are wanted. Adds to `cover`
    (4, n_theta, n_r) and `sums` (8, 3, n_theta, n_r), components r, theta and |across the surface|.
    Gives the cells left out of each group.
    """
    n_phi, _, n = fields[0].shape
    row = np.empty((8, n))
    flux = np.empty((5, 3, n))
    good = np.empty(n, dtype=np.bool_)
    left_out = np.zeros(4, dtype=np.int64)
    for j in range(start, stop):
        for k in range(n_phi):
            for f in range(8):
                if there[f]:
                    array = fields[f]
                    for i in range(n):
                        row[f, i] = array[k, j, i]
            for group in range(4):
                if groups[group]:
                    first, last = _group_flux(
                        group, row, lever[j], kepler, well, mu0, heat, flux, good
                    )
                    left_out[group] += _collect(
                        flux, good, steps[k], slopes[j], cover[group], sums, first, last, j
                    )
    return left_out


@njit(cache=True, nogil=True)
def _group_flux(group, row, lever, kepler, well, mu0, heat, flux, good):
    """Fluxes of one group along r and theta; which places in the sums are theirs."""
    n = len(good)
    good[:] = True
    if group == 0:
        for i in range(n):
            good[i] = row[0, i] > 0.0
        _gas_flux(row, lever, kepler, well, flux)
        return 0, 5
    if group == 1:
        for c in range(2):
            for i in range(n):
                flux[0, c, i] = -lever[i] * row[7, i] * row[5 + c, i] / mu0
        return 5, 6
    if group == 2:
        for c in range(2):
            for i in range(n):
                square = row[5, i] ** 2 + row[6, i] ** 2 + row[7, i] ** 2
                along = row[2, i] * row[5, i] + row[3, i] * row[6, i] + row[4, i] * row[7, i]
                flux[0, c, i] = (square * row[2 + c, i] - along * row[5 + c, i]) / mu0
        return 6, 7
    for c in range(2):
        for i in range(n):
            flux[0, c, i] = heat * row[1, i] * row[2 + c, i]
    return 7, 8


@njit(cache=True, nogil=True)
def _gas_flux(row, lever, kepler, well, flux):
    """Mass, R v_phi, its excess over Kepler's, kinetic energy, energy of gravity."""
    for c in range(2):
        for i in range(row.shape[1]):
            carried = row[0, i] * row[2 + c, i]
            turning = lever[i] * row[4, i]
            square = row[2, i] ** 2 + row[3, i] ** 2 + row[4, i] ** 2
            flux[0, c, i] = carried
            flux[1, c, i] = turning * carried
            flux[2, c, i] = carried * (turning - kepler[i])
            flux[3, c, i] = 0.5 * square * carried
            flux[4, c, i] = well[i] * carried


@njit(cache=True, nogil=True)
def _collect(flux, good, step, slope, cover, sums, first, last, j):
    """Add one azimuth of a group where all of it is finite; give the cells left out."""
    n = len(good)
    for q in range(last - first):
        for i in range(n):
            flux[q, 2, i] = abs(flux[q, 1, i] - slope[i] * flux[q, 0, i])
        for c in range(3):
            for i in range(n):
                # Infinity minus itself is no number, and neither is NaN.
                good[i] &= flux[q, c, i] - flux[q, c, i] == 0.0
    left_out = 0
    for i in range(n):
        left_out += not good[i]
        cover[j, i] += step if good[i] else 0.0
    for q in range(last - first):
        for c in range(3):
            for i in range(n):
                sums[first + q, c, j, i] += step * flux[q, c, i] if good[i] else 0.0
    return left_out


@njit(cache=True, nogil=True)
def lean_rows(
    fields, start, stop, steps, sine, cosine, signs, slopes, wanted, steep, sideways, cover, sums
):  # fmt: skip
    """Sum along azimuth the mass that leaves and its lean, over some rows of a block.

    `fields` are five arrays (n_phi, n_theta, n_r) of one type: rho, v_r, v_theta, B_r, B_theta.
    `signs` (n_sides,), `slopes` (n_sides, n_r), `wanted` (n_sides, n_theta): other rows are looked
    at, not summed. Adds to `cover` (n_sides, n_theta, n_r) and `sums` (n_sides, 4, n_theta, n_r):
    the mass, the same for steep lines, times the lean, and for sideways lines. Gives the cells
    left out of each side.
    """
    n_phi, _, n = fields[0].shape
    row = np.empty((5, n))
    across, upward, leaving = np.empty(n), np.empty(n), np.empty(n)
    good = np.empty(n, dtype=np.bool_)
    left_out = np.zeros(len(signs), dtype=np.int64)
    for j in range(start, stop):
        height = 1.0 if cosine[j] >= 0.0 else -1.0
        for k in range(n_phi):
            for f in range(5):
                array = fields[f]
                for i in range(n):
                    row[f, i] = array[k, j, i]
            for i in range(n):
                across[i] = row[3, i] * sine[j] + row[4, i] * cosine[j]
                upward[i] = row[3, i] * cosine[j] - row[4, i] * sine[j]
            for s in range(len(signs)):
                count = 0
                for i in range(n):
                    x = -signs[s] * row[0, i] * (row[2, i] - slopes[s, i] * row[1, i])
                    leaving[i] = 0.0 if x < 0.0 else x
                    # Without field there is no lean; where nothing leaves none is needed.
                    lean = (across[i] == across[i]) & (upward[i] == upward[i])
                    lean &= (across[i] != 0.0) | (upward[i] != 0.0)
                    known = (row[0, i] > 0.0) & (leaving[i] - leaving[i] == 0.0)
                    good[i] = known & (lean | (leaving[i] == 0.0))
                    count += good[i]
                    cover[s, j, i] += steps[k] if good[i] else 0.0
                left_out[s] += n - count
                if wanted[s, j]:
                    _add_lean(
                        across, upward, height, leaving, good, steps[k], steep, sideways, sums[s], j
                    )
    return left_out


@njit(cache=True, nogil=True)
def _add_lean(across, upward, height, leaving, good, step, steep, sideways, sums, j):
    for i in range(len(good)):
        if not good[i] or leaving[i] == 0.0:
            continue
        outward = height * across[i] * (-1.0 if upward[i] < 0.0 else 1.0)
        lying = abs(upward[i]) < sideways * math.hypot(across[i], upward[i])
        degrees = math.atan2(outward, abs(upward[i])) * (180.0 / math.pi)
        if lying:
            degrees = math.copysign(90.0, outward)
        sums[0, j, i] += step * leaving[i]
        if degrees > steep:
            sums[1, j, i] += step * leaving[i]
        sums[2, j, i] += step * (leaving[i] * degrees)
        if lying:
            sums[3, j, i] += step * leaving[i]
