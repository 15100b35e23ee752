"""The verdict on a wind, and one sentence that may be quoted.

Words, in this order: no wind, inflow, one-sided upper or lower, through-flow (in on one side, out
on the other), even (all pairs even), odd (gas leaves on both sides, bends opposite ways and
carries no net angular momentum), else mixed. That a physical disc wind is even and that winds of
local boxes come out odd is common practice, no source.
"""

from __future__ import annotations

from collections.abc import Sequence

from fieldviz.symmetry.pairs import Pair

__all__ = ["NAMING", "short_error", "verdict_sentence", "wind_word"]

NAMING = (
    "'even' here means mirror-symmetric for every quantity: wind outward on both sides, B_phi "
    "reversing at the midplane. Dynamo papers call that the dipole or 'A' type (their P = -1), and "
    "some papers call 'odd' the state whose B_phi does not reverse: say which quantity is meant."
)

_ONE_SIDED = {"upper only": "one-sided upper", "lower only": "one-sided lower"}
_MEANING = {
    "no wind": "no gas leaves through the two surfaces beyond a thousandth of the accretion rate",
    "inflow": "gas falls towards the midplane through both surfaces",
    "one-sided upper": "gas leaves above only",
    "one-sided lower": "gas leaves below only",
    "through-flow": "gas enters on one side and leaves on the other",
}
_EVEN_DOES = {
    "outflow": "leaves",
    "bend": "leans outward",
    "torque": "carries angular momentum away",
}


def wind_word(outflow: Pair, bend: Pair, torque: Pair | None) -> str:
    """Word of the whole wind from the words of its pairs."""
    early = {"none": "no wind", "inflow": "inflow", "odd": "through-flow", **_ONE_SIDED}
    if outflow.word in early:
        return early[outflow.word]
    others = [pair.word for pair in (bend, torque) if pair is not None]
    if outflow.word == "even" and all(word == "even" for word in others):
        return "even"
    if outflow.word == "even" and all(word == "odd" for word in others):
        return "odd"
    return "mixed"


def verdict_sentence(word: str, pairs: Sequence[Pair], caveats: Sequence[str]) -> str:
    """One sentence with the word, what it means here, and the angles that decide.

    Parameters
    ----------
    word : str
        From `wind_word`.
    pairs : sequence of Pair
        Those that could be judged, the outflow first.
    caveats : sequence of str
        What the sentence must not leave out, for example that the field is missing.

    Returns
    -------
    str
    """
    # Where the outflow decides, or all agree with it, its angle says enough.
    told = pairs if word in ("odd", "mixed") else pairs[:1]
    angles = ", ".join(f"{pair.name} angle {_angle(pair)}" for pair in told)
    rest = "; ".join([angles, *caveats])
    name = f"{word} wind" if word in ("even", "odd", "mixed") else word
    return f"{name}: {_meaning(word, pairs)} ({rest})"


def _meaning(word: str, pairs: Sequence[Pair]) -> str:
    if word in _MEANING:
        return _MEANING[word]
    names = [pair.name for pair in pairs]
    if word == "even":
        return f"gas {_listed([_EVEN_DOES[name] for name in names])} on both sides"
    if word == "odd":
        carries = ", and the field carries no net angular momentum" if "torque" in names else ""
        return f"gas leaves on both sides but bends opposite ways above and below{carries}"
    words = _listed([f"the {pair.name} is {pair.word}" for pair in pairs])
    settled = not {"mixed", "none"} & {pair.word for pair in pairs}
    return f"the pairs {'disagree' if settled else 'do not settle it'}: {words}"


def _listed(parts: Sequence[str]) -> str:
    return parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} and {parts[-1]}"


def short_error(error: float) -> str:
    """One decimal of a degree; one digit where that would be nothing."""
    return f"{error:.1f}" if error >= 0.05 or error == 0 else f"{error:.1g}"


def _angle(pair: Pair) -> str:
    if pair.angle != pair.angle:
        return "undefined"
    error = "" if pair.angle_error is None else f" ± {short_error(pair.angle_error)}"
    # Adding zero turns -0.0 into 0.0.
    return f"{round(pair.angle, 1) + 0.0:+.1f}{error} degrees"
