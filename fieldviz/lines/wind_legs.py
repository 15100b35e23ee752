"""The leg of a line that lies in the wind, the mean fields along it, and where speeds cross."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.mach import magnetosonic_speeds
from fieldviz.derived.thickness import disc_thickness
from fieldviz.errors import FieldvizError
from fieldviz.lines.azimuth_mean import azimuth_mean
from fieldviz.lines.line_set import LineSet
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.sampling import sample
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = [
    "NOT_CROSSED",
    "Crossing",
    "Leg",
    "LineState",
    "first_crossing",
    "launch_angle",
    "legs_from_slow_points",
    "line_state",
    "wind_legs",
]

NOT_CROSSED = "not crossed inside the grid"
_MIDPLANE = 0.5 * np.pi
_ON_SURFACE = 1e-9  # radians: a seed put on a cone counts as on it
_SEED_SHARE = 0.5  # of the launching angle: a seed at least so high belongs to its side
_AT_WALL = 1e-9  # of r, or radians: ends of lines may be a rounding beyond the wall
_SHARE_OF_RANGE = 0.9  # a launching surface beyond the grid is moved to this share of its reach


@dataclass(frozen=True, eq=False)
class LineState:
    """Azimuthal means at the points of lines; arrays are (n,), in code units.

    Attributes
    ----------
    mean : Snapshot
        The means themselves, one azimuth cell.
    r, theta, R : arrays
        R is the distance from the axis.
    arc : array
        Poloidal arc length from each line's first stored point: fields depend on r and theta only.
    inside : bool array
        Points within the outermost cell centres. In the half cell before a wall values are
        continued, not interpolated, so nothing is judged there.
    density, v_r, v_theta, v_phi, b_r, b_theta, b_phi : arrays
    pressure : array or None
    """

    mean: Snapshot
    r: Array
    theta: Array
    R: Array
    arc: Array
    inside: Array
    density: Array
    v_r: Array
    v_theta: Array
    v_phi: Array
    b_r: Array
    b_theta: Array
    b_phi: Array
    pressure: Array | None

    @property
    def speed(self) -> Array:
        """Poloidal speed."""
        return np.hypot(self.v_r, self.v_theta)

    @property
    def field(self) -> Array:
        """Strength of the poloidal field."""
        return np.hypot(self.b_r, self.b_theta)

    def sound_speed(self, gamma: float = 1.0) -> Array | None:
        """(gamma P/rho)^(1/2), None without pressure."""
        if self.pressure is None:
            return None
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.sqrt(gamma * self.pressure / self.density)

    def alfven_speed(self) -> Array:
        """Poloidal Alfven speed."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return self.field / np.sqrt(self.mean.mu0 * self.density)

    def magnetosonic_speeds(self, gamma: float = 1.0) -> tuple[Array, Array] | None:
        """Slow and fast speed along the poloidal field; None without pressure.

        See `fieldviz.derived.mach.magnetosonic_speeds`.
        """
        sound = self.sound_speed(gamma)
        if sound is None:
            return None
        poloidal = self.alfven_speed() ** 2
        with np.errstate(divide="ignore", invalid="ignore"):
            toroidal = self.b_phi**2 / (self.mean.mu0 * self.density)
            fast, slow = magnetosonic_speeds(sound**2, poloidal + toroidal, poloidal)
        return np.where(np.isfinite(fast), slow, np.nan), fast


@dataclass(frozen=True, eq=False)
class Leg:
    """The part of one line from its launching surface outward.

    Attributes
    ----------
    path : (m,) int array
        All points of the line, numbered as in the LineSet, ordered so that the outer end is last.
    start : int
        The leg is path[start:]; start = m where there is none.
    side : str
        "upper", "lower", or "midplane" for a line that never leaves it.
    launch : (r, theta)
        Where the leg begins, linear between points; NaN without a leg.
    from_below : bool
        Whether the line comes up through the launching surface, and does not begin beyond it.
    reason : str
        Why there is no leg; empty where there is one.
    both : bool
        Whether the line leaves on both sides and the upper one was taken.
    """

    path: IntArray
    start: int
    side: str
    launch: tuple[float, float] = (np.nan, np.nan)
    from_below: bool = False
    reason: str = ""
    both: bool = False

    @property
    def points(self) -> IntArray:
        """Numbers of the points of the leg, from the launching surface outward."""
        return self.path[self.start :]

    @property
    def sign(self) -> int:
        """1 above, -1 below the midplane."""
        return -1 if self.side == "lower" else 1


@dataclass(frozen=True)
class Crossing:
    """Where a Mach number reaches 1 on one leg; NaN with a reason where it does not."""

    r: float = np.nan
    theta: float = np.nan
    arc: float = np.nan
    reason: str = ""


