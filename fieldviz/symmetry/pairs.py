"""Pairs of an upper and a lower number: score, angle, word.

The score is P = 2 u d/(u^2 + d^2) and q = smaller/larger in size. The score alone is not enough:
two infalling sides give +1, and it is flat near +1 (a ratio of 0.8 gives 0.976). The angle
a = atan2(d, u) - 45 degrees tells them apart: 0 both positive and equal, -45 upper only, +45
lower only, +-90 opposite, 180 both negative. Thresholds are our choice.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from fieldviz.wedge.typing import Array

__all__ = ["Band", "Pair", "judge_pair", "pair_angle", "pair_class", "pair_score"]

_EVEN_RATIO = 1.0 / 3.0  # the score is 0.6 there
_AGREEING_SHARE = 0.7
_NEGLIGIBLE = 1e-3


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


@dataclass(frozen=True)
class Pair:
    """Upper and lower value of one quantity, and what they say.

    Attributes
    ----------
    name : str
        "outflow", "bend" or "torque".
    upper, lower : float
        Positive away from the midplane, away from the star, or taking angular momentum away.
        NaN where nothing on that side could be averaged.
    score : float
        P in [-1, 1]; NaN if both are zero.
    angle : float
        Degrees in (-180, 180].
    angle_error : float or None
        One standard error in degrees; None where it was not estimated.
    word : str
        even, upper only, lower only, odd, reversed (inflow for the outflow), mixed, or none.
    scale : float
        Natural scale below a thousandth of which the pair counts as none.
    unit : str
        What the numbers are, in words.
    bands : tuple of Band
    notes : tuple of str
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


def pair_score(upper: float, lower: float) -> float:
    """P = 2 u d/(u^2 + d^2); NaN if both are zero or one is NaN."""
    size = max(abs(upper), abs(lower))
    if not np.isfinite(size) or size == 0:
        return float("nan")
    u, d = upper / size, lower / size
    return float(2 * u * d / (u * u + d * d)) + 0.0  # no -0.0


def pair_angle(upper: float, lower: float) -> float:
    """atan2(d, u) - 45 degrees, in (-180, 180]; NaN if both are zero or one is NaN."""
    if not np.isfinite(upper + lower) or (upper == 0 and lower == 0):
        return float("nan")
    angle = np.degrees(np.arctan2(lower, upper)) - 45.0
    return float(angle + 360.0 if angle <= -180.0 else angle)


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

    Returns
    -------
    Pair
    """
    negative = "inflow" if name == "outflow" else "reversed"
    upper, lower = totals
    parts = tuple(
        Band(
            float(low), float(high), float(u), float(d),
            pair_score(u, d), pair_angle(u, d), pair_class(u, d, negative=negative),
        )
        for low, high, u, d in zip(band_edges[:-1], band_edges[1:], *bands, strict=True)
    )  # fmt: skip
    word = pair_class(upper, lower, negative=negative)
    if np.nansum(np.abs(totals)) <= _NEGLIGIBLE * abs(scale):
        word = "none"
    elif word != "none" and not _bands_agree(parts):
        word = "mixed"
    return Pair(
        name, upper, lower, pair_score(upper, lower), pair_angle(upper, lower), None, word,
        scale, unit, parts, notes,
    )  # fmt: skip


def _bands_agree(bands: tuple[Band, ...]) -> bool:
    """Whether one class holds at least 70 % of the sum of sizes over bands."""
    weights: dict[str, float] = {}
    for band in bands:
        size = float(np.nansum(np.abs([band.upper, band.lower])))
        weights[band.word] = weights.get(band.word, 0.0) + size
    total = sum(weights.values())
    return total == 0 or max(weights.values()) >= _AGREEING_SHARE * total
