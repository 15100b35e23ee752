"""The scene current-sheet: where B_phi changes sign, coloured by current, and its sections."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from scipy.interpolate import RegularGridInterpolator
from scipy.ndimage import distance_transform_edt

from fieldviz.derived.current_density import current_density
from fieldviz.errors import FieldvizError
from fieldviz.lines.seeds import equal_flux_seeds
from fieldviz.scenes.composition import ColourBar, Composition
from fieldviz.scenes.display_grid import DisplayGrid, Window, make_display_grid
from fieldviz.scenes.field_lines import tubes
from fieldviz.scenes.from_data import robust_range, round_figure
from fieldviz.scenes.ingredients import (
    add_vertical_field,
    is_closed,
    pitch_bar,
    pitch_material,
    wall_outline,
)
from fieldviz.scenes.phrases import absent_layers, left_out, repeats, taken_away
from fieldviz.scenes.settings import CurrentSheetView
from fieldviz.scenes.shown_lines import SMOOTHING, ShownLines, lines_per_wedge, shown_field_lines
from fieldviz.scenes.stage import Layer, Material
from fieldviz.scenes.surfaces import contour, empty_surface, face, merged
from fieldviz.scenes.theme import Theme
from fieldviz.scenes.wording import even_ticks, power_text, scaled
from fieldviz.sheets.current_sheets import CurrentSheets, current_sheets
from fieldviz.sheets.magnetic_midplane import MagneticMidplane, magnetic_midplane
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["compose_current_sheet"]

_CELLS = "current_magnitude"
_LINE_WIDTH = 0.0042  # of the outer radius
_SECTION_HEIGHTS = 4.5  # in H: where sections end
_LINES_HIGHER = 1.5  # times the height of the sections: where field lines end
_WITHOUT_H = 0.4  # abs(z)/R at which they end where H is not known
_BRIGHTEST = 99.3  # percentile of the current within the sections


@dataclass(frozen=True)
class _Found:
    """What is known of the sheet; None with a reason."""

    midplane: MagneticMidplane | None
    sheets: CurrentSheets | None
    reasons: list[str]


def compose_current_sheet(
    snapshot: Snapshot, scene: CurrentSheetView, theme: Theme, nodes: int
) -> Composition:
    """Make the picture of the current sheet of a snapshot.

    Parameters
    ----------
    snapshot : Snapshot
        With the magnetic field; density for the scale height. What is missing is named.
    scene : CurrentSheetView
    theme : Theme
    nodes : int
        Size of the display grid at most.

    Returns
    -------
    Composition

    Raises
    ------
    MissingFieldError
        Without the whole magnetic field.
    """
    snapshot.require("draw the current sheet", *MAGNETIC)
    found = _found(snapshot)
    height = _section_height(snapshot, scene, found)
    grid, exponent = _grid(snapshot, scene, height, nodes)
    limits = _limits(grid, scene)
    sheet = _sheet(grid, found.midplane, snapshot.grid.period)
    lit = _material(limits, theme, lit=True)
    layers = [
        Layer("magnetic midplane", sheet, lit),
        Layer("sections", _sections(grid), _material(limits, theme, lit=False)),
    ]
    if not is_closed(grid):
        layers.append(wall_outline(grid, theme, (0, -1)))
    threads = _lines(snapshot, scene, grid, height)
    if threads.places:
        width = _LINE_WIDTH * float(grid.r[-1])
        mesh = tubes(threads.places, width, scalars=("pitch", threads.pitch))
        layers.append(Layer("field lines", mesh, pitch_material(theme)))
    span = float(grid.phi[-1] - grid.phi[0])
    return Composition(
        title="Current sheet",
        subtitle=_subtitle(found, bool(sheet.n_points), is_closed(grid)),
        layers=layers,
        azimuth=float(0.5 * (grid.phi[0] + grid.phi[-1]) + np.pi)
        + np.radians(scene.camera_azimuth),
        height=np.radians(scene.camera_height),
        legends=_legends(exponent, limits, theme, bool(threads.places)),
        caption=[
            repeats(snapshot.grid, span),
            *taken_away(span),
            rf"sections for $|z| < {height:.2g}\,R$",
            *_line_phrases(threads),
            *_findings(found),
            *found.reasons,
            *absent_layers(layers, *_expected(found, grid)),
            *left_out(grid),
        ],
        scale_bar=True,
        drawn={
            "current_exponent": exponent,
            "current_limit": limits[1],
            "height_limit": height,
            "lines": len(threads.places),
        },
    )


# ---- what is found ------------------------------------------------------------------------------


def _found(snapshot: Snapshot) -> _Found:
    if not snapshot.has("density"):
        reason = (
            "no density in this snapshot: no scale height, so no magnetic midplane is looked for"
        )
        return _Found(None, None, [reason])
    try:
        midplane = magnetic_midplane(snapshot)
        return _Found(midplane, current_sheets(snapshot), [])
    except FieldvizError as error:
        return _Found(None, None, [str(error).partition(";")[0].rstrip(".")])


def _section_height(snapshot: Snapshot, scene: CurrentSheetView, found: _Found) -> float:
    """abs(z)/R at which sections end."""
    if scene.height_limit is not None:
        return scene.height_limit
    if found.midplane is None:
        return _WITHOUT_H
    low, high = snapshot.grid.theta_range
    reach = max(0.5 * np.pi - low, high - 0.5 * np.pi)
    return float(np.tan(min(_SECTION_HEIGHTS * found.midplane.thickness.h, reach, 1.4)))


def _grid(
    snapshot: Snapshot, scene: CurrentSheetView, height: float, nodes: int
) -> tuple[DisplayGrid, float]:
    """The display grid with "current", abs(J) R^c, and c."""
    lowest = float(np.arctan2(1.0, height))
    window = Window(
        r_end=scene.outer_radius,
        theta_range=(lowest, np.pi - lowest),
        phi_start=snapshot.grid.phi_range[0],
        phi_span=np.radians(scene.shown_azimuth),
    )
    strength = current_density(snapshot).magnitude
    charged = snapshot.with_cells(**{_CELLS: strength})
    grid = make_display_grid(charged, (_CELLS, *MAGNETIC[:2]), window, budget=nodes)
    exponent = scene.current_exponent
    if exponent is None:
        # Current is field over length.
        exponent = add_vertical_field(grid, None)[1].exponent + 1.0
    # Splines may pass below zero beside a steep edge.
    J = np.maximum(grid.fields[_CELLS], 0.0)
    R = grid.r * np.sin(grid.theta)[:, None]
    return grid.with_fields(current=J * R**exponent), exponent


def _limits(grid: DisplayGrid, scene: CurrentSheetView) -> tuple[float, float]:
    if scene.current_limit is not None:
        return 0.0, scene.current_limit
    return 0.0, round_figure(robust_range(grid.fields["current"], 1.0, _BRIGHTEST)[1])


# ---- layers -------------------------------------------------------------------------------------


def _material(limits: tuple[float, float], theme: Theme, *, lit: bool) -> Material:
    return Material(
        scalars="current",
        colour_map=theme.colour_map("current"),
        limits=limits,
        lit=lit,
        ambient=0.25,
        diffuse=0.85,
        specular=0.25,
    )


def _sheet(grid: DisplayGrid, midplane: MagneticMidplane | None, period: float) -> Any:
    """The surface at the height where B_phi changes sign, without columns in which it does not."""
    if midplane is None or midplane.word != "reversal":
        return empty_surface()
    height, absent = _on_nodes(grid, midplane, period)
    theta = 0.5 * np.pi - midplane.thickness.h * height
    below = grid.theta[:, None] - theta[:, None, :]
    hidden = np.broadcast_to(absent[:, None, :], grid.shape)
    if grid.hidden is not None:
        hidden = hidden | grid.hidden
    shaped = replace(grid.with_fields(below=below), hidden=hidden if hidden.any() else None)
    return contour(shaped, "below", 0.0, ("current",))


def _on_nodes(
    grid: DisplayGrid, midplane: MagneticMidplane, period: float
) -> tuple[Array, np.ndarray]:
    """Height in H on the nodes' (phi, r), and where there is none."""
    known = np.isfinite(midplane.height)
    nearest = distance_transform_edt(~known, return_distances=False, return_indices=True)
    filled = midplane.height[tuple(nearest)]
    phi = np.concatenate([[midplane.phi[-1] - period], midplane.phi, [midplane.phi[0] + period]])
    around = [np.concatenate([a[-1:], a, a[:1]]) for a in (filled, (~known).astype(float))]
    first = midplane.phi[0] - 0.5 * period
    at = first + np.mod(grid.phi - first, period)
    at = np.clip(np.where(at > phi[-1], at - period, at), phi[0], phi[-1])
    r = np.clip(np.log(grid.r), *np.log(midplane.r[[0, -1]]))
    mesh = np.stack(np.meshgrid(at, r, indexing="ij"), axis=-1)
    axes = (phi, np.log(midplane.r))
    height, share = (RegularGridInterpolator(axes, a)(mesh) for a in around)
    return height, share > 0.5


