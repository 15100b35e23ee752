"""Heights at which a table of a meridional mesh passes a level, column by column."""

from __future__ import annotations

import numpy as np

from fieldviz.derived.azimuth_sums import MIDPLANE, MeridionalMesh
from fieldviz.wedge.typing import Array

__all__ = ["leaving_heights", "outermost_crossings"]


def outermost_crossings(mesh: MeridionalMesh, table: Array, level: float) -> tuple[Array, Array]:
    """Outermost crossing of a level above and below, NaN where there is none."""
    found = np.full((2, table.shape[1]), np.nan)
    for i in range(table.shape[1]):
        theta, values = mesh.column(table, i)
        over = np.clip(values, -1e300, 1e300) - level
        for side, outward in enumerate(_outward(theta)):
            x, f = theta[outward], over[outward]
            with np.errstate(invalid="ignore"):
                crossed = np.isfinite(f[:-1] + f[1:]) & ((f[:-1] > 0) != (f[1:] > 0))
            if crossed.any():
                last = int(np.flatnonzero(crossed)[-1])
                share = f[last] / (f[last] - f[last + 1])
                found[side, i] = _kept(x[last] + share * (x[last + 1] - x[last]), side)
    return found[0], found[1]


def leaving_heights(mesh: MeridionalMesh, speed: Array) -> tuple[Array, Array]:
    """Lowest height above which the speed away from the midplane stays positive."""
    found = np.full((2, speed.shape[1]), np.nan)
    for i in range(speed.shape[1]):
        theta, values = mesh.column(speed, i)
        for side, outward in enumerate(_outward(theta)):
            x, v = theta[outward], (-1, 1)[side] * values[outward]
            inward = np.flatnonzero(~(v > 0))
            if not len(v) or (inward.size and inward[-1] == len(v) - 1):
                continue
            if not inward.size:
                found[side, i] = MIDPLANE
            elif np.isfinite(v[inward[-1]]):
                j = int(inward[-1])
                at = x[j] + v[j] / (v[j] - v[j + 1]) * (x[j + 1] - x[j])
                found[side, i] = _kept(at, side)
    return found[0], found[1]


def _outward(theta: Array) -> tuple[Array, Array]:
    """Cells of a column from the midplane out, above and below.

    Each side begins with the last cell of the other one, so that no crossing is lost between.
    """
    above = int(np.searchsorted(theta, MIDPLANE))
    upper = np.arange(min(above, len(theta) - 1), -1, -1) if above else np.arange(0)
    below = int(np.searchsorted(theta, MIDPLANE, side="right"))
    lower = np.arange(max(below - 1, 0), len(theta)) if below < len(theta) else np.arange(0)
    return upper, lower


def _kept(theta: float, side: int) -> float:
    """A crossing just beyond the midplane lies on it."""
    return min(theta, MIDPLANE) if side == 0 else max(theta, MIDPLANE)
