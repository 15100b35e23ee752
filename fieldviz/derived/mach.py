"""Mach numbers of the poloidal flow, and the surfaces where they pass 1."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from fieldviz.derived.azimuth_sums import AzimuthMoments, MeridionalMesh, azimuth_moments
from fieldviz.errors import FieldvizError
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["MachNumbers", "MachSurface", "mach_numbers", "mach_surface", "magnetosonic_speeds"]

_MIDPLANE = 0.5 * np.pi
_KINDS = ("sonic", "alfven", "fast", "slow")


def magnetosonic_speeds(
    sound_squared: Array, alfven_squared: Array, poloidal_squared: Array
) -> tuple[Array, Array]:
    """Fast and slow speeds along the poloidal field, cell by cell.

    Parameters
    ----------
    sound_squared, alfven_squared, poloidal_squared : arrays that broadcast
        c_s^2, v_A^2 of the whole field, v_Ap^2 of its poloidal part.

    Returns
    -------
    fast, slow : arrays

    Notes
    -----
    V^2 = {c_s^2 + v_A^2 +- [(c_s^2 + v_A^2)^2 - 4 c_s^2 v_Ap^2]^(1/2)}/2 (Weber & Davis 1967;
    Sakurai 1985, from memory). The slow one comes from the product V_f^2 V_s^2 = c_s^2 v_Ap^2, as
    the difference loses its digits in a weak field.
    """
    both = np.asarray(sound_squared) + np.asarray(alfven_squared)
    product = np.asarray(sound_squared) * np.asarray(poloidal_squared)
    fast = 0.5 * (both + np.sqrt(np.maximum(both**2 - 4.0 * product, 0.0)))
    slow = np.divide(product, fast, out=np.zeros_like(fast), where=~(fast <= 0))  # NaN stays
    return np.sqrt(fast), np.sqrt(slow)


@dataclass(frozen=True, eq=False)
class MachNumbers:
    """Poloidal speed over four others; tables (n_theta, n_r), None where absent.

    Attributes
    ----------
    r_edges, theta_edges : (n_r + 1,), (n_theta + 1,) arrays
    speed : table
        Poloidal speed of the mass-weighted azimuth means, frame of the grid, code velocity.
    sonic : table or None
        v_p/c_s.
    alfven : table or None
        v_p/v_Ap with the poloidal Alfven speed; infinite without field.
    fast, slow : tables or None
    height : (n_theta, n_r) array
        z = r cos(theta) of the cells, code length.
    notes : tuple of str
        Reasons for what is None among them.
    """

    r_edges: Array
    theta_edges: Array
    speed: Array
    sonic: Array | None
    alfven: Array | None
    fast: Array | None
    slow: Array | None
    height: Array
    notes: tuple[str, ...]
    mesh: MeridionalMesh = field(repr=False)


def mach_numbers(
    snapshot: Snapshot, *, adiabatic: bool = False, mean_field: bool = True
) -> MachNumbers:
    """Work out Mach numbers of the azimuth-averaged flow.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `velocity_r`, `velocity_theta` and `density`; `pressure` for all but the Alfven
        number, `magnetic_r|theta` for that, `magnetic_phi` for the fast and slow ones too.
    adiabatic : bool
        c_s^2 = gamma P/rho with the snapshot's `gamma`, instead of P/rho.
    mean_field : bool
        Alfven speeds from the azimuth mean of the field; else from its mean square, fluctuations
        included.

    Returns
    -------
    MachNumbers

    Raises
    ------
    MissingFieldError, FieldvizError
    """
    flow = ("velocity_r", "velocity_theta")
    snapshot.require("work out Mach numbers", "density", *flow)
    if adiabatic and snapshot.gamma is None:
        raise FieldvizError(
            "Cannot work out the adiabatic sound speed: expected a snapshot with gamma, got none; "
            "give gamma with the snapshot, or leave adiabatic out."
        )
    volume = ["density", *(n for n in ("pressure", *MAGNETIC) if snapshot.has(n))]
    fields = [name for name in MAGNETIC if name in volume]
    pairs = [(name, name) for name in fields]
    moments = azimuth_moments(snapshot, volume, flow, pairs=pairs)
    mesh = moments.mesh
    speed = np.hypot(*(moments.mass_means[name] for name in flow))
    sound = None
    if "pressure" in volume:
        with np.errstate(divide="ignore", invalid="ignore"):
            sound = moments.means["pressure"] / moments.means["density"]
        sound = sound * snapshot.gamma if adiabatic and snapshot.gamma is not None else sound
    poloidal = _alfven_squared(moments, MAGNETIC[:2], snapshot.mu0, mean_field)
    total = _alfven_squared(moments, MAGNETIC, snapshot.mu0, mean_field)
    fast = slow = None
    if sound is not None and total is not None and poloidal is not None:
        fast, slow = (_ratio(speed, v) for v in magnetosonic_speeds(sound, total, poloidal))
    return MachNumbers(
        mesh.r_edges,
        mesh.theta_edges,
        speed,
        None if sound is None else _ratio(speed, np.sqrt(sound)),
        None if poloidal is None else _ratio(speed, np.sqrt(poloidal)),
        fast,
        slow,
        mesh.r * np.cos(mesh.theta)[:, None],
        _notes(snapshot, moments, adiabatic, mean_field),
        mesh,
    )


def _alfven_squared(
    moments: AzimuthMoments, names: Sequence[str], mu0: float, mean_field: bool
) -> Array | None:
    if not set(names) <= set(moments.means):
        return None
    squares = [moments.means[n] ** 2 if mean_field else moments.mean_square(n) for n in names]
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(np.sum(squares, axis=0) / (mu0 * moments.means["density"]))


def _ratio(speed: Array, other: Array) -> Array:
    """Speed over another; infinite over zero, 0 where the gas rests."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(np.where(speed == 0, 0.0 * other, speed / other))


