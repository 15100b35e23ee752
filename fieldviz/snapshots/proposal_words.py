"""What names of datasets and variables usually mean in this trade."""

from __future__ import annotations

import re
from dataclasses import dataclass

__all__ = ["Meaning", "axis_of_name", "edge_or_centre", "meaning_of_name", "own_name", "tokens"]

_AXIS_WORDS = {
    "r": {"1", "r", "rad", "radius", "radii", "radial"},
    "theta": {
        "2", "theta", "th", "tht", "t", "polar", "colat", "colatitude", "lat", "latitude",
        "elevation",
    },
    "phi": {"3", "phi", "ph", "p", "az", "azimuth", "azimuthal", "lon", "longitude"},
}  # fmt: skip
_SHORT = {"t", "p"}  # One letter that may mean something else.
_EDGE_WORDS = {
    "edge", "edges", "e", "face", "faces", "f", "bound", "bounds", "boundary", "boundaries",
    "interface", "interfaces", "wall", "walls", "node", "nodes",
}  # fmt: skip
_CENTRE_WORDS = {
    "centre", "centres", "center", "centers", "c", "v", "mid", "mids", "middle", "middles", "cell",
    "cells",
}  # fmt: skip
_FILLERS = {
    "x", "grid", "coord", "coords", "coordinate", "coordinates", "axis", "axes", "log", "ln",
    "range", "limits", "extent", "domain", "deg", "degrees", "angle", "line", "lines",
    "values", "array",
}  # fmt: skip
_FIELD_FILLERS = {
    "gas", "x", "cell", "cells", "face", "faces", "cc", "f", "c", "centred", "centered",
    "component", "field", "fields", "fluid", "side", "staggered",
}  # fmt: skip
_DENSITY = {"rho", "dens", "density"}
_PRESSURE = {"press", "pressure", "prs", "pres"}
_VELOCITY = {"v", "vel", "velo", "velocity", "u"}
_MAGNETIC = {"b", "bfield", "mag", "magn", "magnetic"}
_DIFFUSIVITY = {"eta", "diffusivity", "resistivity", "diff"}
_AMBIPOLAR = {"a", "ad", "am", "ambi", "ambipolar"}
_OHMIC = {"o", "oh", "ohm", "ohmic"}


@dataclass(frozen=True)
class Meaning:
    """A field of the model that a name seems to stand for.

    Attributes
    ----------
    name : str
        Canonical name.
    doubt : str
        Why it may be wrong, else empty.
    """

    name: str
    doubt: str = ""


def tokens(name: str) -> list[str]:
    """Split the last part of a path into lower-case words and numbers."""
    last = name.rstrip("/").rpartition("/")[2]
    parted = re.sub(r"([a-z])([A-Z])", r"\1 \2", last)
    return re.findall(r"[a-z]+|\d+", parted.lower())


def _axis_of_token(token: str) -> str:
    for axis, words in _AXIS_WORDS.items():
        if token in words or (len(token) > 3 and token.removesuffix("s") in words):
            return axis
    return ""


def axis_of_name(name: str) -> str:
    """Name the coordinate ("r", "theta", "phi") that a name stands for, or give ""."""
    rest = [token for token in tokens(name) if token not in _EDGE_WORDS | _CENTRE_WORDS | _FILLERS]
    if len(rest) != 1:
        return ""
    token = re.sub(r"^(log|ln)(?=.)", "", rest[0])
    if token in _SHORT:
        return ""
    # "rf", "thc": an axis and one letter for edges or centres.
    return _axis_of_token(token) or (_axis_of_token(token[:-1]) if token[-1] in "fecv" else "")


def edge_or_centre(name: str) -> str:
    """Say whether a coordinate's name speaks of "edges" or "centres", or give ""."""
    words = set(tokens(name))
    words |= {
        word[-1]
        for word in tokens(name)
        if not _axis_of_token(word) and word[-1] in "fecv" and _axis_of_token(word[:-1])
    }
    if words & _EDGE_WORDS:
        return "edges"
    return "centres" if words & _CENTRE_WORDS else ""


def meaning_of_name(name: str) -> Meaning | None:
    """Find the field of the model that a dataset's or a variable's name stands for."""
    words = tokens(name)
    vector = _vector(words)
    if vector is not None:
        return vector
    rest = [word for word in words if word not in _FIELD_FILLERS]
    if len(rest) == 1 and rest[0] in _DENSITY:
        return Meaning("density")
    if len(rest) == 1 and rest[0] in _PRESSURE:
        return Meaning("pressure")
    if rest == ["d"]:
        return Meaning("density", "a single letter, taken for density")
    if rest == ["p"]:
        return Meaning("pressure", "a single letter, taken for pressure")
    return _diffusivity(set(rest))


def _vector(words: list[str]) -> Meaning | None:
    kept = [word for word in words if word not in _FIELD_FILLERS]
    if len(kept) == 1 and kept[0].isalpha():
        kept = _parted(kept[0])
    if len(kept) != 2:
        return None
    axis = _axis_of_token(kept[1])
    if not axis:
        return None
    doubt = f"'{kept[1]}' taken for {axis}" if kept[1] in _SHORT else ""
    if kept[0] in _VELOCITY:
        if kept[0] == "u":
            doubt = "'u' taken for velocity"
        return Meaning(f"velocity_{axis}", doubt)
    if kept[0] in _MAGNETIC:
        return Meaning(f"magnetic_{axis}", doubt)
    return None


def _parted(word: str) -> list[str]:
    """Part "vphi" into "v" and "phi"."""
    for prefix in sorted(_VELOCITY | _MAGNETIC, key=len, reverse=True):
        if word.startswith(prefix) and _axis_of_token(word[len(prefix) :]):
            return [prefix, word[len(prefix) :]]
    return [word]


def _diffusivity(words: set[str]) -> Meaning | None:
    if not words & _DIFFUSIVITY or len(words) > 2:
        return None
    doubt = "" if words & {"ambipolar", "ohmic"} else "which diffusivity it is"
    if words & _AMBIPOLAR:
        return Meaning("diffusivity_ambipolar", doubt)
    if words & _OHMIC or words == {"resistivity"}:
        return Meaning("diffusivity_ohmic", doubt)
    return None


def own_name(name: str) -> str:
    """Make a name for a field that is none of the model's own: letters, digits and _ kept."""
    return re.sub(r"\W+", "_", name.strip("/")).strip("_") or "field"