def line_state(
    snapshot: Snapshot, lines: LineSet, work: str, *, mass_weighted: bool = True
) -> LineState:
    """Azimuthal means at all points of the lines.

    Raises
    ------
    MissingFieldError
        Without density, velocity or magnetic field.
    """
    snapshot.require(work, "density", *VELOCITY, *MAGNETIC)
    names = ["density", *VELOCITY, *MAGNETIC]
    if snapshot.has("pressure"):
        names.append("pressure")
    mean = azimuth_mean(snapshot, names, mass_weighted=mass_weighted)
    points = _within_walls(mean, lines.spherical)
    values, _ = sample(mean, points, names)
    r, theta = points[:, 0], points[:, 1]
    R, z = r * np.sin(theta), r * np.cos(theta)
    steps = np.hypot(np.diff(R, prepend=R[:1]), np.diff(z, prepend=z[:1]))
    total = np.cumsum(steps)
    first = np.minimum(lines.offsets[:-1], max(len(total) - 1, 0))
    begin = np.repeat(total[first] if len(total) else np.zeros(len(lines)), np.diff(lines.offsets))
    density, v_r, v_theta, v_phi, b_r, b_theta, b_phi = (values[name] for name in names[:7])
    return LineState(
        mean, r, theta, R, total - begin, _between_centres(mean, r, theta), density, v_r, v_theta,
        v_phi, b_r, b_theta, b_phi, values.get("pressure"),
    )  # fmt: skip


def _between_centres(mean: Snapshot, r: Array, theta: Array) -> Array:
    """Which points have cell centres on all sides; a lone row of cells counts as all its width."""
    good = np.ones(len(r), dtype=bool)
    for values, edges in ((r, mean.grid.r_edges[0]), (theta, mean.grid.theta_edges[0])):
        if len(edges) > 2:
            middles = centres(edges)
            good &= (values >= middles[0]) & (values <= middles[-1])
    return good


def _within_walls(mean: Snapshot, points: Array) -> Array:
    """Points a rounding beyond a wall put on it."""
    places = points.copy()
    for axis, (low, high) in enumerate((mean.grid.r_range, mean.grid.theta_range)):
        nearest = np.clip(places[:, axis], low, high)
        near = np.abs(nearest - places[:, axis]) <= _AT_WALL * max(1.0, high)
        places[near, axis] = nearest[near]
    return places


def launch_angle(
    snapshot: Snapshot, from_height: float | str, thickness: float | None, work: str
) -> tuple[float, str]:
    """Angle of the launching surfaces from the midplane, and a note on it.

    Parameters
    ----------
    snapshot : Snapshot
    from_height : float
        Height in H, 0 for the midplane; clipped to the grid.
    thickness : float or None
        H/R; worked out from the snapshot if it is needed and not given.
    work : str
        What it is for, for errors.
    """
    if isinstance(from_height, str) or not (np.isfinite(from_height) and from_height >= 0):
        raise FieldvizError(
            f"Cannot {work}: expected from_height to be a number of scale heights >= 0 or 'slow', "
            f"got {from_height!r}."
        )
    if from_height == 0:
        return 0.0, "legs begin at the midplane, or where a line begins"
    if thickness is not None and not 0 < thickness < 1:
        raise FieldvizError(
            f"Cannot {work}: expected a thickness H/R of 0 to 1, got {thickness}; leave it out and "
            "it is worked out."
        )
    h, source = thickness, "given"
    if h is None:
        measured = disc_thickness(snapshot)
        h, source = measured.h, f"from {measured.source}"
    up, down = snapshot.grid.theta_range
    angle = min(from_height * h, _SHARE_OF_RANGE * max(_MIDPLANE - up, down - _MIDPLANE))
    clipped = ", clipped to the grid" if angle < from_height * h * (1 - 1e-12) else ""
    return angle, (
        f"legs begin {angle / h:.3g} H ({angle:.4g} rad) from the midplane{clipped}, H/R = {h:.4g} "
        f"{source}"
    )


def wind_legs(lines: LineSet, angle: float, side: str, work: str) -> list[Leg]:
    """The leg of every line beyond cones at `angle` from the midplane.

    Parameters
    ----------
    lines : LineSet
    angle : float
        Radians, >= 0.
    side : str
        "auto": where the seed lies, or, for a seed below half the launching angle, where the line
        leaves; the upper side if it leaves on both. Or "upper", "lower".
    work : str
        What it is for, for errors.

    Returns
    -------
    list of Leg

    Notes
    -----
    A leg runs back from the line's end on that side as long as it stays beyond the surface. Of a
    line with both ends there, the end down the stream is taken, or the one farther from the star
    for a field line.
    """
    if side not in ("auto", "upper", "lower"):
        raise FieldvizError(
            f"Cannot {work}: expected side to be one of auto, upper, lower, got {side!r}."
        )
    return [_leg(lines, number, angle, side) for number in range(len(lines))]


