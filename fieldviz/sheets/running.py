"""Smoothing, running median and spread on cells of any width."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from fieldviz.wedge.typing import Array

__all__ = ["Kernel", "gaussian_kernel", "row_medians", "running_median"]

_LEAST_CELLS = 0.3  # a smoothing narrower than this many cells changes nothing and is left out
_STEP = 0.2  # of x between places at which a running median is worked out
_REACH = 5.0  # standard deviations at which the Gaussian is cut
MAD_TO_SIGMA = 1.4826  # of a normal distribution; Huber & Ronchetti 2009, from memory


@dataclass(frozen=True, eq=False)
class Kernel:
    """A smoothing as a matrix.

    Attributes
    ----------
    weights : (n, n) array or None
        Rows sum to 1; None leaves values as they are.
    variance : (n,) array
        Second moment of each row: what it adds to the square of a width.
    note : str
    """

    weights: Array | None
    variance: Array
    note: str

    def apply(self, values: Array) -> Array:
        """Smooth along the last axis."""
        return values if self.weights is None else np.asarray(values @ self.weights.T)


def gaussian_kernel(
    x: Array, dx: Array, sigma: float, *, period: float | None = None, unit: str = "H"
) -> Kernel:
    """Gaussian smoothing on cells.

    Parameters
    ----------
    x, dx : (n,) arrays
        Middles and widths of the cells.
    sigma : float
        Standard deviation. Below 0.3 of the median cell nothing is smoothed.
    period : float, optional
        x repeats after this.
    unit : str
        Of x, for the note.

    Returns
    -------
    Kernel
        At walls the Gaussian is cut and its weights are made to sum to 1.
    """
    if sigma < _LEAST_CELLS * float(np.median(dx)):
        return Kernel(
            None, np.zeros(len(x)), f"not smoothed: {sigma:g} {unit} is less than 0.3 of a cell"
        )
    distance = x - x[:, None]
    if period is not None:
        distance = (distance + 0.5 * period) % period - 0.5 * period
    inside = np.abs(distance) <= _REACH * sigma
    weights = np.where(inside, np.exp(-0.5 * (distance / sigma) ** 2), 0.0) * dx
    weights /= weights.sum(1, keepdims=True)
    variance = np.sum(weights * distance**2, axis=1)
    return Kernel(
        weights, variance, f"smoothed by a Gaussian of standard deviation {sigma:g} {unit}"
    )


def running_median(x: Array, dx: Array, values: Array, reach: float) -> Array:
    """Median over `reach` either side, each cell counted by its width.

    Parameters
    ----------
    x, dx, values : (n,) arrays
    reach : float

    Returns
    -------
    (n,) array
        Windows are cut at the ends. Worked out at steps of a fifth of a unit of x where cells are
        narrower, linear between.
    """
    found = [
        (i, _medians(values[None, window], dx[window])[0]) for i, window in _windows(x, dx, reach)
    ]
    nodes, medians = zip(*found, strict=True)
    return np.asarray(np.interp(x, x[list(nodes)], medians))


def _windows(x: Array, dx: Array, reach: float) -> Iterator[tuple[int, slice]]:
    """Cells, at least `_STEP` apart where they are narrower, and the window about each."""
    every = max(1, int(_STEP / float(np.median(dx))))
    for i in np.unique(np.append(np.arange(0, len(x), every), len(x) - 1)):
        first, last = np.searchsorted(x, (x[i] - reach, x[i] + reach))
        yield int(i), slice(int(first), int(last))


def row_medians(
    x: Array, dx: Array, rows: Array, widths: Array, middle: Array, reach: float
) -> tuple[Array, Array]:
    """Background and spread of a profile that is the mean of rows.

    Parameters
    ----------
    x, dx : (n,) arrays
    rows : (n_rows, n) array
    widths : (n_rows,) array
        Weights of the rows.
    middle : (n,) array
        Their mean.
    reach : float
        Half width of the windows.

    Returns
    -------
    background : (n,) array
        Running median of the mean, or mean of the running medians of all rows, whichever is nearer
        to zero.
    spread : (n,) array
        1.4826 times the running median deviation from the background, equal to the standard
        deviation for normally distributed values (Huber & Ronchetti 2009, from memory): of the
        mean, or averaged over the rows, whichever is less.

    Notes
    -----
    A maximum that bends from row to row is wide in the mean and lifts its median, but is narrow in
    each row. Scatter from row to row beside maxima lifts the medians of rows, but cancels in the
    mean. Neither lowers them: hence the lesser of both. Worked out at steps of a fifth of a unit
    of x where cells are narrower, linear between.
    """
    share = widths / widths.sum()
    nodes, background, spread = [], [], []
    for i, window in _windows(x, dx, reach):
        weights, mean, of_row = dx[window], middle[None, window], rows[:, window]
        medians = _medians(mean, weights)
        around = MAD_TO_SIGMA * _medians(np.abs(mean - medians[:, None]), weights)[0]
        least = (float(medians[0]), float(around))
        if len(rows) > 1:
            medians = _medians(of_row, weights)
            apart = _medians(np.abs(of_row - medians[:, None]), weights)
            b = min(least[0], float(share @ medians), key=abs)
            least = (b, min(least[1], float(MAD_TO_SIGMA * share @ apart)))
        nodes.append(i)
        background.append(least[0])
        spread.append(least[1])
    return np.interp(x, x[nodes], background), np.interp(x, x[nodes], spread)


def _medians(rows: Array, weights: Array) -> Array:
    """Weighted median of each row, linear between the two values in the middle."""
    order = np.argsort(rows, axis=1, kind="stable")
    values, w = np.take_along_axis(rows, order, 1), weights[order]
    middles = np.cumsum(w, axis=1) - 0.5 * w
    half = 0.5 * weights.sum()
    high = np.clip((middles < half).sum(1), 1, max(1, rows.shape[1] - 1))
    if rows.shape[1] == 1:
        return np.asarray(values[:, 0])
    n = np.arange(len(rows))
    low_at, high_at = middles[n, high - 1], middles[n, high]
    part = np.clip((half - low_at) / (high_at - low_at), 0.0, 1.0)
    low_value, high_value = values[n, high - 1], values[n, high]
    return np.asarray(low_value + part * (high_value - low_value))
