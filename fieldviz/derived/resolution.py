"""What the mesh resolves: cells per scale height and per unstable wavelength; floors and NaN."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import (
    MIDPLANE,
    AzimuthMoments,
    azimuth_cells,
)
from fieldviz.derived.floors import Floor, find_floor, nan_shares
from fieldviz.derived.local_thickness import LocalThickness, local_thickness
from fieldviz.derived.quality_factor import (
    PRODUCT,
    RESOLVED,
    UNRESOLVED,
    QualityFactor,
    quality_averages,
    quality_factor,
    quality_word,
)
from fieldviz.errors import FieldvizError
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["LevelCells", "Resolution", "resolution"]


CAVEATS = (
    "Q_i = 2 pi v_A,i/(Omega cell length), the wavelength of ideal MHD in a Keplerian disc; the "
    "fastest mode is sqrt(16/15) longer, which is not used (Balbus & Hawley 1991)",
    "the thresholds were set for ideal MHD: with ambipolar diffusion (Am of order 1) the unstable "
    "wavelengths grow, and the same Q says something else",
    "Q of the net field alone is small by nature: Q_z = 2 pi sqrt(2/beta_z) N with N cells per H, "
    "2.84 for 32 cells and beta_z = 1e4; the words are for the field there is",
    "32 cells per H in theta and 16 in azimuth are a rule of thumb (common practice, no source)",
)


@dataclass(frozen=True)
class LevelCells:
    """Cells per H at the midplane on one level; NaN where the level is not there.

    Attributes
    ----------
    level : int
    n_blocks : int
        Blocks of this level in all, and
    n_midplane : int
        those that touch the midplane.
    least, median : mapping of "r", "theta", "phi" to float
        Smallest and median over radius. One cell in azimuth has no count: NaN.
    """

    level: int
    n_blocks: int
    n_midplane: int
    least: dict[str, float]
    median: dict[str, float]


@dataclass(frozen=True, eq=False)
class Resolution:
    """What the mesh resolves; profiles (n,) on the cells at the midplane, without units.

    Attributes
    ----------
    r_edges : (n + 1,) array
    levels : tuple of LevelCells
    q_theta, q_phi : QualityFactor or None
        None without that component of the field; `q_phi` also with one cell in azimuth.
    word : str or None
        resolved, marginal or unresolved, from the medians; None without field.
    words : (n,) array of str or None
        The same by radius; empty text where there is no number.
    height : float
        Half height of the band in H.
    density_floor, pressure_floor : Floor or None
    nan_shares : mapping of field to share of its cells that are NaN or infinite
    sentence : str
    notes : tuple of str
    """

    r_edges: Array
    levels: tuple[LevelCells, ...]
    q_theta: QualityFactor | None
    q_phi: QualityFactor | None
    word: str | None
    words: Array | None
    height: float
    density_floor: Floor | None
    pressure_floor: Floor | None
    nan_shares: dict[str, float]
    sentence: str
    notes: tuple[str, ...]

    @property
    def r(self) -> Array:
        """Middles of the radial cells at the midplane."""
        return centres(self.r_edges)


def resolution(
    snapshot: Snapshot,
    *,
    height: float = 2.0,
    thickness: float | None = None,
    density_floor: float | None = None,
    pressure_floor: float | None = None,
) -> Resolution:
    """Work out what the mesh resolves.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `density`; `magnetic_theta`, `magnetic_phi` for Q.
    height : float
        Half height of the band of Q in H.
    thickness : float, optional
        H/R everywhere; from the midplane sound speed at each radius by default.
    density_floor, pressure_floor : float, optional
        Floors of the run; guessed from the smallest value by default.

    Returns
    -------
    Resolution

    Raises
    ------
    MissingFieldError, FieldvizError

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.derived.resolution import resolution
    >>> found = resolution(fv.demo_disc(shape=(32, 96, 128)))
    >>> round(found.levels[0].median["theta"], 2)
    6.86
    """
    snapshot.require("work out the resolution", "density")
    if not 0 < height < np.inf:
        raise FieldvizError(
            f"Cannot work out the resolution: expected height in H to be positive, got {height}."
        )
    moments = quality_averages(snapshot)
    scale = local_thickness(snapshot, moments, thickness)
    levels = _levels(snapshot, moments, scale)
    angle = height * scale.columns
    q = {name: quality_factor(snapshot, moments, name, angle) for name in ("theta", "phi")}
    word, words = _words(q["theta"], q["phi"], azimuth_cells(snapshot.grid) == 1)
    floors = [
        find_floor(snapshot, name, given)
        for name, given in (("density", density_floor), ("pressure", pressure_floor))
    ]
    bad = nan_shares(snapshot)
    return Resolution(
        moments.mesh.profile_edges,
        levels,
        q["theta"],
        q["phi"],
        word,
        words,
        height,
        floors[0],
        floors[1],
        bad,
        _sentence(levels, q["theta"], q["phi"], word),
        _notes(snapshot, moments, scale, height, floors, bad),
    )


def _levels(
    snapshot: Snapshot, moments: AzimuthMoments, scale: LocalThickness
) -> tuple[LevelCells, ...]:
    grid, mesh = snapshot.grid, moments.mesh
    assert grid.level is not None
    axes = ("r", "theta", "phi")
    found: dict[int, dict[str, list[Array]]] = {}
    for block in range(grid.n_blocks):
        r_edges, theta_edges, phi_edges = grid.edges(block)
        rows = np.flatnonzero((theta_edges[:-1] <= MIDPLANE) & (theta_edges[1:] >= MIDPLANE))
        if not rows.size:
            continue
        r = centres(r_edges)
        h = np.interp(r, mesh.r, scale.columns)
        counts = {
            "r": h * r / np.diff(r_edges),
            "theta": h / np.diff(theta_edges)[rows].max(),
            "phi": h / np.diff(phi_edges).max(),
        }
        if azimuth_cells(grid) == 1:
            counts["phi"] = np.full(len(r), np.nan)
        of_level = found.setdefault(int(grid.level[block]), {axis: [] for axis in axes})
        for axis in axes:
            of_level[axis].append(counts[axis])
    results = []
    for level in grid.levels:
        here = found.get(level)
        columns = {a: np.concatenate(here[a]) if here else np.empty(0) for a in axes}
        good = {a: values[np.isfinite(values)] for a, values in columns.items()}
        results.append(
            LevelCells(
                level,
                int(np.count_nonzero(grid.level == level)),
                len(here["r"]) if here else 0,
                {a: float(v.min()) if v.size else float("nan") for a, v in good.items()},
                {a: float(np.median(v)) if v.size else float("nan") for a, v in good.items()},
            )
        )
    return tuple(results)


def _words(
    q_theta: QualityFactor | None, q_phi: QualityFactor | None, one_azimuth: bool
) -> tuple[str | None, Array | None]:
    if q_theta is None or (q_phi is None and not one_azimuth):
        return None, None
    along = [None] * len(q_theta.actual) if q_phi is None else list(q_phi.actual)
    words = [quality_word(t, p) for t, p in zip(q_theta.actual, along, strict=True)]
    whole = quality_word(q_theta.median, None if q_phi is None else q_phi.median)
    return whole or None, np.array(words)


def _notes(
    snapshot: Snapshot,
    moments: AzimuthMoments,
    scale: LocalThickness,
    height: float,
    floors: list[Floor | None],
    bad: dict[str, float],
) -> tuple[str, ...]:
    notes = [
        f"H/R = {scale.median:.4g} (median) from the {scale.source}; Q in |theta - pi/2| < "
        f"{height:g} H/R from sqrt(<B_i^2>/<rho>) over the mean cell length",
        f"words: unresolved below Q = {UNRESOLVED:g} in theta or phi (Sano et al. 2004), resolved "
        f"from {RESOLVED['theta']:g} in theta and {RESOLVED['phi']:g} in phi (Noble et al. 2010, "
        f"Hawley et al. 2011) or from a product of {PRODUCT:g}, else marginal (from memory)",
        *CAVEATS,
        *moments.notes,
    ]
    for name in ("magnetic_theta", "magnetic_phi"):
        if not snapshot.has(name):
            notes.append(f"no Q and no word that need {name}: no such field")
    if azimuth_cells(snapshot.grid) == 1:
        notes.append("one cell in azimuth: no cells per H and no Q along phi; theta decides alone")
    notes += [note for floor in floors if floor is not None for note in floor.notes]
    spoilt = [f"{name} {100 * share:.3g} %" for name, share in bad.items() if share]
    if spoilt:
        notes.append(f"NaN or infinite cells: {', '.join(spoilt)}")
    return tuple(notes)


def _sentence(
    levels: tuple[LevelCells, ...],
    q_theta: QualityFactor | None,
    q_phi: QualityFactor | None,
    word: str | None,
) -> str:
    at = [level for level in levels if level.n_midplane]
    if not at:
        return "no cells per H: no block touches the midplane"
    known = [axis for axis, value in at[-1].median.items() if np.isfinite(value)]
    counts = ", ".join(f"{at[-1].median[axis]:.3g} in {axis}" for axis in known)
    text = f"cells per H at the midplane on level {at[-1].level} (median): {counts}"
    for q in (q_theta, q_phi):
        if q is not None:
            text += f"; Q_{q.direction} {q.median:.3g}"
    return text if word is None else f"{word}: {text}"
