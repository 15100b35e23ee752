"""Why a line ends: numbers for the compiled loops, words for people."""

from __future__ import annotations

__all__ = ["CLOSED", "GOING_ON", "NOT_TRACED", "WORDS"]

GOING_ON, CLOSED, NOT_TRACED = 0, 9, 12
# In the order of the constants in `_kernels`.
WORDS = (
    "going on",
    "inner wall",
    "outer wall",
    "upper wall",
    "lower wall",
    "axis",
    "weak field",
    "no data",
    "length",
    "closed",
    "step limit",
    "seed outside",
    "not traced",
)
