"""Cells that sit at the floor of a field, and cells without a number."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import FLOOR_MARGIN
from fieldviz.derived.shared import once
from fieldviz.errors import FieldvizError
from fieldviz.wedge.geometry import cell_volumes
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["Floor", "find_floor", "nan_shares"]

LEAST_SHARE = 0.01  # of the cells within 1 % of the smallest value, to call that a floor


@dataclass(frozen=True)
class Floor:
    """Where a field is as small as the run lets it be.

    Attributes
    ----------
    name : str
    value : float or None
        The floor, code units; None where the smallest value is not one.
    given : bool
        Whether it was given and not guessed.
    share_of_volume, share_of_cells : float
        At most 1.01 times the floor, or the smallest value where there is no floor.
    notes : tuple of str
    """

    name: str
    value: float | None
    given: bool
    share_of_volume: float
    share_of_cells: float
    notes: tuple[str, ...]


def find_floor(snapshot: Snapshot, name: str, given: float | None = None) -> Floor | None:
    """Find the floor of a field and what sits at it.

    Parameters
    ----------
    snapshot : Snapshot
    name : str
        A positive field.
    given : float, optional
        The floor of the run. By default the smallest positive value counts as one if at least 1 %
        of the cells (our choice) lie within 1 % of it. A floor that varies with place must be
        given as fields of its own; it is not noticed.

    Returns
    -------
    Floor or None
        None without the field, or where it has no positive number.

    Raises
    ------
    FieldvizError
    """
    if given is not None and not 0 < given < np.inf:
        raise FieldvizError(
            f"Cannot use this floor of {name}: expected a positive number, got {given}."
        )
    if not snapshot.has(name):
        return None
    _, smallest, largest = _survey(snapshot, name)
    if not smallest < np.inf:
        return None
    level = smallest if given is None else float(given)
    volume, cells = _shares(snapshot, name, FLOOR_MARGIN * level)
    even = given is None and largest <= FLOOR_MARGIN * smallest
    is_floor = given is not None or (cells >= LEAST_SHARE and not even)
    return Floor(
        name,
        level if is_floor else None,
        given is not None,
        volume,
        cells,
        _floor_notes(name, level, given is not None, is_floor, even, volume),
    )


def _floor_notes(
    name: str, level: float, given: bool, is_floor: bool, even: bool, volume: float
) -> tuple[str, ...]:
    if even:
        return (f"the {name} is the same everywhere: no floor can be told",)
    if not is_floor:
        return (
            f"no floor of the {name} found: less than {100 * LEAST_SHARE:g} % of the cells are "
            f"within 1 % of its smallest value {level:.4g}; a floor that varies with place is not "
            "noticed",
        )
    how = "given" if given else "guessed from the smallest value"
    return (f"{100 * volume:.3g} % of the volume is at the {name} floor {level:.4g} ({how})",)


def _survey(snapshot: Snapshot, name: str) -> tuple[int, float, float]:
    """Cells without a number, smallest and largest positive number; infinite without any."""
    from fieldviz.derived._survey_kernels import survey

    def gone_through() -> tuple[int, float, float]:
        bad, low, high = 0, np.inf, -np.inf
        for block in range(snapshot.grid.n_blocks):
            found = np.empty((snapshot.grid.block_shape[0], 3))
            survey(snapshot.cell_block(name, block), found)
            bad += int(found[:, 0].sum())
            low, high = min(low, float(found[:, 1].min())), max(high, float(found[:, 2].max()))
        return bad, low, high

    return once(snapshot, f"survey of {name}", gone_through)


def _shares(snapshot: Snapshot, name: str, limit: float) -> tuple[float, float]:
    from fieldviz.derived._survey_kernels import share_below

    grid, unit = snapshot.grid, np.array([0.0, 1.0])
    sums = np.zeros(2)
    for block in range(grid.n_blocks):
        of_cell = cell_volumes(*grid.edges(block)[:2], unit)[0]
        found = np.empty((grid.block_shape[0], 2))
        steps = np.diff(grid.phi_edges[block])
        share_below(snapshot.cell_block(name, block), limit, steps, of_cell, found)
        sums += found.sum(0)
    return float(sums[0]) / grid.wedge_volume, float(sums[1]) / grid.n_cells


def nan_shares(snapshot: Snapshot) -> dict[str, float]:
    """Share of each field's cells that are NaN or infinite."""
    names = snapshot.cell_names
    return {name: _survey(snapshot, name)[0] / snapshot.grid.n_cells for name in names}
