"""What a scene takes from the data: exponents, levels, ranges, the sign of the net field."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.signal import find_peaks

from fieldviz.scenes.display_grid import DisplayGrid
from fieldviz.wedge.typing import Array

__all__ = [
    "FieldScale",
    "field_scale",
    "power_law_exponent",
    "robust_range",
    "round_figure",
    "sheet_levels",
    "vertical_field",
]

_PROMINENT = 0.3  # of the highest peak over the median: what counts as a sheet
_OUTER_SHARE, _INNER_SHARE = 0.10, 0.66  # of the way from the median to a typical peak


@dataclass(frozen=True)
class FieldScale:
    """How the vertical field of a snapshot is shown.

    Attributes
    ----------
    exponent : float
        b in B_z R^b.
    sign : int
        1, or -1 where the net field points down and -B_z is shown.
    profile : (n_phi, n_r) array
        sign B_z R^b on the midplane.
    """

    exponent: float
    sign: int
    profile: Array


def vertical_field(grid: DisplayGrid) -> Array:
    """B_z = B_r cos(theta) - B_theta sin(theta) on all nodes."""
    theta = grid.theta[:, None]
    product = grid.fields["magnetic_r"] * np.cos(theta)
    return np.asarray(product - grid.fields["magnetic_theta"] * np.sin(theta))


def power_law_exponent(R: Array, values: Array) -> float:
    """A of the background in values ~ R^-a, to the nearest quarter.

    Parameters
    ----------
    R : (n,) array
    values : (n,) array
        Positive values take part. Peaks and gaps hardly count: the sum of absolute deviations of
        the logarithms is made least, first for all values, then for those that lie near.

    Returns
    -------
    float
        0 where fewer than three values are positive.
    """
    use = np.isfinite(values) & (values > 0)
    if np.count_nonzero(use) < 3 or np.ptp(R[use]) == 0:
        return 0.0
    x, y = np.log(R[use]), np.log(values[use])
    matrix = np.column_stack([np.ones_like(x), x])
    away = np.abs(y - matrix @ _least_deviations(matrix, y))
    near = away <= 2.0 * max(float(np.median(away)), 0.02)
    slope = _least_deviations(matrix[near], y[near])[1]
    return float(np.rint(-4.0 * slope) / 4.0) + 0.0


def _least_deviations(matrix: Array, y: Array) -> Array:
    """Coefficients for which the sum of absolute deviations is least, by repeated weighting."""
    weight = np.ones_like(y)
    for _ in range(60):
        root = np.sqrt(weight)
        solution = np.linalg.lstsq(matrix * root[:, None], y * root, rcond=None)[0]
        weight = 1.0 / np.maximum(np.abs(y - matrix @ solution), 1e-4)
    return np.asarray(solution)


def field_scale(R: Array, midplane: Array, exponent: float | None = None) -> FieldScale:
    """Sign and compensation of B_z from its values on the midplane.

    Parameters
    ----------
    R : (n_r,) array
    midplane : (n_phi, n_r) array
        B_z.
    exponent : float, optional
        Use this one.
    """
    mean = midplane.mean(axis=0)
    sign = -1 if np.trapezoid(mean * R, R) < 0 else 1
    fitted = power_law_exponent(R, sign * mean) if exponent is None else float(exponent)
    return FieldScale(fitted, sign, sign * midplane * R**fitted)


def sheet_levels(profile: Array) -> tuple[float, float]:
    """Outer and inner level of the flux sheets.

    Parameters
    ----------
    profile : (n_phi, n_r) array
        Compensated B_z on the midplane.

    Returns
    -------
    (float, float)
        Both between the background's median and the height of the lower quarter of the peaks.
        Without peaks the levels lie above everything: nothing is a sheet.
    """
    median = float(np.median(profile))
    reach = float(profile.max()) - median
    scatter = float(np.median(np.abs(profile - median)))
    heights: list[float] = []
    if reach > 4.0 * scatter and reach > 1e-6 * abs(median):
        for line in profile:
            peaks, _ = find_peaks(line, prominence=_PROMINENT * reach)
            heights += [float(value) for value in line[peaks]]
    if not heights:
        top = float(profile.max())
        margin = 0.5 * max(abs(top), abs(median), 1e-300)
        return round_figure(top + margin), round_figure(top + 2.0 * margin)
    typical = float(np.quantile(heights, 0.25))
    step = typical - median
    # The outer level stays above the background's own ups and downs.
    low = min(max(_OUTER_SHARE * step, 3.0 * scatter), 0.4 * step)
    return round_figure(median + low), round_figure(median + _INNER_SHARE * step)


def robust_range(values: Array, low: float, high: float) -> tuple[float, float]:
    """Two percentiles of the finite values, never equal."""
    finite = values[np.isfinite(values)]
    bottom, top = (float(value) for value in np.percentile(finite, [low, high]))
    if top <= bottom:
        top = bottom + max(abs(bottom), 1e-12) * 1e-3
    return bottom, top


def round_figure(value: float, digits: int = 2) -> float:
    """A value to so many significant digits."""
    return float(f"{value:.{digits - 1}e}")
