"""Compiled loops of azimuth averages: means and products of deviations along azimuth.

They raise nothing; the public functions around them check what comes in.
"""

# mypy: disable-error-code="no-untyped-def, no-untyped-call"
# Numba infers the types of kernels; the public functions around them are typed.

from __future__ import annotations

import numpy as np
from numba import njit


@njit(cache=True, nogil=True)
def row_moments(
    values, steps, density, least, by_volume, pairs, by_mass, mass_pairs,
    weight, means, products, mass, mass_means, mass_products,
):  # fmt: skip
    """Means along azimuth of the fields of one row theta = constant, and products of deviations.

    `values` (n_fields, n_phi, n_r), `steps` (n_phi,) widths in azimuth; `density` is the field
    that must exceed `least`, or -1. `by_volume`, `by_mass` list fields, `pairs`, `mass_pairs`
    (m, 2) pairs of fields. Results are written into `weight`, `mass` (n_r,) and arrays of one row
    for each field or pair; 0 where no cell could be used. Gives the number of cells left out.

    Sums are about the first usable value, so that small fluctuations keep their digits.
    """
    n_fields, n_phi, n = values.shape
    origin = np.zeros((n_fields, n))
    known = np.zeros(n, dtype=np.bool_)
    away = np.empty((n_fields, n))
    here = np.empty(n)
    heavy = np.empty(n)
    left_out = 0
    weight[:] = 0.0
    means[:] = 0.0
    products[:] = 0.0
    mass[:] = 0.0
    mass_means[:] = 0.0
    mass_products[:] = 0.0
    for k in range(n_phi):
        here[:] = steps[k]
        for f in range(n_fields):
            for i in range(n):
                x = values[f, k, i]
                # Infinity minus itself is no number, and neither is NaN.
                if x - x != 0.0:
                    here[i] = 0.0
        if density >= 0:
            for i in range(n):
                if not (values[density, k, i] > least):
                    here[i] = 0.0
        for i in range(n):
            if here[i] == 0.0:
                left_out += 1
            elif not known[i]:
                known[i] = True
                for f in range(n_fields):
                    origin[f, i] = values[f, k, i]
        for f in range(n_fields):
            for i in range(n):
                x = values[f, k, i] - origin[f, i]
                away[f, i] = x if here[i] > 0.0 else 0.0
        for i in range(n):
            weight[i] += here[i]
        for m in range(len(by_volume)):
            f = by_volume[m]
            for i in range(n):
                means[m, i] += here[i] * away[f, i]
        for m in range(len(pairs)):
            a, b = pairs[m, 0], pairs[m, 1]
            for i in range(n):
                products[m, i] += here[i] * away[a, i] * away[b, i]
        if len(by_mass) > 0:
            for i in range(n):
                heavy[i] = here[i] * values[density, k, i] if here[i] > 0.0 else 0.0
                mass[i] += heavy[i]
            for m in range(len(by_mass)):
                f = by_mass[m]
                for i in range(n):
                    mass_means[m, i] += heavy[i] * away[f, i]
            for m in range(len(mass_pairs)):
                a, b = mass_pairs[m, 0], mass_pairs[m, 1]
                for i in range(n):
                    mass_products[m, i] += heavy[i] * away[a, i] * away[b, i]
    _finish(origin, by_volume, pairs, weight, means, products)
    if len(by_mass) > 0:
        _finish(origin, by_mass, mass_pairs, mass, mass_means, mass_products)
    return left_out


@njit(cache=True, nogil=True)
def _finish(origin, fields, pairs, weight, means, products):
    """Turn sums about the origin into means, and products about the means."""
    n = len(weight)
    place = np.full(len(origin), -1)
    for m in range(len(fields)):
        place[fields[m]] = m
    for m in range(len(pairs)):
        a, b = place[pairs[m, 0]], place[pairs[m, 1]]
        for i in range(n):
            if weight[i] > 0.0:
                products[m, i] -= means[a, i] * means[b, i] / weight[i]
    for m in range(len(fields)):
        f = fields[m]
        for i in range(n):
            if weight[i] > 0.0:
                means[m, i] = origin[f, i] + means[m, i] / weight[i]
    # A sum of squares is not negative, but for rounding.
    for m in range(len(pairs)):
        if pairs[m, 0] == pairs[m, 1]:
            for i in range(n):
                products[m, i] = max(products[m, i], 0.0)
