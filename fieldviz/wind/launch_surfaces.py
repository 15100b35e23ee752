"""Launching surfaces of five kinds, as one colatitude for each radius on each side."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fieldviz.derived.azimuth_sums import MIDPLANE, MeridionalMesh, azimuth_moments, meridional_mesh
from fieldviz.derived.mach import mach_numbers
from fieldviz.derived.plasma import plasma
from fieldviz.derived.thickness import disc_thickness
from fieldviz.errors import FieldvizError
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.surface_search import leaving_heights, outermost_crossings
from fieldviz.wind.surfaces import matched_cones

__all__ = [
    "SURFACE_KINDS",
    "LaunchSurface",
    "Surface",
    "SurfaceSide",
    "launch_surface",
    "moved_surface",
]

Surface = float | str | tuple[str, float]
SURFACE_KINDS = ("outflow", "slow", "sonic", "beta")
_WORK = "find the launching surfaces"
_FOUND_ENOUGH = 0.9  # share of ln r with a surface below which a side is flagged; our choice


@dataclass(frozen=True, eq=False)
class SurfaceSide:
    """The launching surface of one side: straight pieces in (r, theta), one to a column.

    Attributes
    ----------
    side : str
        "upper" or "lower".
    r_edges : (n + 1,) array
    inner, outer : (n,) arrays
        Colatitude where each piece begins and ends in radius; NaN where there is no surface.
    """

    side: str
    r_edges: Array
    inner: Array
    outer: Array

    @property
    def sign(self) -> int:
        """1 above, -1 below the midplane."""
        return 1 if self.side == "upper" else -1

    @property
    def there(self) -> Array:
        """Which columns have a surface, (n,) bool."""
        return np.isfinite(self.inner)

    @property
    def theta(self) -> Array:
        """Colatitude in the middle of each column, (n,)."""
        return np.asarray(0.5 * (self.inner + self.outer))

    @property
    def slope(self) -> Array:
        """Slope r dtheta/dr of each piece, (n,); 0 on a cone."""
        r = 0.5 * (self.r_edges[1:] + self.r_edges[:-1])
        return np.asarray(r * (self.outer - self.inner) / np.diff(self.r_edges))

    @property
    def on_edges(self) -> Array:
        """Colatitude on the spheres between the columns, (n + 1,)."""
        ends = np.append(self.inner, self.outer[-1:])
        ends[1:] = np.where(np.isnan(ends[1:]), self.outer, ends[1:])
        return ends

    @property
    def share_found(self) -> float:
        """Share of the range in ln r that has a surface."""
        width = _log_widths(self.r_edges)
        return float(width[self.there].sum() / width.sum())


@dataclass(frozen=True, eq=False)
class LaunchSurface:
    """Where the wind is said to begin.

    Attributes
    ----------
    kind : str
        "cone", "outflow", "slow", "sonic", "beta" or "contour".
    label : str
        In words.
    h : float
        H/R.
    scale_heights : float or None
        Height of a cone in H after clipping.
    upper, lower : SurfaceSide
    clipped : bool
        Whether it was asked for beyond the grid.
    notes : tuple of str
    """

    kind: str
    label: str
    h: float
    scale_heights: float | None
    upper: SurfaceSide
    lower: SurfaceSide
    clipped: bool
    notes: tuple[str, ...]

    @property
    def sides(self) -> tuple[SurfaceSide, SurfaceSide]:
        """Upper and lower side."""
        return self.upper, self.lower


def launch_surface(
    snapshot: Snapshot,
    surface: Surface = 4.0,
    *,
    thickness: float | None = None,
) -> LaunchSurface:
    """Find the launching surfaces above and below the midplane.

    Parameters
    ----------
    snapshot : Snapshot
    surface : float, str or (str, float)
        A number: cones so many H from the midplane. "outflow": the lowest height above which all
        gas moves away from the midplane. "slow" or "sonic": where the poloidal speed passes the
        slow or the sound speed for the last time on the way out. "beta": where plasma beta passes
        1 for the last time. (name, value): the outermost contour of any cell field's azimuth mean.
    thickness : float, optional
        H/R; worked out from the snapshot by default.

    Returns
    -------
    LaunchSurface

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    All but cones come from azimuth means, linear in theta between cells, and have one height at
    each radius: of a folded surface the outermost sheet. Common practice, no source.
    """
    h = _thickness(snapshot, thickness)
    mesh = meridional_mesh(snapshot.grid)
    if not isinstance(surface, str | tuple):
        return _cones(snapshot, mesh, h, float(surface))
    kind, label, columns, notes = _columns(snapshot, mesh, surface)
    sides = [
        _pieces(name, mesh.r_edges, theta)
        for name, theta in zip(("upper", "lower"), columns, strict=True)
    ]
    for side in sides:
        notes += _found_notes(side, label)
    found = LaunchSurface(kind, label, h, None, sides[0], sides[1], False, tuple(notes))
    return _within_grid(snapshot, found)


def moved_surface(snapshot: Snapshot, surface: LaunchSurface, by: float) -> LaunchSurface:
    """The same surface `by` H farther from the midplane, clipped to the grid.

    Raises
    ------
    FieldvizError
        If a cone would come to lie on the midplane or beyond it.
    """
    if surface.scale_heights is not None:
        mesh = meridional_mesh(snapshot.grid)
        return _cones(snapshot, mesh, surface.h, surface.scale_heights + by)
    sides = [
        replace(side, inner=side.inner - step, outer=side.outer - step)
        for side, step in ((s, s.sign * by * surface.h) for s in surface.sides)
    ]
    label = f"{surface.label}, moved {by:+g} H"
    moved = replace(surface, label=label, upper=sides[0], lower=sides[1])
    return _within_grid(snapshot, moved)


def _within_grid(snapshot: Snapshot, surface: LaunchSurface) -> LaunchSurface:
    reach = snapshot.grid.theta_range
    limits = ((reach[0], MIDPLANE), (MIDPLANE, reach[1]))
    sides, clipped = [], False
    for side, limit in zip(surface.sides, limits, strict=True):
        ends = np.clip([side.inner, side.outer], *limit)
        clipped |= not np.array_equal(ends, [side.inner, side.outer], equal_nan=True)
        sides.append(replace(side, inner=ends[0], outer=ends[1]))
    notes = surface.notes
    if clipped:
        notes += ("parts of the surface were clipped to the grid or to the midplane",)
    return replace(surface, upper=sides[0], lower=sides[1], clipped=clipped, notes=notes)


def _thickness(snapshot: Snapshot, thickness: float | None) -> float:
    if thickness is None:
        return disc_thickness(snapshot).h
    if not 0 < thickness < 1:
        raise FieldvizError(
            f"Cannot {_WORK}: expected a thickness H/R of 0 to 1, got {thickness}; leave it out "
            "and it is worked out."
        )
    return float(thickness)


def _cones(snapshot: Snapshot, mesh: MeridionalMesh, h: float, height: float) -> LaunchSurface:
    cones = matched_cones(snapshot, h, height)
    count = len(mesh.r_edges) - 1
    sides = [
        SurfaceSide(name, mesh.r_edges, np.full(count, theta), np.full(count, theta))
        for name, theta in (("upper", cones.upper), ("lower", cones.lower))
    ]
    label = f"cones {cones.scale_heights:.3g} H ({cones.angle:.4g} rad) from the midplane"
    notes = [f"launching surfaces are {label}, H/R = {h:.4g}"]
    if cones.clipped:
        notes.append(f"the surfaces were clipped to the grid: {height:g} H were asked for")
    return LaunchSurface(
        "cone", label, h, cones.scale_heights, sides[0], sides[1], cones.clipped, tuple(notes)
    )


def _columns(
    snapshot: Snapshot, mesh: MeridionalMesh, surface: str | tuple[str, float]
) -> tuple[str, str, tuple[Array, Array], list[str]]:
    """Kind, label, colatitudes above and below, notes."""
    if isinstance(surface, tuple):
        name, level = surface
        snapshot.require(_WORK, name)
        moments = azimuth_moments(snapshot, [name])
        label = f"the outermost contour {name} = {level:g}"
        table, notes = moments.means[name], moments.notes
        return "contour", label, outermost_crossings(mesh, table, float(level)), list(notes)
    if surface == "outflow":
        snapshot.require(_WORK, "density", "velocity_theta")
        moments = azimuth_moments(snapshot, (), ["velocity_theta"])
        label = "the lowest height above which gas moves away from the midplane"
        table = moments.mass_means["velocity_theta"]
        return surface, label, leaving_heights(mesh, table), list(moments.notes)
    if surface in ("slow", "sonic"):
        numbers = mach_numbers(snapshot)
        found = numbers.slow if surface == "slow" else numbers.sonic
        return surface, f"the {surface} surface", _contour(mesh, found, numbers.notes), []
    if surface == "beta":
        state = plasma(snapshot)
        label = "the surface of plasma beta 1"
        return surface, label, _contour(mesh, state.beta_total, state.notes), []
    raise FieldvizError(
        f"Cannot {_WORK}: expected a height in H, one of {', '.join(SURFACE_KINDS)}, or a field "
        f"and its value, got {surface!r}; name one of these."
    )


def _contour(
    mesh: MeridionalMesh, table: Array | None, notes: tuple[str, ...]
) -> tuple[Array, Array]:
    if table is None:
        reasons = "; ".join(note for note in notes if "absent" in note)
        raise FieldvizError(
            f"Cannot {_WORK}: expected the fields it needs, got a snapshot without them "
            f"({reasons}); choose another surface."
        )
    return outermost_crossings(mesh, table, 1.0)


def _pieces(side: str, r_edges: Array, theta: Array) -> SurfaceSide:
    """Straight pieces through the middles of the columns, joined where neighbours have one."""
    r = 0.5 * (r_edges[1:] + r_edges[:-1])
    inner, outer = theta.copy(), theta.copy()
    if len(r) > 1:
        share = (r_edges[1:-1] - r[:-1]) / np.diff(r)
        joint = theta[:-1] + share * np.diff(theta)
        outer[:-1] = np.where(np.isfinite(joint), joint, theta[:-1])
        inner[1:] = np.where(np.isfinite(joint), joint, theta[1:])
        # Continued linearly to the walls.
        steps = (r - r_edges[:-1]) / (r_edges[1:] - r)
        inner[0] = theta[0] - (outer[0] - theta[0]) * steps[0]
        outer[-1] = theta[-1] + (theta[-1] - inner[-1]) / steps[-1]
    return SurfaceSide(side, r_edges, inner, outer)


def _log_widths(r_edges: Array) -> Array:
    inner = np.maximum(r_edges, 1e-12 * r_edges[-1])
    return np.asarray(np.diff(np.log(inner)))


def _found_notes(side: SurfaceSide, label: str) -> list[str]:
    share = side.share_found
    if share == 1:
        return []
    flag = ": do not rely on this side" if share < _FOUND_ENOUGH else ""
    return [f"{side.side} side: {label} was found over {100 * share:.3g} % of ln r{flag}"]
