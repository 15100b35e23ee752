"""What both scenes need: the compensated fields on the display grid, and their colours."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.scenes.composition import ColourBar
from fieldviz.scenes.display_grid import DisplayGrid
from fieldviz.scenes.from_data import (
    FieldScale,
    field_scale,
    power_law_exponent,
    robust_range,
    vertical_field,
)
from fieldviz.scenes.theme import Theme
from fieldviz.scenes.wording import decade_ticks, power_text, scaled
from fieldviz.wedge.typing import Array

__all__ = ["DensityScale", "add_density", "add_vertical_field", "density_bar", "field_label"]

_DEEPEST = 4.6  # decades of density below its maximum that are told apart


@dataclass(frozen=True)
class DensityScale:
    """How the density is shown.

    Attributes
    ----------
    exponent : float
        a in rho R^a.
    surface : float
        log10 of rho R^a at the disc's surface.
    limits : (float, float)
        Ends of the colours of log10 rho.
    """

    exponent: float
    surface: float
    limits: tuple[float, float]


def _cylindrical(grid: DisplayGrid) -> Array:
    return np.asarray(grid.r * np.sin(grid.theta)[:, None])


def add_density(
    grid: DisplayGrid,
    surface_level: float,
    exponent: float | None,
    limits: tuple[float, float] | None,
    *,
    whole: bool,
) -> tuple[DisplayGrid, DensityScale]:
    """Add "log_density" and "log_surface_density" (of rho R^a) and find their scales.

    Parameters
    ----------
    grid : DisplayGrid
        With density.
    surface_level : float
        Density of the surface over that of the midplane.
    exponent : float or None
        a; None: fitted.
    limits : (float, float) or None
        Ends of the colours; None: percentiles.
    whole : bool
        Whether the colours must serve all of the grid, or only the disc within its surface.
    """
    log_density = np.log10(grid.fields["density"])
    R = _cylindrical(grid)
    row = grid.midplane_row
    midplane = np.exp(np.log(grid.fields["density"][:, row]).mean(axis=0))
    a = power_law_exponent(R[row], midplane) if exponent is None else float(exponent)
    compensated = log_density + a * np.log10(R)
    surface = float(np.median(compensated[:, row]) + np.log10(surface_level))
    if limits is None:
        shown = log_density if whole else log_density[compensated > surface]
        low, high = robust_range(shown if shown.size else log_density, 1.0, 99.9)
        high = float(log_density[:, row].max()) if whole else high
        limits = (max(low, high - _DEEPEST), high)
    grid = grid.with_fields(log_density=log_density, log_surface_density=compensated)
    return grid, DensityScale(a, surface, limits)


def add_vertical_field(grid: DisplayGrid, exponent: float | None) -> tuple[DisplayGrid, FieldScale]:
    """Add "sheet_field", the compensated B_z with the sign that makes the net field positive."""
    B_z = vertical_field(grid)
    R = _cylindrical(grid)
    row = grid.midplane_row
    scale = field_scale(R[row], B_z[:, row], exponent)
    return grid.with_fields(sheet_field=scale.sign * B_z * R**scale.exponent), scale


def density_bar(theme: Theme, scale: DensityScale, label: str) -> ColourBar:
    """Colour bar of the density."""
    return ColourBar(label, theme.colour_map("density"), scale.limits, decade_ticks(*scale.limits))


def field_label(scale: FieldScale, largest: float) -> tuple[float, str]:
    """What to divide the compensated field by, and how to call it then."""
    factor, unit = scaled(largest)
    sign = "" if scale.sign > 0 else "-"
    return factor, rf"${sign}B_z{power_text('R', scale.exponent)}$ [{unit}]"
