"""How constant a quantity is along the legs of lines."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from fieldviz.lines.wind_legs import Leg, LineState
from fieldviz.wedge.typing import Array

__all__ = ["CONSERVED", "ROUGHLY", "LineStatistics", "judge", "over_legs"]

CONSERVED, ROUGHLY = 0.05, 0.20  # drifts up to which a quantity is called so; our choice
_FEWEST_POINTS = 3


@dataclass(frozen=True, eq=False)
class LineStatistics:
    """How constant one quantity is along each leg; arrays are (n_lines,).

    Attributes
    ----------
    median : array
    drift : array
        (max - min)/(2 |median|).
    half_range : array
        (max - min)/2, in the quantity's own unit: for e, whose terms cancel, the safer number.
    slope : array
        Change of q/median from the leg's beginning to its end, by a straight line in arc length.
    word : tuple of str
        "conserved" below 5 %, "roughly conserved" up to 20 %, "not steady or not ideal" above;
        "not tested" where it is undefined.
    reason : tuple of str
        Why it was not tested, or how many points were left out; else empty.
    """

    median: Array
    drift: Array
    half_range: Array
    slope: Array
    word: tuple[str, ...]
    reason: tuple[str, ...]


def judge(
    state: LineState, legs: Sequence[Leg], values: Array, untested: Mapping[int, str]
) -> LineStatistics:
    """Median, drift, slope and word of a quantity on every leg; `untested` names lines left out."""
    n = len(legs)
    numbers = np.full((4, n), np.nan)
    words, reasons = ["not tested"] * n, [""] * n
    for number, leg in enumerate(legs):
        points = leg.points[state.inside[leg.points]]
        some = points[np.isfinite(values[points])]
        left_out = len(points) - len(some)
        if leg.reason or number in untested:
            reasons[number] = leg.reason or untested[number]
            continue
        if left_out:
            reasons[number] = f"{left_out} of {len(points)} points undefined"
        if len(some) < _FEWEST_POINTS or left_out > len(some):
            reasons[number] = reasons[number] or f"the leg has only {len(some)} points"
            continue
        numbers[:, number] = _numbers(values[some], state.arc[some])
        if np.isfinite(numbers[1, number]):
            words[number] = _word(numbers[1, number])
        else:
            reasons[number] = "the median is zero"
    median, drift, half_range, slope = numbers
    return LineStatistics(median, drift, half_range, slope, tuple(words), tuple(reasons))


def _numbers(values: Array, arc: Array) -> tuple[float, float, float, float]:
    """Median, drift, half range and slope."""
    middle, half = float(np.median(values)), 0.5 * float(np.ptp(values))
    if middle == 0:
        return middle, np.nan, half, np.nan
    share = np.abs(arc - arc[0])
    share = share / share.max() - 0.5 if share.max() > 0 else share
    centred = share - share.mean()
    spread = float(centred @ centred)
    slope = float(centred @ (values / middle)) / spread if spread > 0 else np.nan
    return middle, half / abs(middle), half, slope


def _word(drift: float) -> str:
    if drift < CONSERVED:
        return "conserved"
    return "roughly conserved" if drift <= ROUGHLY else "not steady or not ideal"


def over_legs(
    measure: Callable[[Array], float], state: LineState, legs: Sequence[Leg], values: Array
) -> Array:
    """One number of each leg from its finite values; NaN where there are none."""
    result = np.full(len(legs), np.nan)
    for number, leg in enumerate(legs):
        some = values[leg.points[state.inside[leg.points]]]
        some = some[np.isfinite(some)]
        if some.size:
            result[number] = measure(some)
    return result