def _leg(lines: LineSet, number: int, angle: float, wanted: str) -> Leg:
    path = np.arange(lines.offsets[number], lines.offsets[number + 1])
    if not len(path):
        return Leg(path, 0, "", reason="the line has no points")
    place = lines.spherical[path]
    height = _MIDPLANE - place[:, 1]
    sign, both = _side(height, int(lines.seed_index[number]), angle, wanted)
    side = "upper" if sign > 0 else "lower"
    if np.abs(height).max() < _ON_SURFACE:
        side = "midplane"
    beyond = sign * height >= angle - _ON_SURFACE
    if not (beyond[0] or beyond[-1]):
        return Leg(
            path, len(path), side,
            reason=f"the line does not end beyond the launching surface on the {side} side",
        )  # fmt: skip
    backward = beyond[0] and not beyond[-1]
    if beyond[0] and beyond[-1] and lines.name != "velocity":
        backward = place[0, 0] > place[-1, 0]
    if backward:
        path, place, height, beyond = path[::-1], place[::-1], height[::-1], beyond[::-1]
    inside = np.flatnonzero(~beyond)
    start = int(inside[-1]) + 1 if inside.size else 0
    launch = place[start, :2]
    if start:
        low, high = sign * height[start - 1], sign * height[start]
        share = np.clip((angle - low) / (high - low), 0.0, 1.0)
        launch = place[start - 1, :2] + share * (launch - place[start - 1, :2])
    from_below = start > 0 or abs(sign * height[0] - angle) <= _ON_SURFACE
    return Leg(path, start, side, (float(launch[0]), float(launch[1])), from_below, both=both)


def _side(height: Array, seed: int, angle: float, wanted: str) -> tuple[int, bool]:
    """1 above or -1 below, and whether the line leaves on both sides and the seed does not tell."""
    if wanted != "auto":
        return (1 if wanted == "upper" else -1), False
    if abs(height[seed]) >= _SEED_SHARE * angle and height[seed] != 0:
        return (1 if height[seed] > 0 else -1), False
    ends = height[[0, -1]]
    up, down = bool((ends > 0).any()), bool((ends < 0).any())
    if angle > 0:
        up = bool((ends >= angle - _ON_SURFACE).any())
        down = bool((ends <= -angle + _ON_SURFACE).any())
    return (-1 if down and not up else 1), up and down


def legs_from_slow_points(state: LineState, legs: list[Leg], gamma: float) -> list[Leg]:
    """The same legs cut to begin at their slow points; a leg without one is lost, and says why."""
    speeds = state.magnetosonic_speeds(gamma)
    cut = []
    for leg in legs:
        if leg.reason:
            cut.append(leg)
            continue
        if speeds is None:
            reason = "no slow point: the snapshot has no pressure"
            cut.append(Leg(leg.path, len(leg.path), leg.side, reason=reason))
            continue
        found = first_crossing(state, leg, state.speed, speeds[0])
        if found.reason:
            reason = f"no slow point: {found.reason}"
            cut.append(Leg(leg.path, len(leg.path), leg.side, reason=reason))
            continue
        beyond = np.abs(state.arc[leg.path] - state.arc[leg.points[0]]) >= found.arc * (1 - 1e-12)
        beyond[: leg.start] = False
        start = int(np.argmax(beyond))
        cut.append(Leg(leg.path, start, leg.side, (found.r, found.theta), True, both=leg.both))
    return cut


def first_crossing(state: LineState, leg: Leg, speed: Array, scale: Array) -> Crossing:
    """First point of a leg, going outward, where speed/scale reaches 1.

    Returns
    -------
    Crossing
        r and theta linear in the arc length between points; `arc` counts from the leg's first
        point.
    """
    points = leg.points[state.inside[leg.points]]
    if leg.reason or not len(points):
        return Crossing(reason=leg.reason or "the leg has no points between cell centres")
    with np.errstate(divide="ignore", invalid="ignore"):
        mach = speed[points] / scale[points]
    if not np.isfinite(mach).any():
        return Crossing(reason="the leg has no finite Mach number")
    reached = np.flatnonzero(mach >= 1)
    if not reached.size:
        gaps = np.count_nonzero(~np.isfinite(mach))
        hidden = f" ({gaps} of {len(mach)} points without a number)" if gaps else ""
        return Crossing(reason=NOT_CROSSED + hidden)
    at = int(reached[0])
    if at == 0:
        return Crossing(reason="already crossed where the leg begins; begin lower (from_height)")
    if not np.isfinite(mach[at - 1]):
        return Crossing(reason="crossed where there is no number")
    share = (1 - mach[at - 1]) / (mach[at] - mach[at - 1]) if np.isfinite(mach[at]) else 1.0
    before, after = points[at - 1], points[at]

    def between(values: Array) -> float:
        return float(values[before] + share * (values[after] - values[before]))

    arc = abs(between(state.arc) - float(state.arc[leg.points[0]]))
    return Crossing(between(state.r), between(state.theta), arc)
