"""Values at arbitrary points, by trilinear interpolation of cell values."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo, halo_array, halo_grid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["PointSampler", "sample"]


class PointSampler:
    """Points located once, for sampling many fields.

    Parameters
    ----------
    grid : WedgeGrid
    points : (n, 3) array
        r, theta, phi. phi wraps with the wedge's period.

    Attributes
    ----------
    inside : (n,) bool array
        Which points lie within the wedge; NaN coordinates are outside.
    """

    def __init__(self, grid: WedgeGrid, points: Array) -> None:
        from fieldviz.wedge._kernels import locate_points

        points = np.ascontiguousarray(points, dtype=np.float64)
        if points.ndim != 2 or points.shape[1] != 3:
            raise FieldvizError(
                f"Cannot sample: expected points of shape (n, 3) holding r, theta, phi, "
                f"got shape {points.shape}."
            )
        self.grid = grid
        self._cells = np.empty((len(points), 4), dtype=np.int64)
        self._weights = np.zeros((len(points), 3))
        around, table = halo_grid(grid), grid.table
        locate_points(
            points, around.r, around.theta, around.phi, table.r, table.theta, table.phi,
            table.block, self._cells, self._weights,
        )  # fmt: skip
        self.inside = self._cells[:, 0] >= 0

    def of_halo(self, haloed: Array, outside: float = np.nan) -> Array:
        """Values of an array that already has its ghost layer; (n,), in its precision."""
        from fieldviz.wedge._kernels import gather

        values = np.empty(len(self._cells), dtype=haloed.dtype)
        gather(haloed, self._cells, self._weights, outside, values)
        return values

    def of_array(self, cells: Array, *, positive: bool = False, outside: float = np.nan) -> Array:
        """Values of a cell array (n_blocks, n_phi, n_theta, n_r) at the points."""
        return self.of_halo(halo_array(self.grid, cells, positive=positive), outside)


def sample(
    snapshot: Snapshot, points: Array, names: Sequence[str], *, outside: float = np.nan
) -> tuple[dict[str, Array], Array]:
    """Sample cell fields at points.

    Parameters
    ----------
    snapshot : Snapshot
    points : (n, 3) array
        r, theta, phi in code units and radians; phi wraps.
    names : sequence of str
        Cell fields. Components are interpolated as spherical components.
    outside : float
        Value given to points outside the wedge.

    Returns
    -------
    dict of str to (n,) array
        In each field's precision. Second order in the cell size.
    (n,) bool array
        Mask of the points inside.

    Raises
    ------
    MissingFieldError, FieldvizError
    """
    snapshot.require("sample", *names)
    sampler = PointSampler(snapshot.grid, points)
    values = {name: sampler.of_halo(halo(snapshot, name), outside) for name in names}
    return values, sampler.inside
