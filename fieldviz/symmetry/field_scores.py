"""How even or odd each field is about the midplane: scores of azimuth means and of full fields.

P = (E+ - E-)/(E+ + E-) with E+- = int w [(f +- s f*)/2]^2 dV, f* the value at the mirror point and
s the sign that the mirror gives the quantity: 1 for a mirror-symmetric disc whatever the quantity.
After Brandenburg et al. 1989 (from memory), with signs such that our "even" is +1 for all.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from fieldviz.symmetry.full_energies import full_energies
from fieldviz.symmetry.mean_tables import (
    SPLIT,
    MeanTables,
    log_even_mean,
    mean_tables,
    weights_of,
)
from fieldviz.symmetry.mirror import MIRROR_SIGNS, TableMirror, table_mirror
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["FieldScore", "FieldScoreBand", "FieldScores", "field_scores", "field_word"]

EVEN_SCORE = 0.6
# A mean below a hundred thousandth of the full field is what is left of single precision.
_ROUNDING = 1e-10

Energies = dict[str, Array]


@dataclass(frozen=True)
class FieldScoreBand:
    """Scores of one quantity in one band of radii."""

    r_low: float
    r_high: float
    score: float
    full_score: float
    word: str


@dataclass(frozen=True)
class FieldScore:
    """Scores of one quantity.

    Attributes
    ----------
    name : str
    sign : int
        What a mirror-symmetric disc does to it: +1 keeps, -1 turns the sign as a plain function.
    score : float
        P of the azimuth mean; NaN where there is nothing, or only rounding.
    full_score : float
        P of the full field: turbulence draws it towards 0.
    word : str
        even, odd, mixed, none; of the azimuth mean.
    bands : tuple of FieldScoreBand
    """

    name: str
    sign: int
    score: float
    full_score: float
    word: str
    bands: tuple[FieldScoreBand, ...]


@dataclass(frozen=True)
class FieldScores:
    """Scores of all quantities of a snapshot; `scores["magnetic_phi"]` is one of them.

    Attributes
    ----------
    scores : tuple of FieldScore
    weight, region : str
        How cells were weighted, and which ones.
    notes : tuple of str
    """

    scores: tuple[FieldScore, ...]
    weight: str
    region: str
    notes: tuple[str, ...]

    def __getitem__(self, name: str) -> FieldScore:
        for score in self.scores:
            if score.name == name:
                return score
        raise KeyError(f"no score of '{name}', only of {', '.join(s.name for s in self.scores)}")


def field_word(score: float) -> str:
    """Word of a score: even from 0.6 up, odd from -0.6 down, mixed between; none for NaN."""
    if np.isnan(score):
        return "none"
    if abs(score) >= EVEN_SCORE:
        return "even" if score > 0 else "odd"
    return "mixed"


def field_scores(
    snapshot: Snapshot,
    *,
    h: float,
    reach: float,
    band_edges: Array,
    weight: str = "wind",
    region: str = "wind",
    current: bool = False,
) -> FieldScores:
    """Score every field that is there.

    Parameters
    ----------
    snapshot : Snapshot
        Needs density and velocity.
    h : float
        H/R.
    reach : float
        Angle from the midplane up to which both sides have data, radians.
    band_edges : (n_bands + 1,) array
        Radii.
    weight : str
        "wind": mass flux |rho v_p| of the azimuth mean, the mean of both sides; "volume".
    region : str
        "wind": beyond 2 H; "disc": within 2 H; "all".
    current : bool
        The current density as well; it is worked out for the whole snapshot at once.

    Returns
    -------
    FieldScores

    Raises
    ------
    MissingFieldError, FieldvizError

    Examples
    --------
    >>> import numpy as np, fieldviz as fv
    >>> from fieldviz.symmetry.field_scores import field_scores
    >>> disc = fv.demo_disc(shape=(2, 48, 24), wind="through-flow")
    >>> scores = field_scores(disc, h=0.1, reach=0.7, band_edges=np.array([1.0, 5.0]))
    >>> scores["magnetic_phi"].word, scores["magnetic_theta"].word
    ('odd', 'even')
    """
    tables = mean_tables(snapshot, h, reach, band_edges, current=current)
    energies = field_energies(snapshot, tables, weight=weight, region=region)
    return scores_of_energies(energies, band_edges, weight, region, tables.notes)


def field_energies(
    snapshot: Snapshot, tables: MeanTables, *, weight: str = "wind", region: str = "wind"
) -> Energies:
    """E+ and E- of every quantity.

    Returns
    -------
    dict of name to (2, 2, n_bands) array
        First index: azimuth mean, full field. Second: E+, E-.
    """
    mirror = table_mirror(tables.mesh)
    weights = weights_of(tables, mirror, weight, region)
    means = mean_energies(tables, mirror, weights, tuple(tables.means))
    even_mean = log_even_mean(tables, mirror, weights)
    full = full_energies(snapshot, tables, weights, even_mean)
    return {name: np.stack([means[name], full[name]]) for name in means}


def mean_energies(
    tables: MeanTables, mirror: TableMirror, weights: Array, names: tuple[str, ...]
) -> Energies:
    """E+ and E- of the azimuth means of some quantities, (2, n_bands) each."""
    found = {}
    for name in names:
        value = tables.means[name]
        base = np.zeros(1)
        if name == "density":
            value, base = np.log(value), log_even_mean(tables, mirror, weights)
        value, other = value - base, mirror(value) - base
        halves = _halves(weights, value, MIRROR_SIGNS[name] * other)
        found[name] = np.stack([tables.in_bands(half) for half in halves])
    return found


def _halves(weights: Array, value: Array, other: Array) -> tuple[Array, Array]:
    """Work out w (f +- f*)^2/4; zero where either is no number."""
    known = np.isfinite(value) & np.isfinite(other) & (weights > 0)
    f, g = np.where(known, value, 0.0), np.where(known, other, 0.0)
    return weights * (0.5 * (f + g)) ** 2, weights * (0.5 * (f - g)) ** 2


def scores_of_energies(
    energies: Mapping[str, Array],
    band_edges: Array,
    weight: str,
    region: str,
    notes: tuple[str, ...] = (),
) -> FieldScores:
    """Turn E+ and E- into scores and words."""
    found = []
    for name, pair in energies.items():
        total, bands = _score(pair.sum(-1)), _score(pair)
        parts = tuple(
            FieldScoreBand(float(low), float(high), float(mean), float(full), field_word(mean))
            for low, high, mean, full in zip(band_edges[:-1], band_edges[1:], *bands, strict=True)
        )
        sign = MIRROR_SIGNS[name]
        found.append(
            FieldScore(name, sign, float(total[0]), float(total[1]), field_word(total[0]), parts)
        )
    where = {
        "wind": f"beyond {SPLIT:g} H from the midplane",
        "disc": f"within {SPLIT:g} H of the midplane",
        "all": "at all heights that both sides reach",
    }[region]
    how = {"wind": "mass flux |rho v_p|, the mean of both sides", "volume": "volume"}[weight]
    return FieldScores(
        tuple(found),
        weight,
        region,
        (
            f"field scores {where}, weighted by {how}; words: even from {EVEN_SCORE:g} up, odd "
            f"from -{EVEN_SCORE:g} down, our choice",
            "density is scored as ln(rho/even mean), the even mean that of both sides and of the "
            "band at each height; v_phi without the Kepler speed; density, v_phi and B_theta stay "
            "even in odd winds too",
            *notes,
        ),
    )


def _score(energies: Array) -> Array:
    """(E+ - E-)/(E+ + E-) of (2, 2, ...) energies; NaN where there is nothing but rounding."""
    even, odd = energies[:, 0], energies[:, 1]
    total = even + odd
    there = total > _ROUNDING * total.max(0)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.where(there, (even - odd) / total, np.nan))
