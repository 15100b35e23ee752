"""The scene flux-sheets: nested surfaces of B_z R^b in a ring with its front taken away."""

from __future__ import annotations

from typing import Any

import numpy as np

from fieldviz.scenes.composition import ColourBar, Composition, Swatches
from fieldviz.scenes.description import FluxSheets
from fieldviz.scenes.display_grid import DisplayGrid, Window, make_display_grid
from fieldviz.scenes.field_lines import tubes
from fieldviz.scenes.from_data import FieldScale, sheet_levels
from fieldviz.scenes.ingredients import (
    DensityScale,
    add_density,
    add_vertical_field,
    density_bar,
    density_material,
    disc_sections,
    field_label,
    is_closed,
    pitch_bar,
    pitch_material,
)
from fieldviz.scenes.phrases import absent_layers, left_out, repeats, surface_phrase, taken_away
from fieldviz.scenes.sheet_lines import SheetLines, sheet_lines
from fieldviz.scenes.shown_lines import SMOOTHING
from fieldviz.scenes.stage import Layer, Material
from fieldviz.scenes.surfaces import contour, face, merged
from fieldviz.scenes.theme import Theme
from fieldviz.scenes.wording import number_text
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["compose_flux_sheets"]

_NEEDED = ("density", "magnetic_r", "magnetic_theta")
_WITHOUT_LINES = "where the vertical field gathers, and the disc it threads"
_LINE_WIDTH = 0.0042  # of the outer radius
_FADE_SHARE = 0.2  # of the outer radius over which the disc's surface fades away


def compose_flux_sheets(
    snapshot: Snapshot, scene: FluxSheets, theme: Theme, nodes: int
) -> Composition:
    """Make the flux sheets of a snapshot.

    Parameters
    ----------
    snapshot : Snapshot
        With density and the poloidal magnetic field.
    scene : FluxSheets
    theme : Theme
    nodes : int
        Size of the display grid at most.

    Returns
    -------
    Composition

    Raises
    ------
    MissingFieldError
    """
    snapshot.require("draw flux sheets", *_NEEDED)
    grid = _grid(snapshot, scene, nodes)
    grid, density = add_density(
        grid, scene.surface_level, scene.density_exponent, scene.density_limits, whole=False
    )
    grid, field = add_vertical_field(grid, scene.field_exponent)
    levels = _levels(scene, field)
    layers = _layers(grid, density, levels, scene.inner_height_limit, theme)
    threads = sheet_lines(
        snapshot, grid, field, levels[0], scene.line_count, scene.line_height_limit
    )
    if threads.places:
        layers.append(_line_layer(grid, threads, theme))
    span = float(grid.phi[-1] - grid.phi[0])
    return Composition(
        title="Flux sheets",
        subtitle="and the field lines that thread them" if threads.places else _WITHOUT_LINES,
        layers=layers,
        azimuth=_opening_middle(grid) + np.radians(scene.camera_azimuth),
        height=np.radians(scene.camera_height),
        legends=_legends(density, field, levels, theme, bool(threads.places)),
        caption=_caption(snapshot.grid, scene, grid, field, layers, span)
        + _line_phrases(scene, threads),
        scale_bar=True,
        drawn={
            "outer_level": levels[0],
            "inner_level": levels[1],
            "field_exponent": field.exponent,
            "field_sign": field.sign,
            "density_exponent": density.exponent,
            "density_limits": list(density.limits),
            "shown_azimuth": float(np.degrees(span)),
            "sheet_radii": threads.radii,
            "lines": len(threads.places),
        },
    )


def _grid(snapshot: Snapshot, scene: FluxSheets, nodes: int) -> DisplayGrid:
    lowest = float(np.arctan2(1.0, scene.height_limit))
    window = Window(
        r_end=scene.outer_radius,
        theta_range=(lowest, np.pi - lowest),
        phi_start=snapshot.grid.phi_range[0],
        phi_span=np.radians(scene.shown_azimuth),
    )
    return make_display_grid(snapshot, _NEEDED, window, budget=nodes)


def _opening_middle(grid: DisplayGrid) -> float:
    """Azimuth of the middle of what is not shown."""
    return float(0.5 * (grid.phi[0] + grid.phi[-1]) + np.pi)


def _levels(scene: FluxSheets, field: FieldScale) -> tuple[float, float]:
    outer, inner = sheet_levels(field.profile)
    return (
        outer if scene.outer_level is None else scene.outer_level,
        inner if scene.inner_level is None else scene.inner_level,
    )


