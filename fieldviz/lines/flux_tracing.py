"""Field lines from face fluxes: without divergence in any cell, exact in each of them."""

from __future__ import annotations

import numpy as np

from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.lines.half import Half, followed_to_the_end
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["FluxWalk"]

_WEAKEST = 1e-8
_SPARE = 64  # most points that one cell may add


class FluxWalk:
    """A face-centred field ready to be followed; see `trace_lines`.

    Across a level jump a line goes on at the same place; its flux function then changes by the
    difference between the coarse and the fine interpolation, second order in the cell size.
    """

    def __init__(
        self,
        snapshot: Snapshot,
        name: str,
        most_cells: float,
        longest: float,
        most_steps: int,
        poloidal: bool,
    ) -> None:
        if name != "magnetic":
            raise FieldvizError(
                f"Cannot trace '{name}' by fluxes: expected the magnetic field, got '{name}'; use "
                "interpolation = 'linear'."
            )
        missing = [part for part in MAGNETIC if part not in snapshot.faces]
        if missing:
            raise MissingFieldError(
                "Cannot trace lines by fluxes: expected face-centred magnetic_r, magnetic_theta "
                f"and magnetic_phi, got a snapshot without {', '.join(missing)} on faces; use "
                "interpolation = 'linear'."
            )
        grid = snapshot.grid
        self.faces = tuple(snapshot.faces[part] for part in MAGNETIC)
        self.edges = (grid.r_edges, grid.theta_edges, grid.phi_edges)
        self.lattice = (grid.table.r, grid.table.theta, grid.table.phi)
        self.table, self.period = grid.table.block, grid.period
        self.most_cells, self.longest, self.most_steps = most_cells, longest, most_steps
        self.poloidal = poloidal
        finite = [np.abs(face[np.isfinite(face)]) for face in self.faces]
        self.weakest = _WEAKEST * max((float(f.max()) for f in finite if f.size), default=0.0)

    def follow(self, seeds: Array, sign: int) -> Half:
        """Follow all seeds along (+1) or against (-1) the field."""
        from fieldviz.lines import _flux_kernels, _kernels

        n = len(seeds)
        cells, shares = np.zeros((n, 4), dtype=np.int64), np.zeros((n, 3))
        travels = np.zeros((n, 4))
        _flux_kernels.start_cells(
            seeds, self.edges, self.lattice, self.table, cells, shares, travels[:, 1]
        )
        reason = np.where(cells[:, 3] < 0, _kernels.OUTSIDE, _kernels.GOING_ON)
        reason[(reason == _kernels.GOING_ON) & (seeds[:, 0] == 0.0)] = _kernels.AXIS
        steps = np.full(n, self.most_steps, dtype=np.int64)

        def advance(active: IntArray, points: Array, counts: IntArray) -> None:
            _flux_kernels.follow_lines(
                active, cells, shares, travels, float(sign), self.faces, self.edges, self.lattice,
                self.table, self.weakest, self.most_cells, self.longest, self.poloidal, seeds,
                self.period, points, counts, reason, steps,
            )  # fmt: skip

        return Half(followed_to_the_end(advance, reason, 4 * _SPARE), reason, travels[:, 0])
