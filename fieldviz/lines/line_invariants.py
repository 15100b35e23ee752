"""What a steady, axisymmetric, ideal wind keeps constant along its lines, and how constant it is.

    k = rho v_p.B_p/B_p^2                      mass per magnetic flux, signed
    omega = (v_phi - k B_phi/rho)/R            rotation of the field line
    l = R (v_phi - B_phi/(mu0 k))              angular momentum per mass
    e = v^2/2 - GM/r + w - omega R B_phi/(mu0 k)   energy per mass

Mestel 1961; Weber & Davis 1967; Blandford & Payne 1982 (formulae re-derived, papers cited from
memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.lines.line_set import LineSet
from fieldviz.lines.line_statistics import (
    CONSERVED,
    ROUGHLY,
    LineStatistics,
    judge,
    over_legs,
)
from fieldviz.lines.wind_legs import (
    Leg,
    LineState,
    launch_angle,
    legs_from_slow_points,
    line_state,
    wind_legs,
)
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["LineInvariants", "LineStatistics", "line_invariants"]

LEAST_LOAD = 1e-3  # of the leg's largest |k|: below it l and e have no meaning; our choice
DEAD_MACH = 1e-6  # Alfven Mach number below which a leg counts as without flow; our choice
ISOTHERMAL = 0.01  # drift of P/rho up to which a leg counts as isothermal; our choice
_WORK = "work out what is conserved along lines"
_ENTHALPIES = ("auto", "adiabatic", "isothermal", "none")


@dataclass(frozen=True, eq=False)
class LineInvariants:
    """Invariants along lines; point arrays are (n,) as in the LineSet, NaN where undefined.

    Attributes
    ----------
    lines : LineSet
    k, omega, l, e : (n,) arrays
        Code units. l and e are NaN where |k| is below a thousandth of the leg's largest.
    entropy : (n,) array or None
        P/rho^gamma; None without gamma or pressure.
    misalignment : (n,) array
        |v_p x B_p|/(|v_p| |B_p|).
    statistics : dict of str to LineStatistics
        For "k", "omega", "l", "e", and "entropy" where it is there.
    misalignment_median, misalignment_largest : (n_lines,) arrays
        Over the leg.
    side : tuple of str
        "upper", "lower", "midplane"; empty for a line without points.
    on_leg : (n,) bool array
        Which points were judged: from the launching surface outward, but not beyond the outermost
        cell centres.
    launch : (n_lines, 2) array
        r and theta where the leg begins; NaN without a leg.
    legs : tuple of Leg
    state : LineState
        The azimuthal means along the lines.
    notes : tuple of str
        What the numbers rest on.
    """

    lines: LineSet
    k: Array
    omega: Array
    l: Array  # noqa: E741
    e: Array
    entropy: Array | None
    misalignment: Array
    statistics: dict[str, LineStatistics]
    misalignment_median: Array
    misalignment_largest: Array
    side: tuple[str, ...]
    on_leg: Array
    launch: Array
    legs: tuple[Leg, ...]
    state: LineState
    notes: tuple[str, ...]


def line_invariants(
    snapshot: Snapshot,
    lines: LineSet,
    *,
    from_height: float | str = 4.0,
    side: str = "auto",
    thickness: float | None = None,
    enthalpy: str = "auto",
    adiabatic_sound: bool = False,
    mass_weighted: bool = True,
) -> LineInvariants:
    """Work out k, omega, l and e along lines, and judge whether they are conserved.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `density`, the velocity and the magnetic field; `pressure` for the enthalpy.
    lines : LineSet
        Streamlines (of the velocity, best of its poloidal part) or field lines.
    from_height : float or "slow"
        Where legs begin: so many H from the midplane, clipped to the grid; 0 for the midplane
        itself; "slow" for the first slow point beyond the midplane.
    side : str
        "auto": the seed's side, or, for a seed below half that height, where the line leaves.
        "upper" or "lower" choose among the two halves of a field line.
    thickness : float, optional
        H/R; worked out from the snapshot by default.
    enthalpy : str
        "auto": adiabatic where gamma is known, else isothermal. "adiabatic":
        gamma P/((gamma - 1) rho). "isothermal": c_s^2 ln(rho/rho at the leg's beginning), only
        where P/rho is constant along the leg. "none": left out, as for a cold wind.
    adiabatic_sound : bool
        Slow points with c_s^2 = gamma P/rho instead of P/rho.
    mass_weighted : bool
        Mean velocities are <rho v>/<rho>; see `azimuth_mean`.

    Returns
    -------
    LineInvariants

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    All fields are means over azimuth, taken before anything is multiplied. Turning the field round
    changes the sign of k and nothing else.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.lines.line_invariants import line_invariants
    >>> disc = fv.demo_disc(shape=(1, 128, 160))
    >>> lines = fv.trace_lines(disc, "velocity", fv.wind_seeds(disc, 4), poloidal=True)
    >>> found = line_invariants(disc, lines, from_height=4.5)
    >>> found.statistics["omega"].word[0]
    'conserved'
    """
    gamma = sound_gamma(snapshot, adiabatic_sound)
    kind = _enthalpy_kind(snapshot, enthalpy)
    state = line_state(snapshot, lines, _WORK, mass_weighted=mass_weighted)
    slow = from_height == "slow"
    angle, where = launch_angle(snapshot, 0.0 if slow else from_height, thickness, _WORK)
    legs = wind_legs(lines, angle, side, _WORK)
    if slow:
        legs = legs_from_slow_points(state, legs, gamma)
        where = "legs begin at the first slow point beyond the midplane"
    k, omega, l, misalignment = _kinematics(snapshot, state)  # noqa: E741
    void = _void(state, legs, k)
    l = np.where(void.points, np.nan, l)  # noqa: E741
    w, untested = _enthalpy(snapshot, state, legs, kind)
    with np.errstate(divide="ignore", invalid="ignore"):
        square = state.v_r**2 + state.v_theta**2 + state.v_phi**2
        # omega (l - R v_phi) is -omega R B_phi/(mu0 k).
        e = 0.5 * square - snapshot.gm / state.r + w + omega * (l - state.R * state.v_phi)
    entropy = _entropy(snapshot, state)
    dead = {n: reason for n, reason in enumerate(void.reasons) if reason}
    judged = {
        "k": judge(state, legs, k, dead),
        "omega": judge(state, legs, omega, {}),
        "l": judge(state, legs, l, dead),
        "e": judge(state, legs, e, untested | dead),
    }
    if entropy is not None:
        judged["entropy"] = judge(state, legs, entropy, {})
    on_leg = np.zeros(len(k), dtype=bool)
    for leg in legs:
        on_leg[leg.points] = state.inside[leg.points]
    return LineInvariants(
        lines, k, omega, l, e, entropy, misalignment, judged,
        over_legs(np.median, state, legs, misalignment),
        over_legs(np.max, state, legs, misalignment),
        tuple(leg.side for leg in legs), on_leg,
        np.array([leg.launch for leg in legs]).reshape(-1, 2), tuple(legs), state,
        _notes(snapshot, legs, where, kind, mass_weighted, gamma, slow, k),
    )  # fmt: skip


def sound_gamma(snapshot: Snapshot, adiabatic: bool) -> float:
    """Gamma in c_s^2 = gamma P/rho: 1 unless the adiabatic sound speed is asked for."""
    if not adiabatic:
        return 1.0
    if snapshot.gamma is None:
        raise FieldvizError(
            f"Cannot {_WORK}: expected a snapshot with gamma for the adiabatic sound speed, got "
            "one without; give it gamma or use the isothermal sound speed."
        )
    return snapshot.gamma


def sound_note(gamma: float) -> str:
    """Which sound speed was meant."""
    factor = "" if gamma == 1 else f"{gamma:g} "
    return f"sound speed ({factor}P/rho)^(1/2)"


def _kinematics(snapshot: Snapshot, state: LineState) -> tuple[Array, Array, Array, Array]:
    """k, omega, l and the misalignment at all points."""
    along = state.v_r * state.b_r + state.v_theta * state.b_theta
    across = np.abs(state.v_r * state.b_theta - state.v_theta * state.b_r)
    with np.errstate(divide="ignore", invalid="ignore"):
        k = state.density * along / state.field**2
        omega = (state.v_phi - k * state.b_phi / state.density) / state.R
        l = state.R * (state.v_phi - state.b_phi / (snapshot.mu0 * k))  # noqa: E741
        misalignment = across / (state.speed * state.field)
    return k, omega, l, misalignment


@dataclass(frozen=True)
class _Void:
    """Points where k is too small for l and e, and the reason for legs without any flow."""

    points: Array
    reasons: list[str]


def _void(state: LineState, legs: list[Leg], k: Array) -> _Void:
    with np.errstate(divide="ignore", invalid="ignore"):
        mach = np.abs(k) * np.sqrt(state.mean.mu0 / state.density)
    points = np.ones(len(k), dtype=bool)
    reasons = []
    for leg in legs:
        # A line without a leg is measured by the whole of it.
        some = leg.points[state.inside[leg.points]]
        some = some if len(some) else leg.path
        load = np.abs(k[some])
        finite = np.isfinite(load)
        if not finite.any():
            reasons.append("no point with a finite mass load")
        elif not np.nanmax(mach[some]) >= DEAD_MACH:
            reasons.append(f"no flow along the field: Alfven Mach number below {DEAD_MACH:g}")
        else:
            reasons.append("")
            points[leg.path] = ~(np.abs(k[leg.path]) >= LEAST_LOAD * load[finite].max())
    return _Void(points, reasons)


def _enthalpy_kind(snapshot: Snapshot, wanted: str) -> str:
    if wanted not in _ENTHALPIES:
        raise FieldvizError(
            f"Cannot {_WORK}: expected enthalpy to be one of {', '.join(_ENTHALPIES)}, got "
            f"{wanted!r}."
        )
    ideal = snapshot.gamma is not None and snapshot.gamma > 1
    if wanted == "auto":
        return "adiabatic" if ideal else "isothermal"
    if wanted == "adiabatic" and not ideal:
        raise FieldvizError(
            f"Cannot {_WORK}: expected a snapshot with gamma above 1 for the adiabatic enthalpy, "
            f"got gamma {snapshot.gamma}; choose another enthalpy."
        )
    return wanted


def _enthalpy(
    snapshot: Snapshot, state: LineState, legs: list[Leg], kind: str
) -> tuple[Array, dict[int, str]]:
    """Enthalpy at all points, and why e is not tested on some lines."""
    if kind == "none":
        return np.zeros(len(state.r)), {}
    if state.pressure is None:
        reason = "no pressure for the enthalpy; for a cold wind ask for enthalpy 'none'"
        return np.full(len(state.r), np.nan), dict.fromkeys(range(len(legs)), reason)
    with np.errstate(divide="ignore", invalid="ignore"):
        temperature = state.pressure / state.density
    if kind == "adiabatic":
        assert snapshot.gamma is not None
        return snapshot.gamma / (snapshot.gamma - 1) * temperature, {}
    w, untested = np.full(len(state.r), np.nan), {}
    for number, leg in enumerate(legs):
        some = leg.points[state.inside[leg.points] & np.isfinite(temperature[leg.points])]
        if not some.size:
            continue
        middle = float(np.median(temperature[some]))
        drift = 0.5 * float(np.ptp(temperature[some])) / middle
        if not drift <= ISOTHERMAL:
            untested[number] = (
                f"P/rho drifts by {100 * drift:.3g} % along the leg, and without gamma the "
                "enthalpy is known only where it is constant"
            )
            continue
        with np.errstate(divide="ignore", invalid="ignore"):
            w[leg.path] = middle * np.log(state.density[leg.path] / state.density[some[0]])
    return w, untested


def _entropy(snapshot: Snapshot, state: LineState) -> Array | None:
    if snapshot.gamma is None or state.pressure is None:
        return None
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(state.pressure / state.density**snapshot.gamma)


def _notes(
    snapshot: Snapshot,
    legs: list[Leg],
    where: str,
    kind: str,
    mass_weighted: bool,
    gamma: float,
    slow: bool,
    k: Array,
) -> tuple[str, ...]:
    weight = "weighted with mass" if mass_weighted else "weighted with volume"
    enthalpies = {
        "adiabatic": "e with the enthalpy gamma P/((gamma - 1) rho)",
        "isothermal": "e with c_s^2 ln(rho/rho at the leg's beginning), where P/rho is constant to "
        f"{100 * ISOTHERMAL:g} %",
        "none": "e without enthalpy, as for a cold wind",
    }
    notes = [
        f"fields are means over azimuth, velocities {weight} ({snapshot.grid.azimuth_sentence})",
        where,
        enthalpies[kind],
        f"thresholds are our choice: drift below {100 * CONSERVED:g} % conserved, up to "
        f"{100 * ROUGHLY:g} % roughly; l and e undefined below {LEAST_LOAD:g} of the leg's "
        f"largest |k|",
    ]
    if slow:
        notes.append(sound_note(gamma))
    both = sum(leg.both for leg in legs)
    if both:
        notes.append(f"{both} lines leave on both sides: the upper half was taken, or ask by side")
    lost = sum(bool(leg.reason) for leg in legs)
    if lost:
        notes.append(f"{lost} of {len(legs)} lines have no leg")
    on_legs = np.concatenate([leg.points for leg in legs]) if legs else np.zeros(0, dtype=int)
    bad = int(np.count_nonzero(~np.isfinite(k[on_legs])))
    if bad:
        notes.append(f"{bad} of {len(on_legs)} points on legs have no finite mass load")
    return tuple(notes)
