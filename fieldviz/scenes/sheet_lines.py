"""Field lines that thread the flux sheets, over the azimuth that is shown."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.signal import find_peaks

from fieldviz.lines.seeds_sheets import sheet_seeds
from fieldviz.scenes.display_grid import DisplayGrid
from fieldviz.scenes.from_data import FieldScale
from fieldviz.scenes.shown_lines import ShownLines, lines_per_wedge, shown_field_lines
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["SheetLines", "sheet_lines"]


@dataclass(frozen=True)
class SheetLines(ShownLines):
    """Lines to draw, and `radii`: the sheets that carry them."""

    radii: list[float]


def sheet_lines(
    snapshot: Snapshot,
    grid: DisplayGrid,
    field: FieldScale,
    level: float,
    count: int,
    height: float,
) -> SheetLines:
    """Trace lines from the ridges of the sheets.

    Parameters
    ----------
    snapshot : Snapshot
        With the whole magnetic field.
    grid : DisplayGrid
        What is shown.
    field : FieldScale
        With the midplane's profile, where the sheets are looked for.
    level : float
        A sheet's mean height must reach this.
    count : int
        Lines over the azimuth that is shown, about.
    height : float
        Lines end at this abs(z)/R.

    Returns
    -------
    SheetLines
        Empty if there is no sheet or the azimuthal field is missing.
    """
    radii = _sheet_radii(grid, field, level)
    if not radii or count < 1 or not snapshot.has(*MAGNETIC):
        return SheetLines([], [], [])
    per_wedge = max(len(radii), lines_per_wedge(snapshot, grid, count))
    lines = shown_field_lines(snapshot, grid, sheet_seeds(snapshot, radii, per_wedge), height)
    return SheetLines(lines.places, lines.pitch, radii)


def _sheet_radii(grid: DisplayGrid, field: FieldScale, level: float) -> list[float]:
    profile = field.profile.mean(axis=0)
    R = grid.r * np.sin(grid.theta[grid.midplane_row])
    peaks, _ = find_peaks(profile, height=level, prominence=0.2 * level)
    return [float(R[peak]) for peak in peaks]
