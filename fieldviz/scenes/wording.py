"""Words and numbers as they stand on the page."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from matplotlib.ticker import MaxNLocator

from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = [
    "Scaled",
    "decade_ticks",
    "degrees_text",
    "even_ticks",
    "number_text",
    "power_text",
    "radius_ticks",
    "scaled",
    "time_text",
]

Scaled = tuple[float, str]


def number_text(value: float) -> str:
    """A number in up to three digits, with a true minus sign."""
    return f"{value:.3g}".replace("-", "\N{MINUS SIGN}")


def degrees_text(radians: float) -> str:
    """An angle in degrees, to a tenth at most."""
    degrees = round(float(np.degrees(radians)), 1)
    return f"{degrees:g}°".replace("-", "\N{MINUS SIGN}")


def power_text(symbol: str, exponent: float) -> str:
    """A power in mathematical notation without the dollar signs: R^{5/4}; empty for power 0."""
    if exponent == 0:
        return ""
    if exponent == 1:
        return rf"\,{symbol}"
    fraction = Fraction(exponent).limit_denominator(100)
    return rf"\,{symbol}^{{{fraction}}}"


def scaled(largest: float) -> Scaled:
    """A factor and a label that turn numbers up to `largest` into short ones.

    Returns
    -------
    (float, str)
        What to divide by, and the unit with its power of ten.
    """
    exponent = int(np.floor(np.log10(abs(largest)))) if largest else 0
    if -2 <= exponent <= 2:
        return 1.0, "code units"
    return 10.0**exponent, rf"$10^{{{exponent}}}$ code units"


def even_ticks(low: float, high: float, count: int = 5) -> list[tuple[float, str]]:
    """Round values between two ends, with their texts."""
    values = MaxNLocator(count, steps=[1, 2, 2.5, 5, 10]).tick_values(low, high)
    margin = 1e-9 * (high - low)
    return [(float(v), number_text(v)) for v in values if low - margin <= v <= high + margin]


def decade_ticks(low: float, high: float, most: int = 6) -> list[tuple[float, str]]:
    """Ticks between two decimal logarithms, with texts such as $10^{-3}$, or 0.2 and 0.5."""
    first, last = int(np.ceil(low - 1e-9)), int(np.floor(high + 1e-9))
    if last - first >= 2:
        step = int(np.ceil((last - first + 1) / most))
        decades = [n for n in range(first, last + 1) if (n - last) % step == 0]
        return [(float(n), rf"$10^{{{n}}}$") for n in decades]
    values = [(m, n) for n in range(first - 1, last + 1) for m in (1, 2, 5)]
    ticks = [(float(np.log10(m) + n), _small(m, n)) for m, n in values]
    return [(at, text) for at, text in ticks if low - 1e-9 <= at <= high + 1e-9]


def _small(mantissa: int, exponent: int) -> str:
    if -3 <= exponent <= 3:
        return f"{mantissa * 10.0**exponent:g}"
    head = "" if mantissa == 1 else rf"{mantissa}\times "
    return rf"${head}10^{{{exponent}}}$"


def radius_ticks(low: float, high: float, most: int = 6) -> Array:
    """Round radii that are well apart, on a linear scale."""
    values = MaxNLocator(most, steps=[1, 2, 5, 10]).tick_values(low, high)
    return np.array([v for v in values if v > 0 and low * 0.999 <= v <= high * 1.001])


def time_text(snapshot: Snapshot) -> str:
    """The snapshot's time: in orbits' units at R = 1, and in its own unit where there is one."""
    turns = snapshot.time * np.sqrt(snapshot.gm)
    text = rf"$t = {turns:.2f}\ \Omega_0^{{-1}}$"
    conversion = snapshot.units.conversion(time=1)
    if conversion is None:
        return text
    factor, label = conversion
    return f"{text} = {number_text(snapshot.time * factor)} {label}"
