"""Phrases of captions that several scenes share."""

from __future__ import annotations

import numpy as np

from fieldviz.scenes.display_grid import DisplayGrid
from fieldviz.scenes.from_data import round_figure
from fieldviz.scenes.stage import Layer
from fieldviz.scenes.wording import degrees_text, number_text
from fieldviz.wedge.grid import WedgeGrid

__all__ = ["absent_layers", "left_out", "repeats", "surface_phrase", "taken_away"]


def repeats(wedge: WedgeGrid, span: float) -> str:
    """How often the wedge is repeated to fill the azimuth that is shown."""
    if wedge.is_full_ring:
        return f"{degrees_text(span)} of the full ring"
    times = span / wedge.period
    if times <= 1 + 1e-6:
        return f"{degrees_text(span)} of a wedge of {degrees_text(wedge.period)}"
    count = f"{times:.1f}".removesuffix(".0")
    return f"wedge of {degrees_text(wedge.period)} repeated {count}\N{MULTIPLICATION SIGN}"


def taken_away(span: float, what: str = "front") -> list[str]:
    """What is missing of the ring in front; nothing for a closed one."""
    rest = 2 * np.pi - span
    return [f"{what} {degrees_text(rest)} taken away"] if rest > 1e-6 else []


def surface_phrase(surface_level: float) -> str:
    """What the disc's surface is."""
    return f"disc surface: {number_text(round_figure(surface_level))} of the midplane density"


def absent_layers(layers: list[Layer], *expected: str) -> list[str]:
    """Name the layers that have nothing in these data, except those `expected` to be empty."""
    return [
        f"no {layer.name} in these data"
        for layer in layers
        if not layer.mesh.n_points and layer.name not in expected
    ]


def left_out(grid: DisplayGrid) -> list[str]:
    """Count the cells without a number."""
    count = grid.cells_left_out
    return [f"{count} cells without a number left out"] if count else []
