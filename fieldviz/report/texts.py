"""Numbers and words as they stand on the page and in the diagrams' captions."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence

__all__ = [
    "degrees_number",
    "listed",
    "plain_number",
    "readable",
    "sentence_case",
    "signed_degrees",
    "unit_text",
    "with_error",
]

_SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_PLAIN_WORD = re.compile(r"(a|[a-z]{2,})(-[a-z]+)?[,;:]?(\s|$)")
_E_NOTATION = re.compile(r"(?<![\w.])(-?\d+(?:\.\d+)?)e([+-]?\d+)\b")
_MINUS = "\N{MINUS SIGN}"
_LARGEST, _LEAST = 1e5, 1e-3  # beyond these a power of ten is written


def plain_number(value: float, digits: int = 4) -> str:
    """A number to so many digits; very large and small ones with a power of ten."""
    if isinstance(value, int):
        return f"{value:,}".replace(",", "\N{NARROW NO-BREAK SPACE}").replace("-", _MINUS)
    if not math.isfinite(value):
        return "not a number"
    if value == 0 or _LEAST <= abs(value) < _LARGEST:
        text = f"{value + 0.0:.{digits}g}"
        return (f"{value:.0f}" if "e" in text else text).replace("-", _MINUS)
    mantissa, exponent = f"{value:.{digits - 1}e}".split("e")
    if "." in mantissa:
        mantissa = mantissa.rstrip("0").rstrip(".")
    return _power(mantissa, int(exponent))


def _power(mantissa: str, exponent: int) -> str:
    raised = str(exponent).translate(_SUPERSCRIPTS)
    return f"{mantissa.replace('-', _MINUS)}\u00a0\N{MULTIPLICATION SIGN}\u00a010{raised}"


def readable(text: str) -> str:
    """A sentence in which numbers such as 2.6e-06 stand with a power of ten."""
    return _E_NOTATION.sub(lambda found: _power(found[1], int(found[2])), text)


def with_error(value: float | None, error: float | None) -> str:
    """A number, and its error where there is one; "undefined" where there is no number."""
    if value is None:
        return "undefined"
    text = plain_number(value)
    return text if error is None else f"{text} ± {plain_number(error, 2)}"


def degrees_number(angle: float) -> str:
    """An angle in degrees to a hundredth, for tables."""
    return f"{round(angle, 2) + 0.0:.2f}".replace("-", _MINUS)


def signed_degrees(angle: float | None) -> str:
    """An angle in degrees with its sign, to a tenth."""
    if angle is None:
        return "undefined"
    # Adding zero turns -0.0 into 0.0.
    return f"{round(angle, 1) + 0.0:+.1f}°".replace("-", _MINUS)


def unit_text(unit: str) -> str:
    """A unit with raised powers: "code length^-2" as "code length⁻²"."""
    words = []
    for word in unit.split(" "):
        base, mark, power = word.partition("^")
        raised = mark and power.lstrip("-").isdigit()
        words.append(base + power.translate(_SUPERSCRIPTS) if raised else word)
    return " ".join(words)


def sentence_case(text: str) -> str:
    """The text with a capital first letter, unless it is a symbol or a name, and a full stop."""
    if not text:
        return text
    head = text[0].upper() if _PLAIN_WORD.match(text) else text[0]
    return head + text[1:] + ("" if text[-1] in ".!?" else ".")


def listed(parts: Sequence[str]) -> str:
    """Words one after the other: "a, b and c"."""
    if len(parts) < 2:
        return "".join(parts)
    return f"{', '.join(parts[:-1])} and {parts[-1]}"
