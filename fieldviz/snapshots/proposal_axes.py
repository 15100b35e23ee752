"""Guess which axis of a dataset is which, from the lengths of the coordinates."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from fieldviz.snapshots.layout_tables import AXES

__all__ = ["Candidate", "Roles", "guess_roles"]

_MOST_GHOSTS = 8
_MOST_VARIABLES = 64


@dataclass(frozen=True)
class Candidate:
    """A dataset or attribute that may be a coordinate.

    Attributes
    ----------
    reference : str
    axis : str
    length : int
        Values along the axis.
    rows : int
        0 for one row for all blocks, else the number of rows.
    hint : str
        "edges", "centres", "bounds" or empty, from the name.
    doubt : str
        Why it may not be a coordinate, else empty.
    bounds : (float, float) or None
        The numbers themselves, where no single place in the file holds both.
    unit : str
    """

    reference: str
    axis: str
    length: int
    rows: int = 0
    hint: str = ""
    doubt: str = ""
    bounds: tuple[float, float] | None = None
    unit: str = ""


@dataclass(frozen=True)
class Roles:
    """A guess for one dataset.

    Attributes
    ----------
    order : tuple of str
        Role of each axis of the dataset.
    kinds : dict of str to (Candidate, str)
        For each axis the coordinate used, and "edges", "centres" or "bounds".
    ghosts : dict of str to int
    score : float
    doubt : str
        Why the order may be another one, else empty.
    """

    order: tuple[str, ...]
    kinds: dict[str, tuple[Candidate, str]] = field(default_factory=dict)
    ghosts: dict[str, int] = field(default_factory=dict)
    score: float = 0.0
    doubt: str = ""


@dataclass(frozen=True)
class FaceVote:
    """A face field that is longer by one than the main field.

    Attributes
    ----------
    axis : str
        Along which it is face-centred, by its name.
    dim : int
        Axis of the main field along which it is longer.
    left_out : int or None
        Axis of the main field that it lacks: that would count variables.
    """

    axis: str
    dim: int
    left_out: int | None = None

    def agrees(self, order: Sequence[str]) -> bool:
        """Whether an order of the main field's axes agrees with it."""
        lacks = self.left_out is None or order[self.left_out] == "variable"
        return lacks and order[self.dim] == self.axis


def guess_roles(
    shape: Sequence[int],
    candidates: Sequence[Candidate],
    *,
    block_lengths: frozenset[int] = frozenset(),
    variable_lengths: frozenset[int] = frozenset(),
    face_votes: Sequence[FaceVote] = (),
) -> Roles | None:
    """Find the most likely role of each axis.

    Parameters
    ----------
    shape : sequence of int
        Of the main field.
    candidates : sequence of Candidate
    block_lengths : frozenset of int
        Lengths that an axis counting blocks may have.
    variable_lengths : frozenset of int
        Lengths of the lists of names in the file.
    face_votes : sequence of FaceVote

    Returns
    -------
    Roles or None
        None where nothing fits.
    """
    found: list[Roles] = []
    for n_axes in (3, 2):
        names = AXES if n_axes == 3 else AXES[1:]
        for dims in itertools.permutations(range(len(shape)), n_axes):
            rest = _rest_roles(
                [n for n in range(len(shape)) if n not in dims],
                shape, block_lengths, variable_lengths,
            )  # fmt: skip
            for extra, extra_score in rest:
                roles = _fit(shape, dict(zip(names, dims, strict=True)), extra, candidates)
                if roles is None:
                    continue
                votes = 8 * sum(vote.agrees(roles.order) for vote in face_votes)
                penalty = 0 if n_axes == 3 else 15
                found.append(_with_score(roles, roles.score + extra_score + votes - penalty))
    if not found:
        return None
    # The usual order, slowest first, breaks a tie; it is said that it did.
    best_score = max(roles.score for roles in found)
    best = [roles for roles in found if roles.score == best_score]
    best.sort(key=lambda roles: _disorder(roles.order))
    doubt = ""
    others = {roles.order for roles in best} - {best[0].order}
    if others:
        doubt = f"{' or '.join(str(list(order)) for order in sorted(others)[:2])} fits as well"
    return Roles(best[0].order, best[0].kinds, best[0].ghosts, best_score, doubt)


