"""What several scenes need: compensated fields on the display grid, materials, colour bars."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from fieldviz.scenes.composition import ColourBar
from fieldviz.scenes.display_grid import DisplayGrid
from fieldviz.scenes.field_lines import in_plane, tubes
from fieldviz.scenes.from_data import (
    FieldScale,
    field_scale,
    power_law_exponent,
    robust_range,
    vertical_field,
)
from fieldviz.scenes.stage import Layer, Material
from fieldviz.scenes.surfaces import contour, face, merged
from fieldviz.scenes.theme import Theme
from fieldviz.scenes.wording import decade_ticks, number_text, power_text, scaled
from fieldviz.wedge.typing import Array

__all__ = [
    "DensityScale",
    "add_density",
    "add_vertical_field",
    "density_bar",
    "density_material",
    "disc_body",
    "disc_sections",
    "field_label",
    "is_closed",
    "pitch_bar",
    "pitch_material",
    "wall_outline",
]

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


def density_material(theme: Theme, scale: DensityScale, *, lit: bool) -> Material:
    """Gas in the colours of its density; unlit where it must match the bar."""
    return Material(
        scalars="log_density",
        colour_map=theme.colour_map("density"),
        limits=scale.limits,
        lit=lit,
        ambient=0.28,
        diffuse=0.82,
        specular=0.15,
    )


def disc_body(grid: DisplayGrid, scale: DensityScale) -> Any:
    """The disc's surface and its inner and outer ends, with "log_density"."""
    within = ("log_surface_density", scale.surface)
    parts = [contour(grid, *within, ("log_density",))]
    parts += [face(grid, "r", end, ("log_density",), within) for end in (0, -1)]
    return merged(parts)


def disc_sections(grid: DisplayGrid, scale: DensityScale, ends: tuple[int, ...] = (0, -1)) -> Any:
    """The disc where it is cut at constant azimuth; none for a closed ring."""
    if is_closed(grid):
        return merged([])
    within = ("log_surface_density", scale.surface)
    return merged([face(grid, "phi", end, ("log_density",), within) for end in ends])


def is_closed(grid: DisplayGrid) -> bool:
    """Whether the azimuth that is shown is the whole ring."""
    return bool(grid.phi[-1] - grid.phi[0] > 2 * np.pi - 1e-6)


def wall_outline(grid: DisplayGrid, theme: Theme, ends: tuple[int, ...]) -> Layer:
    """A thin line round the walls at some azimuth nodes, as low values have the page's colour."""
    low, high = grid.theta[0], grid.theta[-1]
    ring = [
        np.column_stack([grid.r, np.full_like(grid.r, low)]),
        np.column_stack([np.full_like(grid.theta, grid.r[-1]), grid.theta]),
        np.column_stack([grid.r, np.full_like(grid.r, high)])[::-1],
        np.column_stack([np.full_like(grid.theta, grid.r[0]), grid.theta])[::-1],
    ]
    width = 0.0016 * float(grid.r[-1])
    parts = [tubes(in_plane(ring, float(grid.phi[end])), width, widening=False) for end in ends]
    return Layer("wall outline", merged(parts), Material(theme.rgb("outline"), lit=False))


def pitch_material(theme: Theme) -> Material:
    """Field lines in the colours of "pitch", B_phi/|B|."""
    return Material(
        scalars="pitch",
        colour_map=theme.colour_map("signed_field_on_lines"),
        limits=(-1.0, 1.0),
        ambient=0.22,
        specular=0.45,
        specular_power=30.0,
    )


def pitch_bar(theme: Theme) -> ColourBar:
    """Colour bar of the field lines."""
    return ColourBar(
        r"field line: $B_\phi/|B|$",
        theme.colour_map("signed_field_on_lines"),
        (-1.0, 1.0),
        [(value, number_text(value)) for value in (-1.0, -0.5, 0.0, 0.5, 1.0)],
    )
