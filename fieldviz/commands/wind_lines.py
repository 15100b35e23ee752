"""What `fieldviz lines` says of streamlines of the wind: invariants and lever arms."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace

import numpy as np

from fieldviz.diagnostics.summary import median
from fieldviz.errors import MissingFieldError
from fieldviz.lines.critical_points import CriticalPoints, critical_points
from fieldviz.lines.line_set import LineSet
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["wind_lines", "wind_text"]

_INVARIANTS = ("k", "omega", "l", "e")
_WORDS = ("conserved", "roughly conserved", "not steady or not ideal", "not tested")


def wind_lines(
    snapshot: Snapshot, lines: LineSet, height: float
) -> tuple[LineSet, dict[str, object]]:
    """The lines with k, omega, l and e along them, and a summary of each side.

    Parameters
    ----------
    snapshot : Snapshot
    lines : LineSet
        Streamlines.
    height : float
        Where the wind is judged from, in H.

    Returns
    -------
    LineSet
    dict
        Fit for JSON; only "reason" where fields are missing.
    """
    try:
        points = critical_points(snapshot, lines, from_height=height)
    except MissingFieldError as error:
        return lines, {"reason": str(error)}
    found = points.invariants
    along = {f"invariant_{name}": getattr(found, name) for name in _INVARIANTS}
    sides = {}
    for side in ("upper", "lower"):
        mine = np.array([one == side for one in points.side])
        if mine.any():
            sides[side] = _side(points, mine)
    notes = list(dict.fromkeys((*found.notes, *points.notes)))
    return replace(lines, fields=lines.fields | along), {"sides": sides, "notes": notes}


def _side(points: CriticalPoints, mine: Array) -> dict[str, object]:
    chosen = np.flatnonzero(mine)
    crossed = {
        kind: int(np.isfinite(getattr(points, kind).r[mine]).sum())
        for kind in ("slow", "sonic", "alfven", "fast")
    }
    unmet = Counter(points.alfven.reason[n] for n in chosen if points.alfven.reason[n])
    words = {
        name: dict(Counter(points.invariants.statistics[name].word[n] for n in chosen))
        for name in _INVARIANTS
    }
    limit = points.lambda_A_is_limit[mine]
    return {
        "lines": len(chosen),
        "foot_radius_median": median(points.footpoint[mine]),
        "cross": crossed,
        "alfven_radius_median": median(points.alfven.R[mine]),
        "no_alfven_point": dict(unmet),
        "lever_arm_alfven_median": median(points.lambda_A[mine][~limit]),
        "lever_arm_alfven_lower_limits": int(limit.sum()),
        "lever_arm_momentum_median": median(points.lambda_l[mine]),
        "mass_load_kappa_median": median(points.kappa[mine]),
        "drift_words": words,
    }


def wind_text(summary: dict[str, object]) -> list[str]:
    """The summary as rows of plain text."""
    if "reason" in summary:
        return ["", f"wind      not judged: {summary['reason']}"]
    sides, notes = summary["sides"], summary["notes"]
    assert isinstance(sides, dict)
    assert isinstance(notes, list)
    rows = []
    for side, found in sides.items():
        cross = found["cross"]
        rows += [
            "",
            f"{side} wind, {found['lines']} streamlines, medians",
            f"  footpoint R_0    {_number(found['foot_radius_median'])}",
            f"  Alfven point R_A {_number(found['alfven_radius_median'])} (on {cross['alfven']}; "
            f"sonic on {cross['sonic']}, slow on {cross['slow']}, fast on {cross['fast']})",
            f"  lever arm        {_number(found['lever_arm_alfven_median'])} from (R_A/R_0)^2, "
            f"{_number(found['lever_arm_momentum_median'])} from l/(Omega_0 R_0^2); "
            f"{found['lever_arm_alfven_lower_limits']} lines only with a lower limit",
            f"  mass load kappa  {_number(found['mass_load_kappa_median'])}",
        ]
        for name, words in found["drift_words"].items():
            said = ", ".join(f"{word} on {words[word]}" for word in _WORDS if word in words)
            rows.append(f"  {name:5s}            {said}")
        rows += [f"  no Alfven point on {n}: {why}" for why, n in found["no_alfven_point"].items()]
    return [*rows, "", *notes]


def _number(value: float | None) -> str:
    return "none" if value is None else f"{value:.3g}"
