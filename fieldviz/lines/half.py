"""Lines followed one way, before both ways are joined."""

from __future__ import annotations

from dataclasses import dataclass

from fieldviz.wedge.typing import Array, IntArray

__all__ = ["BUFFER_POINTS", "Half"]

# Points held at once for all lines under way, before they are gathered.
BUFFER_POINTS = 4_000_000


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