def _notes(
    snapshot: Snapshot, moments: AzimuthMoments, adiabatic: bool, mean_field: bool
) -> tuple[str, ...]:
    sound = "adiabatic, gamma P/rho" if adiabatic else "isothermal, P/rho"
    field = "azimuth mean" if mean_field else "mean square"
    notes = [
        f"v_p is the poloidal speed in the frame of the grid, of <v>_rho; c_s^2 is {sound}; Alfven "
        f"speeds from the {field} of the field along azimuth",
        *moments.notes,
    ]
    for name in ("pressure", *MAGNETIC):
        if not snapshot.has(name):
            notes.append(f"Mach numbers that need {name} are absent: no such field")
    return tuple(notes)


@dataclass(frozen=True, eq=False)
class MachSurface:
    """Where a Mach number passes a level, column by column on one side of the midplane.

    Attributes
    ----------
    kind : str
    side : str
        "upper" or "lower".
    level : float
    r : (n_r,) array
        Radius of each column.
    theta : (n_sheets, n_r) array
        Colatitude of the crossings from the midplane outward; NaN where there are fewer.
    rising : (n_sheets, n_r) bool array
        Whether the number grows through the level going away from the midplane.
    count : (n_r,) int array
        Crossings of each column; 0 where it is never passed on this side.
    outermost : (n_r,) int array
        Which sheet is the outermost; -1 where there is none.
    """

    kind: str
    side: str
    level: float
    r: Array
    theta: Array
    rising: Array
    count: IntArray
    outermost: IntArray

    @property
    def height(self) -> Array:
        """|z| = r |cos(theta)| of the crossings, (n_sheets, n_r)."""
        return np.asarray(self.r * np.abs(np.cos(self.theta)))

    @property
    def outermost_theta(self) -> Array:
        """Colatitude of the outermost crossing, (n_r,); NaN without one."""
        if not len(self.theta):
            return np.full(len(self.r), np.nan)
        picked = np.take_along_axis(self.theta, np.maximum(self.outermost, 0)[None], axis=0)[0]
        return np.where(self.outermost >= 0, picked, np.nan)


def mach_surface(
    numbers: MachNumbers, kind: str = "alfven", *, level: float = 1.0
) -> tuple[MachSurface, MachSurface]:
    """All crossings of a Mach number, above and below the midplane.

    Parameters
    ----------
    numbers : MachNumbers
    kind : str
        "sonic", "alfven", "fast" or "slow".
    level : float
        1 for the critical surface.

    Returns
    -------
    upper, lower : MachSurface

    Raises
    ------
    FieldvizError

    Notes
    -----
    Linear in theta between cell middles of one column. The surface may fold, so every crossing is
    given; the outermost is the one that gas on its way out passes last.
    """
    if kind not in _KINDS:
        raise FieldvizError(
            f"Cannot find a Mach surface: expected one of {', '.join(_KINDS)}, got '{kind}'."
        )
    table = getattr(numbers, kind)
    if table is None:
        raise FieldvizError(
            f"Cannot find the {kind} surface: expected its Mach number, got a snapshot without it "
            f"({'; '.join(numbers.notes[1:])}); map the fields in a layout description."
        )
    found = [_column_crossings(numbers.mesh, table, i, level) for i in range(table.shape[1])]
    r = numbers.mesh.r
    upper = _surface(kind, "upper", level, r, [c[0] for c in found])
    return upper, _surface(kind, "lower", level, r, [c[1] for c in found])


Crossings = list[tuple[float, bool]]


def _column_crossings(
    mesh: MeridionalMesh, table: Array, i: int, level: float
) -> tuple[Crossings, Crossings]:
    """Crossings above and below, each from the midplane outward."""
    theta, values = mesh.column(table, i)
    # Infinite numbers (no field) count as beyond any level.
    over = np.clip(values, -1e300, 1e300) - level
    low, high = over[:-1], over[1:]
    with np.errstate(invalid="ignore"):
        crossed = np.flatnonzero((low > 0) != (high > 0))
    sides: tuple[Crossings, Crossings] = ([], [])
    for j in crossed:
        if not np.isfinite(low[j] + high[j]):
            continue
        at = theta[j] + low[j] / (low[j] - high[j]) * (theta[j + 1] - theta[j])
        below = at > _MIDPLANE
        sides[int(below)].append((float(at), bool((high[j] > 0) == below)))
    return sides[0][::-1], sides[1]


def _surface(kind: str, side: str, level: float, r: Array, columns: list[Crossings]) -> MachSurface:
    count = np.array([len(column) for column in columns])
    theta = np.full((count.max(initial=0), len(r)), np.nan)
    rising = np.zeros(theta.shape, dtype=bool)
    for i, column in enumerate(columns):
        for n, (at, grows) in enumerate(column):
            theta[n, i], rising[n, i] = at, grows
    return MachSurface(kind, side, level, r, theta, rising, count, count - 1)
