"""Lever arms of the wind three ways, beside the ejection index they would go with."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.lines.critical_points import CriticalPoints
from fieldviz.wedge.typing import Array
from fieldviz.wind.outflow import Outflow

__all__ = ["LeverArms", "SideLeverArms", "index_of_lever_arm", "lever_arms"]

AGREEMENT = 0.1  # relative difference up to which two lever arms are said to agree; our choice


@dataclass(frozen=True)
class SideLeverArms:
    """Lever arms of one side, in units of the Kepler value; NaN where undefined.

    Attributes
    ----------
    side : str
        "upper", "lower" or "both".
    n_lines : int
        Lines with a lever arm.
    lambda_A : float
        Mean of (R_A/R_0)^2 over lines.
    share_of_limits : float
        Share of the lines whose Alfven point lies outside the grid: lambda_A is a lower limit.
    lambda_l : float
        Mean of l/(Omega_0 R_0^2) over lines.
    lambda_eff : float
        Angular momentum over mass lost through the launching surface, over sqrt(GM r) there.
    lambda_eff_at_foot : float
        The same relative to sqrt(GM R_0), with the mean of (r/R_0)^(1/2) over lines: what
        compares with lambda_l.
    index_of_lambda_A, index_of_lambda_l, index_of_lambda_eff : float
        1/(2(lambda - 1)) of each; the first is an upper limit where lambda_A is a lower one. The
        last is of lambda_eff_at_foot.
    """

    side: str
    n_lines: int
    lambda_A: float  # noqa: N815
    share_of_limits: float
    lambda_l: float
    lambda_eff: float
    lambda_eff_at_foot: float
    index_of_lambda_A: float  # noqa: N815
    index_of_lambda_l: float
    index_of_lambda_eff: float

    @property
    def steady_ideal(self) -> bool | None:
        """Whether lambda_A and lambda_l agree to 10 %, as in steady ideal flow.

        None where either is missing, or lambda_A is a limit on half of the lines or more.
        """
        if not np.isfinite(self.lambda_A + self.lambda_l) or self.share_of_limits >= 0.5:
            return None
        return bool(abs(self.lambda_A / self.lambda_l - 1) <= AGREEMENT)


@dataclass(frozen=True)
class LeverArms:
    """Lever arms beside the ejection index.

    Attributes
    ----------
    upper, lower, total : SideLeverArms
    index, index_error : float
        Ejection index fitted to the accretion rate.
    index_of_wind : float
        Its global form from the wind of both sides.
    notes : tuple of str
    """

    upper: SideLeverArms
    lower: SideLeverArms
    total: SideLeverArms
    index: float
    index_error: float
    index_of_wind: float
    notes: tuple[str, ...]

    @property
    def sentence(self) -> str:
        """Both sides of xi = 1/(2(lambda - 1)) in one sentence."""
        both = self.total
        least = "at least " if both.share_of_limits > 0 else ""
        return (
            f"lever arm {least}{both.lambda_A:.3g} (Alfven points), {both.lambda_l:.3g} (specific "
            f"angular momentum), {both.lambda_eff_at_foot:.3g} (torque over mass loss), for which "
            f"a disc braked only by its wind has an ejection index of {both.index_of_lambda_A:.3g}"
            f", {both.index_of_lambda_l:.3g} and {both.index_of_lambda_eff:.3g}; measured "
            f"{self.index:.3g} ± {self.index_error:.2g}"
        )


def index_of_lever_arm(lever_arm: float) -> float:
    """1/(2(lambda - 1)): ejection index of a disc braked only by its wind (Ferreira 1997).

    NaN for a lever arm of 1 or less, with which a wind brakes nothing.
    """
    return 0.5 / (lever_arm - 1.0) if lever_arm > 1 else float("nan")


def lever_arms(wind: Outflow, points: CriticalPoints) -> LeverArms:
    """Put the lever arms of lines beside those of the whole flow; neither is fitted to the other.

    Parameters
    ----------
    wind : Outflow
    points : CriticalPoints
        Of the same snapshot, best of lines from `wind_seeds`: each then stands for the same mass
        of its side, and means over lines are means over mass.

    Returns
    -------
    LeverArms

    Notes
    -----
    Blandford & Payne 1982; Pudritz & Norman 1986; Ferreira 1997 (from memory).
    """
    sides = [
        _side(side, wind, points, np.array([s == side for s in points.side], dtype=bool))
        for side in ("upper", "lower")
    ]
    both = _side("both", wind, points, np.ones(len(points.side), dtype=bool))
    notes = [
        "means over lines; they are means over mass if the lines come from wind_seeds",
        "xi = 1/(2(lambda - 1)) holds where only the wind brakes the disc (Ferreira 1997): neither "
        "side of it was fitted to the other",
        *wind.lever_arm.notes,
        *points.notes,
    ]
    if wind.ejection.reason:
        notes.append(f"no ejection index: {wind.ejection.reason}")
    for side in sides:
        if side.share_of_limits > 0:
            notes.append(
                f"{side.side}: lambda_A is a lower limit on {100 * side.share_of_limits:.3g} % of "
                "the lines"
            )
        if not side.n_lines:
            notes.append(f"{side.side}: no line has a lever arm")
    return LeverArms(
        sides[0],
        sides[1],
        both,
        wind.ejection.value,
        wind.ejection.error,
        wind.ejection.total,
        tuple(dict.fromkeys(notes)),
    )


def _side(side: str, wind: Outflow, points: CriticalPoints, chosen: Array) -> SideLeverArms:
    known = chosen & np.isfinite(points.lambda_A)
    by_torque = getattr(wind.lever_arm, "total" if side == "both" else side)
    launch = np.array([leg.launch[0] for leg in points.invariants.legs])
    stretch = np.sqrt(launch / points.footpoint)
    alfven, angular = _mean(points.lambda_A[chosen]), _mean(points.lambda_l[chosen])
    at_foot = by_torque * _mean(stretch[known])
    return SideLeverArms(
        side,
        int(known.sum()),
        alfven,
        float(points.lambda_A_is_limit[known].mean()) if known.any() else float("nan"),
        angular,
        by_torque,
        at_foot,
        index_of_lever_arm(alfven),
        index_of_lever_arm(angular),
        index_of_lever_arm(at_foot),
    )


def _mean(values: Array) -> float:
    finite = values[np.isfinite(values)]
    return float(finite.mean()) if len(finite) else float("nan")
