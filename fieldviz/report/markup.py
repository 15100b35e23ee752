"""HTML from pieces: texts become markup in one place, which escapes what is not ours."""

from __future__ import annotations

import html
import re
from collections.abc import Iterable

__all__ = ["Html", "Piece", "clean", "element", "escaped", "joined"]

# Control characters, lone surrogates of odd file names, and marks that turn the order of letters.
_UNFIT = re.compile(
    "[\x00-\x08\x0b-\x1f\x7f-\x9f\ud800-\udfff\u202a-\u202e\u2066-\u2069\ufffe\uffff]"
)
_EMPTY = frozenset({"br", "img", "link", "meta", "source"})


class Html(str):
    """Text that is markup already and is not escaped again."""

    __slots__ = ()


Piece = Html | str | None


def clean(text: str) -> str:
    """The text with what has no place on a page replaced by a mark."""
    return _UNFIT.sub("\N{REPLACEMENT CHARACTER}", text)


def escaped(piece: Piece) -> Html:
    """Markup for a piece: `Html` as it is, any other text escaped, nothing for None."""
    if isinstance(piece, Html):
        return piece
    return Html("" if piece is None else html.escape(clean(piece), quote=True))


def joined(pieces: Iterable[Piece], between: str = "") -> Html:
    """Pieces one after the other."""
    return Html(str(escaped(between)).join(escaped(piece) for piece in pieces))


def element(name: str, /, *children: Piece, **attributes: str | int | float | None) -> Html:
    """One element.

    Parameters
    ----------
    name : str
        Tag.
    *children : Html, str or None
        Texts are escaped.
    **attributes : str, number or None
        `class_` stands for class, other underscores for hyphens, but view_box for viewBox; None
        leaves an attribute out, an empty text is written.

    Returns
    -------
    Html
    """
    words = [name]
    for key, value in attributes.items():
        if value is not None:
            text = f"{value:g}" if isinstance(value, float) else str(value)
            words.append(f'{_attribute(key)}="{escaped(str(text))}"')
    head = Html(f"<{' '.join(words)}>")
    if name in _EMPTY:
        return head
    return Html(f"{head}{joined(children)}</{name}>")


def _attribute(key: str) -> str:
    return "viewBox" if key == "view_box" else key.rstrip("_").replace("_", "-")
