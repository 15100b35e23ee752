"""Ridges of the vertical flux on the (r, phi) map: where a sheet runs, azimuth by azimuth.

In x = ln r / h and y = phi / h a scale height is 1 along both axes everywhere, and angles are true.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.sheets.criteria import SheetCriteria
from fieldviz.sheets.flux_map import FluxMap
from fieldviz.sheets.flux_profile import FluxProfile
from fieldviz.sheets.running import gaussian_kernel
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["LEAST_AZIMUTHS", "Ridge", "find_ridges", "uniform_ridge"]

LEAST_AZIMUTHS = 4  # with fewer cells in azimuth the profile is the ridge
ALONG = 0.25  # standard deviation of the smoothing along azimuth, scale heights
_SHARE = 0.5  # of the rise a sheet needs, which each azimuth of its ridge needs
_STEEPEST = 1.0  # |dx/dy| of a ridge that is followed
_LONGEST_GAP = 1.0  # scale heights along azimuth over which a ridge is followed without points ...
_LONGEST_GAP_SHARE = 0.1  # ... or this share of the wedge, if that is more


@dataclass(frozen=True, eq=False)
class Ridge:
    """A ridge of one polarity.

    Attributes
    ----------
    phi : (n_phi,) array
        Azimuths of the map.
    radius : (n_phi,) array
        R(phi); NaN where the ridge is not there.
    coverage : float
        Share of the azimuth where it is there.
    polarity : int
        1 where B_z is up, -1 where it is down.
    strength : float
        Mean of the scale-normalised curvature -t L_vv over the ridge, t the variance of the
        smoothing and v the direction across, in units of f; NaN for a ridge made from a profile
        or without smoothing.
    widths : (n_phi,) array
        Azimuth of each place, radians.
    spiral : bool
        Whether it is one turn of a ridge that does not close after it.
    """

    phi: Array
    radius: Array
    coverage: float
    polarity: int
    strength: float
    widths: Array
    spiral: bool = False

    @property
    def mean_radius(self) -> float:
        """Mean of R over the azimuths where the ridge is there."""
        there = np.isfinite(self.radius)
        return float(np.average(self.radius[there], weights=self.widths[there]))

    @property
    def wander(self) -> float:
        """Root mean square of R(phi) about its mean, code length."""
        there = np.isfinite(self.radius)
        square = (self.radius[there] - self.mean_radius) ** 2
        return float(np.sqrt(np.average(square, weights=self.widths[there])))

    def filled(self, phi: Array) -> Array:
        """R at any azimuths, linear across gaps and round the wedge."""
        there = np.isfinite(self.radius)
        period = float(self.widths.sum())
        return np.asarray(np.interp(phi, self.phi[there], self.radius[there], period=period))


def uniform_ridge(of_band: FluxMap, radius: float, polarity: int) -> Ridge:
    """The ridge of a map with too few azimuths to tell: the same radius everywhere."""
    phi = centres(of_band.phi_edges)
    R = np.full(len(phi), radius)
    return Ridge(phi, R, 1.0, polarity, float("nan"), np.diff(of_band.phi_edges))


def find_ridges(
    of_band: FluxMap, profile: FluxProfile, criteria: SheetCriteria | None = None
) -> list[Ridge]:
    """Ridges of |r B_z| of both polarities, followed through azimuth.

    Parameters
    ----------
    of_band : FluxMap
        At least 4 cells in azimuth.
    profile : FluxProfile
        Its mean, for background, spread and smoothing.
    criteria : SheetCriteria, optional

    Returns
    -------
    list of Ridge
        In order of radius, of any coverage.

    Notes
    -----
    A ridge is where the gradient vanishes along the direction of the most negative eigenvalue of
    the Hessian (Lindeberg 1998, from memory), here of the map smoothed as the profile is in x and
    by 0.25 H in azimuth. Kept are points at which that direction is within 45 degrees of radial
    and f of that azimuth exceeds its background by half the rise that a sheet needs. Points of
    neighbouring azimuths that are nearest to each other both ways are linked; gaps of up to 1 H or
    a tenth of the wedge are bridged.
    """
    criteria = criteria or SheetCriteria()
    rows = profile.kernel.apply(np.where(np.isfinite(of_band.density), of_band.density, profile.f))
    y, dy = centres(of_band.phi_edges) / profile.h, np.diff(of_band.phi_edges) / profile.h
    along = gaussian_kernel(y, dy, ALONG, period=profile.period / profile.h)
    smooth = along.apply(rows.T).T
    ridges: list[Ridge] = []
    for polarity in (1, -1):
        there = _is_there(polarity * rows, profile, criteria, polarity)
        points = _ridge_points(polarity * smooth, there, of_band, profile)
        ridges += _linked(points, of_band, profile, polarity)
    return sorted(ridges, key=lambda ridge: ridge.mean_radius)


@dataclass(frozen=True, eq=False)
class _Points:
    """Ridge points: `row` in azimuth, `x`, and `strength`."""

    row: IntArray
    x: Array
    strength: Array


def _is_there(rows: Array, profile: FluxProfile, criteria: SheetCriteria, polarity: int) -> Array:
    """Where an azimuth by itself has half the rise that a sheet needs, or a neighbouring ring has.

    The smoothing along azimuth must not lend height to azimuths beside the end of a ridge.
    """
    background = polarity * profile.background
    least = background + _SHARE * (criteria.threshold(profile, polarity) - background)
    high = (rows > least) & (rows > 0)
    there = high.copy()
    there[:, 1:] |= high[:, :-1]
    there[:, :-1] |= high[:, 1:]
    return np.asarray(there)


def _ridge_points(L: Array, there: Array, of_band: FluxMap, profile: FluxProfile) -> _Points:
    x, y = profile.x, centres(of_band.phi_edges) / profile.h
    L_x, L_xx = _derivatives(L, x)
    turn = profile.period / profile.h
    round_y = np.concatenate([[y[-1] - turn], y, [y[0] + turn]])

    def along(values: Array) -> tuple[Array, Array]:
        first, second = _derivatives(np.concatenate([values[-1:], values, values[:1]]).T, round_y)
        return first.T[1:-1], second.T[1:-1]

    L_y, L_yy = along(L)
    L_xy = along(L_x)[0]
    # Eigenvector (u, v) of the smaller eigenvalue of the symmetric matrix.
    half = 0.5 * (L_xx - L_yy)
    root = np.hypot(half, L_xy)
    eigenvalue = 0.5 * (L_xx + L_yy) - root
    angle = 0.5 * np.arctan2(-2 * L_xy, -2 * half)
    u, v = np.cos(angle), np.sin(angle)
    with np.errstate(divide="ignore", invalid="ignore"):
        # Along (u, v) the slope vanishes after this way; the ridge crosses the row at x + step.
        step = -(L_x * u + L_y * v) / (eigenvalue * u)
    reach = 0.75 * np.gradient(x)
    good = (np.abs(step) <= reach) & (eigenvalue < 0) & (np.abs(u) >= np.abs(v))
    good &= there & (L > 0)
    good[:, [0, -1]] = False
    row, i = np.nonzero(good)
    # Without smoothing there is no scale: the bare curvature then only ranks points.
    variance = profile.kernel.variance
    scale = np.where(variance > 0, variance, 1.0)
    strength = -eigenvalue[row, i] * scale[i]
    return _without_doubles(_Points(row, x[i] + step[row, i], strength), float(reach.min() / 0.75))


def _derivatives(values: Array, x: Array) -> tuple[Array, Array]:
    """First and second derivative along the last axis by parabolas; zero at both ends."""
    left, right = np.diff(x)[:-1], np.diff(x)[1:]
    fall = (values[..., 1:-1] - values[..., :-2]) / left
    rise = (values[..., 2:] - values[..., 1:-1]) / right
    first, second = np.zeros(values.shape), np.zeros(values.shape)
    first[..., 1:-1] = (fall * right + rise * left) / (left + right)
    second[..., 1:-1] = 2 * (rise - fall) / (left + right)
    return first, second


def _without_doubles(points: _Points, cell: float) -> _Points:
    """Of points of one row nearer than a cell, found from both sides, keep the stronger."""
    order = np.lexsort((points.x, points.row))
    row, x, strength = points.row[order], points.x[order], points.strength[order]
    keep = np.ones(len(row), dtype=bool)
    last = -1
    for n in range(len(row)):
        if last >= 0 and row[n] == row[last] and x[n] - x[last] < cell:
            if strength[n] <= strength[last]:
                keep[n] = False
                continue
            keep[last] = False
        last = n
    return _Points(row[keep], x[keep], strength[keep])


def _linked(points: _Points, of_band: FluxMap, profile: FluxProfile, polarity: int) -> list[Ridge]:
    n_phi = len(of_band.phi_edges) - 1
    widths = np.diff(of_band.phi_edges)
    by_row = [np.flatnonzero(points.row == row) for row in range(n_phi)]
    longest = max(_LONGEST_GAP * profile.h, _LONGEST_GAP_SHARE * profile.period)
    cell = float(np.median(np.diff(profile.x)))
    ahead = np.full(len(points.row), -1)
    behind = np.full(len(points.row), -1)
    y = centres(of_band.phi_edges)
    for step in range(1, n_phi):
        gaps = np.mod(np.roll(y, -step) - y, profile.period)
        if step > 1 and gaps.min() > longest + 1.5 * widths.max():
            break
        for row in range(n_phi):
            if step > 1 and gaps[row] > longest + widths[row]:
                continue
            a, b = by_row[row], by_row[(row + step) % n_phi]
            a, b = a[ahead[a] < 0], b[behind[b] < 0]
            gate = max(1.5 * cell, _STEEPEST * float(gaps[row]) / profile.h)
            for one, other in _mutual_nearest(points.x, a, b, gate):
                ahead[one], behind[other] = other, one
    return _ridges_of_links(points, ahead, of_band, profile, polarity)


def _mutual_nearest(x: Array, a: IntArray, b: IntArray, gate: float) -> list[tuple[int, int]]:
    if not a.size or not b.size:
        return []
    distance = np.abs(x[a][:, None] - x[b])
    forward, backward = distance.argmin(1), distance.argmin(0)
    return [
        (int(a[n]), int(b[m]))
        for n, m in enumerate(forward)
        if backward[m] == n and distance[n, m] <= gate
    ]


def _ridges_of_links(
    points: _Points, ahead: IntArray, of_band: FluxMap, profile: FluxProfile, polarity: int
) -> list[Ridge]:
    """One ridge for each chain of points; one that goes on past a whole turn is cut into turns."""
    widths, phi, ridges = np.diff(of_band.phi_edges), centres(of_band.phi_edges), []
    smoothed = profile.kernel.weights is not None
    for chain in _chains(ahead):
        turns: list[list[int]] = [[]]
        rows: set[int] = set()
        for n in chain:
            if int(points.row[n]) in rows:
                turns.append([])
                rows.clear()
            turns[-1].append(n)
            rows.add(int(points.row[n]))
        for members in turns:
            radius = np.full(len(widths), np.nan)
            radius[points.row[members]] = np.exp(profile.h * points.x[members])
            coverage = float(widths[np.isfinite(radius)].sum() / widths.sum())
            strength = float(points.strength[members].mean()) if smoothed else float("nan")
            spiral = len(turns) > 1
            ridges.append(Ridge(phi, radius, coverage, polarity, strength, widths, spiral))
    return ridges


def _chains(ahead: IntArray) -> list[list[int]]:
    """Points in order along each chain of links; loops begin at their first point."""
    has_before = np.zeros(len(ahead), dtype=bool)
    has_before[ahead[ahead >= 0]] = True
    seen = np.zeros(len(ahead), dtype=bool)
    chains = []
    for start in (*np.flatnonzero(~has_before), *np.flatnonzero(has_before)):
        chain, n = [], int(start)
        while n >= 0 and not seen[n]:
            seen[n] = True
            chain.append(n)
            n = int(ahead[n])
        if chain:
            chains.append(chain)
    return chains
