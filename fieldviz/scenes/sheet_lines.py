"""Field lines that thread the flux sheets, over the azimuth that is shown."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.signal import find_peaks

from fieldviz.lines.line_set import LineSet
from fieldviz.lines.seeds_sheets import sheet_seeds
from fieldviz.lines.tracing import trace_lines
from fieldviz.scenes.display_grid import DisplayGrid
from fieldviz.scenes.field_lines import coarsest_cell, smoothed
from fieldviz.scenes.from_data import FieldScale
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.sampling import sample
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["SheetLines", "sheet_lines"]

_SMOOTHING = 2.5  # of the largest cells: lines are smoothed over this length
_EDGE_SHARE = 0.006  # of the shown azimuth kept free of seeds beside the cut


@dataclass(frozen=True)
class SheetLines:
    """Lines to draw.

    Attributes
    ----------
    places : list of (n, 3) arrays
        r, theta, unwrapped phi.
    pitch : list of (n,) arrays
        B_phi/|B| along each line.
    radii : list of float
        Sheets that carry them.
    """

    places: list[Array]
    pitch: list[Array]
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
    seeds = _repeated(snapshot, grid, radii, count)
    lines = trace_lines(snapshot, "magnetic", seeds)
    shown = _within(lines, grid, height)
    width = _SMOOTHING * min(coarsest_cell(snapshot), 0.05)
    parts = [lines.spherical[_around_seed(lines, n, shown)] for n in range(len(lines))]
    places = [_smooth(part, width) for part in parts if len(part) > 3]
    return SheetLines(places, _pitch(snapshot, places), radii)


def _smooth(line: Array, width: float) -> Array:
    """A line without the traces of single cells; thin sheets that lie aslant leave many."""
    place = np.column_stack([np.log(line[:, 0]), line[:, 1:]])
    place = smoothed(place, width)
    return np.column_stack([np.exp(place[:, 0]), place[:, 1:]])


def _pitch(snapshot: Snapshot, places: list[Array]) -> list[Array]:
    """B_phi/|B| along each line; 0 where there is no field."""
    if not places:
        return []
    values, _ = sample(snapshot, np.concatenate(places), MAGNETIC)
    B = np.stack([values[name] for name in MAGNETIC], axis=-1)
    size = np.linalg.norm(B, axis=-1)
    pitch = np.divide(B[:, 2], size, out=np.zeros(len(size)), where=size > 0)
    return np.split(pitch, np.cumsum([len(line) for line in places])[:-1])


def _sheet_radii(grid: DisplayGrid, field: FieldScale, level: float) -> list[float]:
    profile = field.profile.mean(axis=0)
    R = grid.r * np.sin(grid.theta[grid.midplane_row])
    peaks, _ = find_peaks(profile, height=level, prominence=0.2 * level)
    return [float(R[peak]) for peak in peaks]


def _repeated(snapshot: Snapshot, grid: DisplayGrid, radii: list[float], count: int) -> Array:
    """Seeds of one wedge, repeated over the shown azimuth and kept off its ends."""
    period, span = snapshot.grid.period, float(grid.phi[-1] - grid.phi[0])
    per_wedge = max(len(radii), round(count * period / span))
    seeds = sheet_seeds(snapshot, radii, per_wedge)
    turns = np.arange(int(np.ceil(span / period)))
    every = np.concatenate([seeds + np.array([0.0, 0.0, turn * period]) for turn in turns])
    margin = _EDGE_SHARE * span if span < 2 * np.pi - 1e-6 else 0.0
    inside = (every[:, 2] >= grid.phi[0] + margin) & (every[:, 2] <= grid.phi[-1] - margin)
    return every[inside]


def _within(lines: LineSet, grid: DisplayGrid, height: float) -> Array:
    r, theta, phi = lines.spherical.T
    closed = grid.phi[-1] - grid.phi[0] > 2 * np.pi - 1e-6
    in_azimuth = closed | ((phi >= grid.phi[0]) & (phi <= grid.phi[-1]))
    low = np.abs(np.cos(theta)) <= height * np.sin(theta)
    return in_azimuth & low & (r <= grid.r[-1])


def _around_seed(lines: LineSet, line: int, shown: Array) -> slice:
    """The part of a line about its seed that is shown without a break."""
    first, stop = int(lines.offsets[line]), int(lines.offsets[line + 1])
    seed = first + int(lines.seed_index[line])
    if stop == first or not shown[seed]:
        return slice(first, first)
    hidden = np.flatnonzero(~shown[first:stop]) + first
    before, after = hidden[hidden < seed], hidden[hidden > seed]
    return slice(
        int(before[-1]) + 1 if before.size else first, int(after[0]) if after.size else stop
    )
