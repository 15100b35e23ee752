"""How far the magnetic field is from being free of divergence."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from fieldviz.wedge.fields import MAGNETIC
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
    worst, worst_block, skipped, precision = 0.0, 0, 0, 8
    for block in range(snapshot.grid.n_blocks):
        b_r, b_theta, b_phi = (snapshot.faces.block(name, block) for name in MAGNETIC)
        precision = min(precision, *(values.dtype.itemsize for values in (b_r, b_theta, b_phi)))
        with np.errstate(all="ignore"):  # Damaged values are counted, not complained of.
            ratio, bad = _face_ratio(snapshot.grid, block, b_r, b_theta, b_phi)
        skipped += bad
        largest = float(ratio.max())
        if largest > worst:
            worst, worst_block = largest, block
    return {
        "face": worst,
        "face_worst_block": worst_block,
        "face_precision": precision,
        "n_skipped": skipped,
    }


def _face_ratio(
    grid: WedgeGrid, block: int, b_r: Array, b_theta: Array, b_phi: Array
) -> tuple[Array, int]:
    """|sum of fluxes| / sum of |fluxes| of each cell, and the number of cells that have none."""
    areas = (grid.area_phi(block), grid.area_theta(block), grid.area_r(block))
    total = np.zeros(grid.block_shape)
    size = np.zeros(grid.block_shape)
    for axis, (values, area) in enumerate(zip((b_phi, b_theta, b_r), areas, strict=True)):
        flux = values * area
        low, high = _both_sides(flux, axis)
        total += high - low
        size += np.abs(high) + np.abs(low)
    usable = np.isfinite(size)
    bad = int(size.size - np.count_nonzero(usable))
    ratio = np.where(usable & (size > 0), np.abs(total) / np.where(size > 0, size, 1.0), 0.0)
    return ratio, bad


def _both_sides(array: Array, axis: int) -> tuple[Array, Array]:
    count = array.shape[axis] - 1
    low = np.take(array, range(count), axis)
    return low, np.take(array, range(1, count + 1), axis)


def _cell_part(snapshot: Snapshot) -> dict[str, Any]:
    squares, count, skipped, worst, worst_block = 0.0, 0, 0, 0.0, None
    for block in range(snapshot.grid.n_blocks):
        components = [snapshot.cell_block(name, block).astype(np.float64) for name in MAGNETIC]
        with np.errstate(all="ignore"):
            ratio, bad = _cell_ratio(snapshot.grid, block, components)
        skipped += bad
        if not ratio.size:
            continue
        squares += float(np.square(ratio).sum())
        count += ratio.size
        if worst_block is None or ratio.max() > worst:
            worst, worst_block = float(ratio.max()), block
    if not count:
        return {"n_skipped": skipped}
    return {
        "cell": float(np.sqrt(squares / count)),
        "cell_largest": worst,
        "cell_worst_block": worst_block,
        "n_skipped": skipped,
    }


def _cell_ratio(grid: WedgeGrid, block: int, components: Sequence[Array]) -> tuple[Array, int]:
    """|div B| dx_min / |B| of the interior cells of one block, flat, and how many are unusable."""
    shape = grid.block_shape
    one_azimuth = shape[0] == 1
    inner = tuple(slice(1, -1) if n > 1 else slice(None) for n in shape)
    if min(shape[1:]) < 3 or shape[0] == 2:
        return np.empty(0), 0
    b_r, b_theta, b_phi = components
    pieces = [(1, b_theta, grid.area_theta(block)), (2, b_r, grid.area_r(block))]
    if not one_azimuth:  # A single azimuth cell: derivatives along phi are zero.
        pieces.append((0, b_phi, grid.area_phi(block)))
    outward = np.zeros(tuple(max(n - 2, 1) for n in shape))
    for axis, values, area in pieces:
        low, high = _both_sides(values, axis)
        inner_faces = [part if n != axis else slice(1, -1) for n, part in enumerate(inner)]
        others = [part if n != axis else slice(None) for n, part in enumerate(inner)]
        flux = (0.5 * (low + high))[tuple(others)] * np.asarray(area)[tuple(inner_faces)]
        below, above = _both_sides(flux, axis)
        outward += above - below
    strength = np.sqrt(b_r**2 + b_theta**2 + b_phi**2)[inner]
    ratio = np.abs(outward) / grid.volumes(block)[inner] * _smallest_side(grid, block)[inner]
    usable = np.isfinite(ratio) & np.isfinite(strength)
    there = usable & (strength > 0)
    return ratio[there] / strength[there], int(usable.size - np.count_nonzero(usable))


def _smallest_side(grid: WedgeGrid, block: int) -> Array:
    r_edges, theta_edges, phi_edges = grid.edges(block)
    r, theta, _ = grid.cell_centres(block)
    side = np.minimum(np.diff(r_edges), r * np.diff(theta_edges)[:, None])
    if len(phi_edges) == 2:
        return np.broadcast_to(side, (1, *side.shape))
    along = r * np.sin(theta)[:, None]
    return np.minimum(side, along * np.diff(phi_edges)[:, None, None])
