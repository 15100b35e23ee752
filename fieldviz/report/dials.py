"""The three pairs of the wind as small pictures: a dial for the angle, two bars for the sides."""

from __future__ import annotations

import math
from typing import Any

from fieldviz.report.markup import Html, Piece, element, escaped
from fieldviz.report.texts import plain_number, signed_degrees, with_error

__all__ = ["EVEN_SECTOR", "pair_card"]

# q >= 1/3 with both sides positive: atan2 from 18.43 to 71.57 degrees, less 45.
EVEN_SECTOR = math.degrees(math.atan(3.0)) - 45.0
_RADIUS, _CENTRE = 46.0, (76.0, 76.0)
_WORDS = ((0, "even"), (-45, "upper"), (45, "lower"), (-90, "odd"), (90, "odd"), (180, "both in"))
_BAR_LEFT, _BAR_WIDTH, _BAR_LENGTH, _MIDDLE = 196.0, 34.0, 52.0, 76.0
_DEAD = 0.5  # units of the drawing below which a bar has no length to see
_MEANING = {
    "outflow": "Mass that leaves through the launching surface",
    "bend": "Mean radial velocity of the gas that leaves",
    "torque": "Angular momentum that the field takes away",
}


def pair_card(pair: dict[str, Any]) -> Html:
    """Picture and numbers of one pair.

    Parameters
    ----------
    pair : dict
        `Pair` as plain numbers.

    Returns
    -------
    Html
    """
    name, word = str(pair["name"]), str(pair["word"])
    angle = signed_degrees(pair["angle"])
    if pair["angle_error"] is not None:
        angle += f" ± {pair['angle_error']:.2g}°"
    rows = [
        ("upper", with_error(pair["upper"], pair["upper_error"])),
        ("lower", with_error(pair["lower"], pair["lower_error"])),
        ("angle", angle),
        ("score", "undefined" if pair["score"] is None else _score(pair["score"])),
    ]
    numbers = element(
        "dl", *(element("div", element("dt", key), element("dd", text)) for key, text in rows)
    )
    return element(
        "article",
        element("h3", name.capitalize(), " ", element("span", word, class_="word")),
        element("p", _MEANING.get(name, ""), class_="meaning"),
        _drawing(pair, f"{name}: {word}, angle {angle}; upper {rows[0][1]}, lower {rows[1][1]}"),
        numbers,
        element("p", str(pair["unit"]), class_="unit"),
        class_="pair",
    )


def _score(score: float) -> str:
    return f"{round(score, 3) + 0.0:+.3f}".replace("-", "\N{MINUS SIGN}")


def _drawing(pair: dict[str, Any], alt: str) -> Html:
    return element(
        "svg",
        element("title", alt),
        *_dial(pair),
        *_bars(pair["upper"], pair["lower"]),
        view_box="0 0 280 152",
        role="img",
        xmlns="http://www.w3.org/2000/svg",
    )


def _at(angle: float, radius: float) -> tuple[float, float]:
    """Place on the dial: 0 is up, positive angles turn clockwise, towards "lower"."""
    turn = math.radians(angle)
    return _CENTRE[0] + radius * math.sin(turn), _CENTRE[1] - radius * math.cos(turn)


def _arc(low: float, high: float, radius: float, class_: str) -> Html:
    high = min(high, low + 359.9)
    (x0, y0), (x1, y1) = _at(low, radius), _at(high, radius)
    path = f"M{x0:.2f} {y0:.2f}A{radius:g} {radius:g} 0 {int(high - low > 180)} 1 {x1:.2f} {y1:.2f}"
    return element("path", d=path, class_=class_)


def _dial(pair: dict[str, Any]) -> list[Piece]:
    cx, cy = _CENTRE
    parts: list[Piece] = [element("circle", cx=cx, cy=cy, r=_RADIUS, class_="rim")]
    parts.append(_arc(-EVEN_SECTOR, EVEN_SECTOR, _RADIUS, "even-sector"))
    for angle, word in _WORDS:
        x, y = _at(angle, _RADIUS + 6)
        anchor = "middle" if angle in (0, 180) else "start" if angle > 0 else "end"
        drop = {0: -1.0, 180: 9.0}.get(angle, 3.0)
        parts.append(element("text", word, x=round(x, 2), y=round(y + drop, 2),
                             text_anchor=anchor, class_="mark"))  # fmt: skip
    if pair["interval"] is not None:
        low, high = pair["interval"]
        parts.append(_arc(low, high, _RADIUS - 7, "interval"))
    if pair["angle"] is None:
        parts.append(element("text", "undefined", x=cx, y=cy + 3, text_anchor="middle",
                             class_="mark"))  # fmt: skip
        return parts
    x, y = _at(pair["angle"], _RADIUS - 4)
    line = element("line", x1=cx, y1=cy, x2=round(x, 2), y2=round(y, 2), class_="needle")
    return [*parts, line, element("circle", cx=cx, cy=cy, r=3.5, class_="hub")]


def _bars(upper: float | None, lower: float | None) -> list[Piece]:
    """Bars away from the midplane, in length to each other; hollow where the number is negative."""
    largest = max(abs(upper or 0.0), abs(lower or 0.0))
    left, right = _BAR_LEFT - 12, _BAR_LEFT + _BAR_WIDTH + 12
    parts: list[Piece] = [
        element("line", x1=left, y1=_MIDDLE, x2=right, y2=_MIDDLE, class_="midplane")
    ]
    for side, value, up in (("upper", upper, -1), ("lower", lower, 1)):
        length = 0.0 if not largest or value is None else _BAR_LENGTH * abs(value) / largest
        top = _MIDDLE - length if up < 0 else _MIDDLE
        if length > _DEAD and value is not None:
            kind = side if value > 0 else f"{side} negative"
            parts.append(element("rect", x=_BAR_LEFT, y=round(top, 2), width=_BAR_WIDTH,
                                 height=round(length, 2), class_=kind))  # fmt: skip
            parts.append(_arrow(_MIDDLE + up * 0.5 * length, up if value > 0 else -up, length))
        text = "none" if value is None else plain_number(float(value), 3)
        parts.append(element("text", text, x=_BAR_LEFT + 0.5 * _BAR_WIDTH,
                             y=round(_MIDDLE + up * (length + 6) + (0 if up < 0 else 7), 2),
                             text_anchor="middle", class_="mark"))  # fmt: skip
        parts.append(element("text", side, x=right + 2, y=_MIDDLE + (14 if up > 0 else -8),
                             class_="mark"))  # fmt: skip
    return parts


def _arrow(y: float, towards: int, length: float) -> Html:
    if length < 14:
        return escaped(None)
    x = _BAR_LEFT + 0.5 * _BAR_WIDTH
    tip, foot = y + 5 * towards, y - 5 * towards
    path = f"M{x:g} {foot:.2f}L{x:g} {tip:.2f}M{x - 4:g} {tip - 4 * towards:.2f}"
    return element("path", d=f"{path}L{x:g} {tip:.2f}L{x + 4:g} {tip - 4 * towards:.2f}",
                   class_="arrow")  # fmt: skip
