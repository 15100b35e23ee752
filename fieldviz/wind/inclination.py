"""How far the poloidal field leans outward where the wind leaves, against 30 degrees."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import MeridionalMesh, meridional_mesh
from fieldviz.wedge.coordinates import cylindrical_components
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.chunks import by_chunks, same_type
from fieldviz.wind.launch_surfaces import LaunchSurface, Surface, SurfaceSide, launch_surface
from fieldviz.wind.ring_means import RingTotals
from fieldviz.wind.side_fluxes import through_surface

__all__ = ["COLD_LAUNCHING", "Inclination", "SideInclination", "inclination", "lean"]

COLD_LAUNCHING = 30.0  # degrees from the vertical: Blandford & Payne 1982
SIDEWAYS = 0.05  # |B_z|/|B_p| below which a line counts as lying at 90 degrees
_MIDPLANE = 0.5 * np.pi
_WORK = "work out the inclination of the field"
_FIELDS = ("density", "velocity_r", "velocity_theta", "magnetic_r", "magnetic_theta")
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
    snapshot.require(_WORK, *_FIELDS)
    if not isinstance(surface, LaunchSurface):
        surface = launch_surface(snapshot, surface, thickness=thickness)
    sums, notes = _sums(snapshot, surface, radii)
    upper, lower = (_side(one.side, part) for one, part in zip(surface.sides, sums, strict=True))
    known = [part for one, part in zip(surface.sides, sums, strict=True) if one.there.any()]
    total = _side("both", np.sum(known, axis=0) if known else np.full(4, np.nan))
    return Inclination(upper, lower, total, surface, (*surface.notes, CAVEAT, *notes))


_NAMES = ("leaving", "steep", "leaning", "sideways")


def _sums(
    snapshot: Snapshot, surface: LaunchSurface, radii: tuple[float, float] | None
) -> tuple[list[Array], list[str]]:
    """For each side the mass that leaves, the same for steep lines, times the lean, sideways."""
    mesh = meridional_mesh(snapshot.grid)
    used = np.ones(len(mesh.r), dtype=bool)
    if radii is not None:
        used = (mesh.r >= radii[0]) & (mesh.r <= radii[1])
    totals = _totals(snapshot, mesh, [side for side in surface.sides if side.there.any()])
    sums, notes = [], []
    for side in surface.sides:
        if side.side not in totals:
            sums.append(np.full(4, np.nan))
            continue
        found = []
        for mean in totals[side.side].means().values():
            # Southward is what the integral takes, and it turns the sign above the midplane.
            table = -side.sign * mean
            net, _, _ = through_surface(mesh, side, table, np.abs(table))
            found.append(net[used].sum())
        sums.append(np.array(found))
        notes += [note for note in totals[side.side].notes if note not in notes]
    return sums, notes


def _totals(
    snapshot: Snapshot, mesh: MeridionalMesh, sides: list[SurfaceSide]
) -> dict[str, RingTotals]:
    """Sums along azimuth of each side that has a surface, in one pass over the blocks."""
    totals = {
        side.side: RingTotals(snapshot, mesh, _NAMES, not np.any(side.slope[side.there]))
        for side in sides
    }
    near = np.array([_near(mesh, side) for side in sides]).reshape(-1, len(mesh.theta))
    slopes = np.array([np.nan_to_num(side.slope) for side in sides])
    for block in range(snapshot.grid.n_blocks if sides else 0):
        rows, columns, place = mesh.block_cells(block)
        own_slopes = np.array([np.bincount(columns, s[place[1]]) for s in slopes])
        own_slopes /= np.bincount(columns)
        wanted = np.array([np.bincount(rows, n[place[0]]) > 0 for n in near])
        # Slopes within coarse cells come from the next rows.
        wanted[:, 1:] |= wanted[:, :-1].copy()
        wanted[:, :-1] |= wanted[:, 1:].copy()
        signs = np.array([float(side.sign) for side in sides])
        covered, sums, left_out = _block_sums(snapshot, block, signs, own_slopes, wanted)
        for number, total in enumerate(totals.values()):
            total.add(block, covered[number], sums[number], int(left_out[number]))
    return totals


def _near(mesh: MeridionalMesh, side: SurfaceSide) -> Array:
    """Rows between which values on the surface are interpolated, and all between, (n_theta,)."""
    ends = np.concatenate([side.inner[side.there], side.outer[side.there]])
    first, last = np.searchsorted(mesh.theta_edges, [ends.min(), ends.max()])
    rows = np.arange(len(mesh.theta))
    return (rows >= first - 2) & (rows <= last + 1)


def _block_sums(
    snapshot: Snapshot, block: int, signs: Array, slopes: Array, wanted: Array
) -> tuple[Array, Array, Array]:
    """Azimuth covered, sums and cells left out of one block; see `_kernels.lean_rows`."""
    from fieldviz.wind._kernels import lean_rows

    fields = same_type([snapshot.cell_block(name, block) for name in _FIELDS])
    theta = snapshot.grid.cell_centres(block)[1]
    sine, cosine, steps = np.sin(theta), np.cos(theta), np.diff(snapshot.grid.phi_edges[block])
    shape = (len(theta), slopes.shape[1])
    covered, sums = np.zeros((len(signs), *shape)), np.zeros((len(signs), len(_NAMES), *shape))

    def work(start: int, stop: int) -> Array:
        left_out: Array = lean_rows(
            fields, start, stop, steps, sine, cosine, signs, slopes, wanted, COLD_LAUNCHING,
            SIDEWAYS, covered, sums,
        )  # fmt: skip
        return left_out

    return covered, sums, by_chunks(len(theta), int(np.prod(snapshot.grid.block_shape)), work)


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
