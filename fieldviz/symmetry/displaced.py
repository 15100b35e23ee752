"""A second scoring of the magnetic field: about the magnetic midplane, where B_phi turns round."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.thickness import Thickness
from fieldviz.sheets.columns import Columns, nearest_zero
from fieldviz.sheets.magnetic_midplane import LEAST_SHARE
from fieldviz.symmetry.field_scores import EVEN_SCORE, field_word, mean_energies
from fieldviz.symmetry.mean_tables import MeanTables, weights_of
from fieldviz.symmetry.mirror import table_mirror
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.typing import Array

__all__ = ["DISPLACED", "DisplacedMidplane", "DisplacedScore", "displaced_midplane"]

DISPLACED = "even about a displaced midplane"
_MIDPLANE = 0.5 * np.pi
# The wind is weighted by its mass flux, the disc by volume.
_REGIONS = (("wind", "wind"), ("disc", "volume"))


@dataclass(frozen=True)
class DisplacedScore:
    """Scores of one component of the field in one region.

    Attributes
    ----------
    name : str
    region : str
        "wind": beyond 2 H of the midplane in question; "disc": within.
    about_midplane, about_displaced : float
        P of the azimuth mean about theta = pi/2, and about the magnetic midplane.
    word : str
        even, odd, mixed or none about theta = pi/2; "even about a displaced midplane" for B_phi
        whose score rises from below 0.6 to 0.6 or more.
    """

    name: str
    region: str
    about_midplane: float
    about_displaced: float
    word: str


@dataclass(frozen=True)
class DisplacedMidplane:
    """Where the mean B_phi turns round, and how even the field is about it.

    Attributes
    ----------
    word : str
        "even about a displaced midplane", "no reversal", or "" where nothing need be said.
    displacement : float
        Median height over ln r in H, positive above; NaN without a reversal.
    spread : (float, float)
        16 and 84 percent of the same.
    share : float
        Share of ln r with a reversal.
    scores : tuple of DisplacedScore
    note : str
    """

    word: str
    displacement: float
    spread: tuple[float, float]
    share: float
    scores: tuple[DisplacedScore, ...]
    note: str

    @property
    def sentence(self) -> str:
        """What a verdict must add; empty where nothing need be said."""
        if self.word != DISPLACED:
            return ""
        where = " and ".join(
            "in the wind" if score.region == "wind" else "in the disc"
            for score in self.scores
            if score.word == DISPLACED
        )
        side = "above" if self.displacement > 0 else "below"
        return f"{where} B_phi is {DISPLACED}, {abs(self.displacement):.2g} H {side} theta = pi/2"


def displaced_midplane(
    grid: WedgeGrid, tables: MeanTables, thickness: Thickness
) -> DisplacedMidplane | None:
    """Score B about theta = pi/2 and about the zero of the mean B_phi.

    Parameters
    ----------
    grid : WedgeGrid
    tables : MeanTables
    thickness : Thickness

    Returns
    -------
    DisplacedMidplane or None
        None without B_phi.

    Notes
    -----
    The zero is that of the azimuth mean, smoothed over 1 H in r, nearest to the midplane, linear
    between rows. Density and velocity are not shifted: they are scored about theta = pi/2 only.
    """
    if "magnetic_phi" not in tables.means:
        return None
    mesh = tables.mesh
    turn = np.array([0.0, mesh.period])
    columns = Columns(grid, mesh.r_edges, mesh.theta_edges, turn, thickness)
    height = nearest_zero(
        columns.smoothed_along_r(tables.means["magnetic_phi"][None]), columns.heights
    )
    height[:, tables.band < 0] = np.nan
    widths = np.diff(columns.log_r) * (tables.band >= 0)
    known = np.isfinite(height[0])
    share = float(widths[known].sum() / widths.sum()) if widths.sum() else 0.0
    if share < LEAST_SHARE:
        nan = float("nan")
        note = f"the mean B_phi reverses in {100 * share:.3g} % of ln r only: no second scoring"
        return DisplacedMidplane("no reversal", nan, (nan, nan), share, (), note)
    low, median, high = columns.percentiles(height)
    log_r = np.log(columns.r)
    everywhere = np.interp(log_r, log_r[known], height[0, known])
    scores = _both_scores(tables, _MIDPLANE - everywhere * thickness.h)
    word = DISPLACED if any(score.word == DISPLACED for score in scores) else ""
    note = (
        f"the mean B_phi reverses {median:+.2g} H from theta = pi/2 (16 to 84 % over ln r: "
        f"{low:+.2g} to {high:+.2g} H); the field is scored about both, density and velocity about "
        "theta = pi/2"
    )
    return DisplacedMidplane(word, median, (low, high), share, scores, note)


def _both_scores(tables: MeanTables, centre: Array) -> tuple[DisplacedScore, ...]:
    names = tuple(name for name in tables.means if name.startswith("magnetic"))
    found = []
    mirrors = [table_mirror(tables.mesh, about) for about in (_MIDPLANE, centre)]
    for region, weight in _REGIONS:
        pair = []
        for mirror in mirrors:
            weights = weights_of(tables, mirror, weight, region)
            energies = mean_energies(tables, mirror, weights, names)
            pair.append([_total_score(energies[name]) for name in names])
        for name, before, after in zip(names, *pair, strict=True):
            word = field_word(before)
            if name == "magnetic_phi" and before < EVEN_SCORE <= after:
                word = DISPLACED
            found.append(DisplacedScore(name, region, before, after, word))
    return tuple(found)


def _total_score(energies: Array) -> float:
    even, odd = energies.sum(-1)
    return float((even - odd) / (even + odd)) if even + odd > 0 else float("nan")
