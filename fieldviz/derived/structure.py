"""Disc structure: surface density, thickness two ways, rings and gaps, pressure maxima."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.signal import find_peaks

from fieldviz.derived.azimuth_sums import MIDPLANE, AzimuthMoments, azimuth_moments
from fieldviz.derived.local_thickness import LocalThickness, local_thickness, sound_thickness
from fieldviz.wedge.geometry import annulus_widths, centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["DiscStructure", "RingOrGap", "disc_structure"]

SURFACE_DENSITY_FORM = (
    "surface density is mass over area, sum(rho V)/((r2^2 - r1^2)/2 dphi), so that it adds up to "
    "the mass; the arc form int rho r dtheta differs by 0.4 % at H/R = 0.1"
)
DISAGREEMENT = 0.20  # of the two ways to H
WINDOW = 3.0  # H on each side, of the running median that is the background
LEAST_PROMINENCE = 0.05  # of Sigma/background, for a ring or gap to count
WALL_CELLS = 3  # at each end, in which no derivative is trusted


@dataclass(frozen=True)
class RingOrGap:
    """A local extremum of the surface density over its background.

    Attributes
    ----------
    kind : str
        "ring" or "gap".
    radius : float
        Middle of the cell, code length.
    ratio : float
        Sigma over its running median.
    depth : float
        1 - ratio: positive for a gap.
    contrast : float
        (max - min)/(max + min) with the highest ratio up to the next gap on either side for a
        gap, the lowest up to the next ring for a ring.
    at_edge : bool
        Whether the window of the background is cut by the wedge.
    """

    kind: str
    radius: float
    ratio: float
    depth: float
    contrast: float
    at_edge: bool


@dataclass(frozen=True, eq=False)
class DiscStructure:
    """Radial structure of the disc; profiles (n,) on the cells at the midplane.

    Attributes
    ----------
    r_edges : (n + 1,) array
    r : (n,) array
        Code length.
    surface_density : (n,) array
        Mass over area; NaN where a whole ring of cells has no number.
    mass : float
        Of the wedge, code mass.
    background, ratio : (n,) arrays
        Running median of the surface density, and the surface density over it.
    h_sound : (n,) array or None
        H/R from the midplane sound speed; None without pressure.
    h_spread : (n,) array
        H/R from the spread of the density, sqrt(<(theta - pi/2)^2>_rho).
    disagrees : (n,) bool array or None
        Where they differ by more than 20 % of the first: hot or magnetically compressed.
    midplane_density : (n,) array
    midplane_pressure : (n,) array or None
    rings, gaps : tuple of RingOrGap
    pressure_maxima : (m,) array or None
        Radii at which d ln P/d ln r of the midplane pressure falls through 0.
    contrast : float
        (max - min)/(max + min) of `ratio` over all radii.
    sentence : str
    notes : tuple of str
    """

    r_edges: Array
    r: Array
    surface_density: Array
    mass: float
    background: Array
    ratio: Array
    h_sound: Array | None
    h_spread: Array
    disagrees: Array | None
    midplane_density: Array
    midplane_pressure: Array | None
    rings: tuple[RingOrGap, ...]
    gaps: tuple[RingOrGap, ...]
    pressure_maxima: Array | None
    contrast: float
    sentence: str
    notes: tuple[str, ...]


def disc_structure(snapshot: Snapshot, *, thickness: float | None = None) -> DiscStructure:
    """Work out the radial structure of a disc.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `density`; `pressure` for H from the sound speed and for pressure maxima.
    thickness : float, optional
        H/R that sets the window of the background; from the snapshot by default.

    Returns
    -------
    DiscStructure

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    Common practice, no source. A cell without a number takes the mean of its ring.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.derived.structure import disc_structure
    >>> len(disc_structure(fv.demo_disc(shape=(2, 96, 128))).gaps)
    5
    """
    snapshot.require("work out the disc's structure", "density")
    moments = azimuth_moments(snapshot, ["density"])
    # Apart, so that a pressure without a number costs no mass.
    both = moments
    if snapshot.has("pressure"):
        both = azimuth_moments(snapshot, ["density", "pressure"])
    mesh = moments.mesh
    scale = local_thickness(snapshot, both, thickness)
    ring_mass = moments.means["density"] * mesh.volumes
    mass = mesh.summed(ring_mass.sum(0))
    edges = mesh.profile_edges
    r = centres(edges)
    surface = mass / (annulus_widths(edges) * mesh.period)
    background, cut = _running_median(r, edges, surface, scale.h)
    ratio = surface / background
    rings, gaps = _rings_and_gaps(r, ratio, cut)
    h_spread = _spread(mesh.theta, mesh.summed(ring_mass))
    sound, disagrees = sound_thickness(snapshot, both), None
    pressure = maxima = None
    if sound is not None:
        with np.errstate(invalid="ignore"):
            disagrees = np.abs(h_spread - sound) > DISAGREEMENT * sound
        pressure = mesh.at_midplane(both.means["pressure"])
        maxima = _pressure_maxima(r, pressure)
    notes = _notes(moments, both, scale, snapshot, surface, disagrees)
    total = float(np.nansum(mass)) if np.isfinite(mass).any() else float("nan")
    return DiscStructure(
        edges,
        r,
        surface,
        total,
        background,
        ratio,
        sound,
        h_spread,
        disagrees,
        mesh.at_midplane(moments.means["density"]),
        pressure,
        rings,
        gaps,
        maxima,
        _contrast(ratio),
        _sentence(total, scale, rings, gaps, maxima),
        notes,
    )


def _spread(theta: Array, mass: Array) -> Array:
    """Root of the mass-weighted mean of (theta - pi/2)^2 in each column."""
    with np.errstate(invalid="ignore", divide="ignore"):
        square = np.square(theta - MIDPLANE) @ mass / mass.sum(0)
        return np.sqrt(np.asarray(square))


def _running_median(r: Array, edges: Array, surface: Array, h: Array) -> tuple[Array, Array]:
    """Median of Sigma r^p within 3 H, weighted by ln r, over r^p; and where the wedge cuts it."""
    x, width = np.log(r), np.diff(np.log(np.maximum(edges, 1e-12 * edges[-1])))
    usable = np.isfinite(surface) & (surface > 0)
    result = np.full(len(r), np.nan)
    if not usable.any():
        return result, np.ones(len(r), dtype=bool)
    power = np.polyfit(x[usable], np.log(surface[usable]), 1)[0] if usable.sum() > 1 else 0.0
    level = surface * r**-power
    reach = WINDOW * np.where(np.isfinite(h), h, np.nanmedian(h))
    for i in range(len(r)):
        near = usable & (np.abs(x - x[i]) <= reach[i])
        if near.any():
            result[i] = _weighted_median(level[near], width[near]) * r[i] ** power
    cut = (np.exp(x - reach) < edges[0]) | (np.exp(x + reach) > edges[-1])
    return result, cut


def _weighted_median(values: Array, weights: Array) -> float:
    order = np.argsort(values)
    cumulative = np.cumsum(weights[order]) - 0.5 * weights[order]
    return float(np.interp(0.5 * weights.sum(), cumulative, values[order]))


def _rings_and_gaps(
    r: Array, ratio: Array, cut: Array
) -> tuple[tuple[RingOrGap, ...], tuple[RingOrGap, ...]]:
    known = np.flatnonzero(np.isfinite(ratio))
    f = ratio[known]
    high = find_peaks(f, prominence=LEAST_PROMINENCE)[0]
    low = find_peaks(-f, prominence=LEAST_PROMINENCE)[0]

    def described(kind: str, places: Array) -> tuple[RingOrGap, ...]:
        found = []
        ends = np.concatenate([[0], places, [len(f) - 1]])
        for n, i in enumerate(places):
            around = f[ends[n] : ends[n + 2] + 1]
            other = around.max() if kind == "gap" else around.min()
            contrast = abs(other - f[i]) / (other + f[i])
            values = (float(f[i]), float(1 - f[i]), float(contrast))
            found.append(RingOrGap(kind, float(r[known[i]]), *values, bool(cut[known[i]])))
        return tuple(found)

    return described("ring", high), described("gap", low)


def _contrast(ratio: Array) -> float:
    known = ratio[np.isfinite(ratio)]
    if not known.size:
        return float("nan")
    return float((known.max() - known.min()) / (known.max() + known.min()))


def _pressure_maxima(r: Array, pressure: Array) -> Array:
    """Where the slope of ln P against ln r goes from positive to not positive."""
    if len(r) < 2 * WALL_CELLS + 3:
        return np.empty(0)
    inner = slice(WALL_CELLS, -WALL_CELLS)
    x = np.log(r[inner])
    with np.errstate(invalid="ignore", divide="ignore"):
        slope = np.diff(np.log(pressure[inner])) / np.diff(x)
    x = centres(x)
    i = np.flatnonzero((slope[:-1] > 0) & (slope[1:] <= 0))
    zero = x[i] + slope[i] / (slope[i] - slope[i + 1]) * (x[i + 1] - x[i])
    return np.asarray(np.exp(zero))


def _notes(
    moments: AzimuthMoments,
    both: AzimuthMoments,
    scale: LocalThickness,
    snapshot: Snapshot,
    surface: Array,
    disagrees: Array | None,
) -> tuple[str, ...]:
    notes = [
        f"numbers are for the {snapshot.grid.azimuth_sentence}",
        SURFACE_DENSITY_FORM,
        f"background: running median of Sigma r^p within {WINDOW:g} H on each side, H/R from the "
        f"{scale.source}; rings and gaps of less than {LEAST_PROMINENCE:g} of it do not count (our "
        "choice)",
        *moments.notes,
        *(f"for the midplane and H: {note}" for note in both.notes if note not in moments.notes),
    ]
    empty = int(np.count_nonzero(~np.isfinite(surface)))
    if empty:
        notes.append(
            f"{empty} radii have a ring of cells without any number: their surface density is NaN, "
            "and the mass leaves them out"
        )
    if not snapshot.has("pressure"):
        notes.append("no H from the sound speed and no pressure maxima: there is no pressure")
    elif disagrees is None:
        notes.append("no H from the sound speed and no pressure maxima: the wedge has no midplane")
    elif disagrees.any():
        notes.append(
            f"H from the sound speed and from the spread of the density differ by more than "
            f"{100 * DISAGREEMENT:.0f} % at {100 * disagrees.mean():.0f} % of the radii: the disc "
            "is hot or magnetically compressed there, or much of its mass is not near the midplane"
        )
    if disagrees is not None:
        notes.append(f"pressure maxima leave out {WALL_CELLS} cells at each end")
    return tuple(notes)


def _sentence(
    mass: float,
    scale: LocalThickness,
    rings: tuple[RingOrGap, ...],
    gaps: tuple[RingOrGap, ...],
    maxima: Array | None,
) -> str:
    deepest = max(gaps, key=lambda gap: gap.depth, default=None)
    parts = [f"{len(rings)} rings and {len(gaps)} gaps"]
    if deepest:
        parts.append(f"the deepest gap, at r = {deepest.radius:.4g}, is {deepest.depth:.2f} deep")
    if maxima is not None:
        parts.append(f"{len(maxima)} pressure maxima")
    return f"H/R = {scale.median:.3g}; mass of the wedge {mass:.4g} (code units); " + ", ".join(
        parts
    )
