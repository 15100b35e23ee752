"""How far the poloidal field leans outward where the wind leaves, against 30 degrees."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import meridional_mesh
from fieldviz.wedge.coordinates import cylindrical_components
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.launch_surfaces import LaunchSurface, Surface, SurfaceSide, launch_surface
from fieldviz.wind.ring_means import ring_means
from fieldviz.wind.side_fluxes import through_surface

__all__ = ["COLD_LAUNCHING", "Inclination", "SideInclination", "inclination", "lean"]

COLD_LAUNCHING = 30.0  # degrees from the vertical: Blandford & Payne 1982
SIDEWAYS = 0.05  # |B_z|/|B_p| below which a line counts as lying at 90 degrees
_MIDPLANE = 0.5 * np.pi
_WORK = "work out the inclination of the field"
CAVEAT = (
    "the criterion of 30 degrees is for cold gas (Blandford & Payne 1982): winds driven by heat or "
    "magnetic pressure can start below it, so that failing it does not mean no wind"
)


@dataclass(frozen=True)
class SideInclination:
    """Lean of one side's field, weighted with the mass that leaves.

    Attributes
    ----------
    side : str
    share_steep : float
        Share of the wind's mass flux with more than 30 degrees; NaN where no mass leaves.
    mean : float
        Mean lean in degrees, outward positive.
    share_sideways : float
        Share where |B_z| is below 5 % of |B_p|: taken as 90 degrees.
    mass_flux : float
        Mass that leaves, the positive part only; code units, for the wedge.
    reason : str
    """

    side: str
    share_steep: float
    mean: float
    share_sideways: float
    mass_flux: float
    reason: str


@dataclass(frozen=True)
class Inclination:
    """Lean of the field on both sides of a launching surface.

    Attributes
    ----------
    upper, lower, total : SideInclination
    surface : LaunchSurface
    notes : tuple of str
    """

    upper: SideInclination
    lower: SideInclination
    total: SideInclination
    surface: LaunchSurface
    notes: tuple[str, ...]

    @property
    def sentence(self) -> str:
        """In one sentence."""
        if self.total.reason:
            return f"inclination: none given, {self.total.reason}"
        return (
            f"{100 * self.total.share_steep:.3g} % of the mass leaves along field more than "
            f"{COLD_LAUNCHING:g} degrees from the vertical (upper "
            f"{100 * self.upper.share_steep:.3g} %, lower {100 * self.lower.share_steep:.3g} %; "
            f"mean {self.upper.mean:.3g} and {self.lower.mean:.3g} degrees outward)"
        )


def lean(b_r: Array, b_theta: Array, theta: Array) -> tuple[Array, Array]:
    """Inclination of the poloidal field from the vertical.

    Parameters
    ----------
    b_r, b_theta : arrays
        Components along r-hat and theta-hat (southward).
    theta : array that broadcasts
        Colatitude, radians.

    Returns
    -------
    degrees : array
        In [-90, 90], tan i = sgn(z) B_R/B_z: positive where the line leans away from the axis going
        away from the midplane, on either side and for either polarity. NaN without field.
    sideways : bool array
        Where |B_z| < 0.05 |B_p|: taken as 90 degrees with the sign of the lean.
    """
    B_R, B_z = cylindrical_components(b_r, b_theta, theta)
    height = np.where(np.asarray(theta) <= _MIDPLANE, 1.0, -1.0)
    outward = height * B_R * np.where(B_z < 0, -1.0, 1.0)
    size = np.hypot(B_R, B_z)
    sideways = np.abs(B_z) < SIDEWAYS * size
    degrees = np.degrees(np.arctan2(outward, np.abs(B_z)))
    degrees = np.where(sideways, np.copysign(90.0, outward), degrees)
    return np.where(size > 0, degrees, np.nan), sideways


def inclination(
    snapshot: Snapshot,
    surface: Surface | LaunchSurface = 4.0,
    *,
    thickness: float | None = None,
    radii: tuple[float, float] | None = None,
) -> Inclination:
    """Work out the lean of the field where mass leaves through the launching surfaces.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `density`, `velocity_r|theta`, `magnetic_r|theta`.
    surface, thickness
        As of `launch_surface`, or a surface found already.
    radii : (float, float), optional
        Columns whose middle lies within; all by default.

    Returns
    -------
    Inclination

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    The lean is that of the cells' own field, not of its mean. Weights, and weights times the lean,
    are linear in theta between cells.
    """
    snapshot.require(
        _WORK, "density", "velocity_r", "velocity_theta", "magnetic_r", "magnetic_theta"
    )
    if not isinstance(surface, LaunchSurface):
        surface = launch_surface(snapshot, surface, thickness=thickness)
    sums, notes = [], []
    for side in surface.sides:
        found, its_notes = _sums(snapshot, side, radii)
        sums.append(found)
        notes += [note for note in its_notes if note not in notes]
    upper, lower = (_side(one.side, part) for one, part in zip(surface.sides, sums, strict=True))
    known = [part for one, part in zip(surface.sides, sums, strict=True) if one.there.any()]
    total = _side("both", np.sum(known, axis=0) if known else np.full(4, np.nan))
    return Inclination(upper, lower, total, surface, (*surface.notes, CAVEAT, *notes))


_NAMES = ("leaving", "steep", "leaning", "sideways")


def _sums(
    snapshot: Snapshot, side: SurfaceSide, radii: tuple[float, float] | None
) -> tuple[Array, tuple[str, ...]]:
    """Mass that leaves, and the same for steep lines, times the lean, and for sideways lines."""
    if not side.there.any():
        return np.full(4, np.nan), ()
    mesh = meridional_mesh(snapshot.grid)

    def values(block: int) -> tuple[Array, list[Array]]:
        _, cells, place = mesh.block_cells(block)
        slope = np.bincount(cells, np.nan_to_num(side.slope[place[1]])) / np.bincount(cells)
        found = _weighted(snapshot, block, side.sign, slope)
        return snapshot.cell_block("density", block) > 0, [found[name] for name in _NAMES]

    means, notes = ring_means(
        snapshot, mesh, _NAMES, values, smooth=not np.any(side.slope[side.there])
    )
    used = np.ones(len(mesh.r), dtype=bool)
    if radii is not None:
        used = (mesh.r >= radii[0]) & (mesh.r <= radii[1])
    found = []
    for name in _NAMES:
        # Southward is what the integral takes, and it turns the sign above the midplane.
        table = -side.sign * means[name]
        net, _, _ = through_surface(mesh, side, table, np.abs(table))
        found.append(net[used].sum())
    return np.array(found), notes


def _weighted(snapshot: Snapshot, block: int, sign: int, slope: Array) -> dict[str, Array]:
    density, v_r, v_theta, b_r, b_theta = (
        snapshot.cell_block(name, block).astype(np.float64)
        for name in ("density", "velocity_r", "velocity_theta", "magnetic_r", "magnetic_theta")
    )
    theta = snapshot.grid.cell_centres(block)[1][:, None]
    leaving = np.maximum(-sign * density * (v_theta - slope * v_r), 0.0)
    degrees, sideways = lean(b_r, b_theta, theta)
    # Without field there is no lean; where nothing leaves none is needed.
    degrees = np.where(leaving == 0, 0.0, degrees)
    return {
        "leaving": leaving,
        "steep": np.where(np.isnan(degrees), np.nan, leaving * (degrees > COLD_LAUNCHING)),
        "leaning": leaving * degrees,
        "sideways": leaving * sideways,
    }


def _side(side: str, sums: Array) -> SideInclination:
    leaving, steep, leaning, sideways = (float(value) for value in sums)
    if not np.isfinite(sums).all():
        reason = "no surface, or no number on it"
        return SideInclination(side, np.nan, np.nan, np.nan, leaving, reason)
    if leaving <= 0:
        reason = "no mass leaves"
        return SideInclination(side, np.nan, np.nan, np.nan, 0.0, reason)
    return SideInclination(
        side, steep / leaving, leaning / leaving, sideways / leaving, leaving, ""
    )