def _sections(grid: DisplayGrid) -> Any:
    if is_closed(grid):
        return empty_surface()
    return merged([face(grid, "phi", end, ("current",)) for end in (0, -1)])


def _lines(
    snapshot: Snapshot, scene: CurrentSheetView, grid: DisplayGrid, height: float
) -> ShownLines:
    count = max(lines_per_wedge(snapshot, grid, scene.line_count), 1)
    if not scene.line_count:
        return ShownLines([], [])
    try:
        seeds = equal_flux_seeds(snapshot, count)
    except FieldvizError:
        return ShownLines([], [])
    limit = scene.line_height_limit or _LINES_HIGHER * height
    return shown_field_lines(snapshot, grid, seeds, limit)


# ---- words --------------------------------------------------------------------------------------


def _subtitle(found: _Found, shown: bool, closed: bool) -> str:
    section = "" if closed else ", and its section at the cut"
    if shown:
        return rf"surface where $B_\phi$ changes sign{section}"
    if found.midplane is not None and found.midplane.word != "reversal":
        return rf"$B_\phi$ does not change sign about the midplane{'' if closed else ': sections'}"
    return "current at the cut"


def _findings(found: _Found) -> list[str]:
    phrases = []
    if found.midplane is not None and found.midplane.word == "reversal":
        low, high = (_signed(value) for value in found.midplane.spread)
        phrases.append(
            f"surface at {_signed(found.midplane.median)} H (16 to 84 %: {low} to {high} H), in "
            f"{100 * found.midplane.share:.0f} % of the columns"
        )
    elif found.midplane is not None:
        share = 100 * found.midplane.share
        phrases.append(rf"no surface: $B_\phi$ changes sign in {share:.0f} % of the columns")
    if found.sheets is not None and np.isfinite(found.sheets.share_of_current):
        phrases.append(
            f"current sheets: {100 * found.sheets.share_of_volume:.0f} % of the volume with "
            rf"{100 * found.sheets.share_of_current:.0f} % of $|J|$"
        )
    return phrases


def _expected(found: _Found, grid: DisplayGrid) -> list[str]:
    """Layers whose absence is plain, or said already."""
    names = ["sections"] if is_closed(grid) else []
    if found.midplane is None or found.midplane.word != "reversal":
        names.append("magnetic midplane")
    return names


def _signed(value: float) -> str:
    return f"{round(value, 2) + 0.0:+.2f}".replace("-", "\N{MINUS SIGN}")


def _line_phrases(threads: ShownLines) -> list[str]:
    if not threads.places:
        return []
    return [f"{len(threads.places)} lines of equal flux, smoothed over {SMOOTHING:g} cells"]


def _legends(
    exponent: float, limits: tuple[float, float], theme: Theme, with_lines: bool
) -> list[Any]:
    factor, unit = scaled(limits[1])
    ticks = [(at * factor, text) for at, text in even_ticks(0.0, limits[1] / factor)]
    label = rf"$|J|{power_text('R', exponent)}$ [{unit}]"
    bars = [ColourBar(label, theme.colour_map("current"), limits, ticks)]
    return bars + ([pitch_bar(theme)] if with_lines else [])
