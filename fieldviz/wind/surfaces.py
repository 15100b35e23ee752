"""Launching surfaces: pairs of cones at the same angle above and below the midplane."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["MatchedCones", "matched_cones"]

_MIDPLANE = 0.5 * np.pi
_LEAST_SCALE_HEIGHTS = 3.0
_SHARE_OF_RANGE = 0.9


@dataclass(frozen=True)
class MatchedCones:
    """Two cones at equal angles from the midplane.

    Attributes
    ----------
    angle : float
        Angle from the midplane, radians.
    scale_heights : float
        The same in units of H/R.
    reach : float
        Angle up to which both sides have data.
    clipped : bool
        Whether the cones were asked for farther out than the grid reaches.
    """

    angle: float
    scale_heights: float
    reach: float
    clipped: bool

    @property
    def upper(self) -> float:
        """Colatitude of the upper cone."""
        return _MIDPLANE - self.angle

    @property
    def lower(self) -> float:
        """Colatitude of the lower cone."""
        return _MIDPLANE + self.angle


def matched_cones(snapshot: Snapshot, h: float, scale_heights: float = 4.0) -> MatchedCones:
    """Cones at `scale_heights` H/R above and below the midplane, clipped to the grid.

    Parameters
    ----------
    snapshot : Snapshot
    h : float
        H/R of the disc.
    scale_heights : float
        How far from the midplane; 4 is our choice.

    Returns
    -------
    MatchedCones

    Raises
    ------
    FieldvizError
        If the sides share less than 3 H, or `scale_heights` or `h` is not positive.
    """
    if not (scale_heights > 0 and np.isfinite(scale_heights) and h > 0 and np.isfinite(h)):
        raise FieldvizError(
            f"Cannot place launching surfaces: expected a positive height in H and a positive H/R, "
            f"got {scale_heights} and {h}."
        )
    up, down = snapshot.grid.theta_range
    reach = min(_MIDPLANE - up, down - _MIDPLANE)
    if reach < _LEAST_SCALE_HEIGHTS * h:
        raise FieldvizError(
            f"Cannot compare the two sides: expected at least {_LEAST_SCALE_HEIGHTS:g} H on each "
            f"side of the midplane, got {reach / h:.3g} H (H/R = {h:.4g}, the wedge reaches "
            f"{_MIDPLANE - up:.4g} rad above and {down - _MIDPLANE:.4g} rad below)."
        )
    angle = min(scale_heights * h, _SHARE_OF_RANGE * reach)
    return MatchedCones(angle, angle / h, reach, angle < scale_heights * h * (1 - 1e-12))
