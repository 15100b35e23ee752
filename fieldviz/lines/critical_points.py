"""Slow, sonic, Alfven and fast points of the wind along lines, footpoints and lever arms."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.lines.line_invariants import LineInvariants, line_invariants, sound_gamma, sound_note
from fieldviz.lines.line_set import LineSet
from fieldviz.lines.tracing import trace_lines
from fieldviz.lines.wind_legs import NOT_CROSSED, Crossing, Leg, LineState, first_crossing
from fieldviz.wedge.coordinates import cylindrical_components
from fieldviz.wedge.sampling import sample
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["CriticalPoints", "LinePoints", "critical_points"]

_MIDPLANE = 0.5 * np.pi
_ON_MIDPLANE = 1e-9  # radians
_WORK = "find critical points along lines"
_SURFACES = ("midplane", "surface")
_WAYS = ("line", "field")


@dataclass(frozen=True, eq=False)
class LinePoints:
    """One point on each line; arrays are (n_lines,), NaN where there is none.

    Attributes
    ----------
    r, theta : arrays
    arc : array
        Poloidal arc length from the beginning of the leg, code length.
    reason : tuple of str
        Why there is none; else empty.
    """

    r: Array
    theta: Array
    arc: Array
    reason: tuple[str, ...]

    @property
    def R(self) -> Array:  # noqa: N802
        """Distance from the axis."""
        return self.r * np.sin(self.theta)


@dataclass(frozen=True, eq=False)
class CriticalPoints:
    """Critical points and lever arms; arrays are (n_lines,), code units, NaN where undefined.

    Attributes
    ----------
    slow, sonic, alfven, fast : LinePoints
        First points, going outward from the launching surface, where the poloidal speed reaches
        the slow, sound, poloidal Alfven and fast speed.
    footpoint : array
        R_0.
    footpoint_from : tuple of str
        "line" or "field line" where R_0 is a crossing of the midplane, "surface" for the launching
        surface; empty without R_0.
    footpoint_reason : tuple of str
        Why there is no R_0; else empty.
    exit : array
        R where the line ends.
    lambda_A : array
        (R_A/R_0)^2, or its lower limit (R_exit/R_0)^2. NaN, as `lambda_l`, where no gas moves
        outward along the field.
    lambda_A_is_limit : bool array
        Where the Alfven point lies outside the grid.
    lambda_l : array
        l/(Omega_0 R_0^2) with the median of l and Kepler's Omega_0 at R_0. Equal to `lambda_A` for
        a steady ideal flow.
    kappa : array
        mu0 |k| v_K0/|B_z0| with the median of k and B_z at the footpoint: signs are left out, so
        that both sides compare.
    exit_speed : array
        Poloidal speed where the line leaves the outermost cell centres.
    energy_speed : array
        (2 e)^(1/2) with the median of e, where that is positive.
    cold_speed : array
        v_K0 (2 lambda_l - 3)^(1/2), where lambda_l > 3/2 (Ferreira 1997, from memory).
    side : tuple of str
    invariants : LineInvariants
        What k, l and e come from.
    notes : tuple of str
        What the numbers rest on.
    """

    slow: LinePoints
    sonic: LinePoints
    alfven: LinePoints
    fast: LinePoints
    footpoint: Array
    footpoint_from: tuple[str, ...]
    footpoint_reason: tuple[str, ...]
    exit: Array
    lambda_A: Array  # noqa: N815
    lambda_A_is_limit: Array  # noqa: N815
    lambda_l: Array
    kappa: Array
    exit_speed: Array
    energy_speed: Array
    cold_speed: Array
    side: tuple[str, ...]
    invariants: LineInvariants
    notes: tuple[str, ...]


def critical_points(
    snapshot: Snapshot,
    lines: LineSet,
    *,
    from_height: float | str = 4.0,
    side: str = "auto",
    thickness: float | None = None,
    enthalpy: str = "auto",
    adiabatic_sound: bool = False,
    mass_weighted: bool = True,
    footpoint_surface: str = "midplane",
    footpoint_along: str = "line",
) -> CriticalPoints:
    """Find where the wind passes its critical speeds, and its lever arms.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `density`, the velocity and the magnetic field; `pressure` for the slow, sonic and
        fast points.
    lines : LineSet
        Streamlines, best of the poloidal velocity.
    from_height, side, thickness, enthalpy, adiabatic_sound, mass_weighted
        As of `line_invariants`. Points that lie below `from_height` are not looked for.
    footpoint_surface : str
        "midplane", or "surface": where the leg begins.
    footpoint_along : str
        "line": R_0 is where the line itself comes from the midplane; one that does not is followed
        down along the poloidal field line through the beginning of its leg. "field": always so.

    Returns
    -------
    CriticalPoints

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    Speeds are poloidal, in the frame of the grid, from azimuthal means. Weber & Davis 1967;
    Blandford & Payne 1982; Pudritz & Norman 1986; kappa and lambda as of Blandford & Payne (all
    from memory). A point within half a cell of a wall counts as outside the grid.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.lines.critical_points import critical_points
    >>> disc = fv.demo_disc(shape=(1, 128, 160))
    >>> seeds = fv.wind_seeds(disc, 2, scale_heights=4.5, r_range=(1.2, 2.5))
    >>> found = critical_points(disc, fv.trace_lines(disc, "velocity", seeds, poloidal=True))
    >>> found.footpoint_from
    ('field line', 'field line')
    """
    _check(footpoint_surface, footpoint_along)
    found = line_invariants(
        snapshot,
        lines,
        from_height=from_height,
        side=side,
        thickness=thickness,
        enthalpy=enthalpy,
        adiabatic_sound=adiabatic_sound,
        mass_weighted=mass_weighted,
    )
    state, legs = found.state, found.legs
    gamma = sound_gamma(snapshot, adiabatic_sound)
    slow, sonic, alfven, fast = _points(state, legs, gamma)
    if footpoint_surface == "surface":
        foot = _Feet.at_launch(legs)
    else:
        foot = _footpoints(state, legs, footpoint_along)
    leave, exit_speed = _exits(state, legs)
    R_0 = foot.radius
    rotation = np.sqrt(snapshot.gm / R_0**3)
    lambda_A = (alfven.R / R_0) ** 2
    leaves = _leaves(state, legs) & np.isfinite(found.statistics["k"].median)
    # A point hidden by cells without a number may lie inside: no limit then.
    limit = np.array([reason == NOT_CROSSED for reason in alfven.reason], dtype=bool)
    limit &= leaves & np.isfinite(leave / R_0)
    lambda_A[~leaves] = np.nan
    lambda_A = np.where(limit, (leave / R_0) ** 2, lambda_A)
    lambda_l = np.where(leaves, found.statistics["l"].median / (rotation * R_0**2), np.nan)
    with np.errstate(divide="ignore", invalid="ignore"):
        kappa = snapshot.mu0 * np.abs(found.statistics["k"].median) * rotation * R_0
        kappa = kappa / np.abs(_vertical_field(state, foot.place))
        energy_speed = np.sqrt(2 * found.statistics["e"].median)
        cold_speed = rotation * R_0 * np.sqrt(2 * lambda_l - 3)
    return CriticalPoints(
        slow, sonic, alfven, fast, R_0, foot.source, foot.reason, leave, lambda_A, limit, lambda_l,
        kappa, exit_speed, energy_speed, cold_speed, found.side, found,
        (*found.notes, *_notes(foot, gamma, state, limit, leaves)),
    )  # fmt: skip


def _check(surface: str, along: str) -> None:
    for what, given, known in (
        ("footpoint_surface", surface, _SURFACES),
        ("footpoint_along", along, _WAYS),
    ):
        if given not in known:
            raise FieldvizError(
                f"Cannot {_WORK}: expected {what} to be one of {', '.join(known)}, got {given!r}."
            )


def _points(
    state: LineState, legs: Sequence[Leg], gamma: float
) -> tuple[LinePoints, LinePoints, LinePoints, LinePoints]:
    sound, both = state.sound_speed(gamma), state.magnetosonic_speeds(gamma)
    slow, fast = both or (None, None)
    a, b, c, d = (
        _gathered(state, legs, scale) for scale in (slow, sound, state.alfven_speed(), fast)
    )
    return a, b, c, d


def _gathered(state: LineState, legs: Sequence[Leg], scale: Array | None) -> LinePoints:
    """First crossings of all legs; without a scale all are absent, with the reason."""
    if scale is None:
        found = [Crossing(reason="the snapshot has no pressure") for _ in legs]
    else:
        found = [first_crossing(state, leg, state.speed, scale) for leg in legs]
    r, theta, arc = np.array([(p.r, p.theta, p.arc) for p in found]).reshape(-1, 3).T
    return LinePoints(r, theta, arc, tuple(p.reason for p in found))


@dataclass(frozen=True, eq=False)
class _Feet:
    """R_0 of every line, the place (r, theta) where it is, what it comes from or why it is not."""

    place: Array
    source: tuple[str, ...]
    reason: tuple[str, ...]

    @property
    def radius(self) -> Array:
        return np.asarray(self.place[:, 0] * np.sin(self.place[:, 1]))

    @classmethod
    def at_launch(cls, legs: Sequence[Leg]) -> _Feet:
        reasons = []
        for leg in legs:
            missing = "the line begins beyond the launching surface"
            reasons.append(leg.reason or ("" if leg.from_below else missing))
        place = np.array([leg.launch for leg in legs]).reshape(-1, 2)
        place[[bool(reason) for reason in reasons]] = np.nan
        return cls(place, tuple("" if r else "surface" for r in reasons), tuple(reasons))


def _footpoints(state: LineState, legs: Sequence[Leg], along: str) -> _Feet:
    radius = np.full(len(legs), np.nan)
    source, reason = [""] * len(legs), [leg.reason for leg in legs]
    if along == "line":
        for number, leg in enumerate(legs):
            radius[number] = _own_crossing(state, leg)
            if np.isfinite(radius[number]):
                source[number] = "line"
    rest = [n for n, leg in enumerate(legs) if not (source[n] or leg.reason)]
    for number, (R, why) in zip(rest, _along_field(state, [legs[n] for n in rest]), strict=True):
        radius[number], reason[number] = R, why
        source[number] = "" if why else "field line"
    place = np.column_stack([radius, np.where(np.isfinite(radius), _MIDPLANE, np.nan)])
    return _Feet(place, tuple(source), tuple(reason))


def _own_crossing(state: LineState, leg: Leg) -> float:
    """R of the midplane crossing next below the leg on the line itself, NaN if there is none."""
    if leg.reason:
        return np.nan
    down = leg.path[: leg.start + 1][::-1]
    height = leg.sign * (_MIDPLANE - state.theta[down])
    return _first_on_midplane(state.R[down], height)


def _first_on_midplane(R: Array, height: Array) -> float:
    """R where the height, going along the points, first falls to zero; linear between points."""
    reached = np.flatnonzero(height <= _ON_MIDPLANE)
    if not reached.size:
        return np.nan
    at = int(reached[0])
    if at == 0 or abs(height[at]) <= _ON_MIDPLANE:
        return float(R[at])
    share = height[at - 1] / (height[at - 1] - height[at])
    return float(R[at - 1] + share * (R[at] - R[at - 1]))


def _along_field(state: LineState, legs: list[Leg]) -> list[tuple[float, str]]:
    """R_0 along the mean poloidal field from where each leg begins, or why there is none."""
    grid = state.mean.grid
    low, high = grid.theta_range
    if not low <= _MIDPLANE <= high:
        return [(np.nan, "the grid does not hold the midplane")] * len(legs)
    if not legs:
        return []
    seeds = np.array([(*leg.launch, grid.phi_range[0]) for leg in legs])
    traced = trace_lines(state.mean, "magnetic", seeds, poloidal=True)
    found = []
    for number, leg in enumerate(legs):
        line, seed = traced.line(number), int(traced.seed_index[number])
        candidates = []
        # The way to the midplane is with or against the field: the nearer crossing counts.
        for way in (line[seed::-1], line[seed:]) if len(line) else ():
            R = way[:, 0] * np.sin(way[:, 1])
            height = leg.sign * (_MIDPLANE - way[:, 1])
            candidates.append((_first_on_midplane(R, height), R[0]))
        crossed = [R for R, _ in candidates if np.isfinite(R)]
        if crossed:
            found.append((min(crossed, key=lambda R: abs(R - candidates[0][1])), ""))
        else:
            ends = " and ".join(dict.fromkeys(traced.end_reason[number]))
            found.append((np.nan, f"the field line does not reach the midplane: ends at {ends}"))
    return found


def _exits(state: LineState, legs: Sequence[Leg]) -> tuple[Array, Array]:
    """R of the outer end of each leg, and the speed at its last point between cell centres."""
    R, speed = np.full(len(legs), np.nan), np.full(len(legs), np.nan)
    for number, leg in enumerate(legs):
        if len(leg.points):
            R[number] = state.R[leg.points[-1]]
            good = leg.points[state.inside[leg.points]]
            if len(good):
                speed[number] = state.speed[good[-1]]
    return R, speed


def _leaves(state: LineState, legs: Sequence[Leg]) -> Array:
    """Whether the gas moves outward along each leg, by the median over its points."""
    result = np.zeros(len(legs), dtype=bool)
    x = np.stack([state.R, state.r * np.cos(state.theta)])
    v = np.stack(cylindrical_components(state.v_r, state.v_theta, state.theta))
    for number, leg in enumerate(legs):
        points = leg.points[state.inside[leg.points]]
        if len(points) > 1:
            steps = np.diff(x[:, points], axis=1)
            outward = (steps * v[:, points[1:]]).sum(0)
            outward = outward[np.isfinite(outward)]
            result[number] = outward.size > 0 and np.median(outward) > 0
    return result


def _vertical_field(state: LineState, place: Array) -> Array:
    """B_z of the azimuthal mean at places (r, theta)."""
    points = np.column_stack([place, np.full(len(place), state.mean.grid.phi_range[0])])
    values, _ = sample(state.mean, points, ["magnetic_r", "magnetic_theta"])
    _, b_z = cylindrical_components(values["magnetic_r"], values["magnetic_theta"], points[:, 1])
    return b_z


def _notes(
    foot: _Feet, gamma: float, state: LineState, limit: Array, leaves: Array
) -> tuple[str, ...]:
    notes = []
    for source, words in (
        ("line", "where the line itself crosses the midplane"),
        ("field line", "where the poloidal field line through the leg's beginning crosses it"),
        ("surface", "where the leg begins, at the launching surface"),
    ):
        count = foot.source.count(source)
        if count:
            notes.append(f"R_0 of {count} of {len(foot.source)} lines: {words}")
    if limit.any():
        notes.append(
            f"{int(limit.sum())} lines do not reach their Alfven point: lambda_A is a lower limit"
        )
    if not leaves.all():
        notes.append(f"{int((~leaves).sum())} lines carry no outflow along the field: no lever arm")
    if state.pressure is None:
        notes.append("no slow, sonic and fast points: the snapshot has no pressure")
    else:
        notes.append(sound_note(gamma))
    notes.append("Omega_0 is Kepler's at R_0")
    return tuple(notes)
