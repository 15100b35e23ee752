"""How far the magnetic field is from being free of divergence."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.geometry import area_phi, area_r, area_theta, cell_volumes
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["DivergenceError", "divergence_error", "face_limit"]

_FACE_LIMITS = {2: 2e-2, 4: 1e-5, 8: 1e-12}


@dataclass(frozen=True)
class DivergenceError:
    """Size of div B, without units.

    Attributes
    ----------
    face : float or None
        Largest |sum of outward fluxes| / sum of |fluxes| over the six faces of a cell; rounding
        is all that a staggered field may show. None without all three face fields.
    face_worst_block : int or None
        Where it occurs.
    face_precision : int or None
        Bytes of the least exact face field in memory, to judge `face` by (`face_limit`).
    cell : float or None
        Root mean square of |div B| dx_min / |B| over interior cells, from cell values. It
        measures the truncation error of cell values, which falls with the cell size, and not a
        fault of the run. None without all three components or without interior cells.
    cell_largest : float or None
        The largest such value.
    cell_worst_block : int or None
        Where that occurs.
    n_skipped : int
        Cells left out of `face`, or of `cell` where there are no faces, for values that are NaN
        or infinite.
    """

    face: float | None = None
    face_worst_block: int | None = None
    face_precision: int | None = None
    cell: float | None = None
    cell_largest: float | None = None
    cell_worst_block: int | None = None
    n_skipped: int = 0

    @property
    def too_large(self) -> bool:
        """Whether the face value is more than the rounding of its precision."""
        if self.face is None or self.face_precision is None:
            return False
        return self.face > face_limit(self.face_precision)


def face_limit(item_size: int) -> float:
    """Largest face value that rounding explains, for numbers of 2, 4 or 8 bytes."""
    return _FACE_LIMITS.get(item_size, _FACE_LIMITS[8])


def divergence_error(snapshot: Snapshot) -> DivergenceError:
    """Measure div B, block by block, in double precision.

    Parameters
    ----------
    snapshot : Snapshot
        With face-centred or cell values of all three magnetic components; others give None.

    Returns
    -------
    DivergenceError

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.derived.divergence import divergence_error
    >>> divergence_error(fv.demo_disc(shape=(4, 32, 24))).too_large  # doctest: +SKIP
    False
    """
    faces = _face_part(snapshot) if all(name in snapshot.faces for name in MAGNETIC) else {}
    cells = _cell_part(snapshot) if snapshot.has(*MAGNETIC) else {}
    return DivergenceError(**{**cells, **faces})


def _face_part(snapshot: Snapshot) -> dict[str, Any]:
    from fieldviz.derived._survey_kernels import face_divergence

    worst, worst_block, skipped, precision = 0.0, 0, 0, 8
    grid = snapshot.grid
    for block in range(grid.n_blocks):
        fields = [snapshot.faces.block(name, block) for name in MAGNETIC]
        precision = min(precision, *(values.dtype.itemsize for values in fields))
        found = np.empty((grid.block_shape[0], 2))
        steps = np.diff(grid.phi_edges[block])
        face_divergence(*fields, *_unit_areas(grid, block), steps, found)
        skipped += int(found[:, 1].sum())
        largest = float(found[:, 0].max())
        if largest > worst:
            worst, worst_block = largest, block
    return {
        "face": worst,
        "face_worst_block": worst_block,
        "face_precision": precision,
        "n_skipped": skipped,
    }


def _unit_areas(grid: WedgeGrid, block: int) -> tuple[Array, Array, Array]:
    """Areas of faces across r, theta and phi, the first two for a unit of azimuth."""
    r_edges, theta_edges, _ = grid.edges(block)
    unit = np.array([0.0, 1.0])
    return (
        area_r(r_edges, theta_edges, unit)[0],
        area_theta(r_edges, theta_edges, unit)[0],
        np.ascontiguousarray(area_phi(r_edges, theta_edges, unit)[0]),
    )


def _cell_part(snapshot: Snapshot) -> dict[str, Any]:
    from fieldviz.derived._survey_kernels import cell_divergence

    grid = snapshot.grid
    n_phi, n_theta, n_r = grid.block_shape
    if min(n_theta, n_r) < 3 or n_phi == 2:
        return {"n_skipped": 0}
    squares, count, skipped, worst, worst_block = 0.0, 0, 0, 0.0, None
    inner = np.array([1, n_phi - 2] if n_phi > 1 else [0, 0])
    for block in range(grid.n_blocks):
        fields = [snapshot.cell_block(name, block) for name in MAGNETIC]
        found = np.empty((n_phi, 4))
        cell_divergence(
            *fields, *_unit_areas(grid, block), *_unit_sizes(grid, block),
            np.diff(grid.phi_edges[block]), inner, found,
        )  # fmt: skip
        skipped += int(found[:, 3].sum())
        here = int(found[:, 1].sum())
        if not here:
            continue
        squares += float(found[:, 0].sum())
        count += here
        largest = float(found[:, 2].max())
        if worst_block is None or largest > worst:
            worst, worst_block = largest, block
    if not count:
        return {"n_skipped": skipped}
    return {
        "cell": float(np.sqrt(squares / count)),
        "cell_largest": worst,
        "cell_worst_block": worst_block,
        "n_skipped": skipped,
    }


def _unit_sizes(grid: WedgeGrid, block: int) -> tuple[Array, Array, Array]:
    """Volume for a unit of azimuth, smallest side across phi, and length for a unit of azimuth."""
    r_edges, theta_edges, _ = grid.edges(block)
    r, theta, _ = grid.cell_centres(block)
    side = np.minimum(np.diff(r_edges), r * np.diff(theta_edges)[:, None])
    volume = cell_volumes(r_edges, theta_edges, np.array([0.0, 1.0]))[0]
    return volume, side, r * np.sin(theta)[:, None]
