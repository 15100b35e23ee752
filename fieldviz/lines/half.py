"""Lines followed one way, before both ways are joined."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from fieldviz.lines import reasons
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["Half", "followed_to_the_end"]

# Points that wait, for all lines under way at once, until they are gathered: 12 MB.
_BUFFER_POINTS = 500_000


@dataclass(frozen=True)
class Half:
    """Lines followed one way.

    Attributes
    ----------
    pieces : list of (line numbers, counts, points)
        Points r, theta, phi beyond the seed, in the order they were found.
    reason : (n_lines,) int array
    length : (n_lines,) array
    """

    pieces: list[tuple[IntArray, IntArray, Array]]
    reason: IntArray
    length: Array

    @property
    def counts(self) -> IntArray:
        """Points of each line, the seed not counted."""
        counts = np.zeros(len(self.reason), dtype=np.int64)
        for lines, many, _ in self.pieces:
            counts[lines] += many
        return counts

    def lay_out(self, seed_at: IntArray, sign: int, line_points: Array) -> None:
        """Lay the points down from each seed's place, forwards (+1) or backwards (-1)."""
        from fieldviz.lines._point_kernels import lay_out

        reached = seed_at + sign
        for lines, many, points in self.pieces:
            lay_out(points, many, np.cumsum(many) - many, reached[lines], sign, line_points)
            reached[lines] += sign * many


def followed_to_the_end(
    advance: Callable[[IntArray, Array, IntArray], None], reason: IntArray, least_room: int
) -> list[tuple[IntArray, IntArray, Array]]:
    """Advance all lines that go on until none does; gather their points.

    Parameters
    ----------
    advance : callable
        Given line numbers, a buffer (n, room, 3) and counts (n,), goes on with these lines, fills
        both, and sets their reasons once they end.
    reason : (n_lines,) int array
        Written by `advance`.
    least_room : int
        Smallest useful room of a line in the buffer.
    """
    from fieldviz.lines._point_kernels import gather_rows

    pieces = []
    active = np.flatnonzero(reason == reasons.GOING_ON)
    while len(active):
        room = max(_BUFFER_POINTS // len(active), least_room)
        points = np.empty((len(active), room, 3))
        counts = np.zeros(len(active), dtype=np.int64)
        advance(active, points, counts)
        gathered = np.empty((counts.sum(), 3))
        gather_rows(points, counts, np.cumsum(counts) - counts, gathered)
        pieces.append((active, counts, gathered))
        active = active[reason[active] == reasons.GOING_ON]
    return pieces
