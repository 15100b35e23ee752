"""Current sheets: where the field changes within few cells, or current stands out at its height."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from fieldviz.derived.current_density import current_density
from fieldviz.derived.shared import once
from fieldviz.derived.thickness import Thickness
from fieldviz.errors import FieldvizError
from fieldviz.sheets.columns import (
    SMOOTHING,
    Columns,
    common_notes,
    full_width,
    highest,
    note_holes,
    theta_columns,
)
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.geometry import cell_volumes, centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["CurrentRidge", "CurrentSheets", "current_sheets"]

STEEP = 1 / 3  # chi = mu0 |J| dx/|B| beyond which the field turns within few cells
STRONG = 5.0  # |J| over its running median at the same theta
MEDIAN_REACH = 3.0  # scale heights in r to either side over which the median runs
RESOLVED = 6.0  # cells across the full width at half maximum

_COMPONENTS = ("magnitude", "r", "theta", "phi")
_NOTES = (
    f"in a sheet: chi = mu0 |J| dx/|B| > {STEEP:.3g}, dx the smallest side of the cell, |B| the "
    f"rms over {SMOOTHING:g} H in r and theta; or |J| > {STRONG:g} times its running median",
    f"running median at fixed theta: of the azimuthal median, over {MEDIAN_REACH:g} H in r to "
    "either side",
    "cells at walls in r and theta, where J is one-sided, are left out",
)


@dataclass(frozen=True, eq=False)
class CurrentRidge:
    """Where each column's current is largest; maps (n_phi, n_r), lengths in H.

    Attributes
    ----------
    component : str
        Whose ridge it is: "magnitude", "r", "theta" or "phi".
    height : map
        Height, positive above the midplane, at which the component's |J| is largest; NaN where
        that is at an end of the column.
    in_sheet : bool map
        Whether the cell there is in a current sheet.
    median, spread : float, (float, float)
        Height over ln r and azimuth; 16 and 84 percent.
    width : map
        Full width at half maximum of |J| along theta, about the ridge; NaN where |J| does not fall
        to half.
    width_median, width_spread : float, (float, float)
        The same over ln r and azimuth.
    cells_per_width : float
        Median.
    word : str
        "width resolved" for 6 cells or more, "width not resolved", or "no width".
    """

    component: str
    height: Array
    in_sheet: Array
    median: float
    spread: tuple[float, float]
    width: Array
    width_median: float
    width_spread: tuple[float, float]
    cells_per_width: float
    word: str


@dataclass(frozen=True, eq=False)
class CurrentSheets:
    """Where current is concentrated; arrays (n_phi, n_theta, n_r).

    Attributes
    ----------
    in_sheet : bool array
        chi > 1/3, or |J| above five times its running median.
    chi : array
        mu0 |J| dx/|B|: dx the smallest side of the cell, |B| the rms over 1 H in r and theta.
    contrast : array
        |J| over its running median at the same theta.
    share_of_volume, share_of_current, share_of_square : float
        Of the volume, of |J| and of |J|^2 over it, within sheets.
    ridge : CurrentRidge
    r, theta, phi : arrays
        Middles of the mesh.
    thickness : Thickness
    notes : tuple of str
        What the numbers rest on.
    """

    in_sheet: Array
    chi: Array
    contrast: Array
    share_of_volume: float
    share_of_current: float
    share_of_square: float
    ridge: CurrentRidge
    r: Array
    theta: Array
    phi: Array
    thickness: Thickness
    notes: tuple[str, ...]


def current_sheets(
    snapshot: Snapshot, *, component: str = "magnitude", thickness: float | None = None
) -> CurrentSheets:
    """Find cells in current sheets, and the ridge and thickness of the current in every column.

    Parameters
    ----------
    snapshot : Snapshot
        With the magnetic field; `density`, unless `thickness` is given.
    component : str
        Whose ridge is followed: "magnitude", "r", "theta" or "phi".
    thickness : float, optional
        H/R; worked out from the snapshot by default.

    Returns
    -------
    CurrentSheets

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    Common practice, no source. Cells at walls, where J is one-sided, are left out. chi measures
    the share of the field that changes across one cell; it depends on the mesh by design.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.sheets.current_sheets import current_sheets
    >>> current_sheets(fv.demo_disc(shape=(4, 64, 24))).ridge.height.shape
    (4, 24)
    """
    work = "find current sheets"
    if component not in _COMPONENTS:
        raise FieldvizError(
            f"Cannot {work}: expected component to be one of {', '.join(_COMPONENTS)}, got "
            f"'{component}'; name one of these."
        )
    snapshot.require(work, *MAGNETIC)
    columns = theta_columns(snapshot, work, thickness)
    current = once(snapshot, "current density", lambda: current_density(snapshot))
    masked = columns.of_own_cell(current.one_sided)
    strength = _squares(columns, [getattr(current, name) for name in _COMPONENTS[1:]], root=True)
    notes = [*common_notes(columns), *_NOTES]
    note_holes(notes, "|J|", strength)
    strength[masked] = np.nan
    chi, contrast, in_sheet, shares = _concentration(snapshot, columns, strength)
    followed = strength
    if component != "magnitude":
        followed = np.abs(columns.sampled(np.asarray(getattr(current, component))))
        followed[masked] = np.nan
    ridge = _ridge(columns, component, followed, strength, in_sheet)
    without = columns.share(~np.isfinite(ridge.width))
    if without:
        notes.append(f"{100 * without:.3g} % of the columns have no width at half maximum")
    return CurrentSheets(
        in_sheet,
        chi,
        contrast,
        *shares,
        ridge,
        columns.r,
        columns.theta,
        columns.phi,
        columns.thickness,
        tuple(notes),
    )


def _ridge(
    columns: Columns, component: str, followed: Array, strength: Array, in_sheet: Array
) -> CurrentRidge:
    rows, height = highest(followed, columns.heights)
    width = full_width(strength, columns.heights, rows)
    row = np.maximum(rows, 0)
    there = np.take_along_axis(in_sheet, row[:, None], axis=1)[:, 0] & (rows >= 0)
    low, median, high = columns.percentiles(height)
    narrow, typical, wide = columns.percentiles(width)
    steps = np.diff(columns.theta_edges) / columns.thickness.h
    cells = columns.percentiles(width / steps[row])[1]
    word = "no width"
    if np.isfinite(cells):
        word = "width resolved" if cells >= RESOLVED else "width not resolved"
    return CurrentRidge(
        component, height, there, median, (low, high), width, typical, (narrow, wide), cells, word
    )


def _squares(columns: Columns, components: Sequence[Array], *, root: bool = False) -> Array:
    """Sum of the squares of three cell arrays on the columns, or its root, in double precision."""
    from fieldviz.sheets._kernels import sums_of_squares

    if columns.grid.n_blocks == 1:
        parts = [np.asarray(component)[0] for component in components]
    else:
        parts = [columns.sampled(np.asarray(component)) for component in components]
    out = np.empty(columns.shape)
    sums_of_squares(*parts, root, out)
    return out


def _concentration(
    snapshot: Snapshot, columns: Columns, strength: Array
) -> tuple[Array, Array, Array, tuple[float, float, float]]:
    """Values of chi, |J| over its running median, where there is a sheet, and shares.

    Shares are of volume, |J| and |J|^2 within sheets, over the cells that have a number.
    """
    from fieldviz.sheets._kernels import current_in_sheets

    around = _squares(columns, [snapshot.cell(name) for name in MAGNETIC])
    around = columns.smoothed_along_theta(columns.smoothed_along_r(around))
    side = columns.of_own_cell(_smallest_side(snapshot.grid))
    chi, contrast = np.empty(columns.shape), np.empty(columns.shape)
    in_sheet = np.empty(columns.shape, dtype=bool)
    sums = np.empty((columns.shape[0], 6))
    widths = np.diff(columns.phi_edges)
    unit = cell_volumes(columns.r_edges, columns.theta_edges, np.array([0.0, 1.0]))[0]
    factors = (widths, unit[:, 0] / unit[0, 0], unit[0])
    with np.errstate(all="ignore"):
        current_in_sheets(
            strength, around, _running(columns, strength), side, snapshot.mu0, STEEP, STRONG,
            factors, chi, contrast, in_sheet, sums,
        )  # fmt: skip
    whole = sums.sum(0)
    shares = [float(whole[n + 3] / whole[n]) if whole[n] > 0 else float("nan") for n in range(3)]
    return chi, contrast, in_sheet, (shares[0], shares[1], shares[2])


def _smallest_side(grid: WedgeGrid) -> Array:
    """Smallest side of every cell; a single cell in azimuth does not count."""
    r, theta = centres(grid.r_edges)[:, None, None, :], centres(grid.theta_edges)[:, None, :, None]
    side = np.minimum(
        np.diff(grid.r_edges)[:, None, None, :], r * np.diff(grid.theta_edges)[:, None, :, None]
    )
    side = np.broadcast_to(side, (grid.n_blocks, *grid.block_shape))
    if grid.block_shape[0] == 1 and len(grid.table.phi) == 2:
        return np.asarray(side)
    along = r * np.sin(theta) * np.diff(grid.phi_edges)[:, :, None, None]
    return np.asarray(np.minimum(side, along))


def _running(columns: Columns, strength: Array) -> Array:
    """Median, over +-3 H in r, of the median of |J| over azimuth, (n_theta, n_r)."""
    from fieldviz.sheets._kernels import first_axis_medians, running_medians

    x = centres(columns.log_r)
    first = np.searchsorted(x, x - MEDIAN_REACH)
    last = np.searchsorted(x, x + MEDIAN_REACH, side="right")
    typical, running = np.empty(strength.shape[1:]), np.empty(strength.shape[1:])
    first_axis_medians(strength, typical)
    running_medians(typical, first, last, running)
    return running
