"""The scene azimuth-cut: a sector of the wedge, its upper half opened down to the midplane.

The lower half is kept whole; of the upper half only the part next to the wall. So one picture
shows the density at one azimuth, the body of the disc, and B_z on the midplane.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from fieldviz.errors import MissingFieldError
from fieldviz.scenes.composition import ColourBar, Composition, RadiusMarks, Swatches
from fieldviz.scenes.description import AzimuthCut
from fieldviz.scenes.display_grid import DisplayGrid, Window, make_display_grid
from fieldviz.scenes.field_lines import in_plane, poloidal_lines, tubes
from fieldviz.scenes.from_data import FieldScale, robust_range, round_figure
from fieldviz.scenes.ingredients import (
    DensityScale,
    add_density,
    add_vertical_field,
    density_bar,
    density_material,
    disc_body,
    field_label,
    wall_outline,
)
from fieldviz.scenes.phrases import left_out
from fieldviz.scenes.stage import Layer, Material
from fieldviz.scenes.surfaces import face, merged
from fieldviz.scenes.theme import Theme
from fieldviz.scenes.wording import degrees_text, even_ticks, number_text, radius_ticks
from fieldviz.wedge.coordinates import points_to_cartesian
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["compose_azimuth_cut"]

_FIELD = ("magnetic_r", "magnetic_theta")
_LINE_WIDTH = 0.0032  # radius of the tubes at the outer end, of the outer radius


@dataclass(frozen=True)
class _Cut:
    """The sector with its scales, and where it is opened."""

    grid: DisplayGrid
    opened: int  # azimuth node at which the upper half begins
    density: DensityScale | None
    field: FieldScale | None
    field_limits: tuple[float, float]

    @property
    def upper(self) -> DisplayGrid:
        return self.grid.part(phi=slice(self.opened, None), theta=slice(0, self.row + 1))

    @property
    def lower(self) -> DisplayGrid:
        return self.grid.part(theta=slice(self.row, None))

    @property
    def row(self) -> int:
        return self.grid.midplane_row


def compose_azimuth_cut(
    snapshot: Snapshot, scene: AzimuthCut, theme: Theme, nodes: int
) -> Composition:
    """Open the wedge of a snapshot at constant azimuth.

    Parameters
    ----------
    snapshot : Snapshot
        With density, the poloidal magnetic field, or both; what is missing is left out and named.
    scene : AzimuthCut
    theme : Theme
    nodes : int
        Size of the display grid at most.

    Returns
    -------
    Composition

    Raises
    ------
    MissingFieldError
        If there is neither density nor a magnetic field.
    """
    cut = _cut(snapshot, scene, nodes // 2)
    lines = poloidal_lines(snapshot, scene.outer_radius, scene.line_count) if cut.field else []
    wall = float(np.degrees(cut.grid.phi[-1]))
    return Composition(
        title="Cut at constant azimuth",
        subtitle=_subtitle(cut, wall),
        layers=_layers(cut, lines, theme),
        azimuth=float(cut.grid.phi[0]) + np.radians(scene.camera_azimuth),
        height=np.radians(scene.camera_height),
        legends=_legends(cut, theme),
        caption=_caption(snapshot, scene, cut, lines),
        radius_marks=_radius_marks(cut.grid),
        drawn=_drawn(cut, wall),
    )


def _cut(snapshot: Snapshot, scene: AzimuthCut, nodes: int) -> _Cut:
    has_density, has_field = snapshot.has("density"), snapshot.has(*_FIELD)
    if not has_density and not has_field:
        there = ", ".join(sorted(snapshot.cell_names)) or "no field"
        raise MissingFieldError(
            "Cannot draw the azimuth cut: expected density, or magnetic_r and magnetic_theta, got "
            f"a snapshot with {there}; map them in a layout description."
        )
    names = (("density",) if has_density else ()) + (_FIELD if has_field else ())
    end = snapshot.grid.phi_range[1] if scene.cut_azimuth is None else np.radians(scene.cut_azimuth)
    span = np.radians(scene.sector)
    window = Window(r_end=scene.outer_radius, phi_start=float(end - span), phi_span=float(span))
    grid = make_display_grid(snapshot, names, window, budget=nodes)
    density, field = None, None
    limits = (0.0, 1.0)
    if has_density:
        grid, density = add_density(
            grid, scene.surface_level, scene.density_exponent, scene.density_limits, whole=True
        )
    if has_field:
        grid, field = add_vertical_field(grid, scene.field_exponent)
        high = robust_range(field.profile, 50.0, 99.3)[1]
        limits = (0.0, high if scene.field_limit is None else scene.field_limit)
        limits = limits if limits[1] > 0 else (limits[1] - 1.0, limits[1])
    opened = int(np.clip(round(scene.opened_share * (len(grid.phi) - 1)), 1, len(grid.phi) - 2))
    return _Cut(grid, opened, density, field, limits)


# ---- layers -------------------------------------------------------------------------------------


def _layers(cut: _Cut, lines: list[Array], theme: Theme) -> list[Layer]:
    layers = [_wall(cut, theme)]
    if cut.density is not None:
        layers += _body(cut, cut.density, theme)
    layers.append(_floor(cut, theme))
    if cut.field is not None:
        end = float(cut.grid.r[-1])
        mesh = tubes(in_plane(lines, float(cut.grid.phi[-1])), _LINE_WIDTH * end)
        bright = Material(theme.rgb("line"), ambient=0.35, specular=0.3)
        layers.append(Layer("field lines", mesh, bright))
    layers.append(wall_outline(cut.grid, theme, (-1,)))
    return layers


def _wall(cut: _Cut, theme: Theme) -> Layer:
    if cut.density is None:
        plain = theme.colour("density", 0.1)
        return Layer("wall", face(cut.grid, "phi", -1), Material(plain, lit=False))
    surface = face(cut.grid, "phi", -1, ("log_density",))
    return Layer("wall", surface, density_material(theme, cut.density, lit=False))


def _floor(cut: _Cut, theme: Theme) -> Layer:
    opened = cut.grid.part(phi=slice(0, cut.opened + 1))
    if cut.field is None:
        assert cut.density is not None
        surface = face(opened, "theta", cut.row, ("log_density",))
        return Layer("midplane", surface, density_material(theme, cut.density, lit=False))
    material = Material(
        scalars="sheet_field",
        colour_map=theme.colour_map("vertical_field"),
        limits=cut.field_limits,
        lit=False,
    )
    return Layer("midplane", face(opened, "theta", cut.row, ("sheet_field",)), material)


def _body(cut: _Cut, density: DensityScale, theme: Theme) -> list[Layer]:
    """The disc: its surface and ends, lit; its sections, in the colours of the bar."""
    within = ("log_surface_density", density.surface)
    skin: list[Any] = []
    sections: list[Any] = []
    for half in (cut.upper, cut.lower):
        if min(half.shape) < 2:
            continue
        skin.append(disc_body(half, density))
        sections.append(face(half, "phi", 0, ("log_density",), within))
    return [
        Layer("disc body", merged(skin), density_material(theme, density, lit=True)),
        Layer("disc sections", merged(sections), density_material(theme, density, lit=False)),
    ]


# ---- words --------------------------------------------------------------------------------------


def _subtitle(cut: _Cut, wall: float) -> str:
    at = rf"$\varphi={round(wall, 1) % 360:g}$°"
    if cut.density is None:
        return r"poloidal field lines; $B_z$ on the exposed midplane"
    if cut.field is None:
        return f"density at {at} and on the exposed midplane"
    return f"density at {at}, poloidal field lines; $B_z$ on the exposed midplane"


def _legends(cut: _Cut, theme: Theme) -> list[ColourBar | Swatches]:
    legends: list[ColourBar | Swatches] = []
    if cut.density is not None:
        legends.append(density_bar(theme, cut.density, r"$\rho$ [code units]"))
    if cut.field is not None:
        low, high = cut.field_limits
        factor, label = field_label(cut.field, high)
        ticks = [(at * factor, text) for at, text in even_ticks(low / factor, high / factor)]
        colours = theme.colour_map("vertical_field")
        legends.append(ColourBar(f"midplane {label}", colours, cut.field_limits, ticks))
    return legends


def _caption(snapshot: Snapshot, scene: AzimuthCut, cut: _Cut, lines: list[Array]) -> list[str]:
    wedge, grid = snapshot.grid, cut.grid
    span = float(grid.phi[-1] - grid.phi[0])
    whole = "the full ring" if wedge.is_full_ring else f"a wedge of {degrees_text(wedge.period)}"
    if span > wedge.period + 1e-6:
        whole += " and its repeat"
    opened = float(grid.phi[cut.opened] - grid.phi[0])
    phrases = [
        f"sector of {degrees_text(span)} of {whole}, "
        f"upper half taken away over {degrees_text(opened)}"
    ]
    if cut.density is not None:
        share = number_text(round_figure(scene.surface_level))
        phrases.append(f"disc body: above {share} of the midplane density")
    if cut.field is not None:
        phrases.append("lines: azimuth-averaged field, equal steps of flux")
        if not lines:
            phrases.append("no field line in these data")
        if cut.field.sign < 0:
            phrases.append(r"the net field points down: $-B_z$ is shown")
    else:
        phrases.append("no magnetic field in this snapshot: neither lines nor $B_z$")
    if cut.density is None:
        phrases.append("no density in this snapshot: neither the disc nor the wall's colours")
    return phrases + left_out(grid)


def _drawn(cut: _Cut, wall: float) -> dict[str, Any]:
    drawn: dict[str, Any] = {"cut_azimuth": wall}
    if cut.density is not None:
        drawn["density_exponent"] = cut.density.exponent
        drawn["density_limits"] = list(cut.density.limits)
    if cut.field is not None:
        drawn["field_exponent"] = cut.field.exponent
        drawn["field_sign"] = cut.field.sign
        drawn["field_limit"] = cut.field_limits[1]
    return drawn


def _radius_marks(grid: DisplayGrid) -> list[RadiusMarks]:
    """Edges that can carry radius ticks: the near edge of the midplane, and the wall's two."""
    radii = radius_ticks(float(grid.r[0]), float(grid.r[-1]))
    texts = [f"{radius:g}" for radius in radii]
    first, wall = float(grid.phi[0]), float(grid.phi[-1])
    top, bottom = float(grid.theta[0]), float(grid.theta[-1])
    edges = [
        (r"$R\ [R_0]$", np.pi / 2, first, 0.0, 0.15),
        (r"$r\ [R_0]$", bottom, wall, -0.1, 0.0),
        (r"$r\ [R_0]$", top, wall, 0.1, 0.0),
    ]
    marks = []
    for name, theta, phi, theta_step, phi_step in edges:
        at = np.column_stack([radii, np.full_like(radii, theta), np.full_like(radii, phi)])
        inside = at + np.array([0.0, theta_step, phi_step])
        marks.append(RadiusMarks(name, points_to_cartesian(at), points_to_cartesian(inside), texts))
    return marks