def _layers(
    grid: DisplayGrid,
    density: DensityScale,
    levels: tuple[float, float],
    inner_height: float,
    theme: Theme,
) -> list[Layer]:
    outer, inner = levels
    closed = is_closed(grid)
    outer_mesh = contour(grid.coarser(3, 1), "sheet_field", outer)
    inner_mesh = _inner_sheets(_lower_than(grid, inner_height), inner, density, closed)
    return [
        Layer("disc surface", _disc_surface(grid, density, theme), _DISC_MATERIAL),
        Layer(
            "cut faces",
            disc_sections(grid, density),
            density_material(theme, density, lit=False),
        ),
        Layer("outer sheets", outer_mesh, _sheet(theme, theme.outer_share, theme.outer_opacity)),
        Layer("inner sheets", inner_mesh, _sheet(theme, theme.inner_share, 1.0)),
    ]


def _line_layer(grid: DisplayGrid, threads: SheetLines, theme: Theme) -> Layer:
    mesh = tubes(threads.places, _LINE_WIDTH * float(grid.r[-1]), scalars=("pitch", threads.pitch))
    return Layer("field lines", mesh, pitch_material(theme))


def _line_phrases(scene: FluxSheets, threads: SheetLines) -> list[str]:
    if threads.places:
        count = len(threads.places)
        return [f"{count} lines from the sheets' ridges, smoothed over {SMOOTHING:g} cells"]
    return ["no field lines: no sheet or no azimuthal field"] if scene.line_count else []


def _sheet(theme: Theme, share: float, opacity: float) -> Material:
    return Material(
        theme.colour("vertical_field", share),
        opacity=opacity,
        ambient=0.10,
        specular=0.35,
        specular_power=30.0,
    )


_DISC_MATERIAL = Material(scalars="colour", rgba=True, specular=0.35, specular_power=10.0)


def _disc_surface(grid: DisplayGrid, density: DensityScale, theme: Theme) -> Any:
    """The disc's surface with colours that fade towards its outer end."""
    surface = contour(grid.coarser(2, 2, 2), "log_surface_density", density.surface)
    if surface.n_points:
        R = np.hypot(*np.asarray(surface.points).T[:2])
        end = float(grid.r[-1])
        fade = np.clip((0.985 * end - R) / (_FADE_SHARE * end), 0.0, 1.0) ** 1.5
        colours = np.empty((len(R), 4))
        colours[:, :3] = theme.rgb("haze")
        colours[:, 3] = theme.haze_opacity * fade
        surface.point_data["colour"] = np.rint(255 * colours).astype(np.uint8)
    return surface


def _lower_than(grid: DisplayGrid, height: float) -> DisplayGrid:
    """The nodes with abs(z)/R up to a height; at least three rows."""
    within = np.flatnonzero(np.abs(1 / np.tan(grid.theta)) <= height + 1e-9)
    if len(within) < 3:
        return grid
    return grid.part(theta=slice(int(within[0]), int(within[-1]) + 1))


def _inner_sheets(grid: DisplayGrid, level: float, density: DensityScale, closed: bool) -> Any:
    """The opaque surface with lids where it is cut, so that it looks solid."""
    within = ("sheet_field", level)
    parts = [contour(grid, *within)]
    parts += [face(grid, axis, end, (), within) for axis in ("theta", "r") for end in (0, -1)]
    if not closed:
        # Within the disc the cut shows its density, not the sheet.
        sheet = grid.fields["sheet_field"] / level - 1
        outside = density.surface - grid.fields["log_surface_density"]
        ends = grid.with_fields(lid=np.minimum(sheet, outside))
        parts += [face(ends, "phi", end, (), ("lid", 0.0)) for end in (0, -1)]
    return merged(parts)


def _legends(
    density: DensityScale,
    field: FieldScale,
    levels: tuple[float, float],
    theme: Theme,
    with_lines: bool,
) -> list[ColourBar | Swatches]:
    factor, label = field_label(field, levels[1])
    texts = [number_text(level / factor) for level in levels]
    return [
        density_bar(theme, density, r"cut face: $\rho$ [code units]"),
        *([pitch_bar(theme)] if with_lines else []),
        Swatches(
            f"surfaces of {label}",
            [("outer sheets", None, texts[0]), ("inner sheets", "outer sheets", texts[1])],
        ),
    ]


def _caption(
    wedge: WedgeGrid,
    scene: FluxSheets,
    grid: DisplayGrid,
    field: FieldScale,
    layers: list[Layer],
    span: float,
) -> list[str]:
    phrases = [repeats(wedge, span), *taken_away(span)]
    heights = rf"$|z| < {scene.height_limit:g}\,R$"
    if scene.inner_height_limit < scene.height_limit:
        heights += rf", the inner ones for $|z| < {scene.inner_height_limit:g}\,R$"
    phrases.append(f"sheets shown for {heights}")
    phrases.append(surface_phrase(scene.surface_level))
    if field.sign < 0:
        phrases.append(r"the net field points down: $-B_z$ is shown")
    expected = ("cut faces",) if is_closed(grid) else ()
    return phrases + absent_layers(layers, *expected) + left_out(grid)
