"""The scene outflow: the disc in the middle, streamlines of its wind above and below."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pyvista as pv
from scipy.ndimage import gaussian_filter1d

from fieldviz.derived.mach import MachSurface, mach_numbers, mach_surface
from fieldviz.errors import RenderError
from fieldviz.scenes.composition import ColourBar, Composition, Swatches
from fieldviz.scenes.display_grid import DisplayGrid, Window, make_display_grid
from fieldviz.scenes.field_lines import arrow_heads, tubes
from fieldviz.scenes.from_data import robust_range, round_figure
from fieldviz.scenes.ingredients import (
    DensityScale,
    add_density,
    density_bar,
    density_material,
    disc_body,
    disc_sections,
)
from fieldviz.scenes.phrases import absent_layers, left_out, repeats, surface_phrase, taken_away
from fieldviz.scenes.settings import OutflowView
from fieldviz.scenes.stage import Layer, Material
from fieldviz.scenes.surfaces import empty_surface, merged
from fieldviz.scenes.theme import Theme
from fieldviz.scenes.wind_lines import WindLines, wind_lines
from fieldviz.scenes.wording import even_ticks, number_text
from fieldviz.wedge.coordinates import points_to_cartesian
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["compose_outflow"]

_LINE_WIDTH = 0.0055  # of the outer radius
_DISC_HEIGHT = 1.0  # abs(z)/R up to which the disc's surface is looked for
_DEEPER = 0.45  # of the disc's range of colours, added below it
_BEHIND = np.radians(200.0)  # azimuth behind the star over which the critical surface is shown
_SMOOTHING = 2.0  # columns over which the critical surface is smoothed
_MOST_SPLIT = 0.12  # radians between neighbouring columns beyond which the surface is broken


def compose_outflow(
    snapshot: Snapshot, scene: OutflowView, theme: Theme, nodes: int
) -> Composition:
    """Make the picture of the wind of a snapshot.

    Parameters
    ----------
    snapshot : Snapshot
        With the velocity; density for the disc and for lines of equal mass, magnetic field for the
        Alfven surface; what is missing of these is named.
    scene : OutflowView
    theme : Theme
    nodes : int
        Size of the display grid at most.

    Returns
    -------
    Composition

    Raises
    ------
    MissingFieldError
        Without the velocity.
    """
    snapshot.require("draw the outflow", *VELOCITY)
    camera = np.radians(scene.camera_azimuth)
    threads = wind_lines(
        snapshot, scene.line_count, scene.launch_height, camera - np.pi, scene.outer_radius
    )
    layers: list[Layer] = []
    legends: list[ColourBar | Swatches] = []
    caption = [repeats(snapshot.grid, 2 * np.pi)]
    drawn: dict[str, Any] = {"lines": len(threads.places)}
    if snapshot.has("density"):
        grid, density = _disc(snapshot, scene, camera, nodes)
        layers += _disc_layers(grid, density, theme)
        legends.append(density_bar(theme, density, r"disc: $\rho$ [code units]"))
        opened = taken_away(2 * np.pi - np.radians(scene.opened_azimuth), "disc: front")
        caption += [*opened, surface_phrase(scene.surface_level), *left_out(grid)]
        drawn |= {"density_exponent": density.exponent, "density_limits": list(density.limits)}
    limit = _speed_limit(threads) if scene.speed_limit is None else scene.speed_limit
    layers += _line_layers(snapshot, threads, limit, theme)
    if threads.places:
        legends.append(_speed_bar(limit, theme))
        caption += _line_phrases(threads)
        drawn |= {"speed_limit": limit, "launch_angle": threads.angle}
    caption += threads.notes
    if scene.critical:
        critical, reason = _critical_layer(snapshot, scene.outer_radius, camera, theme)
        layers += critical
        caption += reason
        if critical:
            legends.append(
                Swatches(
                    "Alfv\N{LATIN SMALL LETTER E WITH ACUTE}n surface, behind the star",
                    [_CRITICAL_ENTRY],
                )
            )
    if not any(layer.mesh.n_points for layer in layers):
        raise RenderError(
            "Cannot draw the outflow: expected streamlines that leave the wedge, or density, got "
            f"neither ({'; '.join(threads.notes)}); take another snapshot or launch_height."
        )
    return Composition(
        title="Outflow",
        subtitle=_subtitle(threads),
        layers=layers,
        azimuth=camera,
        height=np.radians(scene.camera_height),
        legends=legends,
        caption=caption + absent_layers(layers, "disc sections", "streamlines", "arrow heads"),
        scale_bar=True,
        drawn=drawn,
    )


# ---- the disc -----------------------------------------------------------------------------------


def _disc(
    snapshot: Snapshot, scene: OutflowView, camera: float, nodes: int
) -> tuple[DisplayGrid, DensityScale]:
    opened = float(np.radians(scene.opened_azimuth))
    lowest = float(np.arctan2(1.0, _DISC_HEIGHT))
    window = Window(
        r_end=scene.outer_radius,
        theta_range=(lowest, np.pi - lowest),
        phi_start=float(camera + 0.5 * opened) if opened else float(camera + np.pi),
        phi_span=2 * np.pi - opened,
    )
    grid = make_display_grid(snapshot, ("density",), window, budget=nodes)
    grid, density = add_density(
        grid, scene.surface_level, scene.density_exponent, scene.density_limits, whole=False
    )
    if scene.density_limits is None:
        # The surface has the lowest density of the disc: it must not have the darkest colour.
        low, high = density.limits
        density = replace(density, limits=(low - _DEEPER * (high - low), high))
    return grid, density


def _disc_layers(grid: DisplayGrid, density: DensityScale, theme: Theme) -> list[Layer]:
    lit = density_material(theme, density, lit=True)
    flat = density_material(theme, density, lit=False)
    return [
        Layer("disc surface", disc_body(grid.coarser(2, 1), density), lit),
        Layer("disc sections", disc_sections(grid, density), flat),
    ]


# ---- the wind -----------------------------------------------------------------------------------


def _speed_limit(threads: WindLines) -> float:
    if not threads.speeds:
        return 1.0
    return round_figure(robust_range(np.concatenate(threads.speeds), 0.0, 98.0)[1])


def _line_layers(snapshot: Snapshot, threads: WindLines, limit: float, theme: Theme) -> list[Layer]:
    material = Material(
        scalars="speed",
        colour_map=theme.colour_map("speed_on_lines"),
        limits=(0.0, limit),
        ambient=0.25,
        diffuse=0.85,
        specular=0.35,
        specular_power=25.0,
    )
    width = _LINE_WIDTH * float(snapshot.grid.r_range[1])
    values = ("speed", threads.speeds)
    return [
        Layer("streamlines", tubes(threads.places, width, scalars=values), material),
        Layer("arrow heads", arrow_heads(threads.places, width, scalars=values), material),
    ]


def _speed_bar(limit: float, theme: Theme) -> ColourBar:
    ticks = even_ticks(0.0, limit)
    label = r"streamline: $v_{\rm p}/v_{\rm K}$ where it starts"
    return ColourBar(label, theme.colour_map("speed_on_lines"), (0.0, limit), ticks)


def _line_phrases(threads: WindLines) -> list[str]:
    where = f"{np.degrees(threads.angle):.0f}°"
    if threads.scale_heights is not None:
        where = f"{number_text(threads.scale_heights)} H ({where})"
    begin = np.array([place[0, 1] for place in threads.places])
    sides = [word for word, there in (("above", begin < np.pi / 2), ("below", begin > np.pi / 2))
             if there.any()]  # fmt: skip
    return [f"{len(threads.places)} streamlines of the gas from {where} {' and '.join(sides)}"]


def _subtitle(threads: WindLines) -> str:
    if not threads.places:
        return "no streamline leaves the disc"
    if not np.isfinite(threads.share_above):
        return "streamlines above and below the disc"
    above = round(100 * threads.share_above)
    shares = f"{above} % above, {100 - above} % below"
    if above in (0, 100):
        shares = f"all of it {'above' if above else 'below'}"
    return f"streamlines in proportion to the mass that leaves: {shares}"


# ---- the critical surface -----------------------------------------------------------------------

_CRITICAL_ENTRY = ("Alfven surface", None, r"$v_{\rm p} = v_{\rm A,p}$")


def _critical_layer(
    snapshot: Snapshot, r_end: float | None, camera: float, theme: Theme
) -> tuple[list[Layer], list[str]]:
    """The Alfven surface behind the star, or why there is none."""
    if not snapshot.has("density", *MAGNETIC[:2]):
        lacking = "density" if snapshot.has(*MAGNETIC[:2]) else "magnetic field"
        return [], [f"no {lacking} in this snapshot: no Alfven surface"]
    sides = mach_surface(mach_numbers(snapshot), "alfven")
    end = snapshot.grid.r_range[1] if r_end is None else r_end
    mesh = merged([part for side in sides for part in _revolved(side, end, camera)])
    if not mesh.n_points:
        return [], ["no Alfven surface within the wedge"]
    material = Material(
        theme.rgb("critical"),
        opacity=theme.critical_opacity,
        ambient=0.15,
        specular=0.3,
    )
    return [Layer("Alfven surface", mesh, material)], []


def _revolved(side: MachSurface, end: float, camera: float) -> list[Any]:
    """One side's outermost crossing as surfaces behind the star, without its breaks."""
    use = side.r <= end
    theta, r = side.outermost_theta[use], side.r[use]
    breaks = np.abs(np.diff(theta)) > _MOST_SPLIT
    pieces = np.split(np.arange(len(r)), np.flatnonzero(breaks | np.isnan(np.diff(theta))) + 1)
    around = camera + np.pi + np.linspace(-0.5, 0.5, 97) * _BEHIND
    surfaces = []
    for piece in pieces:
        if len(piece) < 4 or np.isnan(theta[piece]).any():
            continue
        smooth = gaussian_filter1d(theta[piece], _SMOOTHING, mode="nearest")
        surfaces.append(_surface_of_revolution(r[piece], smooth, around))
    return surfaces


def _surface_of_revolution(r: Array, theta: Array, phi: Array) -> Any:
    spherical = np.stack(
        [
            np.broadcast_to(r, (len(phi), len(r))),
            np.broadcast_to(theta, (len(phi), len(r))),
            np.broadcast_to(phi[:, None], (len(phi), len(r))),
        ],
        axis=-1,
    ).reshape(-1, 3)
    grid = pv.StructuredGrid()
    grid.points = points_to_cartesian(spherical).astype(np.float32)
    grid.dimensions = (len(r), len(phi), 1)
    surface = grid.extract_surface(algorithm="geometry").triangulate()
    surface.clear_data()
    if not surface.n_points:
        return empty_surface()
    return surface.compute_normals(cell_normals=False, split_vertices=False)