def _with_score(roles: Roles, score: float) -> Roles:
    return Roles(roles.order, roles.kinds, roles.ghosts, score, roles.doubt)


def _disorder(order: Sequence[str]) -> tuple[int, int]:
    usual = ("variable", "block", *AXES)
    places = [usual.index(name) for name in order if name != "one"]
    inverted = [(a, b) for a, b in itertools.combinations(places, 2) if a > b]
    return sum(b > 0 for _, b in inverted), len(inverted)


def _rest_roles(
    dims: Sequence[int],
    shape: Sequence[int],
    block_lengths: frozenset[int],
    variable_lengths: frozenset[int],
) -> list[tuple[dict[int, str], float]]:
    """Roles that the axes which are no coordinate may have, each with its score."""
    choices: list[list[tuple[int, str, float]]] = []
    for dim in dims:
        length = shape[dim]
        options = []
        if length in block_lengths:
            options.append((dim, "block", 6.0))
        if length in variable_lengths:
            options.append((dim, "variable", 5.0))
        elif length <= _MOST_VARIABLES:
            options.append((dim, "variable", -5.0))
        if length == 1:
            options.append((dim, "one", 0.0))
        choices.append(options)
    combined = []
    for combination in itertools.product(*choices):
        names = [name for _, name, _ in combination if name != "one"]
        if len(set(names)) == len(names):
            combined.append(
                ({dim: name for dim, name, _ in combination}, sum(s for *_, s in combination))
            )
    return combined


def _fit(
    shape: Sequence[int],
    dims: Mapping[str, int],
    extra: Mapping[int, str],
    candidates: Sequence[Candidate],
) -> Roles | None:
    n_blocks = next((shape[dim] for dim, name in extra.items() if name == "block"), 0)
    kinds, ghosts, score = {}, {}, 0.0
    for axis, dim in dims.items():
        fits = [
            (value, candidate, kind, ghost)
            for candidate in candidates
            if candidate.axis == axis and candidate.rows in (0, 1, n_blocks)
            for kind, ghost, value in _axis_fits(shape[dim], candidate)
        ]
        if not fits:
            if axis == "phi" and shape[dim] == 1:
                continue
            return None
        value, candidate, kind, ghost = max(fits, key=lambda fit: fit[0])
        kinds[axis] = (candidate, kind)
        score += value
        if ghost:
            ghosts[axis] = ghost
    if "phi" not in dims:
        fits_phi = [c for c in candidates if c.axis == "phi" and c.length == 2]
        if fits_phi:
            kinds["phi"] = (fits_phi[0], "bounds")
    order = [""] * len(shape)
    for axis, dim in dims.items():
        order[dim] = axis
    for dim, name in extra.items():
        order[dim] = name
    return Roles(tuple(order), kinds, ghosts, score)


def _axis_fits(length: int, candidate: Candidate) -> list[tuple[str, int, float]]:
    """Ways in which a coordinate fits an axis: (kind, ghosts, score)."""
    if candidate.hint == "bounds":
        return [("bounds", 0, 4.0 if candidate.bounds or candidate.reference else 0.0)]
    found = []
    for kind, n in (("edges", candidate.length - 1), ("centres", candidate.length)):
        if candidate.hint not in ("", kind) or n < 1 or (kind == "centres" and n < 2):
            continue
        surplus = length - n
        score = 10.0 if kind == "edges" else 9.0
        if candidate.doubt:
            score -= 4.0
        if surplus == 0:
            found.append((kind, 0, score))
        elif 0 < surplus <= 2 * _MOST_GHOSTS and surplus % 2 == 0 and n > 1:
            found.append((kind, surplus // 2, score - 6.0))
    return found
