"""Tables and remarks as plain text for a terminal."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

__all__ = ["aligned", "number", "wrapped"]


def aligned(rows: Sequence[Sequence[str]]) -> list[str]:
    """Lines of a table, its first row the heads."""
    widths = [max(len(row[n]) for row in rows) for n in range(len(rows[0]))]
    return [
        "  " + "  ".join(c.ljust(w) for c, w in zip(row, widths, strict=True)).rstrip()
        for row in rows
    ]


def wrapped(remark: str) -> str:
    """A remark as an item of a list."""
    return textwrap.fill(remark, 96, initial_indent="  - ", subsequent_indent="    ")


def number(value: float | None, digits: int = 4) -> str:
    """A number, or a dash where there is none."""
    return "-" if value is None or value != value else f"{value:.{digits}g}"
