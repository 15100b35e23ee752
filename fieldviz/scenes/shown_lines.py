"""Field lines made ready to be drawn: repeated, cut to what is shown, smoothed, with pitch."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.lines.line_set import LineSet
from fieldviz.lines.tracing import trace_lines
from fieldviz.scenes.display_grid import DisplayGrid
from fieldviz.scenes.field_lines import coarsest_cell, smoothed
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.sampling import sample
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["SMOOTHING", "ShownLines", "lines_per_wedge", "shown_field_lines"]

SMOOTHING = 2.5  # of the largest cells: lines are smoothed over this length
_EDGE_SHARE = 0.006  # of the shown azimuth kept free of lines beside the cut


@dataclass(frozen=True)
class ShownLines:
    """Lines to draw.

    Attributes
    ----------
    places : list of (n, 3) arrays
        r, theta, unwrapped phi.
    pitch : list of (n,) arrays
        B_phi/|B| along each line.
    """

    places: list[Array]
    pitch: list[Array]


def lines_per_wedge(snapshot: Snapshot, grid: DisplayGrid, count: int) -> int:
    """How many lines of one wedge make `count` over the azimuth that is shown."""
    return round(count * snapshot.grid.period / float(grid.phi[-1] - grid.phi[0]))


def shown_field_lines(
    snapshot: Snapshot, grid: DisplayGrid, seeds: Array, height: float
) -> ShownLines:
    """Trace the field from seeds of one wedge, repeated over the azimuth that is shown.

    Parameters
    ----------
    snapshot : Snapshot
        With the whole magnetic field.
    grid : DisplayGrid
        What is shown.
    seeds : (n, 3) array
        r, theta, phi.
    height : float
        Lines end at this abs(z)/R.
    """
    lines = trace_lines(snapshot, "magnetic", _repeated(snapshot, grid, seeds))
    shown = _within(lines, grid, height)
    width = SMOOTHING * min(coarsest_cell(snapshot), 0.05)
    parts = [lines.spherical[_around_seed(lines, n, shown)] for n in range(len(lines))]
    places = [_smooth(part, width) for part in parts if len(part) > 3]
    return ShownLines(places, _pitch(snapshot, places))


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


def _repeated(snapshot: Snapshot, grid: DisplayGrid, seeds: Array) -> Array:
    """Seeds repeated over the shown azimuth and kept off its ends."""
    period, span = snapshot.grid.period, float(grid.phi[-1] - grid.phi[0])
    turns = np.arange(int(np.ceil(span / period)))
    every = np.concatenate([seeds + np.array([0.0, 0.0, turn * period]) for turn in turns])
    margin = _EDGE_SHARE * span if span < 2 * np.pi - 1e-6 else 0.0
    inside = (every[:, 2] >= grid.phi[0] + margin) & (every[:, 2] <= grid.phi[-1] - margin)
    return every[inside]


def _within(lines: LineSet, grid: DisplayGrid, height: float) -> Array:
    r, theta, phi = lines.spherical.T
    closed = grid.phi[-1] - grid.phi[0] > 2 * np.pi - 1e-6
    # A tube has a width: at the cut it must not come through the face.
    edge = _EDGE_SHARE * float(grid.phi[-1] - grid.phi[0])
    in_azimuth = closed | ((phi >= grid.phi[0] + edge) & (phi <= grid.phi[-1] - edge))
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
