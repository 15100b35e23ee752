"""Maxima of the flux profile and their measures: radius, width, edges, lean against height."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.signal import find_peaks

from fieldviz.sheets.criteria import SheetCriteria
from fieldviz.sheets.flux_map import FluxMap
from fieldviz.sheets.flux_profile import FluxProfile
from fieldviz.sheets.ridges import Ridge
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.typing import Array

__all__ = [
    "HEIGHTS",
    "Candidate",
    "Extent",
    "Lean",
    "candidate_along",
    "profile_peaks",
    "sheet_extent",
    "sheet_lean",
]

HALF = 0.5  # of the height over the background: where the width is measured
FOOT = 0.1  # the same where a sheet's flux ends
HEIGHTS = (-1.0, -0.75, -0.5, -0.25, 0.25, 0.5, 0.75, 1.0)  # z/H at which sheets are looked for

_FWHM = 8.0 * np.log(2.0)  # FWHM^2 over variance of a Gaussian
_NEAR = 0.5  # scale heights within which a maximum belongs to a ridge, or to the height below it
_STRAIGHT = 0.01  # cells: a ridge that wanders less is straight
_LEAST_HEIGHTS = 2  # on either side, for tilt and bending


@dataclass(frozen=True, eq=False)
class Candidate:
    """A maximum that meets the criteria.

    Attributes
    ----------
    x : float
        ln R / h of the peak.
    height : float
        f at the peak, of its own polarity.
    cell : int
        Ring of the largest value.
    polarity : int
    absolute : bool
        Whether the absolute threshold was used.
    ridge : Ridge or None
    shift : (n_phi,) array
        x of the ridge less its mean, on the azimuths of the map.
    share : (n_phi,) array
        1 at the azimuths that count.
    raw, smooth : (n_r,) arrays
        Mean of f along the ridge, times the polarity, before and after smoothing.
    """

    x: float
    height: float
    cell: int
    polarity: int
    absolute: bool
    ridge: Ridge | None
    shift: Array
    share: Array
    raw: Array
    smooth: Array


@dataclass(frozen=True)
class Extent:
    """How far a sheet reaches, in x; `width` is its FWHM without smoothing, scale heights."""

    inner: float
    outer: float
    foot_inner: float
    foot_outer: float
    width: float
    cells: float
    edge: bool
    blended: bool


@dataclass(frozen=True, eq=False)
class Lean:
    """A sheet against height: z/H and cylindrical R of its ridge, slope and curvature."""

    heights: Array
    radii: Array
    tilt: float | None
    bending: float | None


def profile_peaks(
    raw: Array,
    smooth: Array,
    profile: FluxProfile,
    criteria: SheetCriteria,
    polarity: int,
    ridge: Ridge | None = None,
    shift: Array | None = None,
    share: Array | None = None,
) -> list[Candidate]:
    """Maxima of a profile of one polarity that meet the criteria.

    Parameters
    ----------
    raw, smooth : (n_r,) arrays
        f times the polarity.
    profile : FluxProfile
        For the background, the spread and x.
    criteria : SheetCriteria
    polarity : int
    ridge, shift, share
        What the candidates are to carry.

    Returns
    -------
    list of Candidate
        In order of radius. The peak is that of the parabola through three rings.
    """
    least = criteria.threshold(profile, polarity)
    absolute = criteria.without_scale(profile, polarity)
    stands_out = criteria.least_prominence(profile)
    cells, properties = find_peaks(smooth, prominence=0)
    found = []
    for i, prominence in zip(cells, properties["prominences"], strict=True):
        value = smooth[i]
        if value <= 0 or value <= least[i]:
            continue
        if prominence <= stands_out * abs(profile.background[i]):
            continue
        x, height = _vertex(profile.x, smooth, int(i))
        n_phi = len(profile.midplane.phi_edges) - 1
        found.append(
            Candidate(
                x,
                height,
                int(i),
                polarity,
                bool(absolute[i]),
                ridge,
                np.zeros(n_phi) if shift is None else shift,
                np.ones(n_phi) if share is None else share,
                raw,
                smooth,
            )
        )
    return found


def _vertex(x: Array, values: Array, i: int) -> tuple[float, float]:
    """Peak of the parabola through a largest value and its neighbours: where and how high."""
    before, here, after = (float(v) for v in values[i - 1 : i + 2])
    left, right = float(x[i] - x[i - 1]), float(x[i + 1] - x[i])
    fall, rise = (here - before) / left, (after - here) / right
    slope = (fall * right + rise * left) / (left + right)
    curvature = 2 * (rise - fall) / (left + right)
    if curvature >= 0:
        return float(x[i]), here
    return float(x[i]) - slope / curvature, here - 0.5 * slope * slope / curvature


def candidate_along(
    ridge: Ridge, of_band: FluxMap, profile: FluxProfile, criteria: SheetCriteria, *, whole: bool
) -> Candidate | None:
    """The maximum of the mean taken along a ridge, or None if it does not meet the criteria.

    Parameters
    ----------
    ridge : Ridge
    of_band : FluxMap
    profile : FluxProfile
    criteria : SheetCriteria
    whole : bool
        Whether the mean is over the whole azimuth, or only where the ridge is.

    Returns
    -------
    Candidate or None
    """
    middle = float(np.log(ridge.mean_radius) / profile.h)
    shift = _shift(ridge, of_band, profile, middle)
    share = np.ones(len(shift)) if whole else np.isfinite(ridge.radius).astype(np.float64)
    raw = ridge.polarity * mean_along(of_band, profile, shift, share)
    smooth = profile.kernel.apply(raw)
    found = profile_peaks(raw, smooth, profile, criteria, ridge.polarity, ridge, shift, share)
    near = [one for one in found if abs(one.x - middle) <= _NEAR]
    return min(near, key=lambda one: abs(one.x - middle)) if near else None


def _shift(ridge: Ridge, on: FluxMap, profile: FluxProfile, middle: float) -> Array:
    """Offset in x of a ridge less its mean on the azimuths of a map; zero if it runs straight."""
    shift = np.log(ridge.filled(centres(on.phi_edges))) / profile.h - middle
    straight = np.abs(shift).max() < _STRAIGHT * float(np.diff(profile.x).min())
    return np.zeros(len(shift)) if straight else np.asarray(shift)


def mean_along(of_band: FluxMap, profile: FluxProfile, shift: Array, share: Array) -> Array:
    """Azimuth mean of f with every azimuth shifted in x; patches without number are bridged."""
    if not shift.any() and share.all():
        mean = of_band.mean()
        known = np.isfinite(mean)
        return np.asarray(np.interp(of_band.r, of_band.r[known], mean[known]))
    x = np.log(of_band.r) / profile.h
    ring = np.nan_to_num(of_band.mean())
    weights = np.diff(of_band.phi_edges) * share
    total = np.zeros(len(x))
    for k in np.flatnonzero(weights):
        row = np.where(np.isfinite(of_band.density[k]), of_band.density[k], ring)
        total += weights[k] * np.interp(x + shift[k], x, row)
    return total / weights.sum()


def sheet_extent(
    one: Candidate, profile: FluxProfile, inward: float | None, outward: float | None
) -> Extent:
    """Width and edges of a sheet.

    Parameters
    ----------
    one : Candidate
    profile : FluxProfile
    inward, outward : float or None
        x of the neighbouring sheets.

    Returns
    -------
    Extent
    """
    x, i = profile.x, one.cell
    base = one.polarity * float(np.interp(one.x, x, profile.background))
    stops = []
    for other, step in ((inward, -1), (outward, 1)):
        end = 0 if step < 0 else len(x) - 1
        if other is None:
            stops.append((end, True))
            continue
        between = np.sort([i, int(np.clip(np.searchsorted(x, other), 0, len(x) - 1))])
        part = one.smooth[between[0] : between[1] + 1]
        stops.append((int(between[0] + np.argmin(part)), False))
    ends = {}
    edge = blended = False
    for level in (HALF, FOOT):
        target = base + level * (one.height - base)
        for (stop, is_wall), step in zip(stops, (-1, 1), strict=True):
            where = _first_return(x, one.smooth, i, step, stop, target)
            ends[level, step] = where if where is not None else float(x[stop])
            if where is None and is_wall:
                ends[level, step] = _wall(profile, step)
                edge = True
            if where is None and level == HALF:
                blended |= not is_wall
                ends[level, step] = np.nan
    fwhm = _fwhm(one.x, ends[HALF, -1], ends[HALF, 1])
    cell = float(np.gradient(x)[i])
    square = fwhm**2 - _FWHM * (float(profile.kernel.variance[i]) + cell**2 / 12)
    width = float(np.sqrt(square)) if square > 0 else float("nan")
    inner, outer = (ends[HALF, s] if np.isfinite(ends[HALF, s]) else ends[FOOT, s] for s in (-1, 1))
    return Extent(inner, outer, ends[FOOT, -1], ends[FOOT, 1], width, width / cell, edge, blended)


def _first_return(
    x: Array, values: Array, start: int, step: int, stop: int, target: float
) -> float | None:
    """Where values first fall to a level on the way from a peak; None if not before `stop`."""
    i = start
    while i != stop:
        after = i + step
        if values[after] <= target:
            part = (values[i] - target) / (values[i] - values[after])
            return float(x[i] + part * (x[after] - x[i]))
        i = after
    return None


def _wall(profile: FluxProfile, step: int) -> float:
    edge = profile.r_edges[0] if step < 0 else profile.r_edges[-1]
    return float(np.log(max(edge, 1e-12 * profile.r_edges[-1])) / profile.h)


def _fwhm(middle: float, low: float, high: float) -> float:
    """Full width; twice the half that is known where the other one is not."""
    if np.isfinite(low) and np.isfinite(high):
        return high - low
    halves = [abs(middle - end) for end in (low, high) if np.isfinite(end)]
    return 2 * halves[0] if halves else float("nan")


def sheet_lean(
    one: Candidate, profile: FluxProfile, cones: dict[float, FluxMap], reach: float
) -> Lean:
    """Follow a sheet from the midplane to either side, and fit R(z).

    Parameters
    ----------
    one : Candidate
    profile : FluxProfile
    cones : mapping of z/H to FluxMap
        On cones tan(angle from the midplane) = h z/H.
    reach : float
        Unused heights beyond this many H are left out.

    Returns
    -------
    Lean
        Slope dR/dz and R d^2R/dz^2 at the midplane, of the parabola R(z) with least squares; None
        where the sheet was found at fewer than two heights on a side.
    """
    found = {0.0: float(np.exp(profile.h * one.x))}
    for side in (-1, 1):
        x = one.x
        for height in sorted((z for z in cones if z * side > 0 and abs(z) <= reach), key=abs):
            after = _peak_near(one, profile, cones[height], x)
            if after is None:
                break
            x = after
            # R = r sin(theta) on the cone of this height.
            found[height] = float(np.exp(profile.h * x) / np.hypot(1.0, height * profile.h))
    heights = np.array(sorted(found))
    radii = np.array([found[z] for z in heights])
    if min((heights > 0).sum(), (heights < 0).sum()) < _LEAST_HEIGHTS:
        return Lean(heights, radii, None, None)
    # On a cone z = R h z/H.
    R0, z = found[0.0], heights * profile.h * radii
    curve = np.polynomial.polynomial.polyfit(z / R0, radii / R0, 2)
    return Lean(heights, radii, float(curve[1]), float(2 * curve[2]))


def _peak_near(one: Candidate, profile: FluxProfile, cone: FluxMap, around: float) -> float | None:
    """Place in x of the maximum nearest to where the sheet was, or None."""
    if len(cone.r) != len(profile.x):
        raw = np.interp(profile.r, cone.r, np.nan_to_num(cone.mean()))
    else:
        shift, share = one.shift, one.share
        if len(cone.phi_edges) - 1 != len(shift):
            shift, share = np.zeros(len(cone.phi_edges) - 1), np.ones(len(cone.phi_edges) - 1)
        raw = mean_along(cone, profile, shift, share)
    smooth = profile.kernel.apply(one.polarity * raw)
    cells, _ = find_peaks(smooth)
    places = [x for x, height in (_vertex(profile.x, smooth, int(i)) for i in cells) if height > 0]
    near = [x for x in places if abs(x - around) <= _NEAR]
    return min(near, key=lambda x: abs(x - around)) if near else None
