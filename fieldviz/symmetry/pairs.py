"""Pairs of an upper and a lower number: score, angle, word.

The score is P = 2 u d/(u^2 + d^2) and q = smaller/larger in size. The score alone is not enough:
two infalling sides give +1, and it is flat near +1 (a ratio of 0.8 gives 0.976). The angle
a = atan2(d, u) - 45 degrees tells them apart: 0 both positive and equal, -45 upper only, +45
lower only, +-90 opposite, 180 both negative. Thresholds are our choice.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np

from fieldviz.wedge.typing import Array

if TYPE_CHECKING:
    from fieldviz.symmetry.jackknife import Errors

__all__ = [
    "Band",
    "Pair",
    "judge_pair",
    "pair_angle",
    "pair_angles",
    "pair_class",
    "pair_score",
    "pair_scores",
]

_EVEN_RATIO = 1.0 / 3.0  # the score is 0.6 there
_AGREEING_SHARE = 0.7
_NEGLIGIBLE = 1e-3
_LEAST_ERRORS = 3.0


@dataclass(frozen=True)
class Band:
    """One band of radii of a pair."""

    r_low: float
    r_high: float
    upper: float
    lower: float
    score: float
    angle: float
    word: str
    angle_error: float | None = None


@dataclass(frozen=True)
class Pair:
    """Upper and lower value of one quantity, and what they say.

    Attributes
    ----------
    name : str
        "outflow", "bend", "torque" or "lean".
    upper, lower : float
        Positive away from the midplane, away from the star, or taking angular momentum away.
        NaN where nothing on that side could be averaged.
    score : float
        P in [-1, 1]; NaN if both are zero.
    angle : float
        Degrees in (-180, 180].
    angle_error : float or None
        One standard error in degrees; None where it was not estimated. So are the other errors.
    word : str
        even, upper only, lower only, odd, reversed (inflow for the outflow), mixed, or none.
    scale : float
        Natural scale below a thousandth of which the pair counts as none.
    unit : str
        What the numbers are, in words.
    bands : tuple of Band
    notes : tuple of str
    upper_error, lower_error, score_error : float or None
        One standard error each.
    interval : (float, float) or None
        Two-sigma interval of the angle (95.4 %), degrees: two standard errors to either side,
        widened by Student's t for few blocks. May reach beyond 180.
    score_interval : (float, float) or None
        Scores that occur within it.
    error_source : str
        What the errors are from, or why there is no estimate.
    """

    name: str
    upper: float
    lower: float
    score: float
    angle: float
    angle_error: float | None
    word: str
    scale: float
    unit: str
    bands: tuple[Band, ...] = ()
    notes: tuple[str, ...] = field(default_factory=tuple)
    upper_error: float | None = None
    lower_error: float | None = None
    score_error: float | None = None
    interval: tuple[float, float] | None = None
    score_interval: tuple[float, float] | None = None
    error_source: str = "no estimate"


def pair_scores(upper: Array, lower: Array) -> Array:
    """P = 2 u d/(u^2 + d^2); NaN where both are zero or one is not finite. Any shape."""
    upper, lower = np.asarray(upper, dtype=np.float64), np.asarray(lower, dtype=np.float64)
    size = np.maximum(np.abs(upper), np.abs(lower))
    with np.errstate(invalid="ignore", divide="ignore"):
        u, d = upper / size, lower / size
        score = 2 * u * d / (u * u + d * d)
    return np.asarray(np.where(np.isfinite(size), score, np.nan) + 0.0)  # no -0.0


def pair_angles(upper: Array, lower: Array) -> Array:
    """atan2(d, u) - 45 degrees, in (-180, 180]; NaN as for `pair_scores`. Any shape."""
    upper, lower = np.asarray(upper, dtype=np.float64), np.asarray(lower, dtype=np.float64)
    angle = np.degrees(np.arctan2(lower, upper)) - 45.0
    angle = np.where(angle <= -180.0, angle + 360.0, angle)
    known = np.isfinite(upper) & np.isfinite(lower) & ((upper != 0) | (lower != 0))
    return np.asarray(np.where(known, angle, np.nan))


def pair_score(upper: float, lower: float) -> float:
    """P = 2 u d/(u^2 + d^2); NaN if both are zero or one is NaN."""
    return float(pair_scores(np.asarray(upper), np.asarray(lower)))


def pair_angle(upper: float, lower: float) -> float:
    """atan2(d, u) - 45 degrees, in (-180, 180]; NaN if both are zero or one is NaN."""
    return float(pair_angles(np.asarray(upper), np.asarray(lower)))


def pair_class(upper: float, lower: float, *, negative: str = "reversed") -> str:
    """Word of one pair of numbers; a NaN side counts as zero.

    Parameters
    ----------
    upper, lower : float
    negative : str
        Word for two negative sides, and for one negative side far larger than the other.

    Returns
    -------
    str
    """
    u, d = (0.0 if np.isnan(value) else value for value in (upper, lower))
    larger, smaller = (u, d) if abs(u) >= abs(d) else (d, u)
    if larger == 0:
        return "none"
    if abs(smaller) < _EVEN_RATIO * abs(larger):
        if larger < 0:
            return negative
        return "upper only" if abs(u) >= abs(d) else "lower only"
    if (u > 0) != (d > 0):
        return "odd"
    return "even" if u > 0 else negative


def judge_pair(
    name: str,
    totals: tuple[float, float],
    bands: tuple[Array, Array],
    band_edges: Array,
    *,
    scale: float,
    unit: str,
    notes: tuple[str, ...] = (),
    errors: Errors | None = None,
) -> Pair:
    """Put a pair together and give it its word.

    Parameters
    ----------
    name : str
    totals : (float, float)
        Upper and lower over all radii.
    bands : ((n,) array, (n,) array)
        Upper and lower by band.
    band_edges : (n + 1,) array
    scale : float
        Natural scale; a pair below a thousandth of it is "none".
    unit : str
    notes : tuple of str
    errors : Errors, optional

    Returns
    -------
    Pair
        Its word is "none" also below three errors, and "mixed" also where the interval of the
        angle reaches into another class.
    """
    negative = "inflow" if name == "outflow" else "reversed"
    upper, lower = totals
    angle = pair_angle(upper, lower)
    parts = _judged_bands(bands, band_edges, errors, negative)
    interval = None
    if errors is not None and errors.n_blocks and np.isfinite(angle + errors.half_width):
        interval = (angle - errors.half_width, angle + errors.half_width)
    word = pair_class(upper, lower, negative=negative)
    if _is_nothing(totals, scale, errors):
        word = "none"
    elif word != "none" and not (_bands_agree(parts) and _one_class(interval, negative)):
        word = "mixed"
    pair = Pair(
        name, upper, lower, pair_score(upper, lower), angle, None, word, scale, unit, parts, notes,
        interval=interval, score_interval=_scores_within(interval),
    )  # fmt: skip
    if errors is None:
        return pair
    return replace(
        pair,
        angle_error=_or_none(errors.angle) if interval is not None else None,
        upper_error=_or_none(errors.sides[0]),
        lower_error=_or_none(errors.sides[1]),
        score_error=_or_none(errors.score),
        error_source=errors.source,
    )


def _judged_bands(
    bands: tuple[Array, Array], band_edges: Array, errors: Errors | None, negative: str
) -> tuple[Band, ...]:
    angle_errors = np.full(len(bands[0]), np.nan) if errors is None else errors.band_angles
    return tuple(
        Band(
            float(low), float(high), float(u), float(d), pair_score(u, d), pair_angle(u, d),
            pair_class(u, d, negative=negative), _or_none(error),
        )
        for low, high, u, d, error in zip(
            band_edges[:-1], band_edges[1:], *bands, angle_errors, strict=True
        )
    )  # fmt: skip


def _is_nothing(totals: tuple[float, float], scale: float, errors: Errors | None) -> bool:
    """Whether a pair is below a thousandth of its scale or below three errors."""
    size = float(np.nansum(np.abs(totals)))
    error = 0.0 if errors is None else float(np.sqrt(np.nansum(errors.sides**2)))
    return size <= _NEGLIGIBLE * abs(scale) or size < _LEAST_ERRORS * error


def _or_none(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _within(interval: tuple[float, float]) -> Array:
    # Classes and the score's humps are wider than these steps of at most two degrees.
    low, high = interval
    return np.linspace(low, min(high, low + 360.0), 361)


def _one_class(interval: tuple[float, float] | None, negative: str) -> bool:
    if interval is None:
        return True
    turn = np.radians(_within(interval) + 45.0)
    pairs = zip(np.cos(turn), np.sin(turn), strict=True)
    return len({pair_class(u, d, negative=negative) for u, d in pairs}) == 1


def _scores_within(interval: tuple[float, float] | None) -> tuple[float, float] | None:
    """The score is cos(2 a)."""
    if interval is None:
        return None
    low, high = interval
    turns = np.arange(np.ceil(low / 90.0), np.floor(high / 90.0) + 1) * 90.0
    scores = np.cos(np.radians(2 * np.concatenate([interval, turns])))
    return float(scores.min()), float(scores.max())


def _bands_agree(bands: tuple[Band, ...]) -> bool:
    """Whether one class holds at least 70 % of the sum of sizes over bands."""
    weights: dict[str, float] = {}
    for band in bands:
        size = float(np.nansum(np.abs([band.upper, band.lower])))
        weights[band.word] = weights.get(band.word, 0.0) + size
    total = sum(weights.values())
    return total == 0 or max(weights.values()) >= _AGREEING_SHARE * total
