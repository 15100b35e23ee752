"""The magnetic midplane: where the azimuthal field turns round."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.current_density import current_density
from fieldviz.derived.shared import once
from fieldviz.derived.thickness import Thickness
from fieldviz.sheets.columns import (
    Columns,
    common_notes,
    highest,
    nearest_zero,
    note_holes,
    theta_columns,
)
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["MagneticMidplane", "magnetic_midplane"]

LEAST_SHARE = 0.5  # of all columns that must have a zero of B_phi
RIDGE_REACH = 4.0  # scale heights from the midplane within which the ridge of |J_r| is looked for


@dataclass(frozen=True, eq=False)
class MagneticMidplane:
    """Where B_phi changes sign; maps (n_phi, n_r), heights in H, positive above the midplane.

    Attributes
    ----------
    word : str
        "reversal", or "no reversal" where fewer than half of all columns have a zero of B_phi.
    median : float
        Height over ln r and azimuth; NaN without a reversal.
    spread : (float, float)
        16 and 84 percent of the same.
    share : float
        Share of ln r and azimuth with a zero.
    height : (n_phi, n_r) array
        Height of the zero nearest to the midplane; NaN where there is none.
    ridge : (n_phi, n_r) array or None
        Height within 4 H at which |J_r| is largest; NaN where that is at the end of the 4 H. None
        without all three components of the field.
    ridge_median, ridge_spread : float, (float, float)
        The same over ln r and azimuth; NaN without.
    r, phi : arrays
        Middles of the columns.
    thickness : Thickness
        H/R that heights are in.
    notes : tuple of str
        What the numbers rest on.
    """

    word: str
    median: float
    spread: tuple[float, float]
    share: float
    height: Array
    ridge: Array | None
    ridge_median: float
    ridge_spread: tuple[float, float]
    r: Array
    phi: Array
    thickness: Thickness
    notes: tuple[str, ...]


def magnetic_midplane(snapshot: Snapshot, *, thickness: float | None = None) -> MagneticMidplane:
    """Find the height at which B_phi changes sign, column by column.

    Parameters
    ----------
    snapshot : Snapshot
        With `magnetic_phi`; for the ridge of |J_r| all three components; `density`, unless
        `thickness` is given.
    thickness : float, optional
        H/R; worked out from the snapshot by default.

    Returns
    -------
    MagneticMidplane

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    B_phi and J_r are smoothed over 1 H in r first; the zero is linear between cells. Common
    practice, no source.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.sheets.magnetic_midplane import magnetic_midplane
    >>> disc = fv.demo_disc(shape=(4, 64, 24), midplane_shift=0.12)
    >>> round(magnetic_midplane(disc).median, 1)
    1.2
    """
    work = "find the magnetic midplane"
    snapshot.require(work, "magnetic_phi")
    columns = theta_columns(snapshot, work, thickness)
    sampled = columns.sampled(snapshot.cell("magnetic_phi"))
    field = columns.smoothed_along_r(sampled)
    height = nearest_zero(field, columns.heights)
    share = columns.share(np.isfinite(height))
    notes = common_notes(columns)
    notes.append("B_phi smoothed over 1 H in r; zero nearest to the midplane, linear in theta")
    note_holes(notes, "B_phi", sampled)
    low, median, high = columns.percentiles(height)
    word = "reversal"
    if share < LEAST_SHARE:
        word, low, median, high = "no reversal", np.nan, np.nan, np.nan
        notes.append(
            f"B_phi changes sign in {100 * share:.3g} % of the columns, less than "
            f"{100 * LEAST_SHARE:g} %: no height is given"
        )
    ridge = None
    if snapshot.has(*MAGNETIC):
        ridge = _current_ridge(snapshot, columns)
        notes.append(
            f"ridge of |J_r|, smoothed alike, within {RIDGE_REACH:g} H and without cells at walls"
        )
    else:
        notes.append("no ridge of |J_r|: the snapshot lacks a component of the magnetic field")
    at = columns.percentiles(np.full(height.shape, np.nan) if ridge is None else ridge)
    return MagneticMidplane(
        word,
        median,
        (low, high),
        share,
        height,
        ridge,
        at[1],
        (at[0], at[2]),
        columns.r,
        columns.phi,
        columns.thickness,
        tuple(notes),
    )


def _current_ridge(snapshot: Snapshot, columns: Columns) -> Array:
    """Height at which |J_r| is largest, of J_r smoothed over 1 H in r."""
    current = once(snapshot, "current density", lambda: current_density(snapshot))
    # Farther out the wind carries stronger currents along its own streams.
    near = _span(np.abs(columns.heights) <= RIDGE_REACH)
    along = columns.sampled(np.asarray(current.r), near)
    along[columns.of_own_cell(current.one_sided)[:, near]] = np.nan
    strength = np.full(columns.shape, np.nan)
    strength[:, near] = np.abs(columns.smoothed_along_r(along))
    return highest(strength, columns.heights)[1]


def _span(chosen: Array) -> slice:
    """Rows next to one another as a slice."""
    rows = np.flatnonzero(chosen)
    return slice(int(rows[0]), int(rows[-1]) + 1) if rows.size else slice(0, 0)
