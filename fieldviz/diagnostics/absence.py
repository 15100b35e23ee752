"""Why a number of a result is absent."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

__all__ = ["Absent", "why_absent"]

_SAYS_SO = re.compile(r"^no |absent|needs|\bNaN\b|too few|not tested|no number")
_NO_FINITE = "no place has a finite number"


@dataclass(frozen=True)
class Absent:
    """Stands for a number whose absence has a known reason."""

    reason: str


def why_absent(quantity: str, notes: Sequence[str]) -> str:
    """The notes of a result that say why a quantity is absent.

    Parameters
    ----------
    quantity : str
        In words.
    notes : sequence of str
        Of the result.

    Returns
    -------
    str
        Those that speak of an absence and share most of the quantity's words.
    """
    candidates = [note for note in notes if _SAYS_SO.search(note)]
    if not candidates:
        return _NO_FINITE
    wanted = _words(quantity)
    shared = [len(wanted & _words(note)) for note in candidates]
    most = max(shared)
    chosen = [note for note, count in zip(candidates, shared, strict=True) if count == most]
    return "; ".join(chosen)


def _words(text: str) -> set[str]:
    return {word for word in re.findall(r"[a-z_]+", text.lower()) if len(word) > 3}
