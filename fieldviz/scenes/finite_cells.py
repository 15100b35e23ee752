"""Cells without a number: fill them from their neighbours, and remember where they were."""

from __future__ import annotations

import numpy as np
from scipy.ndimage import distance_transform_edt

from fieldviz.errors import RenderError
from fieldviz.wedge.typing import Array

__all__ = ["finite_field"]


def finite_field(cells: Array, *, positive: bool = False) -> tuple[Array, np.ndarray]:
    """A field without gaps, and the mask of the cells that had no number.

    Parameters
    ----------
    cells : (n_blocks, n_phi, n_theta, n_r) array
    positive : bool
        Count zero and negative values as no number.

    Returns
    -------
    array of the same shape
        Gaps take the nearest finite value of their block, else the median of all cells.
    bool array of the same shape
        Where the gaps were.

    Raises
    ------
    RenderError
        If no cell has a number.
    """
    missing = ~np.isfinite(cells)
    if positive:
        missing |= ~(cells > 0)
    if not missing.any():
        return cells, missing
    if missing.all():
        raise RenderError(
            "Cannot draw the snapshot: expected numbers in the cells, got a field of NaN, "
            "infinite or forbidden values only; mend the file or map another field."
        )
    filled = cells.copy()
    fallback = np.median(cells[~missing])
    for block in np.flatnonzero(missing.any(axis=(1, 2, 3))):
        gaps = missing[block]
        if gaps.all():
            filled[block] = fallback
            continue
        nearest = distance_transform_edt(gaps, return_distances=False, return_indices=True)
        filled[block] = cells[block][tuple(nearest)]
    return filled, missing
